"""95 % intervals of a diameter: from its sd where that is enough, else from draws.

In: a `Finding`. Out: bounds in metres, None where a side is open.
"""

from __future__ import annotations

import numpy as np
from scipy.stats import norm

from fieldround.solve.derive import Finding
from fieldround.solve.montecarlo import diameter_distribution

# The linear interval is suspect when the parallax is known to fewer sds than this ...
PARALLAX_SDS = 8.0
# ... or the diameter itself only to this relative sd.
RELATIVE_SD = 0.04


def is_suspect(finding: Finding) -> bool:
    """Is the linear interval of a finding not to be trusted?"""
    return (
        abs(finding.parallax_deg) < PARALLAX_SDS * finding.parallax_sd_deg
        or finding.diameter_sd_m > RELATIVE_SD * finding.diameter_m
    )


def linear_interval(diameter_m: float, sd_m: float, level: float = 0.95) -> tuple[float, float]:
    """Symmetric interval of a normal error, metres."""
    reach = float(norm.ppf(0.5 + 0.5 * level)) * sd_m
    return diameter_m - reach, diameter_m + reach


def diameter_interval(
    finding: Finding,
    pair: str,
    roundness: float = 0.0,
    draws: int | None = None,
    level: float = 0.95,
) -> tuple[float | None, float | None]:
    """Interval of a diameter at a level, (low, high) metres, None where a side is open.

    roundness : relative sd of one side's width, already inside `finding.diameter_sd_m`
    draws     : Monte Carlo draws asked for; None = only where the linear interval is suspect
    """
    if draws is None and not is_suspect(finding):
        return linear_interval(finding.diameter_m, finding.diameter_sd_m, level)
    drawn = diameter_distribution(finding, pair, roundness, level, draws)
    high = drawn.high if np.isfinite(drawn.high) else None
    return drawn.low if np.isfinite(drawn.low) else None, high
