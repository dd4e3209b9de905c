"""The ellipsoid's kernels against themselves; other programs are in tests/reference."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldround.geometry.earth import (
    ECCENTRICITY2,
    SEMI_MAJOR_M,
    ecef_from_geodetic,
    enu_axes,
    enu_from_geodetic,
    geodetic_from_ecef,
    geodetic_from_enu,
)

longitudes = st.floats(-180.0, 180.0)
latitudes = st.floats(-90.0, 90.0)
heights = st.floats(-1e4, 1e6)


@given(longitudes, latitudes, heights)
@settings(max_examples=200, deadline=None)
def test_geodetic_to_ecef_and_back(lon: float, lat: float, height: float) -> None:
    point = np.array([[lon, lat, height]])
    there = ecef_from_geodetic(point)
    back = geodetic_from_ecef(there)
    assert np.linalg.norm(ecef_from_geodetic(back) - there) < 1e-8
    assert back[0, 1] == pytest.approx(lat, abs=1e-12)
    # The height is what is left of three lengths of the earth's radius, each rounded at 1e-9 m.
    assert back[0, 2] == pytest.approx(height, abs=1e-8)


@given(longitudes, latitudes)
@settings(max_examples=100, deadline=None)
def test_east_north_up_are_square_and_right_handed(lon: float, lat: float) -> None:
    axes = enu_axes(np.array(lon), np.array(lat))
    assert np.allclose(axes @ axes.T, np.eye(3), atol=1e-15)
    assert np.allclose(np.cross(axes[0], axes[1]), axes[2], atol=1e-15)


@given(longitudes, st.floats(-89.0, 89.0), st.floats(-500, 500), st.floats(-500, 500))
@settings(max_examples=100, deadline=None)
def test_level_plane_and_back(lon: float, lat: float, east: float, north: float) -> None:
    origin = np.array([lon, lat, 120.0])
    enu = np.array([[east, north, 7.0]])
    assert np.allclose(enu_from_geodetic(geodetic_from_enu(enu, origin), origin), enu, atol=5e-9)


def test_the_scalar_case_is_the_array_case() -> None:
    points = np.array([[12.5, 52.0, 30.0], [-179.9, -17.8, 5.0], [36.8, 0.0, 1700.0]])
    one_by_one = np.vstack([ecef_from_geodetic(p[None]) for p in points])
    assert np.array_equal(ecef_from_geodetic(points), one_by_one)
    assert np.array_equal(
        geodetic_from_ecef(one_by_one), np.vstack([geodetic_from_ecef(p[None]) for p in one_by_one])
    )


def test_known_points_of_the_ellipsoid() -> None:
    minor = SEMI_MAJOR_M * np.sqrt(1.0 - ECCENTRICITY2)
    points = np.array([[0.0, 0.0, 0.0], [90.0, 0.0, 0.0], [33.0, 90.0, 0.0], [7.0, -90.0, 10.0]])
    wanted = [[SEMI_MAJOR_M, 0, 0], [0, SEMI_MAJOR_M, 0], [0, 0, minor], [0, 0, -minor - 10.0]]
    assert np.allclose(ecef_from_geodetic(points), wanted, atol=1e-9)
    assert geodetic_from_ecef(np.array([[0.0, 0.0, minor]]))[0, 1:] == pytest.approx([90.0, 0.0])


def test_a_step_north_is_north_and_a_step_up_is_up() -> None:
    origin = np.array([18.4, 69.2, 0.0])
    moved = np.array([[18.4, 69.2001, 0.0], [18.4001, 69.2, 0.0], [18.4, 69.2, 2.0]])
    enu = enu_from_geodetic(moved, origin)
    assert enu[0, 1] > 11.0
    assert abs(enu[0, 0]) < 1e-9
    assert enu[1, 0] > 3.9
    assert abs(enu[1, 1]) < 1e-5
    assert np.allclose(enu[2], [0.0, 0.0, 2.0], atol=1e-8)
