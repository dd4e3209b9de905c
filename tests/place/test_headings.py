"""Headings from compasses, bearings and fixes, adjusted over the round."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldround.place.headings import (
    COMPASS_BIAS_SD_DEG,
    COMPASS_OWN_SD_DEG,
    COMPASS_SITE_SD_DEG,
    CompassReadings,
    DirectionReading,
    Heading,
    NorthObservations,
    round_headings,
    wrap,
)


def compass(*headings: float, device: str = "phone") -> NorthObservations:
    own = np.full(len(headings), COMPASS_OWN_SD_DEG)
    return NorthObservations((CompassReadings(device, np.array(headings), own),))


def bearing(heading: float, sd: float) -> NorthObservations:
    return NorthObservations(directions=(DirectionReading("bearing", heading, sd),))


def alone(seen: NorthObservations) -> Heading:
    return round_headings({"P1": seen}).by_pair["P1"]


def off(found: Heading, wanted: float) -> float:
    assert found.heading_deg is not None
    return abs(float(wrap(found.heading_deg - wanted)))


def test_nothing_known_gives_no_heading() -> None:
    assert alone(NorthObservations()).heading_deg is None
    assert alone(NorthObservations(fixes_deg=40.0, fixes_weight=0.2)).heading_deg is None
    assert alone(NorthObservations()).source == "none"


@given(st.floats(0.0, 359.9), st.floats(0.0, 359.9))
@settings(max_examples=30, deadline=None)
def test_turning_everything_turns_the_heading(at: float, by: float) -> None:
    seen = compass(at, at + 7.0)
    turned = compass(at + by, at + 7.0 + by)
    assert off(alone(turned), (alone(seen).heading_deg or 0.0) + by) < 1e-3


def test_two_readings_of_one_phone_are_not_independent() -> None:
    one, two = alone(compass(350.0)), alone(compass(349.0, 351.0))
    single = np.sqrt(COMPASS_BIAS_SD_DEG**2 + COMPASS_SITE_SD_DEG**2 + COMPASS_OWN_SD_DEG**2)
    assert off(two, 350.0) < 1e-3
    assert one.sd_deg == pytest.approx(single, rel=0.02)
    assert two.sd_deg is not None
    assert two.sd_deg > np.hypot(COMPASS_BIAS_SD_DEG, COMPASS_SITE_SD_DEG)
    assert two.source == "photo compass"


def test_one_reading_far_out_of_three_does_not_turn_the_map() -> None:
    found = alone(compass(100.0, 102.0, 141.0))
    assert off(found, 101.0) < 3.0
    plain_mean = (100.0 + 102.0 + 141.0) / 3.0
    assert off(found, plain_mean) > 9.0


def test_a_compass_far_out_does_not_turn_a_pair_with_precise_fixes() -> None:
    precise = NorthObservations(
        compass(140.0, 141.0).compasses, fixes_deg=100.0, fixes_weight=1.0 / np.radians(0.8) ** 2
    )
    found = alone(precise)
    assert off(found, 100.0) < 0.3
    assert found.source == "GNSS baseline"
    assert any("40 degrees off" in sentence for sentence in found.misfits)


def test_two_readings_that_contradict_each_other_give_a_wide_heading() -> None:
    agree, contradict = alone(compass(100.0, 102.0)), alone(compass(80.0, 122.0))
    assert off(contradict, 101.0) < 1.0
    assert contradict.sd_deg is not None
    assert agree.sd_deg is not None
    assert contradict.sd_deg > 1.8 * agree.sd_deg
    assert contradict.sd_deg > 14.0


def test_the_round_finds_the_bias_of_its_compass() -> None:
    rng = np.random.default_rng(3)
    truth = rng.uniform(0.0, 360.0, 12)
    seen = {}
    for k, heading in enumerate(truth):
        reading = heading + 8.0 + rng.normal(0.0, 4.0)
        known = (DirectionReading("bearing", heading, 1.0),) if k < 8 else ()
        seen[f"P{k}"] = NorthObservations(compass(reading).compasses, known)
    found = round_headings(seen)
    assert found.bias_deg[0] == pytest.approx(8.0, abs=3.5)
    assert np.sqrt(found.bias_cov_deg2[0, 0]) < 3.0
    for k in range(8, 12):
        unknown = found.by_pair[f"P{k}"]
        assert unknown.sd_deg is not None
        assert unknown.sd_deg < alone(seen[f"P{k}"]).sd_deg  # type: ignore[operator]
        assert unknown.follows[0] == pytest.approx(-1.0)
        assert off(unknown, truth[k]) < 3.0 * unknown.sd_deg


def test_biases_are_a_matter_of_each_device() -> None:
    seen = {
        "P1": NorthObservations(
            (compass(30.0, device="A").compasses[0], compass(22.0, device="B").compasses[0]),
            (DirectionReading("bearing", 20.0, 0.5),),
        )
    }
    found = round_headings(seen)
    assert found.devices == ("A", "B")
    assert found.bias_deg[0] > found.bias_deg[1] > 0.0


def test_the_better_source_weighs_more_and_is_named_first() -> None:
    both = NorthObservations(compass(60.0).compasses, bearing(50.0, 4.0).directions)
    found = alone(both)
    assert off(found, 50.0) < off(found, 60.0)
    assert found.source == "bearing and photo compass"
    assert alone(bearing(50.0, 2.0)).source == "bearing"


def test_a_very_precise_heading_survives_the_grid() -> None:
    found = alone(NorthObservations(fixes_deg=123.456, fixes_weight=1.0 / np.radians(0.004) ** 2))
    assert off(found, 123.456) < 1e-3
    assert found.sd_deg == pytest.approx(0.004, rel=0.05)


def test_sds_are_honest_over_many_drawn_rounds() -> None:
    rng = np.random.default_rng(11)
    ratios = []
    for _ in range(150):
        bias, truth = rng.normal(0.0, 5.0), rng.uniform(0.0, 360.0, 2)
        seen = {}
        for k, heading in enumerate(truth):
            shared = bias + rng.normal(0.0, 4.0)
            seen[f"P{k}"] = compass(*(heading + shared + rng.normal(0.0, 5.0, 2)))
        found = round_headings(seen)
        for k, heading in enumerate(truth):
            one = found.by_pair[f"P{k}"]
            assert one.sd_deg is not None
            ratios.append(wrap((one.heading_deg or 0.0) - heading) / one.sd_deg)
    assert 0.85 < np.sqrt(np.mean(np.square(ratios))) < 1.15
