"""Features of two pictures matched by their descriptors.

In: two `Features`. Out: index pairs that pass the ratio test both ways and choose each other.
Source of the ratio test: D. Lowe, IJCV 60 (2004), 7.1.
"""

from __future__ import annotations

import numpy as np

from fieldround.vision.features import Features

RATIO = 0.8


def match(first: Features, second: Features) -> np.ndarray:
    """Mutual nearest descriptors whose second nearest is clearly further, (m, 2) indices."""
    if len(first.descriptors) < 2 or len(second.descriptors) < 2:
        return np.zeros((0, 2), dtype=int)
    # Unit descriptors: squared distance = 2 - 2 * product.
    likeness = first.descriptors @ second.descriptors.T
    there, sure_there = _nearest(likeness)
    back, sure_back = _nearest(likeness.T)
    index = np.arange(len(there))
    mutual = (back[there] == index) & sure_there & sure_back[there]
    return np.stack([index[mutual], there[mutual]], axis=1)


def _nearest(likeness: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Most alike column of each row, and whether it passes the ratio test."""
    best = np.argmax(likeness, axis=1)
    rows = np.arange(len(likeness))
    top = likeness[rows, best]
    # Both parts of a partition are needed only for the second largest value.
    second = np.partition(likeness, -2, axis=1)[:, -2]
    distance = np.sqrt(np.maximum(2.0 - 2.0 * np.stack([top, second]), 0.0))
    return best, distance[0] < RATIO * distance[1]
