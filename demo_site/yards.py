"""Random places with random round things in them, for rounds of any number.

In: a random generator, the eastward shift of the yard. Out: things, scenery that does not hide
them, and the stations of a pair. Everything is invented; sizes and ranges are those of the trade.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from demo_site.inventory import Thing
from demo_site.scene import Ball, Cone, Panel, Piece, Scene, box, crown, house, leaning_axis

EAST, NORTH, UP = (1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)
LEAST_WIDTH_PX = 24.0
# kind: diameter (m), taper of the diameter (mm/m), height (m), range (m), lean sd (deg), material
SIZES = {
    "pole": ((0.20, 0.40), (-12.0, -6.0), (5.5, 8.5), (6.0, 16.0), 1.2, "timber"),
    "mast": ((0.114, 0.32), (-10.0, 0.0), (4.0, 8.0), (5.0, 15.0), 0.5, "painted"),
    "trunk": ((0.25, 0.80), (-24.0, -10.0), (4.5, 6.0), (8.0, 24.0), 1.6, "bark"),
    "bollard": ((0.12, 0.34), (-40.0, 0.0), (0.6, 1.0), (3.0, 7.0), 0.5, "painted"),
    "tank": ((1.6, 5.0), (0.0, 0.0), (3.0, 7.0), (15.0, 50.0), 0.0, "plates"),
    "ball": ((0.25, 0.90), (0.0, 0.0), (0.0, 0.0), (4.0, 11.0), 0.0, "stone"),
    "pipe": ((0.20, 0.60), (0.0, 0.0), (0.0, 0.0), (5.0, 9.0), 0.0, "painted"),
}


@dataclass(frozen=True)
class Yard:
    """A place with its things, where to stand (A, B, perhaps C) and what to aim at."""

    scene: Scene
    things: tuple[Thing, ...]
    stations: tuple[tuple[float, float, float], ...]
    aim: tuple[float, float, float]


def make_yard(
    rng: np.random.Generator, name: str, east_m: float, focal_px: float, kinds: tuple[str, ...],
    gauge: bool = False,
) -> Yard:  # fmt: skip
    """A yard whose things are of the given kinds, the first setting the range.

    name : begins the names of its things; gauge : adds a ball of known size
    """
    spread = rng.uniform(*SIZES[kinds[0]][3])
    things, stands = [], []
    bearing = -0.16 * (len(kinds) - 1)
    for number, kind in enumerate(kinds):
        low, high = SIZES[kind][3]
        away = float(np.clip(spread * rng.uniform(0.8, 1.25), low, high))
        turn = bearing + 0.32 * number + rng.uniform(-0.03, 0.03)
        at = (east_m + away * np.sin(turn), away * np.cos(turn))
        thing, stand = _thing(rng, f"{name}{number + 1}", kind, at, away, focal_px)
        things.append(thing)
        stands += stand
        spread = away
    reach = float(np.mean([np.linalg.norm(t.place[:2] - (east_m, 0.0)) for t in things]))
    stations = _stations(rng, east_m, reach, kinds[0] == "pipe")
    if gauge:
        spot = (east_m + 0.22 * min(reach, 5.0), 0.8 * min(reach, 5.0))
        ball = Ball((*spot, 0.62), 0.15, "painted", object=f"{name}9",
                    look={"paint": (0.9, 0.52, 0.14)})  # fmt: skip
        stands += box((spot[0] - 0.25, spot[1] - 0.25, 0.0), (0.5, 0.5, 0.47), "planks")
        things.append(Thing(f"{name}9", "ball", "gauge ball", ball, known_diameter_m=0.3))
    up = 0.7 if kinds[0] == "bollard" else 1.9
    aim = (east_m + float(rng.uniform(-0.3, 0.3)), reach, up)
    pieces = [*[t.solid for t in things], *stands]
    pieces += _scenery(rng, east_m, [t.place for t in things], stations)
    sun = (float(rng.uniform(130, 240)), float(rng.uniform(30, 58)))
    return Yard(Scene(tuple(pieces), *sun), tuple(things), stations, aim)


def _thing(
    rng: np.random.Generator, name: str, kind: str, at: tuple[float, float], away: float,
    focal_px: float,
) -> tuple[Thing, list[Piece]]:  # fmt: skip
    """One thing of a kind and what carries it."""
    sizes, tapers, heights, _, lean_sd, material = SIZES[kind]
    size = float(np.clip(rng.uniform(*sizes), LEAST_WIDTH_PX * away / focal_px, None))
    look = {"seed": int(rng.integers(1, 90)), "paint": tuple(rng.uniform(0.2, 0.75, 3))}
    if kind == "ball":
        up = float(rng.uniform(0.9, 1.8))
        pier = box((at[0] - 0.3, at[1] - 0.3, 0.0), (0.6, 0.6, up), "brick", look={"blank": True})
        ball = Ball((*at, up + 0.47 * size), size / 2, material, look=look, object=name)
        return Thing(name, kind, "", ball), [*pier]
    if kind == "pipe":
        up, turn = float(rng.uniform(2.6, 3.3)), float(rng.uniform(-0.2, 0.2))
        axis = (float(np.sin(turn)), float(np.cos(turn)), 0.0)
        start = (at[0] + 3.0, 0.5, up)
        pipe = Cone(start, axis, size / 2, 13.0, material, 0.0, look, name)
        end = np.add(start, 12.6 * np.array(axis))
        pier = box((end[0] - 0.4, end[1], 0.0), (0.8, 0.8, up - size / 2), "stone")
        return Thing(name, kind, "", pipe, marked_m=(2.0, 11.0), hides_top=True), [*pier]
    taper, tall = float(rng.uniform(*tapers)), float(rng.uniform(*heights))
    ref = {"bollard": 0.4, "tank": 1.5}.get(kind, 1.3)
    axis = leaning_axis(abs(float(rng.normal(0, lean_sd))), float(rng.uniform(0, 360)))
    ground = size - ref * taper / 1000
    bar = Cone((*at, 0.0), axis, ground / 2, tall, material, taper / 2000, look, name)
    marked = (0.1, tall - 0.05) if kind == "bollard" else (0.3, min(tall - 0.2, 4.5))
    more: list[Piece] = []
    if kind == "trunk":
        top = np.array(bar.base) + (tall + 1.0) * np.array(axis)
        more += crown((float(top[0]), float(top[1]), float(top[2])), 2.6, 14, look["seed"])
    return Thing(name, kind, "", bar, ref, marked_m=marked, hides_top=kind == "trunk"), more


def _stations(
    rng: np.random.Generator, east_m: float, reach: float, pipe: bool
) -> tuple[tuple[float, float, float], ...]:
    """Two stations, one time in five three, that see their things under 8 to 17 degrees."""
    wide = float(np.clip(2 * reach * np.tan(np.radians(rng.uniform(8, 17)) / 2), 0.5, 9.0))
    if pipe:
        # A level pipe needs stations under different slopes, nearer to and farther from it.
        wide = float(rng.uniform(2.2, 3.0))
    places = [-wide / 2, wide / 2]
    if rng.uniform() < 0.2:
        places.append(float(rng.uniform(-0.1, 0.1)) * wide)
    return tuple(
        (east_m + x, float(rng.normal(0, 0.06 * wide)), float(rng.uniform(1.42, 1.72)))
        for x in places
    )


def _scenery(
    rng: np.random.Generator, east_m: float, places: list[np.ndarray],
    stations: tuple[tuple[float, float, float], ...],
) -> list[Piece]:  # fmt: skip
    """Ground, houses, trees, boards and crates, none between a station and a thing."""
    names = list(rng.permutation(["grass", "gravel", "cobbles", "paving"]))
    rows, low = [], -20.0
    for name, width in zip(names, rng.uniform(2.0, 7.0, 4), strict=True):
        high = low + width + (18.0 if low < -10 else 0.0)
        rows.append((low, high, str(name)))
        low = high
    found: list[Piece] = [
        Panel(
            (east_m - 160, -160, 0), EAST, NORTH, 320, 320, "ground", look={"strips": tuple(rows)}
        )
    ]
    for number, (away, tall) in enumerate(((105.0, 13.0), (138.0, 19.0))):
        look = {"seed": int(rng.integers(1, 90))}
        found.append(
            Panel(
                (east_m - 220 + 30 * number, away, -1),
                EAST,
                UP,
                440,
                tall,
                "wood_edge",
                "wood",
                look,
            )
        )
    for x in np.arange(-42.0, 42.0, 15.0):
        look = {"seed": int(rng.integers(1, 900)), "rows": (0.95, 3.35),
                "bay_m": 2.2 + rng.uniform(0, 0.6),
                "brick": tuple(rng.uniform((0.45, 0.26, 0.2), (0.65, 0.42, 0.32))),
                "paint": tuple(rng.uniform(0.62, 0.88, 3))}  # fmt: skip
        wall = str(rng.choice(["brick", "plaster", "planks"]))
        corner = (east_m + float(x + rng.uniform(0, 4)), float(rng.uniform(27, 62)))
        found += house(corner, (float(rng.uniform(8, 11)), 8.0), 5.2, 8.0, wall, "tiles",
                       float(rng.uniform(-12, 12)), look)  # fmt: skip
    for _ in range(34):
        turn, away = rng.uniform(-0.75, 0.75), rng.uniform(5.0, 34.0)
        spot = np.array([east_m + away * np.sin(turn), away * np.cos(turn)])
        sort = int(rng.integers(0, 4))
        if not _free(spot, (1.9, 0.9, 3.2, 0.8)[sort], places, stations):
            continue
        x, y, seed = float(spot[0]), float(spot[1]), int(rng.integers(1, 900))
        facing = float(np.degrees(-turn) + rng.uniform(-25, 25))
        if sort == 0:
            found.append(
                Panel((x - 0.7, y, 0.7), EAST, UP, 1.4, 1.1, "poster", look={"seed": seed})
            )
            found += box((x - 0.75, y, 0.0), (0.08, 0.08, 1.9), "planks")
            found += box((x + 0.68, y, 0.0), (0.08, 0.08, 1.9), "planks")
        elif sort == 1:
            size = float(rng.uniform(0.45, 0.85))
            look = {"seed": seed, "board_m": 0.1, "paint": (0.56, 0.45, 0.31), "lie": seed % 2}
            found += box((x, y, 0.0), (size, size, size), "planks", facing, look=look)
        elif sort == 2 and away > 14.0:
            found.append(Cone((x, y, -0.1), UP, 0.16, 3.4, "bark", -0.01, {"seed": seed}))
            found += crown((x, y, 4.6), 2.2, 11, seed)
        else:
            bush = {"seed": seed, "leaf_m": 0.08, "tint": float(rng.uniform())}
            found.append(Ball((x, y, 0.4), float(rng.uniform(0.4, 0.75)), "leaves", 0.4, bush))
    return found


def _free(
    spot: np.ndarray, wide_m: float, places: list[np.ndarray],
    stations: tuple[tuple[float, float, float], ...],
) -> bool:  # fmt: skip
    """Whether something that wide hides no thing from any station."""
    for place in places:
        if np.linalg.norm(spot - place[:2]) < wide_m + 1.2:
            return False
        for station in stations:
            sight, away = place[:2] - station[:2], spot - station[:2]
            far = np.linalg.norm(sight)
            along = away @ sight / far
            aside = abs(away[0] * sight[1] - away[1] * sight[0]) / far
            if along < far + 1.0 and aside < wide_m + 0.5:
                return False
    return True
