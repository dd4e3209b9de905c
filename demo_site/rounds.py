"""Other rounds like the demo: any number gives a small round of its own, with its truth.

Run:  python demo_site/rounds.py 7 some/folder --pairs 3 [--no-card]
In: a number. Out: a round's folder (sheets, photos) with truth.csv, truth_views.csv, truth.json.
"""

from __future__ import annotations

import argparse
import json
import os
import sys
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import numpy as np  # noqa: E402

from demo_site.inventory import Thing  # noqa: E402
from demo_site.outing import Body, Outing, Walked  # noqa: E402
from demo_site.render import write_photo, write_sheets  # noqa: E402
from demo_site.scene import Lens, Scene, View  # noqa: E402
from demo_site.sheets import baseline_m, exact_marks  # noqa: E402
from demo_site.yards import make_yard  # noqa: E402

# Open sea in both hemispheres, near the date line, far north, on the equator.
SITES = ((2.431, 54.748, 11.0), (-28.0, -34.2, 45.0), (4.0, 69.4, 8.0), (-25.0, 0.0004, 20.0),
         (179.9996, -18.2, 5.0))  # fmt: skip
MIXES = (("pole", "pole"), ("mast", "bollard"), ("trunk", "trunk", "trunk"), ("tank",), ("pipe",),
         ("bollard", "bollard"), ("ball", "mast"), ("pole", "trunk"), ("mast", "mast"))  # fmt: skip
YARD_M = 400.0
TRIES = 60


def make_outing(
    seed: int, pairs: int = 3, card: bool | None = None, size_px: tuple[int, int] = (1600, 1200)
) -> Outing:
    """A random outing; card None: drawn, False: the camera is only known by its EXIF."""
    rng = np.random.default_rng([seed, 4021])
    body = _body(rng, seed, bool(rng.uniform() < 0.7) if card is None else card, size_px)
    site = SITES[int(rng.integers(len(SITES)))]
    walked: list[Walked] = []
    things: list[Thing] = []
    for number in range(pairs):
        for _ in range(TRIES):
            pair, found = _pair(rng, seed, number, body)
            outing = Outing(pair.scene or Scene(()), (*things, *found), (*walked, pair), site, seed,
                            f"made-up round {seed}", "nobody", "made up")  # fmt: skip
            if _can_be_marked(outing, pair):
                break
        else:
            raise RuntimeError(f"no yard of pair {number} of round {seed} shows all its things")
        walked.append(pair)
        things += found
    return outing


def _pair(
    rng: np.random.Generator, seed: int, number: int, body: Body
) -> tuple[Walked, tuple[Thing, ...]]:
    """One pair in a yard of its own."""
    name = f"{chr(ord('A') + number % 26)}{number // 26 or ''}"
    mix = MIXES[int(rng.integers(len(MIXES)))]
    gauge = bool(mix[0] in ("pole", "bollard", "ball") and rng.uniform() < 0.3)
    yard = make_yard(rng, name, YARD_M * number, body.lens.values[0], mix, gauge)
    upright = bool(mix[0] not in ("trunk", "pipe", "tank") and rng.uniform() < 0.3)
    views = tuple(
        View(f"{name}-{letter}.jpg", body.lens, station, yard.aim, float(rng.normal(0, 0.8)),
             upright, int(rng.integers(1 << 30)))
        for letter, station in zip("ABC", yard.stations, strict=False)
    )  # fmt: skip
    hour, minute = 9 + number // 10 % 12, 6 * (number % 10)
    taken = f"2026:05:{5 + seed % 20:02d} {hour:02d}:{minute:02d}:00"
    names = tuple(thing.object for thing in yard.things)
    return Walked(
        f"pair-{name}", body, views, names, taken, not gauge, scene=yard.scene
    ), yard.things


def _can_be_marked(outing: Outing, pair: Walked) -> bool:
    """Whether every thing has its limbs or its outline in every view."""
    for view in pair.views:
        marks = [(name, mark) for name, mark, _, _ in exact_marks(outing, pair, view)]
        for name in pair.objects:
            round_ = marks.count((name, "outline")) >= 10
            if not round_ and min(marks.count((name, side)) for side in ("left", "right")) < 5:
                return False
    return True


def _body(rng: np.random.Generator, seed: int, card: bool, size_px: tuple[int, int]) -> Body:
    """A random camera; its 35 mm equivalent follows one of two rules and errs by some percent."""
    width, height = size_px
    focal = float(width * rng.uniform(0.70, 1.15))
    centre = (np.array(size_px) - 1) / 2 + rng.normal(0, 0.004 * width, 2)
    bent = (float(rng.uniform(-0.08, 0.05)), float(rng.uniform(-0.05, 0.05)),
            *(float(v) for v in rng.normal(0, 0.0004, 2)), 0.0)  # fmt: skip
    lens = Lens("drawn", size_px, (focal, focal, float(centre[0]), float(centre[1]), *bent),
                float(rng.uniform(0.5, 0.8)), float(rng.uniform(1.0, 2.2)))  # fmt: skip
    rule = 43.27 / np.hypot(width, height) if rng.uniform() < 0.5 else 36.0 / width
    full = round(focal * rule * float(np.exp(rng.normal(0, 0.03))))
    return Body(lens, "Brantwick", f"Try {seed}", round(full / 5.6, 1), full,
                "drawn camera" if card else None, "T")  # fmt: skip


def truth_json(outing: Outing) -> str:
    """Everything true of an outing: views, objects, exact marks, baselines."""
    found: dict[str, object] = {"site": dict(zip(("lon", "lat", "alt"), outing.site, strict=True))}
    found["pairs"] = {
        pair.pair: {
            "baseline_m": baseline_m(pair),
            "views": [
                {"photo": v.photo, "station": list(v.station), "rotation": v.rotation.tolist(),
                 "values": list(v.lens.values), "turn_deg": v.turn_deg, "size_px": v.upright_px,
                 "marks": [[o, m, *map(float, xy)] for o, m, xy, _ in exact_marks(outing, pair, v)]}
                for v in pair.views
            ],
        }
        for pair in outing.pairs
    }  # fmt: skip
    found["objects"] = [
        {"object": t.object, "kind": t.kind, "diameter_m": t.diameter_m, "place": t.place.tolist(),
         "ref_height_m": t.ref_height_m, "taper_mm_per_m": 2000 * t.taper_m_per_m}
        for t in outing.things
    ]  # fmt: skip
    return json.dumps(found, indent=1) + "\n"


def make_round(
    seed: int,
    folder: Path,
    pairs: int = 3,
    card: bool | None = None,
    size_px: tuple[int, int] = (1600, 1200),
    processes: int = 1,
) -> Outing:
    """Write a random round with its truth into a folder; returns what it was made from."""
    outing = make_outing(seed, pairs, card, size_px)
    write_sheets(outing, folder)
    (folder / "truth.json").write_text(truth_json(outing), encoding="utf-8")
    tasks = [
        (seed, folder, pairs, card, size_px, place, number)
        for place, pair in enumerate(outing.pairs)
        for number in range(len(pair.views))
    ]
    if processes == 1:
        for task in tasks:
            _photo(task)
        return outing
    with ProcessPoolExecutor(processes) as pool:
        list(pool.map(_photo, tasks))
    return outing


def _photo(task: tuple) -> str:
    seed, folder, pairs, card, size_px, place, number = task
    return write_photo(make_outing(seed, pairs, card, size_px), folder, place, number)


def main(arguments: Sequence[str] | None = None) -> int:
    """Entry of the command."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("seed", type=int)
    parser.add_argument("folder", type=Path)
    parser.add_argument("--pairs", type=int, default=3)
    parser.add_argument("--card", action=argparse.BooleanOptionalAction, default=None)
    parser.add_argument("--size", type=int, nargs=2, default=(1600, 1200), metavar=("W", "H"))
    parser.add_argument("--processes", type=int, default=2)
    wanted = parser.parse_args(arguments)
    size = (wanted.size[0], wanted.size[1])
    make_round(wanted.seed, wanted.folder, wanted.pairs, wanted.card, size, wanted.processes)
    return 0


if __name__ == "__main__":
    sys.exit(main())
