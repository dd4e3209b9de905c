"""A pair's frame laid onto its fixes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldround.place.fitting import fit_fixes, turn, turn_slope

STATIONS = np.array([[0.0, 0.0], [4.0, 0.5], [7.0, 3.0]])


def test_the_frame_turns_clockwise_from_north() -> None:
    assert np.allclose(turn(0.0) @ [0.0, 1.0], [0.0, 1.0])
    assert np.allclose(turn(90.0) @ [0.0, 1.0], [1.0, 0.0])
    assert np.allclose(turn(90.0) @ [1.0, 0.0], [0.0, -1.0])
    slope = (turn(30.0 + 1e-4) - turn(30.0 - 1e-4)) / np.radians(2e-4)
    assert np.allclose(turn_slope(30.0), slope, atol=1e-8)


@given(st.floats(0.0, 359.0), st.floats(-500.0, 500.0), st.floats(-500.0, 500.0))
@settings(max_examples=50, deadline=None)
def test_exact_fixes_are_met_exactly(heading: float, east: float, north: float) -> None:
    fixes = STATIONS @ turn(heading).T + [east, north]
    fit = fit_fixes(fixes, STATIONS, 4.0 * np.eye(3))
    assert abs((fit.turn_deg - heading + 180.0) % 360.0 - 180.0) < 1e-6
    assert np.allclose(fit.origin(heading), [east, north], atol=1e-8)
    assert fit.misfit < 1e-6
    assert fit.enlarged == 1.0


def test_turn_weight_is_the_information_of_the_baseline() -> None:
    fixes = np.array([[0.0, 0.0], [20.0, 0.0]])
    fit = fit_fixes(fixes, fixes, 0.02**2 * np.eye(2))
    assert 1.0 / np.sqrt(fit.turn_weight) == pytest.approx(0.02 * np.sqrt(2.0) / 20.0, rel=1e-9)
    assert fit.axis_var_m2 == pytest.approx(0.02**2 / 2.0)


def test_the_origin_follows_the_heading_as_its_slope_says() -> None:
    fit = fit_fixes(STATIONS + 3.0, STATIONS, np.diag([1.0, 2.0, 5.0]))
    step = (fit.origin(40.0 + 1e-4) - fit.origin(40.0 - 1e-4)) / np.radians(2e-4)
    assert np.allclose(fit.origin_slope(40.0), step, atol=1e-6)


def test_one_fix_tells_no_heading() -> None:
    fit = fit_fixes(np.array([[5.0, 6.0]]), STATIONS[:1], np.array([[9.0]]))
    assert fit.turn_weight == 0.0
    assert fit.axis_var_m2 == pytest.approx(9.0)
    assert np.allclose(fit.origin(77.0), [5.0, 6.0])


def test_fixes_that_contradict_the_tape_are_believed_less() -> None:
    stations = np.array([[0.0, 0.0], [2.0, 0.0]])
    fixes = np.array([[0.0, 0.0], [52.0, 0.0]])
    fit = fit_fixes(fixes, stations, 16.0 * np.eye(2), 0.0)
    assert fit.enlarged > 3.0
    assert fit.misfit == pytest.approx(25.0)
    assert np.sqrt(fit.axis_var_m2) > 10.0


def test_the_one_of_three_that_stands_off_weighs_less() -> None:
    fixes = STATIONS.copy()
    fixes[2] += [60.0, 0.0]
    fit = fit_fixes(fixes, STATIONS, 9.0 * np.eye(3), 0.0)
    assert fit.weights[2] < 0.1
    assert abs(fit.origin(0.0)[0]) < 5.0
