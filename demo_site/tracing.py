"""Where sight lines meet the pieces of a place, and what stands between a point and the sun.

In: stations, directions, pieces. Out: distances (infinite where missed), normals, coordinates on
the surface. All intersections are exact; arrays are (n,) or (n, 3) over the sight lines.
"""

from __future__ import annotations

from functools import cache

import numpy as np

from demo_site.noise import noise2
from demo_site.scene import Ball, Cone, Panel, Piece

LEAST_M = 1e-4
# Share of the radius and least noise of a leaf, outermost first.
SHELLS = ((1.0, 1.1), (0.9, 0.45), (0.78, -0.05), (0.6, -0.6))
BUMPS, FINE = 18, 6
# Ragged top of a far wood: wave (m), share of its height, how much it overhangs.
WOOD = ((17.0, 0.13, 0.0), (6.0, 0.10, 0.0), (2.2, 0.05, 0.5), (0.7, 0.03, 1.0))


def distance_to(piece: Piece, start: np.ndarray, towards: np.ndarray) -> np.ndarray:
    """Distance along unit directions to the first meeting with a piece, infinite without one.

    start : (3,) or (n, 3); towards : (n, 3) or (3,)
    """
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        if isinstance(piece, Panel):
            return _to_panel(piece, start, towards)
        if isinstance(piece, Ball):
            return _to_ball(piece, start, towards)
        return _to_cone(piece, start, towards)


def _dot(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Row by row product of (3,) or (n, 3) with (3,) or (n, 3)."""
    if a.ndim == 1:
        return b @ a
    return a @ b if b.ndim == 1 else np.einsum("ij,ij->i", a, b)


def _to_panel(piece: Panel, start: np.ndarray, towards: np.ndarray) -> np.ndarray:
    across, up, normal = piece.frame
    away = start - np.array(piece.origin)
    t = -(away @ normal) / (towards @ normal)
    u = away @ across + t * (towards @ across)
    v = away @ up + t * (towards @ up)
    inside = (u >= 0) & (u <= piece.width_m) & (v >= 0) & (v <= piece.height_m) & (t > LEAST_M)
    if piece.shape == "gable":
        inside &= v <= piece.height_m * (1.0 - np.abs(2.0 * u / piece.width_m - 1.0))
    elif piece.shape == "wood":
        u = np.where(inside, u, 0.0)
        seed = int(piece.look.get("seed", 1))
        ragged = sum(
            weight * noise2(u / wave, v * part / wave, seed + turn)
            for turn, (wave, weight, part) in enumerate(WOOD)
        )
        inside &= v <= piece.height_m * (0.74 + ragged)
    return np.where(inside, t, np.inf)


def _to_ball(piece: Ball, start: np.ndarray, towards: np.ndarray) -> np.ndarray:
    away = start - np.array(piece.centre)
    b = _dot(away, towards)
    square = _dot(away, away) if away.ndim == 2 else away @ away
    root = np.sqrt(b * b - square + piece.radius_m**2)
    if piece.leaves <= 0.0:
        t = np.where(-b - root > LEAST_M, -b - root, -b + root)
        return np.where((root >= 0) & (t > LEAST_M), t, np.inf)
    best = np.full(b.shape, np.inf)
    meets = np.flatnonzero((root >= 0) & (-b + root > LEAST_M))
    if not len(meets):
        return best
    # Shells of leaves, the outer ones thin, so that the rim is ragged; in the order a ray meets
    # them, so that the first leaf it meets is the nearest.
    order = [(share, gaps, -1.0) for share, gaps in SHELLS]
    order += [(share, gaps, 1.0) for share, gaps in reversed(SHELLS)]
    for share, gaps, side in order:
        own = b[meets]
        root = own * own - (square if np.ndim(square) == 0 else square[meets])
        t = side * np.sqrt(root + (share * piece.radius_m) ** 2) - own
        place = np.flatnonzero(t > LEAST_M)
        index = meets[place]
        point = (start if start.ndim == 1 else start[index]) + t[place, None] * (
            towards if towards.ndim == 1 else towards[index]
        )
        leaf = leaf_cover(piece, point, gaps)
        best[index[leaf]] = t[place[leaf]]
        left = np.ones(len(meets), dtype=bool)
        left[place[leaf]] = False
        meets = meets[left]
        if not len(meets):
            break
    return best


@cache
def _foliage() -> np.ndarray:
    """A block of smooth noise that repeats every BUMPS bumps, FINE samples a bump."""
    rng = np.random.default_rng(19)
    size = BUMPS * FINE
    waves = np.fft.fftfreq(size, 1.0 / size)
    wave = np.sqrt(
        waves[:, None, None] ** 2 + waves[None, :, None] ** 2 + waves[: size // 2 + 1] ** 2
    )
    band = np.exp(-0.5 * ((wave - BUMPS * 0.62) / (BUMPS * 0.22)) ** 2)
    block = np.fft.irfftn(
        np.fft.rfftn(rng.standard_normal((size, size, size))) * band, (size,) * 3, (0, 1, 2)
    )
    return (block / block.std()).astype(np.float32)


def leaf_cover(piece: Ball, points: np.ndarray, gaps: float) -> np.ndarray:
    """Where a shell of leaves is not a gap, (n,) bool."""
    block, size = _foliage(), BUMPS * FINE
    leaf = float(piece.look.get("leaf_m", 0.13))
    shift = 13 * int(piece.look.get("seed", 1))
    i, j, k = (np.floor(points * (FINE / leaf)).astype(np.int64) + shift).T % size
    return block[i, j, k] > gaps


def _to_cone(piece: Cone, start: np.ndarray, towards: np.ndarray) -> np.ndarray:
    axis, k, r0 = np.array(piece.axis), piece.taper_m_per_m, piece.radius_m
    away = start - np.array(piece.base)
    h0, dh = away @ axis, towards @ axis
    along = _dot(away, towards)
    square = _dot(away, away) if away.ndim == 2 else away @ away
    r = r0 + k * h0
    a = 1.0 - (1.0 + k * k) * dh * dh
    b = along - (h0 + k * r) * dh
    root = np.sqrt(b * b - a * (square - h0 * h0 - r * r))
    best = np.full(np.shape(root), np.inf)
    # Inside the widest wall only: a missed ray has no root and fails every comparison.
    near = np.flatnonzero(root >= 0)
    if not len(near):
        return _ends(piece, best, h0, dh, along, square)
    a, b, root, slope = (
        np.broadcast_to(a, best.shape)[near],
        b[near],
        root[near],
        np.broadcast_to(dh, best.shape)[near],
    )
    low = h0 if np.ndim(h0) == 0 else h0[near]
    found = np.full(len(near), np.inf)
    for t in ((-b + root) / a, (-b - root) / a):
        h = low + t * slope
        good = (t > LEAST_M) & (h >= 0) & (h <= piece.length_m)
        found = np.where(good, np.minimum(t, found), found)
    best[near] = found
    return _ends(piece, best, h0, dh, along, square)


def _ends(piece: Cone, best, h0, dh, along, square) -> np.ndarray:  # type: ignore[no-untyped-def]
    """The two flat ends of a bar."""
    for end in (0.0, piece.length_m):
        t = (end - h0) / dh
        reach = square + t * (2 * along + t) - end * end
        good = (t > LEAST_M) & (reach <= (piece.radius_m + piece.taper_m_per_m * end) ** 2)
        best = np.where(good, np.minimum(t, best), best)
    return best


def surface(
    piece: Piece, points: np.ndarray, towards: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Normals facing the station and two coordinates on the surface, metres.

    Panels: across and up. Cones: around (at the base radius) and along. Balls: around and up.
    """
    if isinstance(piece, Panel):
        across, up = np.array(piece.across), np.array(piece.up)
        away = points - np.array(piece.origin)
        normal = np.broadcast_to(np.cross(across, up), points.shape)
        u, v = away @ across, away @ up
    elif isinstance(piece, Ball):
        away = points - np.array(piece.centre)
        normal = away / np.linalg.norm(away, axis=1, keepdims=True)
        u = np.arctan2(normal[:, 1], normal[:, 0]) * piece.radius_m
        v = away[:, 2]
    else:
        axis = np.array(piece.axis)
        away = points - np.array(piece.base)
        v = away @ axis
        out = away - v[:, None] * axis
        normal = out / np.maximum(np.linalg.norm(out, axis=1, keepdims=True), 1e-9)
        first = np.cross(axis, (0.267, 0.535, 0.802))
        first /= np.linalg.norm(first)
        second = np.cross(axis, first)
        u = np.arctan2(normal @ second, normal @ first) * piece.radius_m
        normal = normal - piece.taper_m_per_m * axis
        ends = (v < 1e-6) | (v > piece.length_m - 1e-6)
        normal = np.where(ends[:, None], axis * np.sign(v - piece.length_m / 2)[:, None], normal)
        normal = normal / np.linalg.norm(normal, axis=1, keepdims=True)
    turned = np.sum(normal * towards, axis=1) > 0
    return np.where(turned[:, None], -normal, normal), u, v


class Shade:
    """What stands between points and the sun; pieces are sorted out by their shadow's extent."""

    def __init__(self, pieces: tuple[Piece, ...], sun: np.ndarray, corners: list[np.ndarray]):
        from fieldround.geometry.rotations import square_basis

        self.pieces, self.sun, self.basis = pieces, sun, square_basis(sun)
        flat = [c @ self.basis for c in corners]
        self.low = np.array([f.min(axis=0) for f in flat])
        self.high = np.array([f.max(axis=0) for f in flat])
        self.top = np.array([(c @ sun).max() for c in corners])

    def covers(self, points: np.ndarray) -> np.ndarray:
        """True where a point (n, 3) lies in shadow."""
        dark = np.zeros(len(points), dtype=bool)
        flat, depth = points @ self.basis, points @ self.sun
        low, high = flat.min(axis=0), flat.max(axis=0)
        near = (self.low < high).all(axis=1) & (self.high > low).all(axis=1)
        near &= self.top > depth.min()
        for index in np.flatnonzero(near):
            inside = (
                ~dark
                & (flat[:, 0] > self.low[index, 0]) & (flat[:, 0] < self.high[index, 0])
                & (flat[:, 1] > self.low[index, 1]) & (flat[:, 1] < self.high[index, 1])
                & (depth < self.top[index])
            )  # fmt: skip
            where = np.flatnonzero(inside)
            if len(where):
                met = distance_to(self.pieces[index], points[where], self.sun)
                dark[where[np.isfinite(met)]] = True
        return dark
