"""95 % intervals of a diameter from its linear sd.

In: diameters and sds in metres. Out: bounds in metres, None where a side is open.
"""

from __future__ import annotations

from scipy.stats import norm

# Beyond this relative sd the error is chiefly a parallax in the denominator, and the interval
# is taken of the reciprocal: lopsided toward large diameters.
RECIPROCAL_FROM = 0.03


def interval_95(
    diameter_m: float, sd_m: float, level: float = 0.95
) -> tuple[float | None, float | None]:
    """Interval of a diameter, symmetric when narrow, of the reciprocal when wide.

    level   : probability of the interval
    returns : (low, high) metres; high is None when the parallax may be zero
    """
    if not (diameter_m > 0.0 and sd_m >= 0.0):
        return None, None
    reach = float(norm.ppf(0.5 + 0.5 * level))
    relative = reach * sd_m / diameter_m
    if sd_m < RECIPROCAL_FROM * diameter_m:
        return diameter_m * (1.0 - relative), diameter_m * (1.0 + relative)
    low = diameter_m / (1.0 + relative)
    return low, diameter_m / (1.0 - relative) if relative < 1.0 else None
