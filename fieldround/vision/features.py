"""Distinct points of one picture with their descriptors, spread over the picture.

In: a grey picture. Out: `Features`. Scale-invariant features (D. Lowe, IJCV 2004) with the
square-root form of their descriptors (R. Arandjelovic and A. Zisserman, CVPR 2012).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

# Above this many pixels a picture is searched at half size; refinement works at full size.
FULL_SEARCH_PIXELS = 6_000_000
CONTRAST = 0.015
CELLS = 16


@dataclass(frozen=True)
class Features:
    """Points of a picture: xy_px (n, 2) and unit descriptors (n, 128) float32."""

    xy_px: np.ndarray
    descriptors: np.ndarray


def grey(picture: np.ndarray) -> np.ndarray:
    """A picture as one 8-bit channel, (h, w)."""
    if picture.ndim == 2:
        return np.ascontiguousarray(picture)
    import cv2

    return cv2.cvtColor(np.ascontiguousarray(picture[:, :, :3]), cv2.COLOR_RGB2GRAY)


def find_features(picture: np.ndarray, most: int = 5000) -> Features:
    """Features of a grey picture, the strongest of every cell of a grid first.

    picture : (h, w) uint8
    most    : features kept
    """
    import cv2

    height, width = picture.shape
    scale = 2 if picture.size > FULL_SEARCH_PIXELS else 1
    searched = picture
    if scale == 2:
        searched = cv2.resize(picture, (width // 2, height // 2), interpolation=cv2.INTER_AREA)
    sift = cv2.SIFT_create(  # type: ignore[attr-defined]
        nfeatures=0, contrastThreshold=CONTRAST, edgeThreshold=12, enable_precise_upscale=True
    )
    points = sift.detect(searched, None)
    if not points:
        return Features(np.zeros((0, 2)), np.zeros((0, 128), dtype=np.float32))
    places = np.array([point.pt for point in points])
    strength = np.array([point.response for point in points])
    chosen = spread_out(places, strength, searched.shape, most)
    kept, raw = sift.compute(searched, [points[i] for i in chosen])
    xy = np.array([point.pt for point in kept], dtype=float)
    if scale == 2:
        # Pixel centres: the middle of a half-size pixel lies between two full-size ones.
        xy = (xy + 0.5) * 2.0 - 0.5
    total = np.maximum(raw.sum(axis=1, keepdims=True), 1e-9)
    return Features(xy, np.sqrt(raw / total).astype(np.float32))


def spread_out(
    xy_px: np.ndarray, strength: np.ndarray, shape: tuple[int, int], most: int
) -> np.ndarray:
    """Indices of at most `most` points, taken in turn from every cell of a grid by strength."""
    height, width = shape
    column = np.minimum((xy_px[:, 0] * CELLS / width).astype(int), CELLS - 1)
    row = np.minimum((xy_px[:, 1] * CELLS / height).astype(int), CELLS - 1)
    cell = row * CELLS + column
    order = np.lexsort((xy_px[:, 1], xy_px[:, 0], -strength, cell))
    first = np.searchsorted(cell[order], cell[order], side="left")
    rank = np.arange(len(order)) - first
    taken = np.lexsort((order, -strength[order], rank))[:most]
    return np.sort(order[taken])
