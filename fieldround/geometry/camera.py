"""Pixels to rays and back through one camera card (pinhole with Brown-Conrady distortion).

In: arrays of pixels or camera-frame points and the nine card values. Out: arrays and analytic
Jacobians. `values` is always (9,): fx fy cx cy in pixels, then k1 k2 p1 p2 k3. The camera frame
is x right, y down, z along the optical axis; (0, 0) is the centre of the top-left pixel.
Source of the distortion model: D. C. Brown, "Close-range camera calibration" (1971), in the
parameter order that OpenCV documents.
"""

from __future__ import annotations

import numpy as np

NEWTON_TOLERANCE = 1e-12
NEWTON_MOST = 30


def to_card(xy_px: np.ndarray, turn_deg: int, size_px: tuple[int, int]) -> np.ndarray:
    """Turn pixels of the upright picture into pixels of the card's landscape picture.

    xy_px    : (n, 2) upright pixels
    turn_deg : clockwise turn that made the card's picture upright (0, 90, 180, 270)
    size_px  : width, height of the UPRIGHT picture
    returns  : (n, 2)
    """
    x, y = np.asarray(xy_px, dtype=float).T
    width, height = size_px
    if turn_deg == 0:
        return np.stack([x, y], axis=1)
    if turn_deg == 90:
        return np.stack([y, width - 1 - x], axis=1)
    if turn_deg == 180:
        return np.stack([width - 1 - x, height - 1 - y], axis=1)
    if turn_deg == 270:
        return np.stack([height - 1 - y, x], axis=1)
    raise ValueError(f"turn_deg is {turn_deg}; it must be 0, 90, 180 or 270")


def from_card(xy_px: np.ndarray, turn_deg: int, size_px: tuple[int, int]) -> np.ndarray:
    """Turn pixels of the card's landscape picture into pixels of the upright picture.

    xy_px, turn_deg, size_px, returns : as for `to_card`, whose inverse this is.
    """
    x, y = np.asarray(xy_px, dtype=float).T
    width, height = size_px
    if turn_deg == 0:
        return np.stack([x, y], axis=1)
    if turn_deg == 90:
        return np.stack([width - 1 - y, x], axis=1)
    if turn_deg == 180:
        return np.stack([width - 1 - x, height - 1 - y], axis=1)
    if turn_deg == 270:
        return np.stack([y, height - 1 - x], axis=1)
    raise ValueError(f"turn_deg is {turn_deg}; it must be 0, 90, 180 or 270")


def up_in_card(turn_deg: int) -> np.ndarray:
    """Direction in the card's camera frame that points up in the upright picture, (3,) unit."""
    return {
        0: np.array([0.0, -1.0, 0.0]),
        90: np.array([-1.0, 0.0, 0.0]),
        180: np.array([0.0, 1.0, 0.0]),
        270: np.array([1.0, 0.0, 0.0]),
    }[turn_deg]


def distort(ideal: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Move ideal image-plane points by the lens distortion.

    ideal   : (n, 2) x / z, y / z
    values  : (9,) or (n, 9) card values
    returns : (n, 2)
    """
    k1, k2, p1, p2, k3 = (values[..., i] for i in range(4, 9))
    x, y = ideal[..., 0], ideal[..., 1]
    q = x * x + y * y
    radial = 1.0 + q * (k1 + q * (k2 + q * k3))
    out = np.empty(np.broadcast_shapes(ideal.shape, (*np.shape(k1), 2)))
    out[..., 0] = x * radial + 2.0 * p1 * x * y + p2 * (q + 2.0 * x * x)
    out[..., 1] = y * radial + p1 * (q + 2.0 * y * y) + 2.0 * p2 * x * y
    return out


def distort_by_point(ideal: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Jacobian of `distort` with respect to the ideal point, (n, 2, 2)."""
    k1, k2, p1, p2, k3 = (values[..., i] for i in range(4, 9))
    x, y = ideal[..., 0], ideal[..., 1]
    q = x * x + y * y
    radial = 1.0 + q * (k1 + q * (k2 + q * k3))
    slope = k1 + q * (2.0 * k2 + 3.0 * q * k3)
    jacobian = np.empty((*ideal.shape, 2))
    cross = 2.0 * x * y * slope + 2.0 * p1 * x + 2.0 * p2 * y
    jacobian[..., 0, 0] = radial + 2.0 * x * x * slope + 2.0 * p1 * y + 6.0 * p2 * x
    jacobian[..., 1, 1] = radial + 2.0 * y * y * slope + 6.0 * p1 * y + 2.0 * p2 * x
    jacobian[..., 0, 1] = cross
    jacobian[..., 1, 0] = cross
    return jacobian


def undistort(distorted: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Find the ideal points that `distort` maps onto the given ones, by Newton to 1e-12.

    distorted : (n, 2) image-plane points as the lens shows them
    values    : (9,) or (n, 9)
    returns   : (n, 2); NaN where the distortion cannot be inverted (far outside the picture)
    """
    ideal = distorted.copy()
    if not np.any(values[..., 4:]):
        return ideal
    determinant = np.ones(ideal.shape[:-1])
    for _ in range(NEWTON_MOST):
        miss = distort(ideal, values) - distorted
        largest = np.max(np.abs(miss)) if miss.size else 0.0
        j = distort_by_point(ideal, values)
        determinant = j[..., 0, 0] * j[..., 1, 1] - j[..., 0, 1] * j[..., 1, 0]
        ideal[..., 0] -= (j[..., 1, 1] * miss[..., 0] - j[..., 0, 1] * miss[..., 1]) / determinant
        ideal[..., 1] -= (j[..., 0, 0] * miss[..., 1] - j[..., 1, 0] * miss[..., 0]) / determinant
        if largest < NEWTON_TOLERANCE:
            break
    miss = np.max(np.abs(distort(ideal, values) - distorted), axis=-1)
    # Beyond its fold a distortion has other solutions, mirrored or turned inside out.
    same_side = np.einsum("...i,...i->...", ideal, distorted) >= 0.0
    found = (miss < 1e3 * NEWTON_TOLERANCE) & same_side & (determinant > 0.0)
    if not found.all():
        ideal[~found] = np.nan
    return ideal


def pixels_to_ideal(xy_px: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Ideal image-plane points (x / z, y / z) of card pixels, (n, 2)."""
    plane = (np.asarray(xy_px, dtype=float) - values[..., 2:4]) / values[..., :2]
    return undistort(plane, values)


def rays(xy_px: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Unit rays of card pixels in the camera frame.

    xy_px : (n, 2) card pixels; values : (9,); returns : (n, 3)
    """
    ideal = pixels_to_ideal(xy_px, values)
    ray = np.concatenate([ideal, np.ones((*ideal.shape[:-1], 1))], axis=-1)
    return ray / np.linalg.norm(ray, axis=-1, keepdims=True)


def project(points: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Card pixels of camera-frame points.

    points : (n, 3); values : (9,) or (n, 9); returns : (n, 2), NaN behind the camera
    """
    z = points[..., 2:3]
    with np.errstate(divide="ignore", invalid="ignore"):
        ideal = np.where(z > 0, points[..., :2] / z, np.nan)
    return distort(ideal, values) * values[..., :2] + values[..., 2:4]


def pixel_by_values(ideal: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Jacobian of the pixel with respect to the nine adjusted camera values.

    The adjusted values are log(fx) with fy / fx held, log(fy / fx), cx, cy, k1, k2, p1, p2, k3.
    ideal : (n, 2); values : (9,) or (n, 9); returns : (n, 2, 9)
    """
    x, y = ideal[..., 0], ideal[..., 1]
    q = x * x + y * y
    fx, fy = values[..., 0], values[..., 1]
    moved = distort(ideal, values)
    jacobian = np.zeros((*ideal.shape, 9))
    jacobian[..., 0, 0] = fx * moved[..., 0]
    jacobian[..., 1, 0] = fy * moved[..., 1]
    jacobian[..., 1, 1] = fy * moved[..., 1]
    jacobian[..., 0, 2] = 1.0
    jacobian[..., 1, 3] = 1.0
    for column, power in ((4, q), (5, q * q), (8, q * q * q)):
        jacobian[..., 0, column] = fx * x * power
        jacobian[..., 1, column] = fy * y * power
    jacobian[..., 0, 6] = fx * 2.0 * x * y
    jacobian[..., 1, 6] = fy * (q + 2.0 * y * y)
    jacobian[..., 0, 7] = fx * (q + 2.0 * x * x)
    jacobian[..., 1, 7] = fy * 2.0 * x * y
    return jacobian


def pixel_by_ideal(ideal: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Jacobian of the pixel with respect to the ideal image-plane point, (n, 2, 2)."""
    return values[..., :2, None] * distort_by_point(ideal, values)
