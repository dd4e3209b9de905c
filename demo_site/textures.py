"""The colours of made-up surfaces: ground, walls, roofs, wood, metal, stone, leaves.

In: a `Spot` (places on one surface and the size of a pixel there) and the piece's `look`.
Out: (n, 3) float32 colours as the eye sees them in full light, 0 to 1.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from demo_site.noise import cells, edge, mixed, waves


@dataclass(frozen=True)
class Spot:
    """Places on one surface: points (n, 3), its own coordinates u, v (n,), px_m (n,) a pixel."""

    points: np.ndarray
    u: np.ndarray
    v: np.ndarray
    px_m: np.ndarray


def colour(red: float, green: float, blue: float) -> np.ndarray:
    return np.array([red, green, blue], dtype=np.float32)


def blend(a: np.ndarray, b: np.ndarray, share: np.ndarray) -> np.ndarray:
    """a where share is 0, b where it is 1."""
    return a * (1 - share[:, None]) + b * share[:, None]


def tinted(base: np.ndarray, grain: np.ndarray, strength: float) -> np.ndarray:
    """A colour made lighter and darker by a grain."""
    return base * (1.0 + strength * grain[:, None])


def grass(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y = s.points[:, 0], s.points[:, 1]
    patch = waves((x, y), s.px_m, 11, 6.0, 0.8, 0.8)
    tufts = waves((x, y), s.px_m, 31, 0.5, 0.02, 0.9)
    # Blades: noise drawn out along four directions, each where its own patches say.
    blades = np.zeros(len(x), dtype=np.float32)
    for turn in range(4):
        c, n = np.cos(0.8 * turn + 0.3), np.sin(0.8 * turn + 0.3)
        along, across = (c * x + n * y) / 7.0, c * y - n * x
        share = np.clip(0.5 + 1.6 * waves((x, y), s.px_m, 401 + turn, 0.12, 0.05, 0.5), 0, 1)
        blades += share * waves((along, across), s.px_m, 37 + 7 * turn, 0.012, 0.003, 0.9)
    share = np.clip(0.45 + 0.30 * patch + 0.16 * tufts, 0, 1)
    base = blend(colour(0.26, 0.33, 0.15), colour(0.46, 0.48, 0.26), share)
    clump = waves((x, y), s.px_m, 35, 0.16, 0.01, 0.95)
    grain = 0.12 * tufts + 0.20 * clump + 0.34 * blades
    out = tinted(base, grain, 1.0)
    for size, seed, white in ((0.17, 51, 0.5), (0.31, 56, 0.8)):
        first, _, own = cells(x / size, y / size, seed)
        flower = (own > 0.80) * edge(0.016 + 0.012 * own - size * first, s.px_m)
        flower *= np.clip(0.03 / s.px_m, 0.25, 1.0)
        petal = np.where(
            (own > 1 - 0.2 * white)[:, None], colour(0.96, 0.95, 0.90), colour(0.95, 0.82, 0.16)
        )
        out = blend(out, petal, flower.astype(np.float32))
    first, _, own = cells(x / 1.7 + 5, y / 1.7, 61)
    worn = (own > 0.6) * np.clip(1.4 - 2.6 * first + 0.3 * tufts, 0, 1) * 0.7
    return blend(out, tinted(colour(0.50, 0.43, 0.31), grain, 0.9), worn.astype(np.float32))


def paving(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    size = float(look.get("size_m", 0.6))
    x, y = s.points[:, 0], s.points[:, 1]
    row = np.floor(y / size)
    shift = mixed(row.astype(int), seed=3) * size
    width = size * 1.35
    column = np.floor((x + shift) / width)
    fx, fy = (x + shift) - column * width, y - row * size
    rim = np.minimum(np.minimum(fx, width - fx), np.minimum(fy, size - fy))
    own = mixed(column.astype(int), row.astype(int), seed=5)
    grain = waves((x, y), s.px_m, 71, 0.5, 0.002, 0.92)
    base = blend(colour(0.60, 0.57, 0.52), colour(0.43, 0.42, 0.41), own)
    out = tinted(base, grain, 0.17)
    lichen = np.clip(waves((x, y), s.px_m, 83, 0.22, 0.004, 0.9) - 0.75, 0, 0.6)
    out = blend(out, colour(0.78, 0.77, 0.66), lichen)
    joint = edge(0.007 - rim, s.px_m) * np.clip(0.02 / s.px_m, 0.15, 1.0).astype(np.float32)
    return blend(out, tinted(colour(0.23, 0.25, 0.16), grain, 0.25), joint)


def cobbles(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y = s.points[:, 0], s.points[:, 1]
    first, second, own = cells(x / 0.12, y / 0.105, 91)
    grain = waves((x, y), s.px_m, 95, 0.9, 0.002, 0.9)
    base = blend(colour(0.37, 0.35, 0.34), colour(0.63, 0.57, 0.49), own)
    dome = np.clip((second - first) * 2.2, 0, 1)
    fade = np.clip(0.10 / s.px_m, 0, 1).astype(np.float32)
    return tinted(base, grain, 0.17) * (1 - fade * (1 - (0.42 + 0.62 * dome)))[:, None]


def gravel(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y = s.points[:, 0], s.points[:, 1]
    grain = waves((x, y), s.px_m, 105, 1.3, 0.003, 0.93)
    out = tinted(colour(0.50, 0.46, 0.38), grain, 0.14)
    # Fine stones first, then fewer larger ones that lie on them.
    for size, seed, least, round_ in (
        (0.016, 101, 0.0, 0.62),
        (0.034, 104, 0.45, 0.42),
        (0.07, 108, 0.8, 0.33),
    ):
        if size < 1.2 * float(s.px_m.min()):
            continue
        first, _, own = cells(x / size, y / size, seed)
        fade = np.clip(size / s.px_m / 1.5 - 0.6, 0, 1)
        tone = (own * 7.3) % 1.0
        stone = blend(colour(0.40, 0.36, 0.31), colour(0.76, 0.71, 0.63), tone)
        dome = 1.12 - 0.55 * (first / round_) ** 2
        inside = edge((round_ - first) * size, s.px_m) * (own >= least) * fade
        shadow = edge((round_ * 1.25 - first) * size, s.px_m) * (own >= least) * fade * 0.45
        out = out * (1 - shadow[:, None])
        out = blend(out, tinted(stone * dome[:, None], grain, 0.10), inside.astype(np.float32))
    return out.astype(np.float32)


def ground(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    """Grass, with the strips (edge, material) of `look` laid over it by northing."""
    y = s.points[:, 1]
    out = np.empty((len(y), 3), dtype=np.float32)
    wander = 0.12 * waves((s.points[:, 0], y), s.px_m, 111, 0.9, 0.02, 0.8)
    left = np.ones(len(y), dtype=bool)
    for low, high, name in look.get("strips", ()):
        soft = name in ("gravel", "grass")
        place = y + wander if soft else y
        mine = left & (place >= low) & (place < high)
        if mine.any():
            out[mine] = MATERIALS[name](_part(s, mine), look)
        left &= ~mine
    if left.any():
        out[left] = grass(_part(s, left), look)
    return out


def _part(s: Spot, mine: np.ndarray) -> Spot:
    return Spot(s.points[mine], s.u[mine], s.v[mine], s.px_m[mine])


def water(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y = s.points[:, 0], s.points[:, 1]
    weed = waves((x, y), s.px_m, 121, 2.5, 0.01, 0.85)
    out = tinted(colour(0.13, 0.17, 0.12), weed, 0.25)
    first, _, own = cells(x / 0.55, y / 0.55, 125)
    pad = (own > 0.80) * edge(0.07 - 0.55 * first, s.px_m)
    near_edge = np.clip(1.0 - np.minimum(y, look.get("far_m", 11.0) - y) / 2.2, 0, 1)
    return blend(out, colour(0.36, 0.45, 0.16), (pad * (near_edge > 0.1)).astype(np.float32))


def leaves(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y, z = s.points.T
    grain = waves((x, y, z), s.px_m, 131 + int(look.get("seed", 1)), 0.8, 0.02, 0.95)
    tint = np.full(len(x), float(look.get("tint", 0.5)), dtype=np.float32)
    base = blend(colour(0.20, 0.33, 0.11), colour(0.42, 0.46, 0.17), tint)
    return tinted(base, grain, 0.34)


def wood_edge(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    grain = waves((s.u, s.v), s.px_m, 141 + int(look.get("seed", 1)), 7.0, 0.1, 0.92)
    light = np.clip(0.45 + 0.4 * grain, 0, 1)
    return blend(colour(0.17, 0.25, 0.12), colour(0.42, 0.47, 0.22), light)


def bark(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y, z = s.points.T
    seed = 151 + int(look.get("seed", 1))
    ridges = waves((x, y, z / 5.0), s.px_m, seed, 0.09, 0.002, 0.85)
    blotch = waves((x, y, z / 1.5), s.px_m, seed + 20, 0.5, 0.01, 0.85)
    base = blend(
        np.array(look.get("dark", (0.33, 0.28, 0.22)), dtype=np.float32),
        np.array(look.get("light", (0.55, 0.50, 0.42)), dtype=np.float32),
        np.clip(0.45 + 0.4 * blotch, 0, 1),
    )
    out = tinted(base, ridges, 0.30)
    moss = np.clip(0.9 - z, 0, 1) * np.clip(0.3 + blotch, 0, 1)
    return blend(out, colour(0.33, 0.40, 0.17), (0.7 * moss).astype(np.float32))


def timber(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y, z = s.points.T
    seed = 171 + int(look.get("seed", 1))
    fibre = waves((x, y, z / 14.0), s.px_m, seed, 0.06, 0.001, 0.88)
    stain = waves((x, y, z / 3.0), s.px_m, seed + 20, 0.6, 0.01, 0.85)
    base = blend(
        colour(0.42, 0.33, 0.25), colour(0.58, 0.52, 0.46), np.clip(0.5 + 0.4 * stain, 0, 1)
    )
    out = tinted(base, fibre, 0.24)
    tar = edge(0.35 + 0.05 * stain - s.v, s.px_m)
    out = blend(out, tinted(colour(0.20, 0.16, 0.13), fibre, 0.3), tar)
    for low, high in look.get("bands", ()):
        band = edge(np.minimum(s.v - low, high - s.v), s.px_m)
        out = blend(out, tinted(colour(0.86, 0.84, 0.78), stain, 0.08), band)
    return out


def painted(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    """Painted or bare metal: colour `paint`, streaks, rust, bands (from, to, colour)."""
    x, y, z = s.points.T
    seed = 191 + int(look.get("seed", 1))
    streak = waves((x, y, z / 8.0), s.px_m, seed, 0.15, 0.003, 0.85)
    speck = waves((x, y, z), s.px_m, seed + 20, 0.35, 0.003, 0.92)
    base = np.array(look.get("paint", (0.45, 0.50, 0.48)), dtype=np.float32)
    out = tinted(base, streak, 0.08) * (1.0 + 0.07 * speck[:, None])
    rust = np.clip(speck - float(look.get("sound", 1.1)), 0, 0.8).astype(np.float32)
    out = blend(out, tinted(colour(0.42, 0.24, 0.13), streak, 0.2), rust)
    for low, high, paint in look.get("bands", ()):
        band = edge(np.minimum(s.v - low, high - s.v), s.px_m)
        out = blend(out, tinted(np.array(paint, dtype=np.float32), speck, 0.06), band)
    return out


def plates(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    """Steel sheets of a tank: seams, rivets, rust running down."""
    out = painted(s, look)
    tall, wide = float(look.get("sheet_m", 1.2)), float(look.get("sheet_wide_m", 1.9))
    row = np.floor(s.v / tall)
    fu = (s.u + 0.9 * row) % wide
    fv = s.v - row * tall
    seam = np.maximum(edge(0.012 - np.minimum(fv, tall - fv), s.px_m),
                      edge(0.010 - np.minimum(fu, wide - fu), s.px_m))  # fmt: skip
    run = waves((s.u, s.v / 30.0), s.px_m, 211, 0.25, 0.01, 0.85)
    out = blend(
        out, colour(0.45, 0.27, 0.15), np.clip(run - 0.55, 0, 0.55) * np.clip(1.2 - fv, 0, 1)
    )
    own = mixed(np.floor((s.u + 0.9 * row) / wide).astype(int), row.astype(int), seed=9)
    return blend(out * (0.94 + 0.12 * own[:, None]), colour(0.25, 0.24, 0.23), 0.6 * seam)


def stone(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    x, y, z = s.points.T
    seed = 221 + int(look.get("seed", 1))
    grain = waves((x, y, z), s.px_m, seed, 0.25, 0.001, 0.93)
    lichen = np.clip(waves((x, y, z), s.px_m, seed + 20, 0.12, 0.003, 0.9) - 0.6, 0, 0.8)
    base = np.array(look.get("paint", (0.60, 0.56, 0.49)), dtype=np.float32)
    return blend(tinted(base, grain, 0.14), colour(0.74, 0.71, 0.52), lichen.astype(np.float32))


def planks(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    """Boards upright (or lying with look['lie']) with grain, gaps, nails."""
    a, b = (s.v, s.u) if look.get("lie") else (s.u, s.v)
    wide = float(look.get("board_m", 0.14))
    board = np.floor(a / wide)
    f = a - board * wide
    seed = 241 + int(look.get("seed", 1))
    own = mixed(board.astype(int), seed=seed)
    grain = waves((a + 7 * own, b / 12.0), s.px_m, seed, 0.07, 0.001, 0.9)
    weather = waves((a, b), s.px_m, seed + 20, 1.1, 0.01, 0.85)
    base = np.array(look.get("paint", (0.47, 0.41, 0.34)), dtype=np.float32)
    out = tinted(base, grain, 0.20) * (0.80 + 0.35 * own + 0.10 * weather)[:, None]
    gap = edge(0.006 - np.minimum(f, wide - f), s.px_m) * np.clip(0.03 / s.px_m, 0.2, 1)
    nail = edge(0.008 - np.hypot(f - wide / 2, (b + 0.5) % 0.9 - 0.45), s.px_m)
    return blend(
        blend(out, colour(0.12, 0.10, 0.09), gap.astype(np.float32)), colour(0.2, 0.17, 0.16), nail
    )


def poster(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    """A board of notices: sheets of paper with headings, lines of print, pictures."""
    seed = int(look.get("seed", 1))
    grain = waves((s.u, s.v), s.px_m, 261 + seed, 0.2, 0.002, 0.9)
    out = tinted(colour(0.33, 0.26, 0.19), grain, 0.2)
    for layer, size in enumerate((0.44, 0.27)):
        place_u, place_v = s.u / size + 0.37 * layer, s.v / size / 1.35 + 0.2 * layer
        i, j = np.floor(place_u).astype(int), np.floor(place_v).astype(int)
        own = [mixed(i, j, seed=seed + 10 * layer + k) for k in range(6)]
        u = (place_u - i - 0.5 + 0.16 * (own[4] - 0.5)) * size
        v = (place_v - j - 0.5 + 0.16 * (own[5] - 0.5)) * size * 1.35
        half, tall = size * (0.32 + 0.1 * own[1]), size * (0.42 + 0.14 * own[2])
        warm = colour(0.90, 0.86, 0.74)
        paper = blend(warm, colour(0.70, 0.80, 0.84), (own[0] > 0.6) * 0.8)
        paper = blend(paper, colour(0.88, 0.72, 0.40), (own[0] < 0.2) * 0.7)
        line = np.floor(v / 0.017).astype(int)
        end = half * (0.2 + 1.5 * mixed(i, line, seed=seed + layer)) - half
        part = mixed(np.floor(u / 0.011).astype(int), line, seed=seed + 3)
        printed = (np.abs(v / 0.017 - line - 0.5) < 0.3) & (u < end) & (part > 0.25)
        show = np.clip(0.009 / s.px_m, 0.15, 0.75).astype(np.float32)
        sheet = blend(paper, paper * 0.3, printed * (np.abs(u) < 0.85 * half) * show)
        ink = blend(colour(0.42, 0.15, 0.13), colour(0.13, 0.22, 0.36), own[3] > 0.5)
        sheet = blend(
            sheet,
            ink,
            edge(np.minimum(v - 0.55 * tall, 0.8 * tall - v), s.px_m) * (np.abs(u) < 0.7 * half),
        )
        scene = waves((s.u, s.v), s.px_m, 271 + seed, 0.11, 0.004, 0.7)
        picture = blend(
            colour(0.30, 0.38, 0.22), colour(0.72, 0.74, 0.70), np.clip(0.5 + 0.6 * scene, 0, 1)
        )
        framed = (own[3] * own[0] > 0.2) * edge(
            np.minimum(0.8 * half - np.abs(u), 0.45 * tall - np.abs(v)), s.px_m
        )
        sheet = blend(sheet, picture, framed)
        there = edge(np.minimum(half - np.abs(u), tall - np.abs(v)), s.px_m) * (
            own[1] + own[2] > 0.55
        )
        out = blend(out, tinted(sheet, grain, 0.07), there)
    return out.astype(np.float32)


def striped(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    """An awning's cloth."""
    seed = int(look.get("seed", 1))
    wide = float(look.get("stripe_m", 0.22))
    fold = waves((s.u, s.v), s.px_m, 281 + seed, 0.6, 0.01, 0.85)
    place = s.u / wide
    odd = edge((np.abs(place % 2.0 - 1.0) - 0.5) * wide, s.px_m)
    paint = np.array(look.get("paint", (0.62, 0.22, 0.18)), dtype=np.float32)
    return tinted(blend(colour(0.90, 0.87, 0.78), paint, odd), fold, 0.09)


Material = Callable[[Spot, Mapping[str, Any]], np.ndarray]

MATERIALS: dict[str, Material] = {
    "grass": grass, "paving": paving, "cobbles": cobbles, "gravel": gravel, "ground": ground,
    "water": water, "leaves": leaves, "wood_edge": wood_edge, "bark": bark, "timber": timber,
    "painted": painted, "plates": plates, "stone": stone, "planks": planks, "poster": poster,
    "striped": striped,
}  # fmt: skip
