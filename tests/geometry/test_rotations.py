import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from fieldround.geometry.rotations import (
    cross_matrix,
    rotation_between,
    rotation_from_vector,
    square_basis,
    vector_from_rotation,
)

components = st.floats(-1.0, 1.0)


@given(components, components, components)
def test_vector_and_rotation_are_inverse(x, y, z):
    vector = np.array([x, y, z])
    rotation = rotation_from_vector(vector)
    assert np.allclose(rotation @ rotation.T, np.eye(3), atol=1e-12)
    assert np.isclose(np.linalg.det(rotation), 1.0)
    assert np.allclose(vector_from_rotation(rotation), vector, atol=1e-7)


def test_half_a_turn_has_an_axis():
    for axis in (*np.eye(3), np.array([0.6, 0.0, 0.8])):
        vector = vector_from_rotation(rotation_from_vector(np.pi * axis))
        assert np.isclose(np.linalg.norm(vector), np.pi)
        assert np.isclose(abs(vector @ axis), np.pi)


def test_cross_matrix_is_the_cross_product():
    a, b = np.array([1.0, 2.0, 3.0]), np.array([-2.0, 0.5, 4.0])
    assert np.allclose(cross_matrix(a) @ b, np.cross(a, b))


@given(components, components, components)
def test_square_basis_is_orthonormal(x, y, z):
    direction = np.array([x, y, z])
    if np.linalg.norm(direction) < 1e-3:
        direction = np.array([0.0, 0.0, -1.0])
    direction = direction / np.linalg.norm(direction)
    frame = np.column_stack([square_basis(direction), direction])
    assert np.allclose(frame.T @ frame, np.eye(3), atol=1e-12)


@given(components, components, components, components)
def test_rotation_between_turns_one_onto_the_other(x, y, a, b):
    start = np.array([x, y, 1.0]) / np.linalg.norm([x, y, 1.0])
    end = np.array([a, b, -1.0]) / np.linalg.norm([a, b, -1.0])
    assert np.allclose(rotation_between(start, end) @ start, end, atol=1e-9)


def test_opposite_directions_are_turned_too():
    up = np.array([0.0, 0.0, 1.0])
    assert np.allclose(rotation_between(up, -up) @ up, -up, atol=1e-12)
    assert np.allclose(rotation_between(up, up), np.eye(3))
