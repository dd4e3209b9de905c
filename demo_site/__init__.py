"""The demo round of a made-up place, and the renderer that makes its photos."""
