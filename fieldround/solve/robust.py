"""Robust losses for whitened residuals: a weight and a cost from the same formula.

In: whitened residuals (n,). Out: weights (n,) for the reweighted equations and the summed cost
(half the sum of squares where the residuals are small).
Source: P. J. Huber, Robust Statistics (1981); Student's t as in K. L. Lange et al. (JASA, 1989).
"""

from __future__ import annotations

import numpy as np


def plain(residuals: np.ndarray) -> tuple[np.ndarray, float]:
    """Least squares: weight one, half the sum of squares."""
    return np.ones(len(residuals)), 0.5 * float(residuals @ residuals)


def huber(residuals: np.ndarray, limit: float) -> tuple[np.ndarray, float]:
    """Huber's loss: squares up to `limit` sds, straight lines beyond."""
    size = np.abs(residuals)
    weights = limit / np.maximum(size, limit)
    beyond = size > limit
    cost = np.where(beyond, limit * size - 0.5 * limit**2, 0.5 * size**2)
    return weights, float(cost.sum())


def student(residuals: np.ndarray, freedom: float) -> tuple[np.ndarray, float]:
    """Student's t, scaled so that a small residual has weight one."""
    squares = residuals**2
    weights = 1.0 / (1.0 + squares / freedom)
    return weights, 0.5 * freedom * float(np.log1p(squares / freedom).sum())


def cauchy(squares: np.ndarray, limit: float) -> tuple[np.ndarray, float]:
    """Cauchy's loss of SQUARED residuals, for points whose residuals weigh together."""
    ratio = squares / limit**2
    return 1.0 / (1.0 + ratio), 0.5 * limit**2 * float(np.log1p(ratio).sum())
