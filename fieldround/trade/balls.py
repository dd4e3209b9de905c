"""The list of balls: diameter, surface, volume.

In: balls, constants. Out: one `Listing`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from fieldround.trade.constants import Constants
from fieldround.trade.listing import Column, Listing, usable
from fieldround.trade.measured import Measured


def ball_lists(items: Sequence[Measured], constants: Constants) -> list[Listing]:
    """One row a ball, intervals carried through surface and volume as both grow with it."""
    balls, notes = usable(items, ("ball",), constants["lists.verdicts"].value)
    if not balls:
        return []
    rows = []
    for ball in balls:
        d, lo, hi = ball.diameter_m or 0.0, ball.diameter_lo_m, ball.diameter_hi_m
        rows.append(
            (
                ball.object,
                ball.label,
                d,
                ball.diameter_sd_m,
                surface_m2(d),
                None if lo is None else surface_m2(lo),
                None if hi is None else surface_m2(hi),
                volume_m3(d),
                None if lo is None else volume_m3(lo),
                None if hi is None else volume_m3(hi),
            )
        )
    return [
        Listing(
            "balls",
            "Balls",
            (
                Column("object", "Ball"),
                Column("label", "Label"),
                Column("diameter_m", "Diameter", "m", 4),
                Column("diameter_sd_m", "sd", "m", 4),
                Column("surface_m2", "Surface", "m²", 4),
                Column("surface_lo_m2", "95 % from", "m²", 4),
                Column("surface_hi_m2", "to", "m²", 4),
                Column("volume_m3", "Volume", "m³", 5),
                Column("volume_lo_m3", "95 % from", "m³", 5),
                Column("volume_hi_m3", "to", "m³", 5),
            ),
            tuple(rows),
            notes,
            ("lists",),
        )
    ]


def surface_m2(diameter_m: float) -> float:
    """Surface of a ball: pi d^2 (Archimedes)."""
    return math.pi * diameter_m**2


def volume_m3(diameter_m: float) -> float:
    """Volume of a ball: pi d^3 / 6 (Archimedes)."""
    return math.pi * diameter_m**3 / 6.0
