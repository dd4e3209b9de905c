"""Lists of poles: circumferences, top class, taper, lean against a limit, spans.

In: poles, constants. Out: `Listing`s. What is below the ground cannot be seen: figures there
are drawn out along the taper, and the setting depth is a rule unless it was typed.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.trade.constants import Constants
from fieldround.trade.listing import Column, Listing, usable
from fieldround.trade.measured import Measured

_HALF95 = 1.959963984540054
_EARTH_M = 6371008.8  # mean radius (IUGG), good enough to tell neighbours apart


def utility_lists(items: Sequence[Measured], constants: Constants) -> list[Listing]:
    """Pole list and spans; nothing for a round without poles."""
    poles, notes = usable(items, ("pole",), constants["lists.verdicts"].value)
    lists = [pole_list(poles, constants, notes)] if poles else []
    spans = span_list([i for i in items if i.kind == "pole"], constants)
    return [*lists, spans] if spans.rows else lists


@dataclass(frozen=True)
class Setting:
    """How deep a pole stands and how long it is in all."""

    depth_m: float
    length_m: float | None
    source: str


def setting_of(pole: Measured, constants: Constants) -> Setting | None:
    """Setting depth: the typed one, else the rule share * length + extra.

    The length in all is height + depth, so that depth = (share * height + extra) / (1 - share).
    """
    typed = pole.extra.get("setting_depth_m", "").replace(",", ".")
    try:
        depth = float(typed)
    except ValueError:
        depth = math.nan
    if math.isfinite(depth) and depth >= 0.0:
        length = None if pole.height_m is None else pole.height_m + depth
        return Setting(depth, length, "typed")
    if pole.height_m is None:
        return None
    share = constants.number("utility.setting_share")
    extra = constants.number("utility.setting_extra_m")
    depth = (share * pole.height_m + extra) / (1.0 - share)
    return Setting(depth, pole.height_m + depth, "rule")


def diameter_at(pole: Measured, height_m: float) -> float | None:
    """Diameter at a height above the ground line, along the taper that was found."""
    if pole.diameter_m is None or pole.ref_height_m is None or pole.taper_mm_per_m is None:
        return None
    found = pole.diameter_m + pole.taper_mm_per_m / 1000.0 * (height_m - pole.ref_height_m)
    return found if found > 0.0 else None


def top_class(girth_cm: float, classes: dict[str, float]) -> str:
    """The largest class whose smallest circumference the girth reaches; 'none' below all."""
    fitting = {name: least for name, least in classes.items() if girth_cm >= least}
    return max(fitting, key=lambda name: fitting[name]) if fitting else "none"


def lean_says(pole: Measured, limit_deg: float) -> str:
    """'over', 'within' or 'unsure': where the lean's 95 % interval lies beside the limit."""
    if pole.lean_deg is None or pole.lean_sd_deg is None:
        return ""
    half = _HALF95 * pole.lean_sd_deg
    if pole.lean_deg - half > limit_deg:
        return "over"
    return "within" if pole.lean_deg + half <= limit_deg else "unsure"


def pole_list(
    poles: Sequence[Measured], constants: Constants, notes: tuple[str, ...] = ()
) -> Listing:
    """One row a pole."""
    classes = {str(k): float(v) for k, v in constants["utility.top_classes"].value.items()}
    limit = constants.number("utility.lean_limit_deg")
    butt = constants.number("utility.butt_reference_m")
    rows = []
    for pole in poles:
        setting = setting_of(pole, constants)
        at_butt = None if setting is None else diameter_at(pole, butt - setting.depth_m)
        at_top = None if pole.height_m is None else diameter_at(pole, pole.height_m)
        sd = pole.diameter_sd_m or 0.0
        reach = None
        if at_top is not None:
            half = _HALF95 * sd
            ends = [top_class(100 * math.pi * d, classes) for d in (at_top - half, at_top + half)]
            reach = ends[0] if ends[0] == ends[1] else f"{ends[0]} to {ends[1]}"
        ground = pole.ground_diameter_m or diameter_at(pole, 0.0)
        rows.append(
            (
                pole.object,
                pole.label,
                _girth_cm(pole.diameter_m),
                100.0 * math.pi * sd,
                pole.ref_height_m,
                _girth_cm(ground),
                None if setting is None else setting.depth_m,
                None if setting is None else setting.source,
                None if setting is None else setting.length_m,
                _girth_cm(at_butt),
                _girth_cm(at_top),
                None if at_top is None else top_class(100 * math.pi * at_top, classes),
                reach,
                None if pole.taper_mm_per_m is None else math.pi * pole.taper_mm_per_m / 10.0,
                pole.height_m,
                pole.lean_deg,
                pole.lean_sd_deg,
                pole.lean_to_deg,
                lean_says(pole, limit),
            )
        )
    return Listing(
        "utility-poles",
        "Poles",
        (
            Column("object", "Pole"),
            Column("label", "Label"),
            Column("girth_cm", "Girth", "cm", 1),
            Column("girth_sd_cm", "sd", "cm", 1),
            Column("ref_height_m", "at", "m", 2),
            Column("ground_line_cm", "Ground line", "cm", 1),
            Column("setting_depth_m", "Set", "m", 2),
            Column("setting_from", "by"),
            Column("length_m", "Length", "m", 2),
            Column("butt_reference_cm", f"{butt:g} m from butt", "cm", 1),
            Column("top_cm", "Top", "cm", 1),
            Column("top_class", "Class"),
            Column("top_class_95", "95 %"),
            Column("taper_cm_per_m", "Taper of girth", "cm/m", 2),
            Column("height_m", "Height", "m", 2),
            Column("lean_deg", "Lean", "°", 1),
            Column("lean_sd_deg", "sd", "°", 1),
            Column("lean_to_deg", "to", "°", 0),
            Column("lean_limit", "Limit"),
        ),
        tuple(rows),
        (
            f"Top class: {constants['utility.top_classes'].source}.",
            f"Setting depth by rule: {constants['utility.setting_share'].source}.",
            f"Lean limit {limit:g}°: {constants['utility.lean_limit_deg'].source}.",
            "Top and butt figures are drawn out along the taper that was found between the marks.",
            *notes,
        ),
        ("utility", "lists"),
    )


def _girth_cm(diameter_m: float | None) -> float | None:
    return None if diameter_m is None else 100.0 * math.pi * diameter_m


def span_list(poles: Sequence[Measured], constants: Constants) -> Listing:
    """Spans between neighbouring poles: the edges of the shortest tree through all of them.

    source : R. C. Prim, Shortest connection networks (1957); spans above the limit are left out
    """
    placed = [p for p in poles if p.longitude is not None and p.latitude is not None]
    most = constants.number("utility.span_most_m")
    rows = []
    if len(placed) > 1:
        at = _local_m(placed)
        for i, j in _tree(at):
            span = float(np.hypot(*(at[i] - at[j])))
            if span <= most:
                sds = (placed[i].position_sd_m or 0.0, placed[j].position_sd_m or 0.0)
                rows.append((placed[i].object, placed[j].object, span, math.hypot(*sds)))
    return Listing(
        "utility-spans",
        "Spans",
        (
            Column("pole_a", "From"),
            Column("pole_b", "To"),
            Column("span_m", "Span", "m", 2),
            Column("span_sd_m", "sd", "m", 2),
        ),
        tuple(rows),
        (
            "Neighbours are the edges of the shortest tree through all poles.",
            f"Pairs farther apart than {most:g} m are left out "
            f"({constants['utility.span_most_m'].source}).",
            "The sd is that of two independent positions; poles of one pair are known better "
            "to each other.",
        ),
        ("utility",),
    )


def _local_m(items: Sequence[Measured]) -> np.ndarray:
    lon = np.radians([item.longitude or 0.0 for item in items])
    lat = np.radians([item.latitude or 0.0 for item in items])
    east = (lon - lon[0] + np.pi) % (2.0 * np.pi) - np.pi
    return np.stack([east * np.cos(lat.mean()), lat - lat[0]], axis=-1) * _EARTH_M


def _tree(at: np.ndarray) -> list[tuple[int, int]]:
    """Edges of the shortest tree through (n, 2) points, lower index first, in order."""
    n = len(at)
    inside = np.zeros(n, bool)
    inside[0] = True
    nearest = np.zeros(n, int)
    away = np.hypot(*(at - at[0]).T)
    edges = []
    for _ in range(n - 1):
        j = int(np.argmin(np.where(inside, np.inf, away)))
        edges.append((min(j, int(nearest[j])), max(j, int(nearest[j]))))
        inside[j] = True
        closer = np.hypot(*(at - at[j]).T)
        better = closer < away
        nearest[better] = j
        away = np.minimum(away, closer)
    return sorted(edges)
