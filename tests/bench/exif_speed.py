"""How fast EXIF is read, beside the EXIF library alone on the same files.

    python tests/bench/exif_speed.py [FOLDER]

FOLDER holds JPEGs; without it, photos with invented EXIF are written to a temporary folder. The
two readers take turns over every file and the best of the turns counts, so that other work on the
machine disturbs both alike. Prints one JSON object: files a second on one core, and the ratio.
"""

from __future__ import annotations

import json
import logging
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from pathlib import Path

import exifread

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from fieldround.rounds.exif import read_exif
from tests.rounds.exif_writing import (
    ASCII,
    GOOD_GPS,
    RATIONAL,
    SHORT,
    UNDEFINED,
    Value,
    exif_block,
)
from tests.rounds.folders import write_photo

TURNS = 40

IMAGE: dict[int, Value] = {
    0x010F: (ASCII, "Alder"),
    0x0110: (ASCII, "A7"),
    0x0112: (SHORT, [1]),
    0x011A: (RATIONAL, [(72, 1)]),
    0x011B: (RATIONAL, [(72, 1)]),
    0x0128: (SHORT, [2]),
    0x0131: (ASCII, "camera 1.0"),
    0x0132: (ASCII, "2026:05:14 12:00:07"),
    0x0213: (SHORT, [1]),
}
EXIF: dict[int, Value] = {
    0x829A: (RATIONAL, [(1, 500)]),
    0x829D: (RATIONAL, [(18, 10)]),
    0x8822: (SHORT, [2]),
    0x8827: (SHORT, [50]),
    0x9000: (UNDEFINED, b"0232"),
    0x9003: (ASCII, "2026:05:14 12:00:07"),
    0x9004: (ASCII, "2026:05:14 12:00:07"),
    0x9011: (ASCII, "+02:00"),
    0x9101: (UNDEFINED, b"\x01\x02\x03\0"),
    0x9201: (RATIONAL, [(8966, 1000)]),
    0x9202: (RATIONAL, [(1696, 1000)]),
    0x9207: (SHORT, [5]),
    0x9209: (SHORT, [16]),
    0x920A: (RATIONAL, [(51, 10)]),
    0x9214: (SHORT, [2015, 1511, 2217, 1330]),
    0x927C: (UNDEFINED, bytes(1200)),
    0x9291: (ASCII, "250"),
    0xA001: (SHORT, [1]),
    0xA002: (SHORT, [4032]),
    0xA003: (SHORT, [3024]),
    0xA402: (SHORT, [0]),
    0xA403: (SHORT, [0]),
    0xA405: (SHORT, [26]),
    0xA406: (SHORT, [0]),
    0xA432: (RATIONAL, [(51, 10), (51, 10), (18, 10), (18, 10)]),
    0xA434: (ASCII, "main lens 5.1 mm"),
}


def library_alone(path: Path) -> None:
    """What the EXIF library does by itself, without maker notes."""
    with open(path, "rb") as stream:
        exifread.process_file(stream, details=False)


def best_seconds(readers: Sequence[Callable[[Path], object]], paths: Sequence[Path]) -> list[float]:
    """Best time of each reader over all paths, summed; the readers take turns at every file."""
    totals = [0.0] * len(readers)
    for path in paths:
        best = [float("inf")] * len(readers)
        for _ in range(TURNS):
            for which, reader in enumerate(readers):
                start = time.perf_counter()
                reader(path)
                best[which] = min(best[which], time.perf_counter() - start)
        totals = [total + one for total, one in zip(totals, best, strict=True)]
    return totals


def main() -> None:
    """Measure and print."""
    logging.getLogger("exifread").setLevel(logging.CRITICAL)
    with tempfile.TemporaryDirectory() as temporary:
        if len(sys.argv) > 1:
            folder = Path(sys.argv[1])
        else:
            folder = Path(temporary)
            for number in range(20):
                order = "<>"[number % 2]
                block = exif_block(IMAGE, EXIF, GOOD_GPS, order)
                write_photo(folder / f"{number}.jpg", (640, 480), block)
        paths = sorted(path for path in folder.rglob("*") if path.suffix.lower() == ".jpg")
        ours, alone = best_seconds([read_exif, library_alone], paths)
    found = {
        "files": len(paths),
        "ours_files_a_second": round(len(paths) / ours),
        "library_files_a_second": round(len(paths) / alone),
        "ratio": round(ours / alone, 3),
    }
    print(json.dumps(found))


if __name__ == "__main__":
    main()
