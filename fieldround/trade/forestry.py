"""Lists of a stand: diameter classes, basal area, mean diameter, volume, per hectare.

In: trunks, constants, a plot. Out: `Listing`s with every figure's sd. Diameters are over bark at
the reference height of objects.csv (breast height where nothing else was asked for).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.trade.constants import Constants
from fieldround.trade.equation import Equation
from fieldround.trade.listing import Column, Listing, usable
from fieldround.trade.measured import Measured

_HALF95 = 1.959963984540054  # 0.975 quantile of the normal distribution


@dataclass(frozen=True)
class Plot:
    """The ground the stems stand on: its area and, if it was drawn, which stems are inside."""

    area_ha: float
    source: str
    inside: frozenset[str] | None = None
    notes: tuple[str, ...] = ()


def forestry_lists(
    items: Sequence[Measured], constants: Constants, plot: Plot | None
) -> list[Listing]:
    """Class table, stand totals and stem list; nothing for a round without trunks."""
    stems, notes = usable(items, ("trunk",), constants["lists.verdicts"].value)
    if plot is not None and plot.inside is not None:
        outside = [s.object for s in stems if s.object not in plot.inside]
        stems = [s for s in stems if s.object in plot.inside]
        if outside:
            notes = (*notes, f"{len(outside)} stand outside the plot: {', '.join(outside)}")
        notes = (*notes, *plot.notes)
    if not stems:
        return []
    return [
        class_table(stems, constants, notes),
        stand_totals(stems, constants, plot, notes),
        stem_list(stems, constants),
    ]


def basal_area_m2(diameter_m: float) -> float:
    """Area of the section: pi d^2 / 4 (definition)."""
    return math.pi * diameter_m**2 / 4.0


def class_of(diameter_cm: float, width_cm: float, rule: str) -> float:
    """The class a diameter falls into, named by its mid-point ('nearest') or lower end ('down')."""
    shift = 0.5 if rule == "nearest" else 0.0
    return math.floor(diameter_cm / width_cm + shift) * width_cm


def class_table(
    stems: Sequence[Measured], constants: Constants, notes: tuple[str, ...] = ()
) -> Listing:
    """Stems by diameter class: counted by the best value, and expected given each sd."""
    width = constants.number("forestry.class_width_cm")
    rule = str(constants["forestry.class_rule"].value)
    d = np.array([100.0 * (s.diameter_m or 0.0) for s in stems])
    sd = np.array([100.0 * (s.diameter_sd_m or 0.0) for s in stems])
    own = [class_of(value, width, rule) for value in d]
    first, last = min(own), max(own)
    classes = first + width * np.arange(round((last - first) / width) + 1)
    shift = 0.5 * width if rule == "nearest" else 0.0
    rows = []
    for lower, name in zip(classes - shift, classes, strict=True):
        inside = np.isclose(own, name)
        share = _between(d, sd, lower, lower + width)
        rows.append(
            (
                float(name),
                float(max(lower, 0.0)),
                float(lower + width),
                int(inside.sum()),
                float(share.sum()),
                float(np.sqrt((share * (1.0 - share)).sum())),
                float(sum(basal_area_m2(v / 100.0) for v in d[inside])),
            )
        )
    said = "mid-point" if rule == "nearest" else "lower end"
    return Listing(
        "forestry-classes",
        "Diameter classes",
        (
            Column("class_cm", "Class", "cm", 1),
            Column("from_cm", "from", "cm", 1),
            Column("below_cm", "below", "cm", 1),
            Column("stems", "Stems", "", 0),
            Column("stems_expected", "expected", "", 2),
            Column("stems_sd", "sd", "", 2),
            Column("basal_area_m2", "Basal area", "m²", 4),
        ),
        tuple(rows),
        (
            f"Rounding rule: {rule}; a class is named by its {said}, width {width:g} cm.",
            "Expected: the sum of each stem's probability to belong to the class, from its sd.",
            *notes,
        ),
        ("forestry",),
    )


def _between(d: np.ndarray, sd: np.ndarray, low: float, high: float) -> np.ndarray:
    """Probability of each normal value to lie in [low, high)."""
    from scipy.stats import norm

    sure = ((d >= low) & (d < high)).astype(float)
    with np.errstate(divide="ignore", invalid="ignore"):
        share = norm.cdf((high - d) / sd) - norm.cdf((low - d) / sd)
    return np.where(sd > 0.0, share, sure)


def stand_totals(
    stems: Sequence[Measured],
    constants: Constants,
    plot: Plot | None,
    notes: tuple[str, ...] = (),
) -> Listing:
    """Stems, basal area, quadratic mean diameter, volume; per hectare where the area is known.

    The camera's part of each sd is common to all stems and adds up; the rest is independent.
    """
    d = np.array([s.diameter_m or 0.0 for s in stems])
    area = np.pi * d**2 / 4.0
    slope = np.pi * d / 2.0
    total = float(area.sum())
    total_sd = _sum_sd(slope, stems)
    mean = math.sqrt(float((d**2).mean()))  # quadratic mean (Curtis & Marshall 2000, eq. 1)
    mean_sd = mean * total_sd / (2.0 * total)
    rows: list[tuple[str, str, float, float | None]] = [
        ("Stems", "", len(stems), None),
        ("Basal area", "m²", total, total_sd),
        ("Quadratic mean diameter", "cm", 100.0 * mean, 100.0 * mean_sd),
        ("Arithmetic mean diameter", "cm", 100.0 * float(d.mean()),
         100.0 * _sum_sd(np.full(len(d), 1.0 / len(d)), stems)),
    ]  # fmt: skip
    volumes = [volume_of(stem, constants) for stem in stems]
    known = [v for v in volumes if v is not None]
    if known:
        rows.append(("Volume", "m³", *_sum_volume(known)))
        if len(known) < len(stems):
            notes = (*notes, f"Volume of {len(known)} stems: the others have no height.")
    if plot is not None and plot.area_ha > 0.0:
        rows.append(("Plot area", "ha", plot.area_ha, None))
        for name, unit, value, sd in list(rows):
            if name in ("Stems", "Basal area", "Volume"):
                per = f"{unit}/ha" if unit else "1/ha"
                rows.append(
                    (f"{name} per hectare", per, value / plot.area_ha,
                     None if sd is None else sd / plot.area_ha)
                )  # fmt: skip
        notes = (*notes, f"Plot area: {plot.source}.")
    height = constants.number("forestry.breast_height_m")
    odd = [s.object for s in stems if s.ref_height_m and abs(s.ref_height_m - height) > 0.05]
    if odd:
        notes = (*notes, f"Not measured at {height:g} m: {', '.join(odd)}")
    return Listing(
        "forestry-stand",
        "Stand",
        (
            Column("figure", "Figure"),
            Column("unit", "Unit"),
            Column("value", "Value", "", 4),
            Column("sd", "sd", "", 4),
            Column("lo", "95 % from", "", 4),
            Column("hi", "to", "", 4),
        ),
        tuple(
            (n, u, v, s, *((None, None) if s is None else (v - _HALF95 * s, v + _HALF95 * s)))
            for n, u, v, s in rows
        ),
        notes,
        ("forestry", "lists"),
    )


def _sum_sd(slope: np.ndarray, stems: Sequence[Measured]) -> float:
    own = np.array([s.own_sd_m for s in stems])
    common = np.array([s.common_sd_m for s in stems])
    return math.sqrt(float(((slope * own) ** 2).sum()) + float((slope * common).sum()) ** 2)


@dataclass(frozen=True)
class Volume:
    """A stem's volume in m3 with the parts of its sd.

    own_sd_m3    : of its own diameter and height
    camera_sd_m3 : of the camera, common to all stems of a round
    factor_sd_m3 : of the form factor, common too
    """

    m3: float
    own_sd_m3: float
    camera_sd_m3: float
    factor_sd_m3: float

    @property
    def sd_m3(self) -> float:
        """The whole sd of this stem's volume."""
        return math.hypot(self.own_sd_m3, self.camera_sd_m3, self.factor_sd_m3)


def _sum_volume(volumes: Sequence[Volume]) -> tuple[float, float]:
    """Volume of all stems and its sd: own parts are independent, common ones add up."""
    return sum(v.m3 for v in volumes), math.hypot(
        math.sqrt(sum(v.own_sd_m3**2 for v in volumes)),
        sum(v.camera_sd_m3 for v in volumes),
        sum(v.factor_sd_m3 for v in volumes),
    )


def volume_of(stem: Measured, constants: Constants) -> Volume | None:
    """Volume of a stem, None where the height is not known or the equation has no value.

    Slopes are taken by central differences; diameter, height and form factor are independent.
    """
    by_species = constants.under("forestry.volume_by_species")
    species = stem.extra.get("species", "")
    equation = Equation.of(by_species.get(species, constants["forestry.volume"]))
    if stem.diameter_m is None or (stem.height_m is None and "h_m" in equation.names):
        return None
    at = {
        "d": stem.diameter_m,
        "h": stem.height_m or 0.0,
        "f": constants.number("forestry.form_factor"),
    }

    def value(values: dict[str, float]) -> float:
        d, h, f = values["d"], values["h"], values["f"]
        return equation(d_m=d, d_cm=100.0 * d, h_m=h, f=f)

    def slope(name: str) -> float:
        step = max(abs(at[name]) * 1e-4, 1e-6)
        up, down = {**at, name: at[name] + step}, {**at, name: at[name] - step}
        return (value(up) - value(down)) / (2.0 * step)

    height_sd = slope("h") * (stem.height_sd_m or 0.0) if "h_m" in equation.names else 0.0
    factor_sd = constants.number("forestry.form_factor_sd") if "f" in equation.names else 0.0
    found = Volume(
        value(at),
        math.hypot(slope("d") * stem.own_sd_m, height_sd),
        abs(slope("d")) * stem.common_sd_m,
        abs(slope("f")) * factor_sd if factor_sd else 0.0,
    )
    return found if math.isfinite(found.m3) and math.isfinite(found.sd_m3) else None


def stem_list(stems: Sequence[Measured], constants: Constants) -> Listing:
    """One row a stem: diameter, height, basal area, volume."""
    rows = []
    for stem in stems:
        d, sd = stem.diameter_m or 0.0, stem.diameter_sd_m
        volume = volume_of(stem, constants)
        rows.append(
            (
                stem.object,
                stem.label,
                100.0 * d,
                None if sd is None else 100.0 * sd,
                stem.height_m,
                stem.height_sd_m,
                basal_area_m2(d),
                None if sd is None else math.pi * d / 2.0 * sd,
                None if volume is None else volume.m3,
                None if volume is None else volume.sd_m3,
            )
        )
    return Listing(
        "forestry-stems",
        "Stems",
        (
            Column("object", "Stem"),
            Column("label", "Label"),
            Column("diameter_cm", "Diameter", "cm", 2),
            Column("diameter_sd_cm", "sd", "cm", 2),
            Column("height_m", "Height", "m", 2),
            Column("height_sd_m", "sd", "m", 2),
            Column("basal_area_m2", "Basal area", "m²", 5),
            Column("basal_area_sd_m2", "sd", "m²", 5),
            Column("volume_m3", "Volume", "m³", 4),
            Column("volume_sd_m3", "sd", "m³", 4),
        ),
        tuple(rows),
        (f"Volume: {constants['forestry.volume'].value} "
         f"({constants['forestry.volume'].source}; f = "
         f"{constants.number('forestry.form_factor'):g}, "
         f"{constants['forestry.form_factor'].source}).",),
        ("forestry",),
    )  # fmt: skip
