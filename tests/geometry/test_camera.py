import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldround.geometry.camera import (
    distort,
    distort_by_point,
    from_card,
    pixel_by_ideal,
    pixel_by_values,
    pixels_to_ideal,
    project,
    rays,
    to_card,
    undistort,
    up_in_card,
)
from fieldround.solve.cameras import values_moved

# Invented card values of an ordinary phone.
VALUES = np.array([3021.4, 3010.0, 2013.2, 1509.8, 0.05, -0.08, 0.0006, -0.0004, 0.02])


def test_rays_and_pixels_are_inverse():
    rng = np.random.default_rng(1)
    pixels = rng.uniform([0, 0], [4031, 3023], (500, 2))
    assert np.allclose(project(rays(pixels, VALUES), VALUES), pixels, atol=1e-8)


@given(
    st.floats(-0.1, 0.1),
    st.floats(-0.1, 0.1),
    st.floats(-0.002, 0.002),
    st.floats(-0.6, 0.6),
    st.floats(-0.6, 0.6),
)
def test_undistort_inverts_distort_to_newtons_end(k1, k2, p1, x, y):
    values = np.array([1.0, 1.0, 0.0, 0.0, k1, k2, p1, -p1, 0.0])
    ideal = np.array([[x, y]])
    assert np.allclose(undistort(distort(ideal, values), values), ideal, atol=1e-11)


def test_a_distortion_that_folds_gives_nan_not_a_number():
    values = np.array([1.0, 1.0, 0.0, 0.0, -0.5, 0.0, 0.0, 0.0, 0.0])
    # x (1 - x^2 / 2) never reaches 2.
    assert np.isnan(undistort(np.array([[2.0, 0.0]]), values)).all()


@pytest.mark.parametrize("turn", [0, 90, 180, 270])
def test_turning_pixels_there_and_back(turn):
    pixels = np.array([[0.0, 0.0], [10.5, 3.0], [299.0, 399.0]])
    size = (300, 400)
    assert np.allclose(from_card(to_card(pixels, turn, size), turn, size), pixels)


def test_the_top_left_pixel_of_a_portrait_is_the_bottom_left_of_its_landscape():
    # A card's picture of 400 x 300 turned clockwise by 90 is 300 wide and 400 high.
    assert np.allclose(to_card(np.array([[0.0, 0.0]]), 90, (300, 400)), [[0.0, 299.0]])


@pytest.mark.parametrize("turn", [0, 90, 180, 270])
def test_up_in_the_card_is_up_in_the_upright_picture(turn):
    size = (300, 400) if turn in (90, 270) else (400, 300)
    low, high = to_card(np.array([[150.0, 150.0], [150.0, 140.0]]), turn, size)
    assert np.allclose((high - low) / 10.0, up_in_card(turn)[:2])


def test_an_unknown_turn_is_refused():
    with pytest.raises(ValueError, match="turn_deg is 45"):
        to_card(np.zeros((1, 2)), 45, (10, 10))
    with pytest.raises(ValueError, match="turn_deg is 45"):
        from_card(np.zeros((1, 2)), 45, (10, 10))


def test_points_behind_the_camera_have_no_pixel():
    assert np.isnan(project(np.array([[0.1, 0.2, -1.0]]), VALUES)).all()


def test_jacobians_agree_with_differences():
    rng = np.random.default_rng(2)
    ideal = rng.uniform(-0.5, 0.5, (40, 2))
    step = 1e-6

    def pixel(points, values):
        return distort(points, values) * values[:2] + values[2:4]

    by_point, by_plane = distort_by_point(ideal, VALUES), pixel_by_ideal(ideal, VALUES)
    for axis in range(2):
        shift = np.eye(2)[axis] * step
        slope = (distort(ideal + shift, VALUES) - distort(ideal - shift, VALUES)) / (2 * step)
        assert np.allclose(by_point[:, :, axis], slope, atol=1e-8)
        slope = (pixel(ideal + shift, VALUES) - pixel(ideal - shift, VALUES)) / (2 * step)
        assert np.allclose(by_plane[:, :, axis], slope, rtol=1e-6, atol=1e-4)
    by_values = pixel_by_values(ideal, VALUES)
    for column in range(9):
        shift = np.eye(9)[column] * step
        high, low = values_moved(VALUES, shift), values_moved(VALUES, -shift)
        slope = (pixel(ideal, high) - pixel(ideal, low)) / (2 * step)
        assert np.allclose(by_values[:, :, column], slope, rtol=1e-5, atol=1e-4), column


def test_pixels_to_ideal_takes_a_card_a_pixel():
    pixels = np.array([[100.0, 200.0], [3000.0, 1000.0]])
    many = np.stack([VALUES, VALUES * 1.01])
    apart = [pixels_to_ideal(pixels[i : i + 1], many[i])[0] for i in range(2)]
    assert np.allclose(pixels_to_ideal(pixels, many), apart, atol=1e-13)
