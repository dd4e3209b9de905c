"""Lists of tanks and pipes: outside diameter, shell area, volume by height and by level.

In: tanks and pipes, constants. Out: `Listing`s. Volumes are of the outside unless the shell's
thickness is known; they are no calibration for trade in the content.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from fieldround.trade.constants import Constants
from fieldround.trade.listing import Column, Listing, usable
from fieldround.trade.measured import Measured

_LYING_DEG = 45.0


def tank_lists(items: Sequence[Measured], constants: Constants) -> list[Listing]:
    """Standing tanks, lying tanks and pipes, and the level table of those that lie."""
    tanks, notes = usable(items, ("tank", "pipe"), constants["lists.verdicts"].value)
    standing = [t for t in tanks if not lies(t)]
    lying = [t for t in tanks if lies(t)]
    lists = []
    if standing:
        lists.append(standing_list(standing, constants, notes))
    if lying:
        lists += [lying_list(lying, constants, notes), level_list(lying, constants)]
    return lists


def lies(tank: Measured) -> bool:
    """True for a pipe and for a tank whose axis leans more than 45 degrees."""
    return tank.kind == "pipe" or (tank.lean_deg is not None and tank.lean_deg > _LYING_DEG)


def segment_m2(radius_m: float, level_m: float) -> float:
    """Area of a circle's segment below a level: r^2 acos((r - h) / r) - (r - h) sqrt(2 r h - h^2).

    level_m : above the lowest point, from 0 to 2 r; beyond them it is taken as the end
    source  : elementary geometry (any handbook of mensuration)
    """
    h = min(max(level_m, 0.0), 2.0 * radius_m)
    away = radius_m - h
    root = math.sqrt(max(2.0 * radius_m * h - h * h, 0.0))
    return radius_m**2 * math.acos(min(max(away / radius_m, -1.0), 1.0)) - away * root


def inside_m(tank: Measured, constants: Constants) -> tuple[float, bool]:
    """Inside diameter and whether the shell's thickness was known (else it is the outside)."""
    thick = _typed(tank, "shell_thickness_mm")
    if thick is None:
        thick = constants.number("tanks.shell_thickness_mm")
    inside = (tank.diameter_m or 0.0) - 2.0 * thick / 1000.0
    return max(inside, 0.0), thick > 0.0


def _typed(tank: Measured, column: str) -> float | None:
    """A number a person typed into a column of objects.csv, None where there is none."""
    try:
        value = float(tank.extra.get(column, "").replace(",", "."))
    except ValueError:
        return None
    return value if math.isfinite(value) and value > 0.0 else None


def standing_list(
    tanks: Sequence[Measured], constants: Constants, notes: tuple[str, ...] = ()
) -> Listing:
    """One row a standing tank."""
    rows = []
    for tank in tanks:
        d, sd, h, h_sd = _figures(tank)
        inside, known = inside_m(tank, constants)
        per_metre, per_metre_sd = math.pi * inside**2 / 4.0, math.pi * inside / 2.0 * sd
        shell = None if h is None else math.pi * d * h
        volume = None if h is None else per_metre * h
        rows.append(
            (
                tank.object,
                tank.label,
                d,
                sd,
                h,
                h_sd,
                shell,
                None if h is None else math.hypot(math.pi * h * sd, math.pi * d * h_sd),
                per_metre,
                per_metre_sd,
                volume,
                None if h is None else math.hypot(per_metre_sd * h, per_metre * h_sd),
                "inside" if known else "outside",
            )
        )
    return Listing(
        "tanks-standing",
        "Standing tanks",
        (
            Column("object", "Tank"),
            Column("label", "Label"),
            Column("diameter_m", "Diameter", "m", 3),
            Column("diameter_sd_m", "sd", "m", 3),
            Column("height_m", "Height", "m", 2),
            Column("height_sd_m", "sd", "m", 2),
            Column("shell_m2", "Shell area", "m²", 2),
            Column("shell_sd_m2", "sd", "m²", 2),
            Column("volume_per_m_m3", "Volume per metre", "m³/m", 3),
            Column("volume_per_m_sd_m3", "sd", "m³/m", 3),
            Column("volume_m3", "Volume", "m³", 2),
            Column("volume_sd_m3", "sd", "m³", 2),
            Column("volume_of", "of the"),
        ),
        tuple(rows),
        (
            "Cylinder with a flat bottom and top. Volumes of the outside are gross: the shell is "
            "not taken off. Not for trade in the content.",
            *notes,
        ),
        ("tanks", "lists"),
    )


def _figures(tank: Measured) -> tuple[float, float, float | None, float]:
    return (
        tank.diameter_m or 0.0,
        tank.diameter_sd_m or 0.0,
        tank.height_m,
        tank.height_sd_m or 0.0,
    )


def lying_list(
    tanks: Sequence[Measured], constants: Constants, notes: tuple[str, ...] = ()
) -> Listing:
    """One row a lying tank or pipe; volume in all where a column length_m was typed."""
    rows = []
    for tank in tanks:
        d, sd, _, _ = _figures(tank)
        inside, known = inside_m(tank, constants)
        length = _typed(tank, "length_m")
        section, section_sd = math.pi * inside**2 / 4.0, math.pi * inside / 2.0 * sd
        rows.append(
            (
                tank.object,
                tank.kind,
                tank.label,
                d,
                sd,
                section,
                section_sd,
                length,
                None if length is None else math.pi * d * length,
                None if length is None else section * length,
                None if length is None else section_sd * length,
                "inside" if known else "outside",
            )
        )
    return Listing(
        "tanks-lying",
        "Lying tanks and pipes",
        (
            Column("object", "Object"),
            Column("kind", "Kind"),
            Column("label", "Label"),
            Column("diameter_m", "Diameter", "m", 3),
            Column("diameter_sd_m", "sd", "m", 3),
            Column("volume_per_m_m3", "Volume per metre", "m³/m", 4),
            Column("volume_per_m_sd_m3", "sd", "m³/m", 4),
            Column("length_m", "Length", "m", 2),
            Column("shell_m2", "Shell area", "m²", 2),
            Column("volume_m3", "Volume", "m³", 3),
            Column("volume_sd_m3", "sd", "m³", 3),
            Column("volume_of", "of the"),
        ),
        tuple(rows),
        ("Flat ends; the length is the one typed in the column length_m of objects.csv.", *notes),
        ("tanks", "lists"),
    )


def level_list(tanks: Sequence[Measured], constants: Constants) -> Listing:
    """Volume of lying tanks by level: per metre of length, and in all where it is known."""
    step = constants.number("tanks.level_step_pct")
    count = max(1, math.ceil(100.0 / step - 1e-9)) if step > 0.0 else 1
    rows = []
    for tank in tanks:
        inside, _ = inside_m(tank, constants)
        length = _typed(tank, "length_m")
        whole = math.pi * inside**2 / 4.0
        for i in range(count + 1):
            share = min(i * step, 100.0)
            area = segment_m2(inside / 2.0, inside * share / 100.0) if inside > 0.0 else 0.0
            rows.append(
                (
                    tank.object,
                    share,
                    inside * share / 100.0,
                    area,
                    None if length is None else area * length,
                    100.0 * area / whole if whole > 0.0 else None,
                )
            )
    return Listing(
        "tanks-levels",
        "Volume by level of lying tanks",
        (
            Column("object", "Object"),
            Column("level_pct", "Level", "%", 0),
            Column("level_m", "Level", "m", 3),
            Column("volume_per_m_m3", "Volume per metre", "m³/m", 4),
            Column("volume_m3", "Volume", "m³", 3),
            Column("full_pct", "Full", "%", 2),
        ),
        tuple(rows),
        ("Segment of a circle; the axis is taken as level, the ends as flat.",),
        ("tanks",),
    )
