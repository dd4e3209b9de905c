"""What a run finds: one record an object, a pair, a station, a reading, a check.

In: nothing. Out: frozen dataclasses with the field names of the delivered layers; None where a
figure could not be found (the reasons then say why), never NaN.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

from fieldround.place.frames import Placement
from fieldround.rounds.model import Camera, Round

VERDICTS = ("accept", "remeasure", "no result")
BUDGET_SOURCES = (
    "limb marks",
    "ties",
    "baseline",
    "camera",
    "uprightness",
    "taper",
    "ground line",
    "roundness",
)

_EMPTY: Mapping[str, Any] = MappingProxyType({})


@dataclass(frozen=True)
class Drawing:
    """What belongs on one photo of one object, in upright pixels.

    marks    : (name, x_px, y_px) of the marks used
    outline  : polylines ((x, y), ...) of the fitted limbs (or the fitted outline of a ball)
    section  : polyline of the near half of the section at the reference height, may be empty
    box_px   : left, top, right, bottom of a crop that shows the object
    """

    photo: str
    marks: tuple[tuple[str, float, float], ...]
    outline: tuple[tuple[tuple[float, float], ...], ...]
    section: tuple[tuple[float, float], ...]
    box_px: tuple[float, float, float, float]


@dataclass(frozen=True)
class Reading:
    """The diameter one view alone gives of one object."""

    object: str
    pair: str
    photo: str
    diameter_m: float
    sd_m: float
    range_m: float


@dataclass(frozen=True)
class ObjectResult:
    """One row of the `objects` layer (position comes from the placement), see docs/fields.md."""

    object: str
    kind: str
    label: str
    pair: str
    views: int
    verdict: str
    reasons: tuple[str, ...]
    diameter_m: float | None = None
    diameter_sd_m: float | None = None
    diameter_lo_m: float | None = None
    diameter_hi_m: float | None = None
    reading_a_m: float | None = None
    reading_b_m: float | None = None
    agreement: float | None = None
    girth_m: float | None = None
    ref_height_m: float | None = None
    ground_diameter_m: float | None = None
    taper_mm_per_m: float | None = None
    height_m: float | None = None
    height_sd_m: float | None = None
    lean_deg: float | None = None
    lean_sd_deg: float | None = None
    lean_to_deg: float | None = None
    range_m: float | None = None
    baseline_m: float | None = None
    baseline_sd_m: float | None = None
    baseline_from: str | None = None
    orientation_from: str | None = None
    heading_from: str | None = None
    photo_a: str | None = None
    photo_b: str | None = None
    taken_at: str | None = None
    extra: Mapping[str, str] = field(default_factory=lambda: _EMPTY)
    budget: Mapping[str, float] = field(default_factory=lambda: _EMPTY)
    drawings: tuple[Drawing, ...] = ()


@dataclass(frozen=True)
class PairResult:
    """One row of the `pairs` table."""

    pair: str
    photos: tuple[str, ...]
    status: str
    reasons: tuple[str, ...]
    ties_found: int = 0
    ties_used: int = 0
    tie_rms_px: float | None = None
    baseline_m: float | None = None
    baseline_sd_m: float | None = None
    baseline_from: str | None = None
    tape_m: float | None = None
    orientation_from: str | None = None
    parallax_deg: float | None = None
    vertical_from: str | None = None
    vertical_sd_deg: float | None = None
    extra: Mapping[str, str] = field(default_factory=lambda: _EMPTY)


@dataclass(frozen=True)
class CheckResult:
    """A found diameter beside an independent direct measurement of the same object."""

    object: str
    diameter_m: float | None
    diameter_sd_m: float | None
    check_m: float
    check_sd_m: float | None
    difference_m: float | None
    en_number: float | None
    method: str
    measured_on: str
    by: str


@dataclass(frozen=True)
class RoundResult:
    """Everything a run hands to the writers.

    cameras_found : card name -> the card with the adjusted values and sds
    run_facts     : what run.json says of versions, settings, counts and seconds
    """

    round: Round
    objects: tuple[ObjectResult, ...]
    pairs: tuple[PairResult, ...]
    readings: tuple[Reading, ...]
    checks: tuple[CheckResult, ...]
    cameras_found: Mapping[str, Camera]
    placement: Placement | None
    run_facts: Mapping[str, Any] = field(default_factory=lambda: _EMPTY)
