"""What the solver expects of each kind of object before it sees a mark.

In: the kind's name. Out: a `KindExpectation` of priors, each a stated assumption, not a fact.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class KindExpectation:
    """Priors of one kind.

    upright_sd_deg   : sd of the axis about the vertical, None where no attitude is expected
    taper_m_per_m    : expected change of the DIAMETER per metre of height
    taper_sd_m_per_m : its sd
    ref_height_m     : height of the wanted diameter when objects.csv names none; None = the
                       middle of the limb marks
    """

    upright_sd_deg: float | None
    taper_m_per_m: float
    taper_sd_m_per_m: float
    ref_height_m: float | None


# Uprightness of 2 degrees for kinds that normally stand upright; breast height 1.3 m (common
# practice in forestry; some countries use 1.37 m). The taper priors are wide assumptions: timber
# poles and stems lose some 5 to 20 mm of diameter a metre (common practice).
KIND_EXPECTATIONS: dict[str, KindExpectation] = {
    "pole": KindExpectation(2.0, -0.008, 0.012, 1.3),
    "trunk": KindExpectation(2.0, -0.012, 0.020, 1.3),
    "mast": KindExpectation(2.0, -0.005, 0.012, 1.3),
    "bollard": KindExpectation(2.0, 0.0, 0.030, None),
    "tank": KindExpectation(2.0, 0.0, 0.004, None),
    "pipe": KindExpectation(None, 0.0, 0.004, None),
    "ball": KindExpectation(None, 0.0, 0.0, None),
}
