"""GNSS baselines: length, azimuth, refusal and flag."""

from __future__ import annotations

import numpy as np
import pytest

from fieldround.geometry.earth import geodetic_from_enu
from fieldround.place.baselines import GnssBaseline, gnss_baselines
from fieldround.rounds.model import Pair
from tests.place.invented import PLACES, a_photo, a_round

PAIR = [Pair("P1", ("a.jpg", "b.jpg"))]


def baseline(
    east: float, north: float, stated_m: float | None, place: str = "52 N",
    altitudes: tuple[float | None, float | None] = (30.0, 30.0), **b: object,
) -> GnssBaseline:  # fmt: skip
    origin = np.array([*PLACES[place], 0.0])
    lon, lat, _ = geodetic_from_enu(np.array([[east, north, 0.0]]), origin)[0]
    photos = [
        a_photo("a.jpg", origin[0], origin[1], altitudes[0], stated_m),
        a_photo("b.jpg", lon, lat, altitudes[1], stated_m, **{"seconds": 20.0, **b}),  # type: ignore[arg-type]
    ]
    return gnss_baselines(a_round(photos, PAIR))["P1"]


@pytest.mark.parametrize("place", PLACES)
def test_length_and_azimuth_anywhere(place: str) -> None:
    found = baseline(-3.0, 4.0, 0.01, place)
    assert found.length_m == pytest.approx(5.0, abs=1e-4)
    assert found.azimuth_deg == pytest.approx(360.0 - np.degrees(np.arctan2(3, 4)), abs=1e-4)
    assert found.length_sd_m == pytest.approx(0.01 * np.sqrt(2.0))
    assert found.azimuth_sd_deg == pytest.approx(np.degrees(0.01 * np.sqrt(2.0) / 5.0), rel=1e-3)
    assert found.survey


def test_too_short_a_baseline_is_refused_with_what_to_do() -> None:
    found = baseline(6.0, 0.0, 4.0)
    assert not found.usable
    (reason,) = found.reasons
    assert reason.startswith("the GNSS fixes are 6.0 m apart with an sd of 4.1 m")
    assert "read a tape" in reason
    assert "at least 21 m apart" in reason


def test_a_middling_baseline_is_used_and_flagged() -> None:
    found = baseline(40.0, 0.0, 4.0)
    assert found.usable
    assert "has an sd of" in found.reasons[0]
    long = baseline(100.0, 0.0, 4.0)
    assert long.usable
    assert long.reasons == ()


def test_the_limits_are_five_and_twenty_sds() -> None:
    sd = 0.02 * np.sqrt(2.0)

    def level(sds: float) -> GnssBaseline:
        return baseline(sds * sd, 0.0, 0.02, altitudes=(None, None))

    assert (level(4.95).usable, level(5.2).usable) == (False, True)
    assert level(5.2).reasons
    assert level(19.5).reasons
    assert level(20.5).reasons == ()


def test_stated_errors_below_the_floor_do_not_sharpen_it() -> None:
    assert baseline(30.0, 0.0, 0.6).length_sd_m == baseline(30.0, 0.0, 3.0).length_sd_m
    assert baseline(30.0, 0.0, None).length_sd_m > baseline(30.0, 0.0, 3.0).length_sd_m
    other = baseline(30.0, 0.0, 3.0, model="K9").length_sd_m
    assert other == pytest.approx(3.0 * np.sqrt(2.0))
    assert 3.0 < baseline(30.0, 0.0, 3.0).length_sd_m < other


def test_rough_heights_do_not_lengthen_but_surveyed_ones_do() -> None:
    assert baseline(30.0, 0.0, 4.0, altitudes=(30.0, 45.0)).length_m == pytest.approx(
        baseline(30.0, 0.0, 4.0).length_m, abs=1e-3
    )
    steep = baseline(3.0, 0.0, 0.01, altitudes=(30.0, 34.0))
    assert steep.length_m == pytest.approx(5.0, abs=1e-3)
    unknown = baseline(3.0, 0.0, 0.01, altitudes=(30.0, None))
    assert unknown.length_m == pytest.approx(3.0, abs=1e-3)


def test_the_length_is_freed_of_the_bias_of_noise() -> None:
    rng = np.random.default_rng(5)
    sd = 4.0 * np.sqrt(2.0)
    lengths = [
        baseline(30.0 + e, n, 4.0, model="K9").length_m for e, n in rng.normal(0.0, sd, (400, 2))
    ]
    # Plain lengths would average 30.5 m.
    assert np.mean(lengths) == pytest.approx(30.0, abs=3.0 * sd / np.sqrt(400) * 0.5)


def test_two_fixes_in_one_place_and_pairs_without_fixes() -> None:
    same = baseline(0.0, 0.0, 4.0)
    assert (same.usable, same.length_m) == (False, 0.0)
    assert np.isfinite(same.azimuth_sd_deg)
    photos = [a_photo("a.jpg", 13.0, 52.0), a_photo("b.jpg")]
    assert gnss_baselines(a_round(photos, PAIR)) == {}
    assert gnss_baselines(a_round([photos[0]], PAIR)) == {}
