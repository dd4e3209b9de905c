"""What a fix is worth and what two of them share."""

from __future__ import annotations

import numpy as np
import pytest

from fieldround.place.fixes import (
    PHONE_FLOOR_M,
    UNSTATED_SD_M,
    difference_correlation,
    mean_correlation,
    position_covariance,
    worth,
)
from fieldround.rounds.model import Fix
from tests.place.invented import a_photo


@pytest.mark.parametrize(
    ("stated_m", "sd_m"), [(None, UNSTATED_SD_M), (0.5, PHONE_FLOOR_M), (8.0, 8.0), (0.02, 0.02)]
)
def test_the_sd_of_an_exif_fix(stated_m: float | None, sd_m: float) -> None:
    fix = a_photo("a.jpg", 13.0, 52.0, stated_m=stated_m).fix
    assert fix is not None
    assert worth(fix).sd_m == pytest.approx(sd_m)


def test_survey_grade_is_a_stated_sd_below_a_decimetre() -> None:
    assert worth(Fix(13.0, 52.0, horizontal_sd_m=0.05)).survey
    assert not worth(Fix(13.0, 52.0, horizontal_sd_m=0.09)).survey
    assert not worth(Fix(13.0, 52.0)).survey
    assert worth(Fix(13.0, 52.0, horizontal_sd_m=0.001)).sd_m == 0.01


def test_a_receiver_file_is_believed_and_a_poor_dilution_is_not_overlooked() -> None:
    assert worth(Fix(13.0, 52.0, horizontal_sd_m=0.6, source="walk.nmea")).sd_m == 0.6
    assert worth(Fix(13.0, 52.0, dop=4.0)).sd_m == 12.0
    assert worth(Fix(13.0, 52.0, dop=1.0)).sd_m == UNSTATED_SD_M


def test_heights_are_less_sure_than_positions() -> None:
    phone = worth(Fix(13.0, 52.0, 30.0, 4.0, vertical_sd_m=1.0))
    assert phone.vertical_sd_m == 2.0 * phone.sd_m
    rtk = worth(Fix(13.0, 52.0, 30.0, 0.02, vertical_sd_m=0.025, source="pole.csv"))
    assert rtk.vertical_sd_m == 0.025


def test_correlation_for_a_difference_is_low_and_fades() -> None:
    a = a_photo("a.jpg", 13.0, 52.0, seconds=0.0)
    soon = a_photo("b.jpg", 13.0, 52.0, seconds=30.0)
    late = a_photo("c.jpg", 13.0, 52.0, seconds=1200.0)
    assert 0.4 < difference_correlation(a, soon) < 0.5
    assert difference_correlation(a, late) < 0.02
    assert mean_correlation(a, soon) > 0.95
    assert mean_correlation(a, late) > difference_correlation(a, late)


def test_nothing_is_shared_between_devices_or_claimed_without_times() -> None:
    a = a_photo("a.jpg", 13.0, 52.0)
    other = a_photo("b.jpg", 13.0, 52.0, model="K9")
    timeless = a_photo("c.jpg", 13.0, 52.0, seconds=None)
    assert difference_correlation(a, other) == mean_correlation(a, other) == 0.0
    assert difference_correlation(a, timeless) == 0.0
    assert mean_correlation(a, timeless) == 1.0


def variances(cov: np.ndarray) -> tuple[float, float]:
    """Of the mean and of the difference of two."""
    mean, minus = np.array([0.5, 0.5]), np.array([1.0, -1.0])
    return float(mean @ cov @ mean), float(minus @ cov @ minus)


def test_the_mean_of_two_phone_fixes_is_no_better_than_one() -> None:
    pair = [a_photo("a.jpg", 13.0, 52.0), a_photo("b.jpg", 13.0, 52.0, seconds=20.0)]
    mean, difference = variances(position_covariance(pair))
    assert mean == pytest.approx(25.0, rel=0.02)
    assert difference >= 25.0
    apart = [pair[0], a_photo("b.jpg", 13.0, 52.0, model="K9")]
    assert variances(position_covariance(apart)) == pytest.approx((12.5, 50.0))


def test_the_difference_of_two_survey_fixes_claims_no_correlation() -> None:
    pair = [
        a_photo("a.jpg", 13.0, 52.0, stated_m=0.02),
        a_photo("b.jpg", 13.0, 52.0, stated_m=0.02, seconds=20.0),
    ]
    mean, difference = variances(position_covariance(pair))
    assert difference >= 2.0 * 0.02**2
    assert 0.5 * 0.02**2 < mean < 0.02**2


def test_a_single_fix_keeps_its_sd_and_covariances_are_positive() -> None:
    one = position_covariance([a_photo("a.jpg", 13.0, 52.0)])
    assert one == pytest.approx(np.array([[25.0]]))
    four = [
        a_photo(name, 13.0, 52.0, stated_m=stated, seconds=seconds, model=model)
        for name, stated, seconds, model in [
            ("a.jpg", 5.0, 0.0, "K2"), ("b.jpg", 9.0, None, "K2"),
            ("c.jpg", 3.0, 4000.0, "K2"), ("d.jpg", 0.02, 10.0, "K9"),
        ]
    ]  # fmt: skip
    assert np.linalg.eigvalsh(position_covariance(four)).min() > 0.0
