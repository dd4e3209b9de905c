"""Pixels of a view to sight lines, and points of the place to pixels.

In: a `View`. Out: directions in the place's frame for any pixel of the stored picture, pixels of
the upright picture for any point, and the part of the picture a piece of the scene can fill.
"""

from __future__ import annotations

import numpy as np

from demo_site.scene import Panel, Piece, View, corners
from fieldround.geometry.camera import distort, from_card, pixels_to_ideal, project

NEAR_M = 0.05


def sight_lines(view: View, xy_px: np.ndarray) -> np.ndarray:
    """Unit directions (east, north, up) of pixels of the STORED picture, (n, 2) -> (n, 3)."""
    ideal = pixels_to_ideal(xy_px, np.array(view.lens.values))
    ray = np.concatenate([ideal, np.ones((len(ideal), 1))], axis=1) @ view.rotation
    return ray / np.linalg.norm(ray, axis=1, keepdims=True)


def seen_at(view: View, points: np.ndarray) -> np.ndarray:
    """UPRIGHT pixels of points of the place, (n, 3) -> (n, 2); NaN behind the camera."""
    local = (np.asarray(points) - view.station) @ view.rotation.T
    stored = project(local, np.array(view.lens.values))
    return from_card(stored, view.turn_deg, view.upright_px)


def window(
    view: View, piece: Piece, mirror_m: float | None = None, spare_px: int = 3
) -> tuple[int, int, int, int] | None:
    """Columns and rows (first, end, first, end) of the STORED picture a piece can fill.

    mirror_m : height of a level mirror in which it is looked for, None for the piece itself
    """
    width, height = view.lens.size_px
    points = corners(piece)
    if mirror_m is not None:
        points = points * (1.0, 1.0, -1.0) + (0.0, 0.0, 2.0 * mirror_m)
    local = (points - view.station) @ view.rotation.T
    ahead = local[:, 2] > NEAR_M
    if not ahead.any():
        return None
    if not ahead.all():
        if not isinstance(piece, Panel):
            return (0, width, 0, height)
        local = _clipped(local)
    ideal = local[:, :2] / local[:, 2:]
    # Beyond the picture the lens model is no longer one to one: stop a little outside it.
    values = np.array(view.lens.values)
    reach = 1.15 * np.array([width, height]) / 2.0 / values[:2]
    low, high = ideal.min(axis=0), ideal.max(axis=0)
    if (high < -reach).any() or (low > reach).any():
        return None
    low, high = np.clip(low, -reach, reach), np.clip(high, -reach, reach)
    steps = np.linspace(0.0, 1.0, 9)[:, None]
    a, b = np.array([low[0], high[1]]), np.array([high[0], low[1]])
    rim = [p + steps * (q - p) for p, q in ((low, a), (a, high), (high, b), (b, low))]
    spots = distort(np.concatenate(rim), values) * values[:2] + values[2:4]
    first = np.floor(spots.min(axis=0)).astype(int) - spare_px
    end = np.ceil(spots.max(axis=0)).astype(int) + spare_px + 1
    x0, y0 = max(0, first[0]), max(0, first[1])
    x1, y1 = min(width, end[0]), min(height, end[1])
    return (x0, x1, y0, y1) if x0 < x1 and y0 < y1 else None


def _clipped(polygon: np.ndarray) -> np.ndarray:
    """The part of a convex polygon in front of the camera."""
    kept = []
    for p, q in zip(polygon, np.roll(polygon, -1, axis=0), strict=True):
        if p[2] > NEAR_M:
            kept.append(p)
        if (p[2] > NEAR_M) != (q[2] > NEAR_M):
            share = (NEAR_M - p[2]) / (q[2] - p[2])
            kept.append(p + share * (q - p))
    return np.array(kept)
