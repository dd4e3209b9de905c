"""Size on disk and import time of every dependency, for docs/decisions.md.

Run: python tests/bench/dependencies.py [NAME=MODULE ...]
Sizes are those of the package alone, without what it depends on. Times are the median of fresh
interpreters and contain the import of what the module itself imports.
"""

from __future__ import annotations

import argparse
import statistics
import subprocess
import sys
from importlib.metadata import PackageNotFoundError, files, version
from pathlib import Path

MODULES = {
    "click": "click",
    "rich": "rich.progress",
    "numpy": "numpy",
    "scipy": "scipy.stats",
    "pyproj": "pyproj",
    "shapely": "shapely",
    "geopandas": "geopandas",
    "pyogrio": "pyogrio",
    "exifread": "exifread",
    "pillow": "PIL.Image",
    "pillow-heif": "pillow_heif",
    "opencv-python-headless": "cv2",
    "pygeomag": "pygeomag",
    "gpxpy": "gpxpy",
    "pynmea2": "pynmea2",
    "folium": "folium",
    "xstatic-leaflet": "xstatic.pkg.leaflet",
    "jinja2": "jinja2",
}


def megabytes(name: str) -> float:
    """Size of a package's own files."""
    paths = [Path(str(file.locate())) for file in files(name) or []]
    kept = [path for path in paths if path.is_file() and "__pycache__" not in path.parts]
    return sum(path.stat().st_size for path in kept) / 1e6


def milliseconds(module: str, repeats: int) -> float:
    """Median time of an import in a fresh interpreter."""
    code = f"import time; t = time.perf_counter(); import {module}; print(time.perf_counter() - t)"
    times = [
        float(subprocess.run([sys.executable, "-c", code], capture_output=True, check=True).stdout)
        for _ in range(repeats)
    ]
    return 1000.0 * statistics.median(times)


def main() -> None:
    """Print one line a dependency."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("more", nargs="*", metavar="NAME=MODULE", help="others to compare with")
    parser.add_argument("--repeats", type=int, default=7)
    given = parser.parse_args()
    modules = MODULES | dict(pair.split("=", 1) for pair in given.more)
    print(f"{'package':<24}{'version':>12}{'MB':>8}{'ms':>8}")
    for name, module in modules.items():
        try:
            row = f"{version(name):>12}{megabytes(name):>8.1f}"
        except PackageNotFoundError:
            row = f"{'(Python)':>12}{'':>8}"
        print(f"{name:<24}{row}{milliseconds(module, given.repeats):>8.0f}")


if __name__ == "__main__":
    main()
