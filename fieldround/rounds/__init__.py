"""The only readers of a round folder: sheets, camera cards, EXIF, pictures."""
