"""The 95 % error ellipse."""

from __future__ import annotations

import numpy as np
import pytest

from fieldround.place.ellipses import error_ellipse, position_sd
from fieldround.place.fitting import turn


@pytest.mark.parametrize("azimuth", [0.0, 30.0, 90.0, 171.0])
def test_axes_and_azimuth(azimuth: float) -> None:
    rotation = turn(azimuth)
    cov = rotation @ np.diag([4.0, 25.0]) @ rotation.T
    ellipse = error_ellipse(cov)
    # sqrt of the 95 % quantile of chi-square with 2 degrees of freedom, 5.9915 (common tables).
    assert ellipse.semi_major_m == pytest.approx(5.0 * np.sqrt(5.9915), rel=1e-5)
    assert ellipse.semi_minor_m == pytest.approx(2.0 * np.sqrt(5.9915), rel=1e-5)
    assert ellipse.azimuth_deg == pytest.approx(azimuth, abs=1e-9)
    assert position_sd(cov) == pytest.approx(5.0)


def test_95_percent_of_draws_lie_inside() -> None:
    rng = np.random.default_rng(4)
    cov = np.array([[9.0, 4.0], [4.0, 3.0]])
    ellipse = error_ellipse(cov)
    draws = rng.multivariate_normal([0.0, 0.0], cov, 20000) @ turn(ellipse.azimuth_deg)
    inside = (draws[:, 1] / ellipse.semi_major_m) ** 2 + (draws[:, 0] / ellipse.semi_minor_m) ** 2
    # The sd of a share of 0.95 in 20 000 draws is 0.0015.
    assert np.mean(inside <= 1.0) == pytest.approx(0.95, abs=0.005)


def test_no_spread_is_no_ellipse() -> None:
    ellipse = error_ellipse(np.zeros((2, 2)))
    assert (ellipse.semi_major_m, ellipse.semi_minor_m) == (0.0, 0.0)
