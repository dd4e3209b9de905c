"""What one sees along a sight line: nearest piece, its colour, sun and shadow, water, sky, air.

In: a `Scene`, a `View`, pixels of its stored picture. Out: display colours (n, 3), 0 to 1, and
the number of the piece seen.
"""

from __future__ import annotations

import numpy as np

from demo_site import walls
from demo_site.camera import sight_lines, window
from demo_site.noise import waves
from demo_site.scene import Ball, Panel, Scene, View, corners
from demo_site.textures import Spot
from demo_site.tracing import Shade, distance_to, surface

AIR = np.array([0.72, 0.79, 0.86], dtype=np.float32)
SUNLIGHT = np.array([1.02, 0.95, 0.80], dtype=np.float32)
SKYLIGHT = np.array([0.55, 0.60, 0.67], dtype=np.float32)
BOUNCE = np.array([0.22, 0.20, 0.15], dtype=np.float32)
MIRROR_SPARE_PX = 70

Tile = tuple[int, int, int, int]
Windows = list[Tile | None]


class Sight:
    """A view of a scene, with the part of the picture each piece can fill."""

    def __init__(self, scene: Scene, view: View) -> None:
        self.scene, self.view = scene, view
        self.start = np.array(view.station, dtype=float)
        self.angle = 1.0 / view.lens.values[0]
        self.windows: Windows = [window(view, piece) for piece in scene.pieces]
        self.shade = Shade(scene.pieces, scene.sun, [corners(piece) for piece in scene.pieces])
        waters = [p for p in scene.pieces if isinstance(p, Panel) and p.material == "water"]
        self.mirrored: Windows = []
        if waters:
            level = waters[0].origin[2]
            self.mirrored = [window(view, piece, level, MIRROR_SPARE_PX) for piece in scene.pieces]

    def colours(self, xy_px: np.ndarray, tile: Tile) -> tuple[np.ndarray, np.ndarray]:
        """Colours (n, 3) and piece numbers (n,), -1 for the sky, of pixels of a tile."""
        towards = sight_lines(self.view, xy_px)
        return self._along(self.start, towards, xy_px, tile, self.windows)

    def _nearest(
        self,
        start: np.ndarray,
        towards: np.ndarray,
        xy_px: np.ndarray,
        tile: Tile,
        windows: Windows,
    ) -> tuple[np.ndarray, np.ndarray]:
        """Distance to and number of the first piece (infinite, -1: sky)."""
        best = np.full(len(towards), np.inf)
        index = np.full(len(towards), -1, dtype=np.int32)
        x0, x1, y0, y1 = tile
        for number, w in enumerate(windows):
            if w is None or w[0] >= x1 or w[1] <= x0 or w[2] >= y1 or w[3] <= y0:
                continue
            piece = self.scene.pieces[number]
            if w[0] <= x0 and w[1] >= x1 and w[2] <= y0 and w[3] >= y1:
                met = distance_to(piece, start, towards)
                closer = np.flatnonzero(met < best)
                best[closer] = met[closer]
            else:
                x, y = xy_px.T
                inside = (x >= w[0]) & (x < w[1]) & (y >= w[2]) & (y < w[3])
                mine = np.flatnonzero(inside)
                if not len(mine):
                    continue
                begin = start if start.ndim == 1 else start[mine]
                met = distance_to(piece, begin, towards[mine])
                nearer = met < best[mine]
                closer = mine[nearer]
                best[closer] = met[nearer]
            index[closer] = number
        return best, index

    def _along(
        self,
        start: np.ndarray,
        towards: np.ndarray,
        xy_px: np.ndarray,
        tile: Tile,
        windows: Windows,
    ) -> tuple[np.ndarray, np.ndarray]:
        direct = windows is self.windows
        best, index = self._nearest(start, towards, xy_px, tile, windows)
        tone = sky(towards)
        met = np.flatnonzero(index >= 0)
        if not len(met):
            return tone, index
        t, away = best[met], towards[met]
        points = (start if start.ndim == 1 else start[met]) + t[:, None] * away
        normals = np.empty_like(points)
        base = np.empty((len(met), 3), dtype=np.float32)
        gloss = np.zeros(len(met), dtype=np.float32)
        thin, wet = np.zeros(len(met), dtype=bool), np.zeros(len(met), dtype=bool)
        angle = self.angle if direct else 2 * self.angle
        for number in np.unique(index[met]):
            mine = np.flatnonzero(index[met] == number)
            piece = self.scene.pieces[number]
            normal, u, v = surface(piece, points[mine], away[mine])
            slant = np.clip(-np.einsum("ij,ij->i", normal, away[mine]), 0.04, 1.0)
            px_m = (t[mine] * angle / np.sqrt(slant)).astype(np.float32)
            spot = Spot(points[mine], u, v, px_m)
            base[mine] = walls.MATERIALS[piece.material](spot, piece.look)
            normals[mine] = normal
            gloss[mine] = float(piece.look.get("gloss", 0.0))
            thin[mine] = isinstance(piece, Ball) and piece.leaves > 0
            wet[mine] = piece.material == "water"
        lit = self._lit(points, normals, away, base, gloss, thin)
        if wet.any() and direct:
            mine = np.flatnonzero(wet)
            lit[mine] = self._mirror(
                points[mine], away[mine], t[mine], lit[mine], xy_px[met[mine]], tile
            )
        air = (1.0 - np.exp(-t / 260.0)).astype(np.float32)[:, None]
        tone[met] = lit * (1 - air) + AIR * air
        return tone, index

    def _lit(
        self,
        points: np.ndarray,
        normals: np.ndarray,
        away: np.ndarray,
        base: np.ndarray,
        gloss: np.ndarray,
        thin: np.ndarray,
    ) -> np.ndarray:
        """Lambert's law under sun and sky, cast shadows, a highlight, light through leaves."""
        sun = self.scene.sun
        slope = (normals @ sun).astype(np.float32)
        slope = np.where(thin, 0.30 + 0.70 * np.abs(slope), slope)
        bright = np.flatnonzero(slope > 0)
        sunny = np.zeros(len(points), dtype=np.float32)
        if len(bright):
            raised = points[bright] + 2e-3 * normals[bright]
            sunny[bright] = slope[bright] * ~self.shade.covers(raised)
        rise = normals[:, 2].astype(np.float32)
        foot = np.clip(0.70 + 0.5 * points[:, 2], 0.70, 1.0).astype(np.float32)
        foot = np.where(np.abs(rise) < 0.7, foot, 1.0)
        light = sunny[:, None] * SUNLIGHT + ((0.64 + 0.36 * rise) * foot)[:, None] * SKYLIGHT
        light += (0.5 - 0.5 * rise)[:, None] * BOUNCE
        out = base * light
        if gloss.any():
            half = sun - away
            half /= np.linalg.norm(half, axis=1, keepdims=True)
            shine = gloss * np.clip(np.einsum("ij,ij->i", half, normals), 0, 1) ** 40
            out += ((sunny > 0) * shine)[:, None].astype(np.float32) * SUNLIGHT
        return out

    def _mirror(
        self,
        points: np.ndarray,
        away: np.ndarray,
        t: np.ndarray,
        lit: np.ndarray,
        xy_px: np.ndarray,
        tile: Tile,
    ) -> np.ndarray:
        """Water: its own colour and what its rippled face mirrors."""
        px_m = (t * self.angle / np.sqrt(np.clip(-away[:, 2], 0.03, 1))).astype(np.float32)
        normal = np.zeros_like(points)
        for axis, seed in ((0, 521), (1, 531)):
            ripple = waves((points[:, 0], 1.6 * points[:, 1]), px_m, seed, 0.9, 0.03, 0.7)
            normal[:, axis] = 0.007 * ripple
        normal[:, 2] = 1.0
        normal /= np.linalg.norm(normal, axis=1, keepdims=True)
        cosine = np.clip(-np.einsum("ij,ij->i", away, normal), 0.02, 1.0)
        back = away + 2 * cosine[:, None] * normal
        back[:, 2] = np.maximum(back[:, 2], 0.01)
        back /= np.linalg.norm(back, axis=1, keepdims=True)
        tone, _ = self._along(points + 1e-3 * normal, back, xy_px, tile, self.mirrored)
        # How much a flat water face mirrors: C. Schlick's approximation (1994) of Fresnel's law.
        share = (0.04 + 0.96 * (1 - cosine) ** 5).astype(np.float32)[:, None]
        return lit * (1 - share) + 0.92 * tone * share


def sky(towards: np.ndarray) -> np.ndarray:
    """Blue above, pale at the horizon, with broken cloud, (n, 3) float32."""
    rise = np.clip(towards[:, 2], 0.0, 1.0)
    depth = (1.0 - np.exp(-4.0 * rise)).astype(np.float32)[:, None]
    low = np.array([0.78, 0.85, 0.91], dtype=np.float32)
    tone = low * (1 - depth) + depth * np.array([0.36, 0.55, 0.80], dtype=np.float32)
    spread = 1.0 / (rise + 0.12)
    px = np.full(len(rise), 0.004, dtype=np.float32)
    grain = waves((towards[:, 0] * spread, towards[:, 1] * spread), px, 601, 1.7, 0.02, 0.62)
    cloud = np.clip(1.5 * grain + 0.32, 0, 1).astype(np.float32)
    cloud = (cloud * cloud * (3 - 2 * cloud))[:, None]
    shaded = np.clip(0.97 - 0.13 * np.clip(grain - 0.3, 0, 1), 0, 1).astype(np.float32)[:, None]
    return tone * (1 - 0.85 * cloud) + 0.85 * cloud * shaded
