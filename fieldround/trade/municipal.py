"""Lists of street furniture: nominal tube sizes with their probability, heights, assets.

In: masts and bollards, constants. Out: `Listing`s.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.trade.constants import Constants
from fieldround.trade.listing import Column, Listing, usable
from fieldround.trade.measured import Measured

_TUBES = ("mast", "bollard")
_FAR_SDS = 3.0


def municipal_lists(items: Sequence[Measured], constants: Constants) -> list[Listing]:
    """Tube sizes and the asset list; nothing for a round without masts and bollards."""
    tubes, notes = usable(items, _TUBES, constants["lists.verdicts"].value)
    lists = [tube_list(tubes, constants, notes)] if tubes else []
    assets = [item for item in items if item.kind in _TUBES]
    return [*lists, asset_list(assets)] if assets else lists


@dataclass(frozen=True)
class Candidate:
    """One nominal outside diameter and how likely it is."""

    nominal_mm: float
    series: int
    probability: float


def candidates(
    diameter_mm: float, sd_mm: float, constants: Constants
) -> tuple[list[Candidate], float]:
    """Nominal sizes, likeliest first, and how many sds the best lies from the measurement.

    Each size is equally likely before the measurement. A tube of nominal size D has a true
    diameter within the maker's tolerance, taken as uniform (variance tolerance^2 / 3, JCGM 100
    4.3.7); a coating adds its thickness on both sides.
    """
    coating = constants.number("municipal.coating_mm")
    share = constants.number("municipal.tube_tolerance_pct") / 100.0
    least = constants.number("municipal.tube_tolerance_least_mm")
    sizes = [
        (float(size), int(series))
        for series in constants["municipal.series"].value
        for size in constants[f"municipal.tube_series_{int(series)}"].value
    ]
    nominal = np.array([size for size, _ in sizes])
    tolerance = np.maximum(share * nominal, least)
    sd = np.sqrt(sd_mm**2 + tolerance**2 / 3.0)
    away = (diameter_mm - 2.0 * coating - nominal) / sd
    weight = -0.5 * away**2 - np.log(sd)
    weight = np.exp(weight - weight.max())
    weight /= weight.sum()
    order = np.argsort(-weight, kind="stable")
    found = [Candidate(sizes[i][0], sizes[i][1], float(weight[i])) for i in order]
    return found, float(abs(away[order[0]]))


def tube_list(
    tubes: Sequence[Measured], constants: Constants, notes: tuple[str, ...] = ()
) -> Listing:
    """One row a mast or bollard: the likeliest nominal size and the next two."""
    rows = []
    for tube in tubes:
        d, sd = 1000.0 * (tube.diameter_m or 0.0), 1000.0 * (tube.diameter_sd_m or 0.0)
        found, away = candidates(d, sd, constants)
        best, others = found[0], found[1:3]
        fits = away <= _FAR_SDS
        said = f"{best.nominal_mm:g} mm, {100 * best.probability:.0f} %"
        rows.append(
            (
                tube.object,
                tube.kind,
                tube.label,
                d,
                sd,
                best.nominal_mm if fits else None,
                100.0 * best.probability if fits else None,
                best.series if fits else None,
                away,
                said if fits else f"none fits (nearest {best.nominal_mm:g} mm)",
                "; ".join(f"{c.nominal_mm:g} mm {100 * c.probability:.0f} %" for c in others)
                if fits
                else "",
                tube.ref_height_m,
                tube.height_m,
                tube.height_sd_m,
            )
        )
    return Listing(
        "municipal-tubes",
        "Tube sizes",
        (
            Column("object", "Object"),
            Column("kind", "Kind"),
            Column("label", "Label"),
            Column("diameter_mm", "Found", "mm", 1),
            Column("diameter_sd_mm", "sd", "mm", 1),
            Column("nominal_mm", "Nominal", "mm", 1),
            Column("probability_pct", "Probability", "%", 1),
            Column("series", "Series"),
            Column("off_sd", "Off", "sd", 1),
            Column("in_words", "In words"),
            Column("next", "Next"),
            Column("ref_height_m", "at", "m", 2),
            Column("height_m", "Height", "m", 2),
            Column("height_sd_m", "sd", "m", 2),
        ),
        tuple(rows),
        (
            "Outside diameters of ISO 4200 / EN 10220; every size of the series is equally likely "
            "before the measurement. A conical mast has no nominal size: look at its taper.",
            "The probability is among the sizes of the series; 'Off' says how well the best fits.",
            f"None fits: the nearest size is more than {_FAR_SDS:g} sds away.",
            *notes,
        ),
        ("municipal", "lists"),
    )


def asset_list(items: Sequence[Measured]) -> Listing:
    """Every mast and bollard by label, whatever its verdict."""
    order = sorted(items, key=lambda item: (item.label == "", item.label, item.object))
    return Listing(
        "municipal-assets",
        "Assets by label",
        (
            Column("label", "Label"),
            Column("object", "Object"),
            Column("kind", "Kind"),
            Column("diameter_mm", "Diameter", "mm", 0),
            Column("height_m", "Height", "m", 2),
            Column("lean_deg", "Lean", "°", 1),
            Column("longitude", "Longitude", "°", 7),
            Column("latitude", "Latitude", "°", 7),
            Column("verdict", "Verdict"),
        ),
        tuple(
            (
                item.label,
                item.object,
                item.kind,
                None if item.diameter_m is None else 1000.0 * item.diameter_m,
                item.height_m,
                item.lean_deg,
                item.longitude,
                item.latitude,
                item.verdict,
            )
            for item in order
        ),
    )
