from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pyproj import CRS, Geod

from fieldround.deliver import shapes

GEOD = Geod(ellps="WGS84")


@given(st.floats(-84.0, 84.0))
def test_a_metre_in_degrees_is_a_metre_on_the_ellipsoid(latitude):
    """Against pyproj's geodesic (PROJ, C. F. F. Karney's algorithms)."""
    east, north = shapes.degrees_per_metre(np.array([latitude]))[0]
    assert GEOD.inv(0.0, latitude, 10 * east, latitude)[2] == pytest.approx(10.0, rel=1e-6)
    assert GEOD.inv(0.0, latitude, 0.0, latitude + 10 * north)[2] == pytest.approx(10.0, rel=1e-5)


def test_the_grid_turns_by_its_convergence():
    """UTM zone 32 at 48 N, 11 E: convergence is atan(tan(2 deg) sin(48 deg)) to first order."""
    axes = shapes.grid_axes(CRS.from_epsg(32632).to_wkt(), np.array([11.0]), np.array([48.0]))[0]
    turn = np.degrees(np.arctan2(axes[0, 1], axes[1, 1]))  # grid azimuth of true north
    expected = np.degrees(np.arctan(np.tan(np.radians(2.0)) * np.sin(np.radians(48.0))))
    assert turn == pytest.approx(-expected, abs=0.001)
    assert np.linalg.det(axes) == pytest.approx(0.9996**2, rel=1e-3)


def test_feet_are_feet():
    axes = shapes.grid_axes(CRS.from_epsg(2263).to_wkt(), np.array([-73.97]), np.array([40.78]))
    assert np.sqrt(np.linalg.det(axes[0])) == pytest.approx(3937 / 1200, rel=1e-3)


def test_rings_run_counter_clockwise_and_close():
    ring = shapes.rings(
        np.zeros((1, 2)), np.eye(2)[None], np.array([2.0]), np.array([1.0]), np.array([30.0])
    )[0]
    assert np.array_equal(ring[0], ring[-1])
    x, y = ring[:-1].T
    assert np.sum(x * np.roll(y, -1) - y * np.roll(x, -1)) / 2 == pytest.approx(2 * np.pi, rel=2e-3)
    far = ring[np.argmax(np.hypot(*ring.T))]
    assert np.degrees(np.arctan2(far[0], far[1])) % 180 == pytest.approx(30.0)


def test_nothing_drawn_where_nothing_is_known():
    assert shapes.points(np.array([[1.0, np.nan], [1.0, 2.0]]))[0] is None
    assert shapes.lines(np.array([[1.0, np.nan]]), np.array([[1.0, 2.0]]))[0] is None
    assert len(shapes.points(np.empty((0, 2)))) == 0
    assert len(shapes.ellipses(np.empty((0, 2)), np.empty((0, 2, 2)), np.empty((0, 3)))) == 0
