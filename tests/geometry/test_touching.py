import numpy as np

from fieldround.geometry.rotations import square_basis
from fieldround.geometry.touching import axis_distance, centre_distance

STEP = 1e-6


def some(n=30):
    rng = np.random.default_rng(4)
    axes = rng.normal(size=(n, 3))
    axes /= np.linalg.norm(axes, axis=1, keepdims=True)
    return rng.normal(size=(n, 3)), axes, 3.0 * rng.normal(size=(n, 3))


def slopes(figure, at):
    """Central differences of figure(at) (n,) by each coordinate of `at`, (n, 3)."""
    columns = []
    for axis in range(3):
        shift = np.eye(3)[axis] * STEP
        columns.append((figure(at + shift) - figure(at - shift)) / (2 * STEP))
    return np.stack(columns, axis=1)


def unit(axes):
    return axes / np.linalg.norm(axes, axis=1, keepdims=True)


def test_distance_between_a_ray_and_an_axis_by_hand():
    # A ray along x at height 2 above an axis along y: they pass 2 m apart.
    touch = axis_distance(
        np.array([[1.0, 0, 0]]), np.array([[0, 1.0, 0]]), np.array([[5.0, 3.0, -2.0]])
    )
    assert np.isclose(abs(touch.distance[0]), 2.0)
    # The foot on the axis lies at y = 0, three metres back from the axis point.
    assert np.isclose(touch.foot[0], -3.0)


def test_axis_distance_gradients_agree_with_differences():
    rays, axes, offsets = some()
    touch = axis_distance(rays, axes, offsets)
    basis = square_basis(axes)
    for name in ("distance", "foot"):
        prefix = "by" if name == "distance" else "foot_by"

        def value(rays=rays, axes=axes, offsets=offsets, name=name):
            return getattr(axis_distance(rays, unit(axes), offsets), name)

        by_ray = slopes(lambda x, value=value: value(rays=x), rays)
        by_offset = slopes(lambda x, value=value: value(offsets=x), offsets)
        by_axis = slopes(lambda x, value=value: value(axes=x), axes)
        assert np.allclose(getattr(touch, f"{prefix}_ray"), by_ray, rtol=1e-4, atol=1e-5)
        assert np.allclose(getattr(touch, f"{prefix}_offset"), by_offset, rtol=1e-4, atol=1e-5)
        # Only the part square to the axis means anything: the axis stays a unit vector.
        left = np.einsum("ni,nij->nj", getattr(touch, f"{prefix}_axis"), basis)
        assert np.allclose(left, np.einsum("ni,nij->nj", by_axis, basis), rtol=1e-4, atol=1e-5)


def test_centre_distance_gradients_agree_with_differences():
    rays, _, offsets = some()
    touch = centre_distance(rays, offsets)
    by_ray = slopes(lambda x: centre_distance(x, offsets).distance, rays)
    by_offset = slopes(lambda x: centre_distance(rays, x).distance, offsets)
    assert np.allclose(touch.by_ray, by_ray, rtol=1e-5, atol=1e-6)
    assert np.allclose(touch.by_offset, by_offset, rtol=1e-5, atol=1e-6)


def test_distances_do_not_depend_on_the_length_of_the_ray():
    rays, axes, offsets = some()
    for plain, longer in (
        (axis_distance(rays, axes, offsets), axis_distance(7.0 * rays, axes, offsets)),
        (centre_distance(rays, offsets), centre_distance(7.0 * rays, offsets)),
    ):
        assert np.allclose(plain.distance, longer.distance)
