import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from scipy.special import ellipe

from fieldround.geometry.solids import (
    ellipse_perimeter,
    limb_points,
    near_half_section,
    outline_rays,
)
from fieldround.geometry.touching import axis_distance, centre_distance


@given(st.floats(-0.02, 0.02), st.floats(0.05, 1.0), st.sampled_from([1.0, -1.0]))
def test_a_ray_to_a_limb_touches_the_cone_and_goes_on_outside(taper, radius, side):
    station = np.array([0.3, -8.0, 1.5])
    point, axis = np.array([0.2, 0.1, 0.0]), np.array([0.02, -0.03, 1.0])
    axis /= np.linalg.norm(axis)
    limb = limb_points(station, point, axis, radius, taper, np.linspace(0.0, 3.0, 7), side)
    for share in 1.0 + np.concatenate([np.linspace(-0.2, 0.2, 41), np.linspace(-1e-3, 1e-3, 41)]):
        on_ray = station + share * (limb - station) - point
        height = on_ray @ axis
        outside = np.linalg.norm(on_ray - height[:, None] * axis, axis=1)
        assert np.all(outside >= radius + taper * height - 1e-9)


def test_the_normal_at_a_limb_is_square_to_the_sight_line():
    station, axis = np.array([2.0, -9.0, 1.6]), np.array([0.0, 0.0, 1.0])
    heights, taper = np.linspace(0.0, 5.0, 6), -0.01
    limb = limb_points(station, np.zeros(3), axis, 0.3, taper, heights, -1.0)
    radial = limb - heights[:, None] * axis
    normal = radial / np.linalg.norm(radial, axis=1, keepdims=True) - taper * axis
    assert np.allclose(np.einsum("ni,ni->n", normal, station - limb), 0.0, atol=1e-12)


def test_the_touching_distance_is_the_radius_to_second_order_in_the_taper():
    station, axis = np.array([0.0, -6.0, 1.6]), np.array([0.0, 0.0, 1.0])
    limb = limb_points(station, np.zeros(3), axis, 0.3, -0.01, np.linspace(0.5, 4.0, 9), 1.0)
    rays = limb - station
    touch = axis_distance(rays, np.tile(axis, (9, 1)), np.tile(-station, (9, 1)))
    assert np.allclose(np.abs(touch.distance), 0.3 - 0.01 * touch.foot, rtol=0.01**2)


def test_outline_rays_touch_the_ball():
    station, centre = np.array([1.0, 2.0, 0.5]), np.array([4.0, 9.0, 1.0])
    rays = outline_rays(station, centre, 0.7, 25)
    touch = centre_distance(rays, np.tile(centre - station, (25, 1)))
    assert np.allclose(touch.distance, 0.7)
    assert np.allclose(np.linalg.norm(rays, axis=1), 1.0)


def test_the_near_half_faces_the_station():
    station, centre = np.array([0.0, -5.0, 1.0]), np.array([0.0, 0.0, 1.3])
    half = near_half_section(station, centre, np.array([0.0, 0.0, 1.0]), 0.2, 11)
    assert np.allclose(np.linalg.norm(half - centre, axis=1), 0.2)
    assert np.all(half[:, 1] <= 1e-12)
    assert np.isclose(half[5, 1], -0.2)


@given(st.floats(0.3, 1.0))
def test_ellipse_perimeter_is_the_elliptic_integral(ratio):
    # Reference: perimeter = 4 a E(1 - b^2 / a^2), scipy.special.ellipe.
    exact = 4.0 * ellipe(1.0 - ratio**2)
    assert np.isclose(ellipse_perimeter(1.0, ratio), exact, rtol=1e-6)


def test_a_circle_has_the_girth_of_a_circle():
    assert np.isclose(ellipse_perimeter(0.25, 0.25), 0.5 * np.pi)
