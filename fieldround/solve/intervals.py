"""95 % intervals of a diameter: from its sd where that is enough, else from draws.

In: a `Finding`. Out: bounds in metres, None where a side is open.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from scipy.stats import t as student

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


def effective_freedom(budget: Mapping[str, float], freedom: Mapping[str, float]) -> float:
    """Degrees of freedom behind a sum of variances, infinite when all sds are given.

    source : Welch-Satterthwaite formula, JCGM 100:2008, G.4.1
    """
    total = sum(budget.values())
    doubt = sum(budget[name] ** 2 / freedom[name] for name in budget if name in freedom)
    return total**2 / doubt if doubt > 0.0 else float("inf")


def linear_interval(
    diameter_m: float, sd_m: float, level: float = 0.95, freedom: float = float("inf")
) -> tuple[float, float]:
    """Symmetric interval of a normal error whose sd has some degrees of freedom, metres."""
    reach = float(student.ppf(0.5 + 0.5 * level, freedom)) * sd_m
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
    if not (np.isfinite(finding.observables).all() and np.isfinite(finding.observables_cov).all()):
        return None, None
    if draws is None and not is_suspect(finding):
        freedom = effective_freedom(finding.budget, finding.freedom)
        return linear_interval(finding.diameter_m, finding.diameter_sd_m, level, freedom)
    freedom = effective_freedom(finding.budget, finding.freedom)
    drawn = diameter_distribution(finding, pair, roundness, freedom, level, draws)
    high = drawn.high if np.isfinite(drawn.high) else None
    return drawn.low if np.isfinite(drawn.low) else None, high
