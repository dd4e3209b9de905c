"""Ties moved to a hundredth of a pixel's order by least-squares matching of small windows.

In: two grey pictures and rough ties. Out: refined positions in the second picture, their sds.
Source: W. Foerstner, "On the geometric precision of digital correlation" (1982); A. Gruen,
"Adaptive least squares correlation" (1985): affine window, gain and offset.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

HALF = 9
ITERATIONS = 12
# A refinement that walks further than this found something else.
WALK_MOST_PX = 2.0
LIKENESS_LEAST = 0.85
SHEAR_MOST = 0.45
# Interpolation, perspective inside a window and compression leave this much, whatever the noise.
SD_FLOOR_PX = 0.04


@dataclass(frozen=True)
class Refined:
    """Refined positions in the second picture.

    xy_px : (n, 2); sd_px : (n,) of either coordinate in ONE picture; good : (n,) False where the
    windows did not match (the position is then the rough one)
    """

    xy_px: np.ndarray
    sd_px: np.ndarray
    good: np.ndarray


def refine(
    first: np.ndarray, second: np.ndarray, xy_first: np.ndarray, xy_second: np.ndarray
) -> Refined:
    """Match windows of the second picture to those of the first around each tie.

    first, second       : (h, w) uint8 pictures
    xy_first, xy_second : (n, 2) rough positions
    """
    n = len(xy_first)
    if n == 0:
        return Refined(xy_second.copy(), np.zeros(0), np.zeros(0, dtype=bool))
    import cv2

    a, b = (cv2.GaussianBlur(p, (0, 0), 0.7).astype(np.float32) for p in (first, second))
    offset = np.arange(-HALF, HALF + 1, dtype=float)
    u, v = (part.ravel() for part in np.meshgrid(offset, offset))
    weight = np.exp(-(u**2 + v**2) / (2.0 * (0.6 * HALF) ** 2))

    def sampled(picture: np.ndarray, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return cv2.remap(
            picture,
            x.astype(np.float32),
            y.astype(np.float32),
            cv2.INTER_CUBIC,
            borderMode=cv2.BORDER_REFLECT_101,
        ).astype(float)

    window = sampled(a, xy_first[:, :1] + u, xy_first[:, 1:] + v)
    affine = np.tile([1.0, 0.0, 0.0, 1.0], (n, 1))
    place = xy_second.astype(float).copy()
    for _ in range(ITERATIONS):
        x = place[:, :1] + affine[:, :1] * u + affine[:, 1:2] * v
        y = place[:, 1:] + affine[:, 2:3] * u + affine[:, 3:] * v
        seen = sampled(b, x, y)
        step = 0.5
        by_x = (sampled(b, x + step, y) - sampled(b, x - step, y)) / (2.0 * step)
        by_y = (sampled(b, x, y + step) - sampled(b, x, y - step)) / (2.0 * step)
        columns = np.stack(
            [by_x, by_y, by_x * u, by_x * v, by_y * u, by_y * v, -window, -np.ones_like(window)],
            axis=2,
        )
        weighted = columns * weight[None, :, None]
        normal = np.einsum("npi,npj->nij", weighted, columns)
        # Shapes drift along edges: hold the affine part to half a pixel at the window's rim.
        scale = np.einsum("nii->ni", normal).max(axis=1)
        normal[:, range(8), range(8)] += 1e-9 * scale[:, None] + 1e-12
        hold = 0.002 * np.einsum("nii->ni", normal)[:, 2:6]
        normal[:, range(2, 6), range(2, 6)] += hold
        right = -np.einsum("npi,np->ni", weighted, seen)
        right[:, 2:6] -= hold * (affine - [1.0, 0.0, 0.0, 1.0])
        solved = np.linalg.solve(normal, right[:, :, None])[:, :, 0]
        move = np.clip(solved[:, :2], -1.0, 1.0)
        place += move
        affine += np.clip(solved[:, 2:6], -0.1, 0.1)
        if np.abs(move).max() < 1e-3:
            break
    # Residuals after the last step, to first order, give the noise of both windows together.
    left = seen + np.einsum("npi,ni->np", columns, solved)
    freedom = weight.sum() - 8.0
    noise = np.einsum("np,np,p->n", left, left, weight) / freedom
    # Blurred windows have correlated noise: about four pixels speak as one.
    covariance = np.linalg.inv(normal)[:, :2, :2] * (4.0 * noise)[:, None, None]
    spread = 0.5 * (covariance[:, 0, 0] + covariance[:, 1, 1])
    contrast = np.einsum("np,p->n", (seen - seen.mean(axis=1, keepdims=True)) ** 2, weight)
    likeness = 1.0 - noise * freedom / np.maximum(contrast, 1e-9)
    walked = np.linalg.norm(place - xy_second, axis=1)
    good = (
        (walked < WALK_MOST_PX)
        & (likeness > LIKENESS_LEAST)
        & (np.abs(affine - [1.0, 0.0, 0.0, 1.0]).max(axis=1) < SHEAR_MOST)
        & (solved[:, 6] > 0.3)
        & np.isfinite(place).all(axis=1)
    )
    # Half of the variance in each picture: together they are the difference of the two.
    sd = np.sqrt(0.5 * spread + SD_FLOOR_PX**2)
    return Refined(np.where(good[:, None], place, xy_second), sd, good)
