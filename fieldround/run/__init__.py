"""The order of the work on a round: no mathematics and no file formats."""
