"""Found diameters compared with the round's own direct measurements.

In: the objects of a run and the checks of the round. Out: one `CheckResult` a check, with the
difference and the En number of ISO 13528 and ISO/IEC 17043 (the formula is from memory), both
expanded uncertainties with k = 2. |En| <= 1 means that the two agree within what they claim.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

from fieldround.rounds.model import Check
from fieldround.solve.kinds import KIND_EXPECTATIONS
from fieldround.solve.results import CheckResult, ObjectResult

# Coverage factor of an expanded uncertainty of about 95 % (JCGM 100:2008, 6.3).
COVERAGE_FACTOR = 2.0
# Two heights closer than this are the same section.
SAME_HEIGHT_M = 0.005


def en_number(found_m: float, found_sd_m: float, check_m: float, check_sd_m: float) -> float | None:
    """(x - ref) / sqrt(U_x^2 + U_ref^2) with U = 2 sd; None when both sds are zero."""
    expanded = COVERAGE_FACTOR * math.hypot(found_sd_m, check_sd_m)
    return (found_m - check_m) / expanded if expanded > 0.0 else None


def compare(objects: Iterable[ObjectResult], checks: Sequence[Check]) -> tuple[CheckResult, ...]:
    """One row a check, in the order of the sheet.

    A check read at another height than the object's reference height is compared with the
    diameter there: the taper moves it, and what is not known of the taper widens its sd.
    """
    found = {thing.object: thing for thing in objects}
    return tuple(_compared(found.get(check.object), check) for check in checks)


def _compared(thing: ObjectResult | None, check: Check) -> CheckResult:
    diameter, sd = (None, None) if thing is None else diameter_at(thing, check.height_m)
    number = None
    if diameter is not None and sd is not None and check.sd_m is not None:
        number = en_number(diameter, sd, check.diameter_m, check.sd_m)
    return CheckResult(
        object=check.object,
        diameter_m=diameter,
        diameter_sd_m=sd,
        check_m=check.diameter_m,
        check_sd_m=check.sd_m,
        difference_m=None if diameter is None else diameter - check.diameter_m,
        en_number=number,
        method=check.method,
        measured_on=check.measured_on,
        by=check.by,
    )


def diameter_at(thing: ObjectResult, height_m: float | None) -> tuple[float | None, float | None]:
    """Diameter and sd at a height above the ground line, None where there is none.

    The sd of the taper is taken as its prior's, which the marks can only have made smaller.
    """
    if thing.diameter_m is None or thing.diameter_sd_m is None:
        return None, None
    if height_m is None or thing.ref_height_m is None:
        return thing.diameter_m, thing.diameter_sd_m
    rise = height_m - thing.ref_height_m
    if abs(rise) < SAME_HEIGHT_M or thing.taper_mm_per_m is None:
        return thing.diameter_m, thing.diameter_sd_m
    spread = KIND_EXPECTATIONS[thing.kind].taper_sd_m_per_m * rise
    moved = thing.diameter_m + 0.001 * thing.taper_mm_per_m * rise
    return moved, math.hypot(thing.diameter_sd_m, spread)
