from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from fieldround.trade.balls import ball_lists
from fieldround.trade.constants import load_constants
from fieldround.trade.tanks import level_list, lies, segment_m2, standing_list, tank_lists
from tests.trade.made import changed, column, measured, row


@pytest.fixture
def constants():
    return load_constants()


@given(st.floats(0.05, 20.0), st.floats(0.0, 1.0))
def test_segment_against_numerical_integration(radius, share):
    """The width of the circle, integrated from its lowest point up (scipy's quad)."""
    level = 2.0 * radius * share
    turn = math.acos(min(max(1.0 - level / radius, -1.0), 1.0))
    # With y = -r cos t the integrand has no vertical tangent at the ends.
    area, _ = quad(lambda t: 2.0 * radius**2 * math.sin(t) ** 2, 0.0, turn, epsabs=1e-12)
    assert segment_m2(radius, level) == pytest.approx(area, rel=1e-6, abs=1e-9 * radius**2)


def test_segment_at_known_levels():
    assert segment_m2(1.0, 0.0) == 0.0
    assert segment_m2(1.0, 1.0) == pytest.approx(math.pi / 2)
    assert segment_m2(1.0, 2.0) == pytest.approx(math.pi)
    assert segment_m2(1.0, 3.0) == segment_m2(1.0, 2.0)
    # A quarter full by height: r^2 (pi/3 - sqrt(3)/4), elementary geometry.
    assert segment_m2(1.0, 0.5) == pytest.approx(math.pi / 3 - math.sqrt(3) / 4)


def test_a_standing_tank_and_its_sds(constants):
    tank = measured("K", "tank", 7.465, 0.018, height_m=5.5, height_sd_m=0.05)
    found = row(standing_list([tank], constants), "K")
    assert found["shell_m2"] == pytest.approx(math.pi * 7.465 * 5.5)
    assert found["volume_per_m_m3"] == pytest.approx(math.pi * 7.465**2 / 4)
    assert found["volume_m3"] == pytest.approx(math.pi * 7.465**2 / 4 * 5.5)
    assert found["volume_of"] == "outside"
    draw = np.random.default_rng(5)
    d = 7.465 + 0.018 * draw.standard_normal(200_000)
    h = 5.5 + 0.05 * draw.standard_normal(200_000)
    assert found["volume_sd_m3"] == pytest.approx((np.pi * d**2 / 4 * h).std(), rel=0.01)
    assert found["shell_sd_m2"] == pytest.approx((np.pi * d * h).std(), rel=0.01)


def test_the_shell_is_taken_off_where_its_thickness_is_known(tmp_path):
    constants = changed(tmp_path, "[tanks]\nshell_thickness_mm = 10\n")
    tanks = [
        measured("K", "tank", 2.0, height_m=3.0),
        measured("L", "tank", 2.0, height_m=3.0, extra={"shell_thickness_mm": "50"}),
    ]
    listed = standing_list(tanks, constants)
    assert row(listed, "K")["volume_per_m_m3"] == pytest.approx(math.pi * 1.98**2 / 4)
    assert row(listed, "L")["volume_per_m_m3"] == pytest.approx(math.pi * 1.9**2 / 4)
    assert column(listed, "volume_of") == ["inside", "inside"]
    assert row(listed, "K")["shell_m2"] == pytest.approx(math.pi * 2.0 * 3.0)  # of the outside


def test_lying_tanks_have_a_level_table(constants):
    pipe = measured("R", "pipe", 1.2, 0.004, extra={"length_m": "6,0"})
    lying = measured("L", "tank", 2.0, 0.004, lean_deg=89.0)
    assert lies(pipe)
    assert lies(lying)
    assert not lies(measured("S", "tank", 2.0, lean_deg=1.0))
    lists = tank_lists([pipe, lying, measured("S", "tank", 2.0)], constants)
    assert [listing.name for listing in lists] == ["tanks-standing", "tanks-lying", "tanks-levels"]
    found = row(lists[1], "R")
    assert found["volume_m3"] == pytest.approx(math.pi * 0.36 * 6.0)
    assert row(lists[1], "L")["volume_m3"] is None
    levels = level_list([pipe], constants)
    assert len(levels.rows) == 11
    assert column(levels, "full_pct")[0] == 0.0
    assert column(levels, "full_pct")[5] == pytest.approx(50.0)
    assert column(levels, "full_pct")[10] == pytest.approx(100.0)
    assert column(levels, "volume_m3")[10] == pytest.approx(math.pi * 0.36 * 6.0)


def test_a_step_that_does_not_divide_ends_at_the_top(tmp_path):
    constants = changed(tmp_path, "[tanks]\nlevel_step_pct = 30\n")
    levels = level_list([measured("R", "pipe", 1.2)], constants)
    assert column(levels, "level_pct") == [0.0, 30.0, 60.0, 90.0, 100.0]


def test_a_ball_carries_its_interval_through(constants):
    ball = measured("B", "ball", 0.9, 0.005, diameter_lo_m=0.89, diameter_hi_m=0.912)
    found = row(ball_lists([ball], constants)[0], "B")
    assert found["surface_m2"] == pytest.approx(4 * math.pi * 0.45**2)
    assert found["volume_m3"] == pytest.approx(4 / 3 * math.pi * 0.45**3)
    assert found["volume_lo_m3"] == pytest.approx(4 / 3 * math.pi * 0.445**3)
    assert found["surface_hi_m2"] == pytest.approx(math.pi * 0.912**2)
    assert ball_lists([measured("P", "pole", 0.3)], constants) == []
