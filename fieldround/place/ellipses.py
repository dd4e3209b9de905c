"""The 95 % error ellipse of a position.

In: a 2 by 2 covariance, east and north. Out: its `Ellipse`.
"""

from __future__ import annotations

import numpy as np

from fieldround.place.frames import Ellipse

# 95 % quantile of chi-square with two degrees of freedom: -2 ln 0.05.
CHI_SQUARE_95 = float(-2.0 * np.log(0.05))


def error_ellipse(cov_m2: np.ndarray) -> Ellipse:
    """95 % ellipse of a normal position with known covariance.

    cov_m2 : (2, 2) east, north; azimuth of the major axis in 0 .. 180, clockwise from north
    """
    values, vectors = np.linalg.eigh(0.5 * (cov_m2 + cov_m2.T))
    minor, major = np.sqrt(CHI_SQUARE_95 * np.maximum(values, 0.0))
    azimuth = float(np.degrees(np.arctan2(vectors[0, 1], vectors[1, 1])) % 180.0)
    return Ellipse(float(major), float(minor), azimuth)


def position_sd(cov_m2: np.ndarray) -> float:
    """sd along the worst direction, metres."""
    return float(np.sqrt(max(float(np.linalg.eigvalsh(0.5 * (cov_m2 + cov_m2.T))[-1]), 0.0)))
