"""The round things of Quillwater that the round measures, and their true dimensions.

In: nothing. Out: `Thing`s, each with its exact solid, and the whole `Scene`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from demo_site.scene import Ball, Cone, Piece, Scene, box, crown, leaning_axis
from demo_site.village import scenery


@dataclass(frozen=True)
class Thing:
    """One object of the inventory.

    solid      : its exact shape; a ball's centre or a bar's axis and radii
    ref_height_m : height above its foot where the diameter is wanted, None for a ball or pipe
    known_diameter_m : written into objects.csv (a ball of known size)
    marked_m   : heights between which a hand would mark the limbs
    hides_top  : the end cannot be marked (it lies in the leaves)
    """

    object: str
    kind: str
    label: str
    solid: Cone | Ball
    ref_height_m: float | None = None
    known_diameter_m: float | None = None
    marked_m: tuple[float, float] = (0.3, 4.0)
    hides_top: bool = False
    note: str = ""

    @property
    def diameter_m(self) -> float:
        """True diameter at the reference height."""
        if isinstance(self.solid, Ball):
            return 2.0 * self.solid.radius_m
        return 2.0 * (self.solid.radius_m + self.taper_m_per_m * (self.ref_height_m or 0.0))

    @property
    def taper_m_per_m(self) -> float:
        """Change of the RADIUS a metre."""
        return 0.0 if isinstance(self.solid, Ball) else self.solid.taper_m_per_m

    @property
    def place(self) -> np.ndarray:
        """Where the axis meets the ground; a ball's centre, a pipe's middle."""
        if isinstance(self.solid, Ball):
            return np.array(self.solid.centre)
        base, axis = np.array(self.solid.base), np.array(self.solid.axis)
        return base + 0.5 * self.solid.length_m * axis if self.kind == "pipe" else base


def _bar(
    name: str, kind: str, label: str, at: tuple[float, float], ground_m: float, taper_mm: float,
    tall: float, material: str, look: Mapping[str, Any], ref: float = 1.3, lean: float = 0.0,
    to: float = 0.0, **more: Any,
) -> Thing:  # fmt: skip
    """An upright thing: ground_m its diameter at the ground, taper_mm of the DIAMETER a metre."""
    solid = Cone((*at, 0.0), leaning_axis(lean, to), ground_m / 2, tall, material,
                 taper_mm / 2000.0, look, name)  # fmt: skip
    return Thing(name, kind, label, solid, ref, **more)


_ZINC, _GREEN, _IRON = (0.62, 0.65, 0.66), (0.25, 0.41, 0.34), (0.16, 0.17, 0.18)
_WHITE = (0.90, 0.89, 0.84)


def things() -> list[Thing]:
    """The inventory, poles first."""
    return [
        _bar("K1", "pole", "towpath line, pole 1", (4.5, -3.0), 0.292, -9.0, 7.2, "timber",
             {"seed": 1, "bands": ((1.72, 1.80),)}, lean=0.8, to=250.0),
        _bar("K2", "pole", "towpath line, pole 2", (11.0, -3.05), 0.318, -8.0, 7.4, "timber",
             {"seed": 2, "bands": ((1.72, 1.80),)}, lean=1.1, to=95.0),
        _bar("K3", "pole", "towpath line, pole 4", (29.0, -3.0), 0.305, -10.0, 7.3, "timber",
             {"seed": 3, "bands": ((1.72, 1.80),)}, lean=0.5, to=10.0),
        _bar("L1", "pole", "towpath line, pole 3, leans", (22.5, -3.0), 0.284, -8.5, 7.2, "timber",
             {"seed": 4, "bands": ((1.72, 1.80),)}, lean=7.0, to=12.0),
        _bar("K4", "pole", "towpath line, pole 6", (-31.0, -3.0), 0.276, -8.0, 7.0, "timber",
             {"seed": 5, "bands": ((1.72, 1.80),)}, lean=0.9, to=180.0),
        _bar("M1", "mast", "Weir Street lamp 3", (-11.6, -8.0), 0.1683, 0.0, 4.6, "painted",
             {"seed": 1, "paint": _GREEN, "gloss": 0.25, "bands": ((0.9, 1.2, _WHITE),)}),
        _bar("M2", "mast", "Weir Street lamp 4", (-16.4, -4.1), 0.2191, 0.0, 4.8, "painted",
             {"seed": 2, "paint": _GREEN, "gloss": 0.25, "bands": ((0.9, 1.2, _WHITE),)}),
        _bar("M3", "mast", "Far Bank light, east", (44.0, 13.4), 0.2730, -9.0, 8.2, "painted",
             {"seed": 3, "paint": _ZINC, "gloss": 0.2, "bands": ((2.4, 2.6, (0.75, 0.25, 0.2)),)},
             lean=0.4, to=300.0, marked_m=(0.3, 6.5)),
        _bar("M4", "mast", "Far Bank light, west", (-18.6, 13.2), 0.2445, -6.0, 6.0, "painted",
             {"seed": 4, "paint": _ZINC, "gloss": 0.2, "bands": ((2.4, 2.6, (0.75, 0.25, 0.2)),)},
             lean=0.6, to=60.0),
        _bar("T1", "trunk", "Far Bank ash 14", (-6.2, 14.3), 0.548, -16.0, 5.2, "bark", {"seed": 1},
             lean=1.6, to=300.0, marked_m=(0.4, 3.2), hides_top=True),
        _bar("T2", "trunk", "Far Bank ash 15", (-1.4, 16.4), 0.436, -14.0, 5.0, "bark",
             {"seed": 2, "dark": (0.28, 0.26, 0.23), "light": (0.50, 0.48, 0.43)},
             lean=1.2, to=80.0, marked_m=(0.4, 3.2), hides_top=True),
        _bar("T3", "trunk", "Far Bank oak 13", (-10.8, 15.2), 0.682, -22.0, 5.4, "bark",
             {"seed": 3, "dark": (0.30, 0.24, 0.18), "light": (0.52, 0.45, 0.36)},
             lean=0.7, to=170.0, marked_m=(0.4, 3.2), hides_top=True),
        _bar("T4", "trunk", "Far Bank oak 11", (-14.6, 16.8), 0.604, -20.0, 5.4, "bark",
             {"seed": 4, "dark": (0.30, 0.24, 0.18), "light": (0.52, 0.45, 0.36)},
             lean=1.9, to=140.0, marked_m=(0.4, 3.2), hides_top=True),
        _bar("T5", "trunk", "Far Bank ash 27", (37.5, 14.6), 0.470, -13.0, 5.2, "bark", {"seed": 5},
             lean=1.0, to=210.0, marked_m=(0.4, 3.2), hides_top=True),
        _bar("S1", "tank", "old gasworks tank", (30.0, 50.0), 4.260, 0.0, 5.2, "plates",
             {"seed": 1, "paint": (0.60, 0.62, 0.58), "sound": 0.8, "gloss": 0.05}, ref=2.0,
             marked_m=(0.6, 4.8)),
        Thing("P1", "pipe", "water main on its bridge",
              Cone((45.5, -2.6, 3.25), (0.0, 1.0, 0.0), 0.4064 / 2, 16.2, "painted", 0.0,
                   {"seed": 6, "paint": (0.52, 0.57, 0.60), "sound": 0.75, "gloss": 0.15}, "P1"),
              None, marked_m=(2.6, 13.0), hides_top=True),
        _bar("B1", "bollard", "quay bollard 5", (2.0, -0.80), 0.3020, -36.0, 0.72, "painted",
             {"seed": 7, "paint": _IRON, "gloss": 0.2, "bands": ((0.50, 0.60, _WHITE),)}, ref=0.40,
             marked_m=(0.08, 0.68)),
        _bar("B2", "bollard", "quay bollard 6", (4.1, -0.78), 0.2860, -30.0, 0.76, "painted",
             {"seed": 8, "paint": _IRON, "gloss": 0.2, "bands": ((0.50, 0.60, _WHITE),)}, ref=0.40,
             marked_m=(0.08, 0.72)),
        _bar("B3", "bollard", "quay bollard 2", (-15.4, -0.85), 0.2740, -30.0, 0.78, "painted",
             {"seed": 9, "paint": _IRON, "gloss": 0.2, "bands": ((0.50, 0.60, _WHITE),)}, ref=0.40,
             marked_m=(0.08, 0.74)),
        Thing("O1", "ball", "gate ball, west pier",
              Ball((3.51, 20.31, 2.30), 0.318, "stone", look={"seed": 7}, object="O1"),
              note="stands on the pier of the mill garden"),
        Thing("G1", "ball", "gauge ball",
              Ball((-13.9, -2.7, 0.45 + 0.15), 0.150, "painted",
                   look={"seed": 10, "paint": (0.90, 0.52, 0.14), "gloss": 0.3}, object="G1"),
              known_diameter_m=0.300, note="set on a crate for scale"),
    ]  # fmt: skip


def fittings() -> list[Piece]:
    """What hangs on or stands by the inventory: cross-arms, wires, lamps, crowns, supports."""
    found: list[Piece] = []
    tops = {}
    all_things = {t.object: t for t in things()}
    for name in ("K1", "K2", "L1", "K3", "K4"):
        solid = all_things[name].solid
        top = np.array(solid.base) + (solid.length_m - 0.55) * np.array(solid.axis)
        tops[name] = top
        found += box((top[0] - 0.24, top[1] - 0.8, top[2]), (0.09, 1.6, 0.11), "planks",
                     look={"seed": 2, "paint": (0.36, 0.30, 0.25), "lie": 1})  # fmt: skip
        for side in (-0.7, 0.7):
            foot = (top[0] - 0.2, top[1] + side, top[2] + 0.11)
            white = {"paint": (0.80, 0.82, 0.80)}
            found.append(Cone(foot, (0.0, 0.0, 1.0), 0.035, 0.13, "painted", look=white))
    order = [tops[n] for n in ("K4", "K1", "K2", "L1", "K3")]
    order = [
        np.array([-60.0, -3.0, 6.5]),
        *order,
        np.array([42.0, -3.0, 6.6]),
        np.array([75.0, -3.0, 6.5]),
    ]
    for a, b in pairwise(order):
        for side in (-0.7, 0.7):
            hung = np.array([-0.2, side, 0.25])
            found += _wire(a + hung, b + hung)
    for name, arm in (
        ("M1", (0.0, 1.0)),
        ("M2", (0.0, -1.0)),
        ("M3", (0.0, -1.0)),
        ("M4", (0.0, -1.0)),
    ):
        solid = all_things[name].solid
        top = np.array(solid.base) + (solid.length_m - 0.12) * np.array(solid.axis)
        found.append(
            Cone(tuple(top), (arm[0], arm[1], 0.0), 0.03, 0.75, "painted", look={"paint": _GREEN})
        )
        place = top + 0.62 * np.array([*arm, 0.0])
        low = (place[0] - 0.12, place[1] - 0.2, place[2] - 0.16)
        found += box(low, (0.24, 0.4, 0.15), "painted", look={"paint": (0.82, 0.83, 0.80)})
    for number, name in enumerate(("T1", "T2", "T3", "T4", "T5")):
        solid = all_things[name].solid
        top = np.array(solid.base) + (solid.length_m + 0.9) * np.array(solid.axis)
        found += crown(tuple(top), 2.9, 20, 900 + 31 * number)
        for turn in (20.0, 140.0, 260.0):
            low = np.array(solid.base) + 0.78 * solid.length_m * np.array(solid.axis)
            found.append(Cone(tuple(low), leaning_axis(42.0, turn + 31 * number), 0.09, 2.0, "bark",
                              -0.02, {"seed": 11}))  # fmt: skip
    for y in (-2.9, 11.6):
        found += box(
            (45.1, y, 0.0),
            (0.8, 0.9, 3.02),
            "stone",
            look={"seed": 15, "paint": (0.55, 0.54, 0.52)},
        )
    found += box((-14.2, -2.98, 0.0), (0.56, 0.56, 0.45), "planks", 4.0,
                 look={"seed": 33, "board_m": 0.09, "paint": (0.56, 0.45, 0.31)})  # fmt: skip
    found.append(
        Cone(
            (30.0, 50.0, 5.2),
            (0, 0, 1.0),
            2.13,
            0.55,
            "plates",
            -3.4,
            {"seed": 2, "paint": (0.5, 0.52, 0.5)},
        )
    )
    return found


def _wire(start: np.ndarray, end: np.ndarray, parts: int = 6) -> list[Piece]:
    """A sagging wire of straight bits."""
    shares = np.linspace(0.0, 1.0, parts + 1)
    spots = start + shares[:, None] * (end - start)
    spots[:, 2] -= 4.0 * shares * (1.0 - shares) * 0.012 * np.linalg.norm(end - start)
    found: list[Piece] = []
    for a, b in pairwise(spots):
        long = float(np.linalg.norm(b - a))
        found.append(Cone(tuple(a), tuple((b - a) / long), 0.009, long, "painted",
                          look={"paint": (0.13, 0.13, 0.14)}))  # fmt: skip
    return found


def quillwater() -> Scene:
    """The whole place."""
    return Scene((*[t.solid for t in things()], *fittings(), *scenery()))
