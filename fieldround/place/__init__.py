"""From GNSS fixes and bearings to positions in a CRS."""
