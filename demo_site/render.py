"""Make the demo round: its sheets, its true figures and its photos.

Run:  python demo_site/render.py                 everything, some minutes on two cores
      python demo_site/render.py --check         compare sheets and truth with the files
      python demo_site/render.py --only 03,07    photos of some pairs
"""

from __future__ import annotations

import argparse
import os
import re
import sys
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

# One thread a process; the two processes share the work.
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from PIL import Image  # noqa: E402

from demo_site.exif import exif_of  # noqa: E402
from demo_site.outing import Outing, quillwater_round  # noqa: E402
from demo_site.picture import render_view  # noqa: E402
from demo_site.sheets import all_sheets  # noqa: E402

HERE = Path(__file__).resolve().parent
QUALITY = 82


def write_sheets(outing: Outing, folder: Path) -> None:
    """Write every sheet of an outing."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, text in all_sheets(outing).items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")


def write_photo(outing: Outing, folder: Path, pair: int, number: int, coarse: bool = False) -> str:
    """Render one photo with its EXIF; returns its name."""
    walked = outing.pairs[pair]
    view = walked.views[number]
    picture = render_view(outing.scene_of(walked), view, coarse)
    (folder / "photos").mkdir(parents=True, exist_ok=True)
    Image.fromarray(picture).save(
        folder / "photos" / view.photo, quality=QUALITY, subsampling=2, optimize=True,
        exif=exif_of(outing, walked, number),
    )  # fmt: skip
    return view.photo


def _demo_photo(task: tuple[str, int, int, bool]) -> str:
    folder, pair, number, coarse = task
    return write_photo(quillwater_round(), Path(folder), pair, number, coarse)


def different(outing: Outing, folder: Path) -> list[str]:
    """Sheets that are not what the outing gives; the last digit of a number may differ by one."""
    found = []
    for name, text in all_sheets(outing).items():
        path = folder / name
        if not path.exists() or not _alike(text, path.read_text(encoding="utf-8")):
            found.append(name)
    return found


def _alike(text: str, other: str) -> bool:
    number = re.compile(r"-?\d+\.\d+")
    if number.sub("#", text) != number.sub("#", other):
        return False
    # Another machine's sine may differ in its last bit, and so a rounded digit.
    for a, b in zip(number.findall(text), number.findall(other), strict=True):
        step = 10.0 ** -len(a.partition(".")[2])
        if abs(float(a) - float(b)) > 1.01 * step:
            return False
    return True


def main() -> int:
    """Entry of the command."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--check", action="store_true", help="compare sheets and truth only")
    parser.add_argument("--only", default="", help="first letters of pairs, with commas")
    parser.add_argument("--coarse", action="store_true", help="quick pictures with jagged edges")
    parser.add_argument("--folder", type=Path, default=HERE)
    parser.add_argument("--processes", type=int, default=2)
    wanted = parser.parse_args()
    outing = quillwater_round()
    if wanted.check:
        wrong = different(outing, wanted.folder)
        print("\n".join(f"{name} differs" for name in wrong) or "sheets and truth agree")
        return 1 if wrong else 0
    write_sheets(outing, wanted.folder)
    first = tuple(part for part in wanted.only.split(",") if part)
    tasks = [
        (str(wanted.folder), place, number, wanted.coarse)
        for place, pair in enumerate(outing.pairs)
        for number in range(len(pair.views))
        if not first or pair.pair.startswith(first)
    ]
    with ProcessPoolExecutor(wanted.processes) as pool:
        for name in pool.map(_demo_photo, tasks):
            print(name, flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
