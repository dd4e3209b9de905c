"""Relative orientation against pycolmap (COLMAP's estimators) on the same ties.

Source: pycolmap.estimate_essential_matrix; the scene is invented.
"""

import numpy as np
import pycolmap
import pytest

from fieldround.geometry.camera import rays
from fieldround.geometry.essential import relative_pose
from fieldround.geometry.rotations import vector_from_rotation
from tests.solve.simulated import simulated_pair


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_rotation_and_direction_agree_with_pycolmap(seed):
    truth = simulated_pair(np.random.default_rng(seed), ties=300, wrong=0.15, tie_sd_px=0.3)
    fx, fy, cx, cy = truth.values[:4]
    px = truth.problem.ties_px
    # COLMAP counts pixels from the corner of the first one, we from its centre.
    camera = pycolmap.Camera(
        model="PINHOLE", width=4000, height=3000, params=[fx, fy, cx + 0.5, cy + 0.5]
    )
    theirs = pycolmap.estimate_essential_matrix(px[:, 0] + 0.5, px[:, 1] + 0.5, camera, camera)
    a, b = (rays(px[:, view], truth.values) for view in range(2))
    ours = relative_pose(a, b, np.full(len(a), 0.3 / fx))
    pose = theirs["cam2_from_cam1"]
    rotation = pose.rotation.matrix()
    direction = -rotation.T @ pose.translation
    direction /= np.linalg.norm(direction)
    turn = np.degrees(np.linalg.norm(vector_from_rotation(ours.rotation @ rotation.T)))
    aim = np.degrees(np.arccos(np.clip(ours.direction @ direction, -1, 1)))
    assert turn < 0.3
    assert aim < 3.0
