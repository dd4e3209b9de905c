"""What a later reader must know of the software to repeat a run.

In: nothing. Out: versions of Python, of the program and of the libraries it computes with.
"""

from __future__ import annotations

import platform
from importlib.metadata import PackageNotFoundError, version

LIBRARIES = (
    "numpy", "scipy", "opencv-python-headless", "pyproj", "shapely", "geopandas", "pyogrio",
    "exifread", "pillow", "pillow-heif", "pygeomag", "folium", "click", "rich",
)  # fmt: skip


def versions() -> dict[str, str]:
    """Name -> version, for what is installed."""
    from fieldround import __version__

    found = {"python": platform.python_version(), "fieldround": __version__}
    for name in LIBRARIES:
        try:
            found[name] = version(name)
        except PackageNotFoundError:
            continue
    return found
