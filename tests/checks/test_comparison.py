"""Checks against found diameters. Invented data; the formula is that of ISO 13528, from memory."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from fieldround.checks.comparison import compare, diameter_at, en_number
from fieldround.rounds.model import Check
from fieldround.solve.kinds import KIND_EXPECTATIONS
from fieldround.solve.results import ObjectResult

POLE = ObjectResult(
    object="T1", kind="pole", label="", pair="P1", views=2, verdict="accept", reasons=(),
    diameter_m=0.304, diameter_sd_m=0.002, ref_height_m=1.3, taper_mm_per_m=-10.0,
)  # fmt: skip


def test_en_number_is_the_difference_over_both_expanded_uncertainties() -> None:
    # By hand: 4 mm over sqrt((2 x 2 mm)^2 + (2 x 1.5 mm)^2) = 4 / 5.
    assert en_number(0.304, 0.002, 0.300, 0.0015) == pytest.approx(0.8)
    assert en_number(0.300, 0.0015, 0.304, 0.002) == pytest.approx(-0.8)
    assert en_number(0.3, 0.0, 0.3, 0.0) is None


def test_a_check_at_the_reference_height_is_compared_as_it_is() -> None:
    check = Check("T1", 0.300, 0.0015, "girth tape", 1.3, "2031-05-04", "A. Crew")
    (row,) = compare([POLE], [check])
    assert (row.diameter_m, row.diameter_sd_m) == (0.304, 0.002)
    assert row.difference_m == pytest.approx(0.004)
    assert row.en_number == pytest.approx(0.8)
    assert (row.method, row.measured_on, row.by) == ("girth tape", "2031-05-04", "A. Crew")


def test_a_check_at_another_height_is_compared_with_the_diameter_there() -> None:
    diameter, sd = diameter_at(POLE, 0.3)
    assert diameter == pytest.approx(0.314)
    assert sd == pytest.approx(math.hypot(0.002, KIND_EXPECTATIONS["pole"].taper_sd_m_per_m))
    (row,) = compare([POLE], [Check("T1", 0.314, 0.001, height_m=0.3)])
    assert row.difference_m == pytest.approx(0.0, abs=1e-12)


def test_without_heights_or_taper_nothing_is_moved() -> None:
    for thing in (replace(POLE, ref_height_m=None), replace(POLE, taper_mm_per_m=None)):
        assert diameter_at(thing, 0.3) == (0.304, 0.002)
    assert diameter_at(POLE, None) == (0.304, 0.002)


def test_a_check_without_sd_has_a_difference_but_no_en_number() -> None:
    (row,) = compare([POLE], [Check("T1", 0.300)])
    assert row.difference_m == pytest.approx(0.004)
    assert row.en_number is None


def test_no_result_and_unknown_objects_leave_the_figures_empty() -> None:
    nothing = replace(POLE, verdict="no result", diameter_m=None, diameter_sd_m=None)
    rows = compare([nothing], [Check("T1", 0.3, 0.001), Check("T2", 0.4, 0.001)])
    assert [(r.object, r.diameter_m, r.difference_m, r.en_number) for r in rows] == [
        ("T1", None, None, None),
        ("T2", None, None, None),
    ]
