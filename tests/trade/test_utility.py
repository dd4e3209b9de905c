from __future__ import annotations

import math

import pytest
from pyproj import Geod

from fieldround.trade.constants import load_constants
from fieldround.trade.utility import (
    diameter_at,
    lean_says,
    pole_list,
    setting_of,
    span_list,
    top_class,
    utility_lists,
)
from tests.trade.made import changed, column, measured, row

FOOT = 0.3048


@pytest.fixture
def constants():
    return load_constants()


def test_setting_depth_of_a_forty_foot_pole(tmp_path):
    """10 % of 40 ft and 2 ft make 6 ft (Lineman's and Cableman's Handbook, 5th edition)."""
    constants = changed(tmp_path, f"[utility]\nsetting_extra_m = {2 * FOOT}\n")
    setting = setting_of(measured("P", "pole", 0.3, height_m=34 * FOOT), constants)
    assert setting.depth_m / FOOT == pytest.approx(6.0)
    assert setting.length_m / FOOT == pytest.approx(40.0)
    assert setting.source == "rule"


def test_a_typed_setting_depth_goes_first(constants):
    pole = measured("P", "pole", 0.3, height_m=9.0, extra={"setting_depth_m": "1,7"})
    assert setting_of(pole, constants).depth_m == 1.7
    assert setting_of(pole, constants).length_m == pytest.approx(10.7)
    assert setting_of(pole, constants).source == "typed"
    odd = measured("P", "pole", 0.3, height_m=9.0, extra={"setting_depth_m": "deep"})
    assert setting_of(odd, constants).source == "rule"
    assert setting_of(measured("P", "pole", 0.3), constants) is None


def test_circumferences_follow_the_taper(constants):
    pole = measured("P", "pole", 0.28, 0.002, ref_height_m=1.3, taper_mm_per_m=-8.0,
                    height_m=9.0, ground_diameter_m=0.2904)  # fmt: skip
    found = row(pole_list([pole], constants), "P")
    depth = (0.1 * 9.0 + 0.6) / 0.9
    assert found["setting_depth_m"] == pytest.approx(depth)
    # 1.83 m from the butt is 1.83 - depth above the ground.
    at = 0.28 - 0.008 * (1.83 - depth - 1.3)
    assert found["butt_reference_cm"] == pytest.approx(100 * math.pi * at)
    assert found["ground_line_cm"] == pytest.approx(100 * math.pi * 0.2904)
    top = 100 * math.pi * (0.28 - 0.008 * 7.7)
    assert found["top_cm"] == pytest.approx(top)
    assert found["top_class"] == "1"
    assert found["taper_cm_per_m"] == pytest.approx(-0.8 * math.pi)


def test_top_classes_are_those_of_the_source_in_inches(constants):
    """27 in for class 1, 29 for H1, 37 for H5, 19, 17 and 12 for 5, 6 and 10.

    Source: public summaries of ANSI O5.1 (sizes.com utility poles; legalbeagle 7458295).
    """
    classes = constants["utility.top_classes"].value
    for name, inches in {"1": 27, "H1": 29, "H5": 37, "5": 19, "6": 17, "10": 12}.items():
        assert classes[name] == pytest.approx(inches * 2.54, abs=0.06)


def test_the_class_is_the_largest_that_is_reached(constants):
    classes = constants["utility.top_classes"].value
    assert top_class(68.6, classes) == "1"
    assert top_class(68.5, classes) == "2"
    assert top_class(120.0, classes) == "H6"
    assert top_class(20.0, classes) == "none"


def test_an_interval_across_two_classes_is_said(constants):
    pole = measured("P", "pole", 0.6866 / math.pi + 0.0, 0.004, ref_height_m=1.3,
                    taper_mm_per_m=0.0, height_m=9.0)  # fmt: skip
    found = row(pole_list([pole], constants), "P")
    assert found["top_class"] == "1"
    assert found["top_class_95"] == "2 to 1"


@pytest.mark.parametrize(
    "lean, sd, word",
    [(8.0, 1.0, "over"), (2.0, 1.0, "within"), (4.5, 1.0, "unsure"), (5.5, 1.0, "unsure")],
)
def test_lean_against_the_limit_knows_its_doubt(lean, sd, word):
    assert lean_says(measured("P", "pole", 0.3, lean_deg=lean, lean_sd_deg=sd), 5.0) == word
    assert lean_says(measured("P", "pole", 0.3), 5.0) == ""


def test_no_taper_no_drawn_out_figures(constants):
    pole = measured("P", "pole", 0.28, ref_height_m=1.3, height_m=9.0)
    assert diameter_at(pole, 5.0) is None
    found = row(pole_list([pole], constants), "P")
    assert found["top_cm"] is None
    assert found["butt_reference_cm"] is None


def test_spans_join_neighbours_along_a_bent_line(constants):
    """Lengths against pyproj's geodesic."""
    geod = Geod(ellps="WGS84")
    at, here = [], (11.4, 48.0)
    for bearing, length in ((0, 0), (60, 45.0), (75, 52.0), (170, 40.0), (160, 300.0)):
        here = geod.fwd(*here, bearing, length)[:2]
        at.append(here)
    poles = [
        measured(f"P{i}", "pole", 0.3, longitude=p[0], latitude=p[1], position_sd_m=0.3)
        for i, p in enumerate(at)
    ]
    poles.append(measured("Q", "pole", 0.3))  # nowhere
    spans = span_list(poles, constants)
    pairs = list(zip(column(spans, "pole_a"), column(spans, "pole_b"), strict=True))
    assert pairs == [("P0", "P1"), ("P1", "P2"), ("P2", "P3")]  # 300 m is no span
    assert column(spans, "span_m") == pytest.approx([45.0, 52.0, 40.0], rel=4e-3)
    assert column(spans, "span_sd_m") == pytest.approx([math.hypot(0.3, 0.3)] * 3)


def test_spans_across_longitude_180(constants):
    poles = [
        measured("A", "pole", 0.3, longitude=179.9998, latitude=-17.0),
        measured("B", "pole", 0.3, longitude=-179.9998, latitude=-17.0),
    ]
    assert column(span_list(poles, constants), "span_m") == pytest.approx([42.6], rel=0.01)


def test_no_poles_no_lists(constants):
    assert utility_lists([measured("T", "trunk", 0.3)], constants) == []
