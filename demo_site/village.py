"""Quillwater, a made-up canal village: everything in it that is not measured.

In: nothing. Out: the pieces of its ground, water, houses, trees and odds and ends. The canal runs
from west to east between y = 0 and y = 11; the towpath and the street lie south of it.
"""

from __future__ import annotations

import numpy as np

from demo_site.scene import Ball, Cone, Panel, Piece, box, crown, house

FAR_BANK_M = 11.0
WATER_M = -0.7
EAST, NORTH, UP = (1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)
WEST, SOUTH = (-1.0, 0.0, 0.0), (0.0, -1.0, 0.0)

_SOUTH_STRIPS = (
    (-0.55, 0.0, "paving"), (-2.5, -0.55, "gravel"), (-3.6, -2.5, "grass"),
    (-8.5, -3.6, "cobbles"), (-9.7, -8.5, "paving"),
)  # fmt: skip
_NORTH_STRIPS = ((11.0, 11.5, "paving"), (18.2, 19.6, "gravel"))
# x from, width, eaves, ridge, wall, paint, brick
_STREET = (
    (-46.0, 9.0, 5.4, 8.2, "brick", (0.60, 0.34, 0.25)),
    (-36.6, 7.4, 5.8, 8.6, "plaster", (0.84, 0.80, 0.68)),
    (-29.2, 8.2, 5.2, 7.9, "brick", (0.50, 0.27, 0.21)),
    (-20.6, 7.0, 6.0, 8.8, "plaster", (0.70, 0.76, 0.78)),
    (-13.6, 9.4, 5.3, 8.1, "brick", (0.62, 0.40, 0.28)),
    (-3.4, 7.6, 5.7, 8.4, "plaster", (0.86, 0.74, 0.60)),
    (4.2, 8.8, 5.5, 8.3, "brick", (0.52, 0.30, 0.24)),
    (13.8, 7.2, 5.9, 8.7, "plaster", (0.82, 0.83, 0.80)),
    (21.0, 8.6, 5.3, 8.0, "brick", (0.58, 0.33, 0.23)),
    (32.4, 9.2, 5.6, 8.5, "brick", (0.55, 0.36, 0.27)),
    (41.6, 8.0, 5.8, 8.6, "plaster", (0.80, 0.72, 0.60)),
    (50.4, 9.0, 5.4, 8.2, "brick", (0.60, 0.32, 0.24)),
    (62.0, 12.0, 5.6, 8.6, "plaster", (0.85, 0.82, 0.75)),
)
_TILES = ((0.50, 0.29, 0.21), (0.36, 0.36, 0.39), (0.56, 0.36, 0.25), (0.44, 0.33, 0.28))


def scenery() -> list[Piece]:
    """All pieces of the village."""
    return [
        *ground(), *street_houses(), *far_houses(), *barn(), *woods(), *far_trees(), *fences(),
        *boats(), *gate(), *odds_and_ends(), *street_life(), *bridge(),
    ]  # fmt: skip


def ground() -> list[Piece]:
    far = FAR_BANK_M
    return [
        Panel((-160, -160, 0), EAST, NORTH, 320, 160, "ground", look={"strips": _SOUTH_STRIPS}),
        Panel((-160, far, 0), EAST, NORTH, 320, 170, "ground", look={"strips": _NORTH_STRIPS}),
        Panel((-160, 0, WATER_M), EAST, NORTH, 320, far, "water", look={"far_m": far}),
        Panel((160, 0, WATER_M - 0.2), WEST, UP, 320, -WATER_M + 0.2, "brick",
              look={"blank": True, "brick": (0.45, 0.38, 0.33)}),
        Panel((-160, far, WATER_M - 0.2), EAST, UP, 320, -WATER_M + 0.2, "brick",
              look={"blank": True, "brick": (0.47, 0.40, 0.35)}),
    ]  # fmt: skip


def street_houses() -> list[Piece]:
    found: list[Piece] = []
    for number, (x, width, eaves, ridge, wall, paint) in enumerate(_STREET):
        look = {
            "seed": 11 + 3 * number, "rows": (0.95, 3.35), "bay_m": 2.2 + 0.25 * (number % 3),
            "tile": _TILES[number % 4], ("brick" if wall == "brick" else "paint"): paint,
            "frame": ((0.88, 0.87, 0.82), (0.35, 0.42, 0.36), (0.82, 0.80, 0.70))[number % 3],
        }  # fmt: skip
        # The house's first side faces its south: turned, so that the street front is north.
        found += house((x + width, -9.7), (width, 8.0), eaves, ridge, wall, "tiles", 180.0, look)
    return found


def far_houses() -> list[Piece]:
    found: list[Piece] = []
    plan = (
        (-62, 50, 11, 5.0, 7.8, -6), (-47, 54, 10, 5.2, 8.2, 4), (-14, 52, 12, 5.0, 8.0, -3),
        (2, 57, 10, 5.4, 8.4, 5), (14, 66, 12, 5.2, 8.0, -4), (44, 60, 11, 5.2, 8.2, 8),
        (60, 42, 12, 5.0, 7.9, -8), (84, 36, 14, 5.4, 8.6, 6), (-92, 34, 14, 5.2, 8.0, 5),
        (100, 18, 14, 5.4, 8.6, 70),
    )  # fmt: skip
    for number, (x, y, width, eaves, ridge, turn) in enumerate(plan):
        wall = ("brick", "plaster")[number % 2]
        look = {
            "seed": 71 + 5 * number, "rows": (0.95, 3.2), "bay_m": 2.3 + 0.3 * (number % 2),
            "tile": _TILES[(number + 2) % 4],
        }  # fmt: skip
        found += house((x, y), (width, 8.0), eaves, ridge, wall, "tiles", turn, look)
    return found


def barn() -> list[Piece]:
    look = {"seed": 61, "board_m": 0.22, "paint": (0.40, 0.30, 0.24), "tile": (0.40, 0.34, 0.31)}
    return [
        *house((-37.0, 29.0), (13.0, 9.0), 4.2, 7.6, "planks", "tiles", 8.0, look, chimney=False)
    ]


def woods() -> list[Piece]:
    """Rows of trees around the horizon, nearer and farther."""
    found: list[Piece] = []
    tints = (0.0, 0.3)
    for number, (away, tall) in enumerate(((105.0, 13.0), (138.0, 19.0))):
        look = {"seed": 5 + number, "tint": tints[number]}
        shift = 30.0 * number
        found += [
            Panel((-220 + shift, away, -1), EAST, UP, 440, tall, "wood_edge", "wood", look),
            Panel((220, -away * 0.6, -1), WEST, UP, 440, tall, "wood_edge", "wood", look),
            Panel((away * 1.1, 200, -1), SOUTH, UP, 400, tall, "wood_edge", "wood", look),
            Panel((-away * 1.1, -200, -1), NORTH, UP, 400, tall, "wood_edge", "wood", look),
        ]
    return found


def tree(x: float, y: float, tall: float, spread: float, seed: int) -> list[Piece]:
    """A tree of the scenery."""
    trunk = Cone((x, y, -0.1), UP, 0.045 * spread + 0.05, 0.6 * tall, "bark", -0.01, {"seed": seed})
    return [trunk, *crown((x, y, 0.68 * tall), spread, 15, 100 * seed + 7)]


def far_trees() -> list[Piece]:
    plan = (
        (-42, 22, 8.5, 3.4), (-27, 24.5, 7.5, 3.0), (-20, 30, 9.5, 3.8), (-9, 27, 7.8, 3.2),
        (9.5, 29, 9.0, 3.6), (13, 44, 10, 4.2), (15.5, 31, 7.2, 2.8), (41, 27, 8.6, 3.4),
        (54, 20, 8.0, 3.2), (66, 24, 9.4, 3.8), (-60, 19, 9.0, 3.6), (38, 44, 9.0, 3.4),
        (-74, -4.5, 8.0, 3.2), (72, -5.5, 8.6, 3.4), (17, 54, 9.6, 4.0), (-1.5, 40, 9.0, 3.6),
        (88, 14, 9.0, 3.6), (-54, 36, 9.5, 4.0),
    )  # fmt: skip
    return [p for n, (x, y, tall, wide) in enumerate(plan) for p in tree(x, y, tall, wide, n + 3)]


def fences() -> list[Piece]:
    """A board fence and hedges on the far bank, a low wall by the street."""
    found: list[Piece] = []
    look = {"seed": 15, "board_m": 0.16, "paint": (0.50, 0.44, 0.37)}
    for x in np.arange(-33.0, -13.0, 2.0):
        found += box((float(x), 21.0, 0), (0.1, 0.1, 1.25), "planks", look=look)
        for z in (0.35, 0.72, 1.05):
            found += box((float(x), 20.95, z), (2.0, 0.04, 0.14), "planks", look={**look, "lie": 1})
    rng = np.random.default_rng(5)
    for x in np.arange(9.5, 27.0, 1.1):
        place = (float(x), 22.4 + float(rng.uniform(-0.1, 0.1)), 0.55)
        leafy = {"seed": int(40 + x), "leaf_m": 0.09, "tint": float(rng.uniform(0, 0.5))}
        found.append(Ball(place, float(rng.uniform(0.75, 0.95)), "leaves", 0.35, leafy))
    return found


def boats() -> list[Piece]:
    found: list[Piece] = []
    plan = ((17.5, 9.0, 7.5, (0.16, 0.28, 0.36), (0.66, 0.20, 0.16)),
            (27.0, 8.9, 6.0, (0.20, 0.18, 0.17), (0.18, 0.38, 0.26)),
            (-26.0, 9.0, 8.0, (0.18, 0.20, 0.22), (0.70, 0.55, 0.24)))  # fmt: skip
    for x, y, long, hull, cabin in plan:
        tarred = {"paint": hull, "seed": int(x) % 7, "sound": 0.9}
        found += box((x, y, WATER_M - 0.1), (long, 1.8, 0.75), "painted", top="planks", look=tarred)
        bands = ((0.12, 0.17, (0.85, 0.78, 0.55)), (0.30, 0.62, (0.80, 0.84, 0.86)))
        found += box((x + 1.3, y + 0.2, WATER_M + 0.65), (long - 2.8, 1.4, 0.85), "painted",
                     look={"paint": cabin, "bands": bands, "seed": int(x) % 5})  # fmt: skip
    return found


def gate() -> list[Piece]:
    """Two brick piers with a garden wall on the far bank; the eastern pier's ball is scenery."""
    found: list[Piece] = []
    bricks = {"blank": True, "seed": 8, "brick": (0.57, 0.36, 0.28)}
    for x in (3.2, 6.4):
        found += box((x, 20.0, 0), (0.62, 0.62, 1.75), "brick", look=bricks)
        found += box((x - 0.09, 19.91, 1.75), (0.80, 0.80, 0.12), "stone", look={"seed": 4})
        found.append(Cone((x + 0.31, 20.31, 1.87), UP, 0.16, 0.14, "stone", -0.3, {"seed": 5}))
    found.append(Ball((6.71, 20.31, 2.28), 0.30, "stone", look={"seed": 6}))
    for x, long in ((-7.0, 10.2), (7.02, 2.4)):
        found += box((x, 20.18, 0), (long, 0.26, 1.05), "brick", look=bricks)
        found += box((x, 20.12, 1.05), (long, 0.38, 0.08), "stone", look={"seed": 9})
    for z in (0.35, 1.15):
        found.append(Cone((3.82, 20.31, z), EAST, 0.016, 2.58, "painted",
                          look={"paint": (0.12, 0.13, 0.13)}))  # fmt: skip
    for number, x in enumerate((3.95, 4.35, 4.75, 5.15, 5.55, 5.95)):
        found.append(Cone((x, 20.31, 0.1), UP, 0.014, 1.5 - 0.1 * abs(number - 2.5), "painted",
                          look={"paint": (0.12, 0.13, 0.13)}))  # fmt: skip
    return found


def odds_and_ends() -> list[Piece]:
    """Benches, crates, barrels, tubs of flowers, a stack of logs, a shed."""
    found: list[Piece] = []
    wood = {"seed": 3, "board_m": 0.11, "paint": (0.46, 0.36, 0.27), "lie": 1}
    for x, y, turn in (
        (-9.2, -3.0, 0),
        (13.5, -3.1, 0),
        (-24.0, -3.1, 0),
        (9.0, 17.4, 0),
        (30.5, -3.2, 0),
    ):
        found += box((x, y, 0.42), (1.7, 0.42, 0.05), "planks", turn, look=wood)
        found += box((x, y - 0.05, 0.62), (1.7, 0.04, 0.30), "planks", turn, look=wood)
        for side in (0.1, 1.5):
            found += box((x + side, y, 0), (0.08, 0.42, 0.42), "stone", turn)
    crates = (
        (8.2, -8.3, 0.0, 0.7, 12), (9.0, -8.4, 0.0, 0.6, -8), (8.5, -8.35, 0.7, 0.5, 30),
        (-17.8, -8.4, 0.0, 0.65, 5), (-17.0, -8.2, 0.0, 0.5, 24), (18.6, -8.3, 0, 0.7, 3),
        (31.4, 12.6, 0, 0.8, 15), (32.3, 12.4, 0, 0.6, 40), (-4.6, 12.2, 0, 0.55, 20),
        (27.2, -8.3, 0, 0.75, 10), (-27.6, -8.1, 0, 0.7, 31), (24.0, 14.2, 0, 0.6, 12),
    )  # fmt: skip
    for number, (x, y, z, size, turn) in enumerate(crates):
        look = {
            "seed": 20 + number,
            "board_m": 0.10,
            "paint": (0.56, 0.45, 0.31),
            "lie": number % 2,
        }
        found += box((x, y, z), (size, size, size), "planks", turn, look=look)
    for number, (x, y) in enumerate(
        ((10.3, -8.4), (11.0, -8.2), (-18.9, -8.2), (33.4, 12.9), (19.9, -8.3), (-30.9, -8.3))
    ):
        hoops = tuple((low, low + 0.05, (0.3, 0.3, 0.3)) for low in (0.12, 0.68))
        look = {"seed": number, "bands": hoops, "paint": (0.43, 0.31, 0.22)}
        found.append(Cone((x, y, 0), UP, 0.30, 0.88, "painted", 0.0, look))
    for number, x in enumerate(
        (-31.5, -22.3, -15.6, -6.8, -1.2, 3.0, 6.6, 15.4, 22.6, 29.0, 34.6, 43.4)
    ):
        found.append(
            Cone(
                (x, -9.2, 0),
                UP,
                0.26,
                0.45,
                "stone",
                0.12,
                {"seed": number, "paint": (0.58, 0.38, 0.28)},
            )
        )
        leafy = {"seed": 60 + number, "leaf_m": 0.06, "tint": 0.4}
        found.append(Ball((x, -9.2, 0.62), 0.34, "leaves", 0.4, leafy))
    for row, count in enumerate((5, 4, 3)):
        for number in range(count):
            place = (-9.0 + 0.26 * (number + 0.5 * row), 12.6, 0.13 + 0.225 * row)
            found.append(Cone(place, NORTH, 0.13, 1.1, "bark", 0.0, {"seed": 7 * row + number}))
    shed = {"seed": 44, "board_m": 0.13, "paint": (0.32, 0.40, 0.36), "tile": (0.34, 0.34, 0.36)}
    found += house(
        (24.5, 24.5), (3.6, 2.6), 2.1, 3.0, "planks", "tiles", -12.0, shed, chimney=False
    )
    return found


def street_life() -> list[Piece]:
    """Notice boards, shop awnings and market stalls."""
    found: list[Piece] = []
    boards = (
        (-22.6, -8.7, 90), (16.3, -8.4, 75), (36.4, -8.2, 60), (-27.5, -8.0, 80), (2.6, -8.6, 95),
        (0.6, 16.9, 175), (-12.4, 18.0, 185), (34.0, 17.4, 200), (9.0, 13.4, 165),
        (26.5, 15.6, 190), (-24.5, 14.8, 160),
    )  # fmt: skip
    for number, (x, y, turn) in enumerate(boards):
        wood = {"seed": 50 + number, "board_m": 0.08, "paint": (0.36, 0.28, 0.21)}
        c, s = float(np.cos(np.radians(turn))), float(np.sin(np.radians(turn)))
        for side in (0.0, 1.5):
            post = (x + side * c, y + side * s, 0.0)
            found += box(post, (0.09, 0.09, 1.95), "planks", turn, look=wood)
        for across, shift in (((c, s, 0.0), 0.0), ((-c, -s, 0.0), 1.4)):
            start = (x + (0.1 + shift) * c, y + (0.1 + shift) * s, 0.75)
            found.append(Panel(start, across, UP, 1.4, 1.1, "poster", look={"seed": 31 * number}))
    paints = ((0.62, 0.22, 0.18), (0.18, 0.36, 0.44), (0.28, 0.42, 0.22), (0.66, 0.48, 0.18))
    for number, (x, wide) in enumerate(
        ((-11.4, 3.0), (-26.8, 2.6), (6.0, 3.4), (24.0, 3.2), (43.8, 3.0))
    ):
        slope = (0.0, float(np.cos(0.5)), -float(np.sin(0.5)))
        cloth = {"seed": number, "paint": paints[number % 4]}
        found.append(Panel((x, -9.68, 2.95), EAST, slope, wide, 1.35, "striped", look=cloth))
        sign = {"seed": 7 + number, "paint": paints[(number + 1) % 4]}
        found += box((x + 0.3, -9.72, 3.0), (wide - 0.6, 0.06, 0.4), "painted", look=sign)
    for number, (x, y) in enumerate(((-21.6, -7.6), (13.2, -7.9), (28.4, -7.4), (39.4, -7.6))):
        wood = {"seed": 80 + number, "board_m": 0.1, "paint": (0.50, 0.41, 0.30)}
        for dx in (0.0, 1.92):
            for dy in (0.0, 1.02):
                found += box((x + dx, y + dy, 0.0), (0.07, 0.07, 2.15), "planks", look=wood)
        found += box((x, y, 0.72), (2.0, 1.1, 0.06), "planks", look=wood)
        found += box(
            (x + 0.02, y + 1.04, 0.1), (1.95, 0.03, 0.62), "poster", look={"seed": 5 * number}
        )
        for side in (1, -1):
            rise = (0.0, side * 0.94, 0.342)
            cloth = {"seed": 9 + number, "paint": paints[(number + 2) % 4], "stripe_m": 0.16}
            along = EAST if side > 0 else WEST
            low = (x - 0.15 if side > 0 else x + 2.15, y + 0.55 - side * 0.72, 2.1)
            found.append(Panel(low, along, rise, 2.3, 0.77, "striped", look=cloth))
        for k in range(5):
            spot = (x + 0.15 + 0.38 * k, y + 0.15, 0.78)
            found += box(spot, (0.3, 0.75, 0.14), "planks", look={**wood, "seed": k})
            fruit = {"seed": 3 * k + number, "leaf_m": 0.05, "tint": 0.25 * k}
            found.append(Ball((spot[0] + 0.15, y + 0.5, 0.84), 0.2, "leaves", 0.4, fruit))
    return found


def bridge() -> list[Piece]:
    """A brick road bridge east of the village."""
    look = {"blank": True, "brick": (0.50, 0.36, 0.30), "seed": 12}
    found: list[Piece] = []
    found += box((58.0, -5.0, 0.0), (5.0, 5.6, 2.9), "brick", look=look)
    found += box((58.0, FAR_BANK_M - 0.6, 0.0), (5.0, 6.0, 2.9), "brick", look=look)
    found += box((58.0, -5.0, 2.3), (5.0, 21.9, 1.5), "brick", look=look)
    found += box((57.9, -5.1, 3.8), (5.2, 22.1, 0.14), "stone", look={"seed": 13})
    return found
