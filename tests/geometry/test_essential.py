import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldround.geometry.camera import rays
from fieldround.geometry.essential import (
    essential_of,
    in_front,
    poses_of,
    relative_pose,
    sampson,
)
from fieldround.geometry.five_point import five_point
from fieldround.geometry.rotations import rotation_from_vector, vector_from_rotation
from tests.solve.simulated import simulated_pair

SD = 0.5 / 3000.0


def scene(rng, n=60, depth=(4.0, 40.0), sd=0.0, station=(1.5, 0.2, 0.3), turn=(0.02, -0.15, 0.03)):
    """Ray pairs of random points before two cameras (invented)."""
    points = rng.uniform([-0.5, -0.4, 1.0], [0.5, 0.4, 1.0], (n, 3))
    points *= rng.uniform(*depth, (n, 1))
    station, rotation = np.array(station), rotation_from_vector(np.array(turn))
    seen = [points, (points - station) @ rotation.T]
    out = []
    for p in seen:
        d = p / np.linalg.norm(p, axis=1, keepdims=True) + sd * rng.normal(size=p.shape)
        out.append(d / np.linalg.norm(d, axis=1, keepdims=True))
    length = np.linalg.norm(station)
    return out[0], out[1], rotation, station / length if length else station


def off_deg(found, rotation, direction):
    turn = np.linalg.norm(vector_from_rotation(found.rotation @ rotation.T))
    return np.degrees(turn), np.degrees(np.arccos(np.clip(found.direction @ direction, -1, 1)))


@given(st.integers(0, 200))
def test_five_exact_pairs_have_the_true_matrix_among_their_solutions(seed):
    a, b, rotation, direction = scene(np.random.default_rng(seed), n=5)
    found = five_point(a[None], b[None])
    truth = essential_of(rotation, direction)
    truth /= np.linalg.norm(truth)
    gap = np.minimum(
        np.linalg.norm(found - truth, axis=(1, 2)), np.linalg.norm(found + truth, axis=(1, 2))
    )
    assert gap.min() < 1e-6


def test_exact_pairs_lie_on_their_epipolar_planes():
    a, b, rotation, direction = scene(np.random.default_rng(1))
    essential = essential_of(rotation, direction)
    assert np.abs(sampson(essential[None], a, b)).max() < 1e-12
    assert in_front(rotation, direction, a, b, np.zeros(len(a))).all()
    alike = [np.allclose(r, rotation) and np.allclose(d, direction) for r, d in poses_of(essential)]
    assert alike.count(True) == 1


def test_sampson_is_the_angle_a_ray_must_move():
    a, b, rotation, direction = scene(np.random.default_rng(2), sd=SD)
    distance = sampson(essential_of(rotation, direction)[None], a, b)[0]
    assert np.std(distance) == pytest.approx(SD, rel=0.3)


@pytest.mark.parametrize("wrong", [0.0, 0.2, 0.4])
def test_wrong_ties_do_not_turn_the_pose(wrong):
    rng = np.random.default_rng(3)
    a, b, rotation, direction = scene(rng, n=200, sd=SD)
    bad = rng.random(200) < wrong
    b[bad] = b[rng.permutation(np.flatnonzero(bad))]
    found = relative_pose(a, b, np.full(200, SD), seed=1)
    turn, aim = off_deg(found, rotation, direction)
    assert turn < 0.1
    assert aim < 1.0
    assert found.inliers[~bad].mean() > 0.97


def test_an_overall_turn_of_the_frame_turns_the_pose_with_it():
    a, b, rotation, direction = scene(np.random.default_rng(4), sd=SD)
    turn = rotation_from_vector(np.array([0.3, -0.2, 0.5]))
    found = relative_pose(a @ turn.T, b @ turn.T, np.full(60, SD))
    assert max(off_deg(found, turn @ rotation @ turn.T, turn @ direction)) < 1.0


def test_exchanged_views_give_the_inverse_pose():
    a, b, rotation, direction = scene(np.random.default_rng(5), sd=SD)
    found = relative_pose(b, a, np.full(60, SD))
    assert max(off_deg(found, rotation.T, -rotation @ direction)) < 1.0


def test_the_same_seed_gives_the_same_bits():
    a, b, _, _ = scene(np.random.default_rng(6), sd=SD)
    first, again = (relative_pose(a, b, np.full(60, SD), seed=9) for _ in range(2))
    assert np.array_equal(first.rotation, again.rotation)
    assert np.array_equal(first.direction, again.direction)


def test_five_hand_ties_are_enough_and_four_are_not():
    a, b, rotation, direction = scene(np.random.default_rng(7), n=6)
    found = relative_pose(a, b, np.full(6, SD))
    assert max(off_deg(found, rotation, direction)) < 0.1
    assert relative_pose(a[:4], b[:4], np.full(4, SD)) is None


def test_a_camera_that_only_turned_is_named():
    rng = np.random.default_rng(8)
    a, b, _, _ = scene(rng, n=80, sd=SD, station=(0.0, 0.0, 0.0))
    assert relative_pose(a, b, np.full(80, SD)).rotation_only
    a, b, _, _ = scene(rng, n=80, sd=SD)
    assert not relative_pose(a, b, np.full(80, SD)).rotation_only


def test_ties_on_one_plane_offer_the_true_pose_as_best_or_second():
    rng = np.random.default_rng(9)
    points = np.column_stack([rng.uniform(-3, 3, 80), rng.uniform(-2, 2, 80), np.full(80, 8.0)])
    points[:, 2] += 0.3 * points[:, 0]
    station, rotation = np.array([1.5, 0.1, 0.2]), rotation_from_vector([0.0, -0.15, 0.02])
    a, b = points, (points - station) @ rotation.T
    a, b = (p / np.linalg.norm(p, axis=1, keepdims=True) for p in (a, b))
    a = a + 0.2 * SD * rng.normal(size=a.shape)
    a /= np.linalg.norm(a, axis=1, keepdims=True)
    found = relative_pose(a, b, np.full(80, SD))
    direction = station / np.linalg.norm(station)
    poses = [found] + ([found.runner_up] if found.runner_up else [])
    assert min(max(off_deg(pose, rotation, direction)) for pose in poses) < 2.0


def test_real_distances_of_a_simulated_round():
    truth = simulated_pair(np.random.default_rng(10), wrong=0.2, distance_m=40.0, baseline_m=2.0)
    px = truth.problem.ties_px
    a, b = rays(px[:, 0], truth.values), rays(px[:, 1], truth.values)
    found = relative_pose(a, b, np.full(len(a), SD))
    station = truth.state.stations[1]
    turn, aim = off_deg(found, truth.state.rotations[1], station / np.linalg.norm(station))
    assert turn < 0.5
    assert aim < 8.0
