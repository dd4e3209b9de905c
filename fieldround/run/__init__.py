"""The order of the work."""
