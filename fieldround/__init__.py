"""fieldround: sizes and places of round objects from pairs of photos."""

__version__ = "0.1.0"
