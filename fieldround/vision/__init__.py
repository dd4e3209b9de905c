"""From pixels to ties and limbs."""
