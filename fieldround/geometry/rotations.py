"""Small rotation kernels shared by the geometry and the adjustment.

In: rotation vectors (radians), rotation matrices or unit vectors. Out: the same kinds.
"""

from __future__ import annotations

import numpy as np


def cross_matrix(vector: np.ndarray) -> np.ndarray:
    """Matrix of the cross product: cross_matrix(v) @ w = v x w.

    vector : (..., 3); returns : (..., 3, 3)
    """
    matrix = np.zeros((*vector.shape, 3))
    x, y, z = vector[..., 0], vector[..., 1], vector[..., 2]
    matrix[..., 0, 1], matrix[..., 0, 2] = -z, y
    matrix[..., 1, 0], matrix[..., 1, 2] = z, -x
    matrix[..., 2, 0], matrix[..., 2, 1] = -y, x
    return matrix


def rotation_from_vector(vector: np.ndarray) -> np.ndarray:
    """Rotation matrix of a rotation vector (Rodrigues' formula).

    vector : (3,) axis times angle in radians; returns : (3, 3)
    """
    angle = float(np.linalg.norm(vector))
    k = cross_matrix(np.asarray(vector, dtype=float))
    if angle < 1e-8:
        return np.eye(3) + k + 0.5 * k @ k
    return np.eye(3) + np.sin(angle) / angle * k + (1.0 - np.cos(angle)) / angle**2 * k @ k


def vector_from_rotation(rotation: np.ndarray) -> np.ndarray:
    """Rotation vector (axis times angle, radians) of a rotation matrix.

    rotation : (3, 3); returns : (3,), angle in [0, pi]
    """
    skew = 0.5 * np.array(
        [
            rotation[2, 1] - rotation[1, 2],
            rotation[0, 2] - rotation[2, 0],
            rotation[1, 0] - rotation[0, 1],
        ]
    )
    sine = float(np.linalg.norm(skew))
    cosine = 0.5 * (float(np.trace(rotation)) - 1.0)
    angle = float(np.arctan2(sine, cosine))
    if sine > 1e-9:
        return skew * (angle / sine)
    if cosine > 0.0:
        return skew
    # Half a turn: the axis is the eigenvector of eigenvalue 1.
    column = rotation + np.eye(3)
    axis = column[:, int(np.argmax(np.diag(column)))]
    return np.pi * axis / np.linalg.norm(axis)


def square_basis(direction: np.ndarray) -> np.ndarray:
    """Two unit vectors square to a unit direction and to each other.

    direction : (..., 3); returns : (..., 3, 2), a smooth choice away from one coordinate axis
    source    : T. Duff et al., "Building an orthonormal basis, revisited" (JCGT, 2017)
    """
    x, y, z = direction[..., 0], direction[..., 1], direction[..., 2]
    sign = np.where(z >= 0.0, 1.0, -1.0)
    a = -1.0 / (sign + z)
    b = x * y * a
    basis = np.empty((*direction.shape, 2))
    basis[..., 0, 0], basis[..., 0, 1] = 1.0 + sign * x * x * a, b
    basis[..., 1, 0], basis[..., 1, 1] = sign * b, sign + y * y * a
    basis[..., 2, 0], basis[..., 2, 1] = -sign * x, -y
    return basis


def rotation_between(start: np.ndarray, end: np.ndarray) -> np.ndarray:
    """Smallest rotation that turns one unit vector into another, (3,), (3,) -> (3, 3)."""
    axis = np.cross(start, end)
    sine = float(np.linalg.norm(axis))
    cosine = float(start @ end)
    if sine < 1e-12:
        if cosine > 0.0:
            return np.eye(3)
        return rotation_from_vector(np.pi * square_basis(start)[:, 0])
    return rotation_from_vector(axis / sine * np.arctan2(sine, cosine))
