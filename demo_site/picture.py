"""From a scene and a view to the picture the camera would have stored.

In: a `Scene`, a `View`. Out: (height, width, 3) uint8 of the STORED (landscape) picture.
One sight line a pixel, more where pieces meet; then lens blur, corner shading, sensor noise.
Colours are mixed as displayed, so that the middle of a blurred edge stays where the edge is.
"""

from __future__ import annotations

import numpy as np

from demo_site.scene import Ball, Panel, Scene, View
from demo_site.shading import Sight

ROWS, COLUMNS = 64, 96
# No two sight lines of a pixel share a row or a column, so that an edge of any direction is
# placed to a sixteenth of a pixel (bit-reversed order, J. G. van der Corput, 1935).
FOUR = np.array([(k, (0, 2, 1, 3)[k]) for k in range(4)]) / 4 - 0.375
_REVERSED = (0, 8, 4, 12, 2, 10, 6, 14, 1, 9, 5, 13, 3, 11, 7, 15)
SIXTEEN = (np.array([(k, _REVERSED[k]) for k in range(16)]) + 0.5) / 16 - 0.5


def render_view(scene: Scene, view: View, coarse: bool = False) -> np.ndarray:
    """The stored picture of a view, (height, width, 3) uint8; `coarse` leaves edges jagged."""
    width, height = view.lens.size_px
    sight = Sight(scene, view)
    picture = np.empty((height, width, 3), dtype=np.float32)
    seen = np.empty((height, width), dtype=np.int32)
    tiles = [
        (x, min(x + COLUMNS, width), y, min(y + ROWS, height))
        for y in range(0, height, ROWS)
        for x in range(0, width, COLUMNS)
    ]
    for tile in tiles:
        x0, x1, y0, y1 = tile
        y, x = np.mgrid[y0:y1, x0:x1]
        tone, index = sight.colours(np.stack([x.ravel(), y.ravel()], axis=1).astype(float), tile)
        picture[y0:y1, x0:x1] = tone.reshape(*x.shape, 3)
        seen[y0:y1, x0:x1] = index.reshape(x.shape)
    if not coarse:
        soft = np.array([isinstance(p, Ball) and p.leaves > 0 for p in scene.pieces] + [False])
        soft |= np.array(
            [isinstance(p, Panel) and p.shape == "wood" for p in scene.pieces] + [False]
        )
        rough = _steps(seen)
        hard = rough & _steps(np.where(soft[seen], -1, seen))
        for which, pattern in ((rough & ~hard, FOUR), (hard, SIXTEEN)):
            for tile in tiles:
                _refine(sight, tile, which, pattern, picture)
    return developed(picture, view)


def _steps(seen: np.ndarray) -> np.ndarray:
    """Pixels beside one that shows another piece, and their neighbours."""
    rough = np.zeros(seen.shape, dtype=bool)
    across, down = seen[:, 1:] != seen[:, :-1], seen[1:] != seen[:-1]
    rough[:, 1:] |= across
    rough[:, :-1] |= across
    rough[1:] |= down
    rough[:-1] |= down
    return rough


def _refine(
    sight: Sight,
    tile: tuple[int, int, int, int],
    which: np.ndarray,
    pattern: np.ndarray,
    picture: np.ndarray,
) -> None:
    """More sight lines for the marked pixels of a tile."""
    x0, x1, y0, y1 = tile
    y, x = np.nonzero(which[y0:y1, x0:x1])
    if not len(x):
        return
    x, y = x + x0, y + y0
    spots = (np.stack([x, y], axis=1)[:, None] + pattern).reshape(-1, 2)
    tone, _ = sight.colours(spots, tile)
    picture[y, x] = tone.reshape(len(x), -1, 3).mean(axis=1)


def developed(picture: np.ndarray, view: View) -> np.ndarray:
    """Corner shading, lens blur, a soft shoulder, sensor noise; (height, width, 3) uint8."""
    height, width = picture.shape[:2]
    y, x = np.mgrid[:height, :width].astype(np.float32)
    away = ((x - width / 2) ** 2 + (y - height / 2) ** 2) / (width**2 + height**2) * 4
    out = blurred(picture * (1.0 - 0.16 * away)[:, :, None], view.lens.blur_px)
    out = np.where(out > 0.8, 0.8 + 0.2 * np.tanh((out - 0.8) / 0.2), out) * 255.0
    rng = np.random.default_rng([view.seed, 77])
    grain = rng.standard_normal(out.shape, dtype=np.float32)
    out += view.lens.noise * (0.7 + 0.6 * np.sqrt(np.clip(out, 0, 255) / 255.0)) * grain
    return np.clip(np.rint(out), 0, 255).astype(np.uint8)


def blurred(picture: np.ndarray, sd_px: float) -> np.ndarray:
    """Gaussian blur of (height, width, 3), the rim repeated."""
    reach = int(np.ceil(4 * sd_px))
    weights = np.exp(-0.5 * (np.arange(-reach, reach + 1) / sd_px) ** 2)
    weights = (weights / weights.sum()).astype(np.float32)
    for axis in (0, 1):
        room = [(reach, reach) if a == axis else (0, 0) for a in range(3)]
        padded = np.pad(picture, room, mode="edge")
        size = picture.shape[axis]
        picture = sum(
            w * np.take(padded, np.arange(k, k + size), axis=axis) for k, w in enumerate(weights)
        )
    return picture
