"""Hashed value noise: the grain of every made-up surface, the same on every machine.

In: coordinates in metres, the size of a pixel on the surface. Out: float32 arrays. Waves shorter
than two pixels fade out, so that a far surface does not sparkle.
"""

from __future__ import annotations

from functools import cache

import numpy as np

PERIOD = {2: 512, 3: 64}
_SCALE = np.float32(1.0 / 4294967296.0)


def mixed(*integers: np.ndarray | int, seed: int = 0) -> np.ndarray:
    """Numbers in [0, 1) that look random, one for every tuple of integers."""
    h = np.uint32((seed * 0x9E3779B1 + 0x7F4A7C15) & 0xFFFFFFFF)
    for factor, values in zip((0x9E3779B1, 0x85EBCA77, 0xC2B2AE3D), integers, strict=False):
        h = (np.asarray(values).astype(np.int64).astype(np.uint32) * np.uint32(factor)) ^ h
        h = h ^ (h >> np.uint32(15))
        h = h * np.uint32(0x2C1B3C6D)
        h = h ^ (h >> np.uint32(13))
    h = h * np.uint32(0x297A2D39)
    h = h ^ (h >> np.uint32(16))
    return h.astype(np.float32) * _SCALE


@cache
def _lattice(dimensions: int) -> np.ndarray:
    """Random numbers in [-1, 1] on a square or cubic lattice whose last layer is its first."""
    side = PERIOD[dimensions]
    grid = np.arange(side + 1) % side
    numbers = mixed(*np.meshgrid(*(grid,) * dimensions, indexing="ij"), seed=dimensions)
    return (2.0 * numbers - 1.0).astype(np.float32).ravel()


def _split(x: np.ndarray, side: int, shift: int) -> tuple[np.ndarray, np.ndarray]:
    """Place on the lattice and smoothed fraction."""
    whole = np.floor(x)
    part = (x - whole).astype(np.float32)
    return (whole.astype(np.int64) + shift) % side, part * part * (3.0 - 2.0 * part)


def noise2(x: np.ndarray, y: np.ndarray, seed: int) -> np.ndarray:
    """Smooth noise in [-1, 1] over a plane, one bump a unit; repeats after many bumps."""
    table, side = _lattice(2), PERIOD[2]
    i, fx = _split(x, side, 37 * seed)
    j, fy = _split(y, side, 101 * seed)
    at = i * (side + 1) + j
    low = table[at] * (1 - fy) + table[at + 1] * fy
    at += side + 1
    high = table[at] * (1 - fy) + table[at + 1] * fy
    return low * (1 - fx) + high * fx


def noise3(x: np.ndarray, y: np.ndarray, z: np.ndarray, seed: int) -> np.ndarray:
    """Smooth noise in [-1, 1] in space."""
    table, side = _lattice(3), PERIOD[3]
    i, fx = _split(x, side, 37 * seed)
    j, fy = _split(y, side, 53 * seed)
    k, fz = _split(z, side, 11 * seed)
    at = (i * (side + 1) + j) * (side + 1) + k
    layers = []
    for _ in (0, 1):
        low = table[at] * (1 - fz) + table[at + 1] * fz
        next_row = at + side + 1
        high = table[next_row] * (1 - fz) + table[next_row + 1] * fz
        layers.append(low * (1 - fy) + high * fy)
        at = at + (side + 1) ** 2
    return layers[0] * (1 - fx) + layers[1] * fx


def waves(
    places: tuple[np.ndarray, ...],
    px_m: np.ndarray,
    seed: int,
    longest_m: float,
    shortest_m: float = 0.002,
    gain: float = 0.8,
) -> np.ndarray:
    """Sum of noises of halving wavelength, each faded out where it is finer than two pixels.

    places : two or three coordinate arrays in metres; px_m : metres a pixel covers
    gain   : amplitude of each wave against the one before; the first has amplitude 1
    """
    total = np.zeros(len(px_m), dtype=np.float32)
    finest = float(px_m.min()) if len(px_m) else 1.0
    wave, amplitude, turn = longest_m, 1.0, seed
    noise = noise2 if len(places) == 2 else noise3
    while wave > max(shortest_m, 1.6 * finest):
        shown = np.clip(wave / px_m / 1.6 - 1.0, 0.0, 1.0).astype(np.float32)
        scaled = [place / wave + 17.3 * turn % 101.0 for place in places]
        total += amplitude * shown * noise(*scaled, turn)
        wave, amplitude, turn = wave / 2.03, amplitude * gain, turn + 1
    return total


def edge(distance: np.ndarray, px_m: np.ndarray) -> np.ndarray:
    """How much of a pixel lies inside (distance > 0), from 0 to 1."""
    return np.clip(distance / np.maximum(px_m, 1e-6) + 0.5, 0.0, 1.0).astype(np.float32)


def cells(x: np.ndarray, y: np.ndarray, seed: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Nearest of scattered points, one a unit square: distance, distance to next, its own number.

    source : S. Worley, "A cellular texture basis function" (SIGGRAPH 1996)
    """
    i, j = np.floor(x).astype(np.int64), np.floor(y).astype(np.int64)
    first = np.full(len(x), 9.0, dtype=np.float32)
    second = first.copy()
    own = np.zeros(len(x), dtype=np.float32)
    for di in (-1, 0, 1):
        for dj in (-1, 0, 1):
            a, b = i + di, j + dj
            px = a + mixed(a, b, seed=seed)
            py = b + mixed(a, b, seed=seed + 1)
            away = np.hypot(x - px, y - py).astype(np.float32)
            nearer = away < first
            second = np.where(nearer, first, np.minimum(second, away))
            own = np.where(nearer, mixed(a, b, seed=seed + 2), own)
            first = np.where(nearer, away, first)
    return first, second, own
