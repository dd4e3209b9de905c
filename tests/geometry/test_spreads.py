import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from fieldround.geometry.rotations import rotation_from_vector
from fieldround.geometry.spreads import along_axis, quadrance, readings, semi_spread, spread


def seen_ball(rng, n=1):
    """Limb rays of balls of known diameter from two stations (invented)."""
    centres = np.column_stack([rng.uniform(-1, 1, n), rng.uniform(6, 15, n), rng.uniform(-1, 1, n)])
    stations = [np.zeros((n, 3)), rng.uniform([1, -0.3, -0.2], [2, 0.3, 0.2], (n, 3))]
    diameters = rng.uniform(0.05, 1.0, n)
    limbs = []
    for station in stations:
        away = centres - station
        distance = np.linalg.norm(away, axis=1, keepdims=True)
        unit = away / distance
        across = np.cross(unit, [0.0, 0.0, 1.0])
        across /= np.linalg.norm(across, axis=1, keepdims=True)
        sine = 0.5 * diameters[:, None] / distance
        rows = [np.sqrt(1 - sine**2) * unit + side * sine * across for side in (-1.0, 1.0)]
        limbs.append(np.stack(rows, axis=1))
    return limbs[0], limbs[1], stations[1], diameters


def test_both_readings_of_a_round_thing_are_its_diameter():
    limbs_a, limbs_b, baseline, diameters = seen_ball(np.random.default_rng(1), 200)
    found = readings(limbs_a, limbs_b, baseline)
    assert np.allclose(found, diameters[:, None], rtol=1e-10)


@given(st.floats(0.01, 100.0), st.integers(0, 1000))
def test_readings_scale_with_the_baseline(factor, seed):
    limbs_a, limbs_b, baseline, _ = seen_ball(np.random.default_rng(seed))
    plain, scaled = (readings(limbs_a, limbs_b, baseline * f) for f in (1.0, factor))
    assert np.allclose(scaled, factor * plain, rtol=1e-10)


@given(st.integers(0, 1000))
def test_readings_do_not_depend_on_the_frame_nor_on_the_limbs_order(seed):
    rng = np.random.default_rng(seed)
    limbs_a, limbs_b, baseline, _ = seen_ball(rng)
    plain = readings(limbs_a, limbs_b, baseline)
    turn = rotation_from_vector(rng.uniform(-2, 2, 3))
    turned = readings(limbs_a @ turn.T, limbs_b @ turn.T, baseline @ turn.T)
    assert np.allclose(turned, plain, rtol=1e-9)
    assert np.allclose(readings(limbs_a[:, ::-1], limbs_b, baseline), plain, rtol=1e-12)
    mirror = np.array([-1.0, 1.0, 1.0])
    assert np.allclose(readings(limbs_a * mirror, limbs_b * mirror, baseline * mirror), plain)


@given(st.integers(0, 1000))
def test_views_may_change_places(seed):
    limbs_a, limbs_b, baseline, _ = seen_ball(np.random.default_rng(seed))
    plain = readings(limbs_a, limbs_b, baseline)
    assert np.allclose(readings(limbs_b, limbs_a, -baseline), plain[:, ::-1], rtol=1e-12)


def test_parallel_sight_lines_have_no_reading():
    limbs = np.array([[[-0.01, 0.0, 1.0], [0.01, 0.0, 1.0]]])
    limbs /= np.linalg.norm(limbs, axis=2, keepdims=True)
    assert np.isnan(readings(limbs, limbs, np.array([[1.0, 0.0, 0.0]]))).all()
    assert np.isnan(readings(limbs, limbs, np.zeros((1, 3)))).all()


def test_unequal_limbs_show_in_unequal_readings():
    limbs_a, limbs_b, baseline, _ = seen_ball(np.random.default_rng(3))
    wide = limbs_b.copy()
    wide[:, 0] += 0.2 * (wide[:, 0] - wide[:, 1])
    wide /= np.linalg.norm(wide, axis=2, keepdims=True)
    first, second = readings(limbs_a, wide, baseline)[0]
    assert second > 1.15 * first


def test_a_spread_of_a_thousandth_of_a_degree_keeps_its_digits():
    angle = np.radians(1e-3)
    first, second = np.array([1.0, 0.0, 0.0]), np.array([np.cos(angle), np.sin(angle), 0.0])
    assert np.isclose(spread(first, second), np.sin(angle) ** 2, rtol=1e-9)
    assert np.isclose(semi_spread(first, second), np.sin(0.5 * angle) ** 2, rtol=1e-9)


def test_projection_along_an_axis_is_square_to_it():
    rng = np.random.default_rng(5)
    rays = rng.normal(size=(20, 3))
    axis = np.array([0.0, 0.6, 0.8])
    flat = along_axis(rays, axis)
    assert np.allclose(flat @ axis, 0.0, atol=1e-12)
    assert np.allclose(quadrance(flat), 1.0)
    assert np.isnan(along_axis(axis[None] * 1.0, axis)).all() or np.all(
        np.abs(along_axis(axis[None], axis) @ axis) < 1
    )
