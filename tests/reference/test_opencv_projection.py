"""Projection, distortion and triangulation against OpenCV (opencv-python-headless 4.9 or later).

Source: functions projectPoints, undistortPoints and triangulatePoints of OpenCV's calib3d / its
successors; the cameras and points are invented.
"""

import cv2
import numpy as np

from fieldround.geometry.camera import pixels_to_ideal, project
from fieldround.geometry.rotations import rotation_from_vector
from fieldround.solve.start import triangulated

VALUES = np.array([3021.4, 3010.0, 2013.2, 1509.8, 0.05, -0.08, 0.0006, -0.0004, 0.02])
MATRIX = np.array([[VALUES[0], 0, VALUES[2]], [0, VALUES[1], VALUES[3]], [0, 0, 1.0]])


def test_project_is_projectpoints():
    rng = np.random.default_rng(1)
    points = rng.uniform([-3, -2, 4], [3, 2, 20], (200, 3))
    vector, shift = np.array([0.1, -0.2, 0.05]), np.array([0.3, -0.1, 0.2])
    theirs = cv2.projectPoints(points, vector, shift, MATRIX, VALUES[4:])[0][:, 0]
    ours = project(points @ rotation_from_vector(vector).T + shift, VALUES)
    assert np.allclose(ours, theirs, atol=1e-8)


def test_pixels_to_ideal_is_undistortpoints_iterated_to_its_end():
    rng = np.random.default_rng(2)
    pixels = rng.uniform([200, 200], [3800, 2800], (200, 2))
    criteria = (cv2.TERM_CRITERIA_COUNT | cv2.TERM_CRITERIA_EPS, 100, 1e-14)
    theirs = cv2.undistortPoints(pixels[:, None], MATRIX, VALUES[4:], criteria=criteria)
    assert np.allclose(pixels_to_ideal(pixels, VALUES), theirs[:, 0], atol=1e-9)


def test_triangulated_ties_are_triangulatepoints():
    rng = np.random.default_rng(3)
    points = rng.uniform([-3, -2, 4], [3, 2, 30], (100, 3))
    rotation, station = rotation_from_vector([0.02, -0.1, 0.01]), np.array([1.5, 0.1, 0.2])
    seen = [points, (points - station) @ rotation.T]
    ideal = [p[:, :2] / p[:, 2:] for p in seen]
    first = np.hstack([np.eye(3), np.zeros((3, 1))])
    second = np.hstack([rotation, -(rotation @ station)[:, None]])
    theirs = cv2.triangulatePoints(first, second, ideal[0].T, ideal[1].T)
    theirs = (theirs[:3] / theirs[3]).T
    directions = np.stack([p / np.linalg.norm(p, axis=1, keepdims=True) for p in seen], axis=1)
    ties, rho = triangulated(
        directions, np.stack([np.eye(3), rotation]), np.stack([np.zeros(3), station])
    )
    assert np.allclose(ties / rho[:, None], theirs, rtol=1e-6)
