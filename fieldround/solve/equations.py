"""Small symmetric equations solved after scaling, so that metres and pixels may mix.

In: normal matrices and right sides. Out: solutions and inverses.
"""

from __future__ import annotations

import numpy as np


def solve_scaled(normal: np.ndarray, right: np.ndarray) -> np.ndarray:
    """Solve symmetric positive equations after scaling the diagonal to one.

    Columns that no observation touches (zero diagonal) get zero.
    """
    scale = np.sqrt(np.maximum(np.diag(normal), 0.0))
    used = scale > 0.0
    inverse = np.where(used, 1.0 / np.where(used, scale, 1.0), 0.0)
    scaled = normal * inverse[:, None] * inverse[None, :]
    scaled[~used, ~used] = 1.0
    shape = (-1, *([1] * (right.ndim - 1)))
    weighted = right * inverse.reshape(shape)
    return np.linalg.solve(scaled, weighted) * inverse.reshape(shape)


def inverse_scaled(normal: np.ndarray) -> np.ndarray:
    """Inverse of a symmetric positive matrix, zero for columns nothing touches."""
    result = solve_scaled(normal, np.eye(len(normal)))
    return 0.5 * (result + result.T)
