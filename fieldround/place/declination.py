"""Magnetic north to true north by the World Magnetic Model, without a network.

In: a place and a date. Out: the declination with its sd, and what the report must say of it.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from functools import lru_cache
from typing import Any

import numpy as np

# Coefficient files by the first year they hold for; each holds for five.
_MODELS = {2010: "WMM_2010", 2015: "WMM_2015v2", 2020: "WMM_2020", 2025: "WMM_2025"}
# Declination error of the model itself: sqrt(0.26^2 + (5417 / H)^2) degrees, H the horizontal
# field in nT (WMM2025 technical report, error model; older models differ by less than 5 %).
_MODEL_SD_DEG, _FIELD_TERM = 0.26, 5417.0
# Below this horizontal field a compass does not point (WMM "blackout zone"), nT.
BLACKOUT_NT = 2000.0
# The field drifts by up to some 0.2 degrees a year, and the drift itself changes: sd for every
# year that a date lies outside the models' years (an assumption).
_OUTSIDE_SD_DEG_A_YEAR = 0.3


@dataclass(frozen=True)
class Declination:
    """Angle from true to magnetic north, positive east; degrees is None where no compass works."""

    degrees: float | None
    sd_deg: float
    model: str
    notes: tuple[str, ...] = ()


def declination(
    longitude_deg: float, latitude_deg: float, altitude_m: float, taken_at: datetime
) -> Declination:
    """Declination at a place and date; a date outside the models' years is said in the notes."""
    year = decimal_year(taken_at)
    first = max([y for y in _MODELS if y <= year], default=min(_MODELS))
    name = _MODELS[first].replace("_", "")
    outside = max(first - year, year - (first + 5), 0.0)
    height_km = float(np.clip(altitude_m / 1000.0, -1.0, 850.0))
    found = _model(_MODELS[first]).calculate(
        glat=latitude_deg,
        glon=longitude_deg,
        alt=height_km,
        time=year,
        allow_date_outside_lifespan=True,
    )
    notes = []
    if outside > 0.0:
        notes.append(
            f"the photos are of {year:.1f}, outside the years of the world magnetic model {name} "
            f"({first} to {first + 5}); its declination was carried on and may be off"
        )
    if found.h < BLACKOUT_NT:
        notes.append(
            f"the horizontal magnetic field is only {found.h:.0f} nT here: a compass does not "
            "point, magnetic directions were not used"
        )
        return Declination(None, 180.0, name, tuple(notes))
    model_sd = np.hypot(_MODEL_SD_DEG, _FIELD_TERM / found.h)
    sd = float(np.hypot(model_sd, _OUTSIDE_SD_DEG_A_YEAR * outside))
    return Declination(float(found.d), sd, name, tuple(notes))


def decimal_year(at: datetime) -> float:
    """A date as a year with decimals, as the magnetic models count."""
    start = datetime(at.year, 1, 1)
    days = (datetime(at.year + 1, 1, 1) - start).days
    return at.year + (at.replace(tzinfo=None) - start).total_seconds() / 86400.0 / days


@lru_cache(maxsize=8)
def _model(name: str) -> Any:
    from pygeomag import GeoMag

    return GeoMag(coefficients_file=f"wmm/{name}.COF")
