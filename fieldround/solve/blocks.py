"""A block of whitened observations of one source, as the normal equations take it.

In: residuals in sds, their Jacobian, a robust loss. Out: the frozen record.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

Loss = Callable[[np.ndarray], tuple[np.ndarray, float]]


@dataclass(frozen=True)
class Block:
    """Observations of one source: residuals (m,), Jacobian (m, size) or None, loss."""

    source: str
    residuals: np.ndarray
    jacobian: np.ndarray | None
    loss: Loss
