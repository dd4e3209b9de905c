"""The colours of buildings: brick, plaster, roof tiles, with their windows and doors.

In: a `Spot` on a wall or roof and its `look` (paint, window grid). Out: (n, 3) float32 colours.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from demo_site.noise import edge, mixed, waves
from demo_site.textures import MATERIALS, Spot, blend, colour, tinted


def brick(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    seed = int(look.get("seed", 1))
    course, length = 0.075, 0.225
    row = np.floor(s.v / course)
    u = s.u + 0.5 * length * (row % 2)
    column = np.floor(u / length)
    fu, fv = u - column * length, s.v - row * course
    own = mixed(column.astype(int), row.astype(int), seed=seed)
    other = mixed(column.astype(int), row.astype(int), seed=seed + 1)
    fade = np.clip(0.06 / s.px_m, 0.0, 1.0).astype(np.float32)
    own = own * fade + 0.5 * (1 - fade)
    paint = np.array(look.get("brick", (0.55, 0.30, 0.22)), dtype=np.float32)
    base = tinted(paint, own - 0.5, 0.75)
    base = blend(base, paint * colour(0.62, 0.72, 0.85), (other > 0.86) * fade)
    grain = waves((s.u, s.v), s.px_m, 301 + seed, 0.9, 0.003, 0.9)
    out = tinted(base, grain, 0.14)
    joint = np.maximum(edge(0.011 - np.minimum(fv, course - fv) * 2, s.px_m),
                       edge(0.011 - np.minimum(fu, length - fu) * 2, s.px_m))  # fmt: skip
    out = blend(out, tinted(colour(0.66, 0.62, 0.55), grain, 0.08), joint * fade * 0.9)
    return openings(damp(out, s), s, look)


def plaster(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    seed = int(look.get("seed", 1))
    grain = waves((s.u, s.v), s.px_m, 321 + seed, 1.6, 0.002, 0.9)
    paint = np.array(look.get("paint", (0.80, 0.76, 0.66)), dtype=np.float32)
    out = tinted(paint, grain, 0.075)
    stain = np.clip(waves((s.u, s.v / 4.0), s.px_m, 341 + seed, 1.1, 0.01, 0.85) - 0.5, 0, 1)
    out = blend(out, paint * colour(0.68, 0.66, 0.60), np.clip(stain, 0, 0.8))
    fallen = np.clip((waves((s.u, s.v), s.px_m, 361 + seed, 0.9, 0.01, 0.75) - 1.35) * 6, 0, 1)
    if fallen.any():
        bare = brick(s, {**look, "blank": True})
        out = blend(out, bare, fallen.astype(np.float32))
    return openings(damp(out, s), s, look)


def damp(out: np.ndarray, s: Spot) -> np.ndarray:
    """Darker and greener at the foot."""
    z = s.points[:, 2]
    grain = waves((s.u, s.v), s.px_m, 371, 0.5, 0.01, 0.85)
    wet = np.clip(0.55 - z + 0.25 * grain, 0, 0.6).astype(np.float32)
    return blend(out, out * colour(0.55, 0.60, 0.48), wet)


def openings(out: np.ndarray, s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    """Windows in rows (look['rows']: sill heights) every look['bay_m'], doors at the ground."""
    if look.get("blank"):
        return out
    seed = int(look.get("seed", 1))
    bay = float(look.get("bay_m", 2.3))
    number = np.floor(s.u / bay).astype(int)
    f = s.u - number * bay - bay / 2
    grain = waves((s.u, s.v), s.px_m, 381 + seed, 0.4, 0.003, 0.88)
    frame = np.array(look.get("frame", (0.88, 0.87, 0.82)), dtype=np.float32)
    for storey, sill in enumerate(look.get("rows", (1.0, 3.6))):
        own = mixed(number, storey, seed=seed + 5)
        is_door = (storey == 0) & (own > 0.68)
        is_there = own > (0.30 if look.get("end") else 0.12)
        low = np.where(is_door, 0.0, sill)
        tall = np.where(is_door, 2.1, 1.25)
        half = np.where(is_door, 0.48, 0.5)
        g = s.v - low
        rim = np.minimum(np.minimum(half - f, half + f), np.minimum(g, tall - g))
        inside = edge(rim, s.px_m) * is_there
        if not inside.any():
            continue
        lintel = edge(
            np.minimum(half + 0.18 - np.abs(f), np.minimum(g - tall, tall + 0.2 - g)), s.px_m
        )
        ledge = edge(np.minimum(half + 0.1 - np.abs(f), np.minimum(g + 0.09, -g)), s.px_m)
        out = blend(
            out,
            tinted(colour(0.72, 0.69, 0.62), grain, 0.14),
            (np.maximum(lintel, ledge) * is_there).astype(np.float32),
        )
        glass = tinted(colour(0.17, 0.20, 0.24), grain, 0.35)
        shine = np.clip((g / tall + f * 0.4 + own - 0.9) * 3, 0, 0.45)
        glass = blend(glass, colour(0.55, 0.62, 0.70), shine.astype(np.float32))
        drawn = edge(np.abs(f) - 0.2 - 0.22 * own, s.px_m) * (own < 0.55)
        glass = blend(glass, tinted(colour(0.62, 0.55, 0.48), grain, 0.2), 0.8 * drawn)
        bars = np.maximum(edge(0.018 - np.abs(f), s.px_m),
                          edge(0.018 - np.abs((g % 0.42) - 0.21), s.px_m))  # fmt: skip
        bars = np.maximum(bars, edge(0.06 - rim, s.px_m))
        pane = blend(glass, tinted(frame, grain, 0.06), bars)
        paint = blend(
            colour(0.20, 0.33, 0.30), colour(0.45, 0.16, 0.14), mixed(number, seed=seed + 8)
        )
        leaf = MATERIALS["planks"](s, {"seed": seed, "board_m": 0.12}) * (0.4 + 1.6 * paint)
        leaf = blend(
            leaf, colour(0.82, 0.72, 0.36), edge(0.03 - np.hypot(f - 0.36, g - 1.0), s.px_m)
        )
        leaf = blend(leaf, tinted(frame, grain, 0.06), edge(0.05 - rim, s.px_m))
        out = blend(out, np.where(is_door[:, None], leaf, pane), inside.astype(np.float32))
    return out


def tiles(s: Spot, look: Mapping[str, Any]) -> np.ndarray:
    seed = int(look.get("seed", 1))
    row = np.floor(s.v / 0.26)
    u = s.u + 0.11 * (row % 2)
    column = np.floor(u / 0.22)
    fu, fv = (u - column * 0.22) / 0.22, (s.v - row * 0.26) / 0.26
    own = mixed(column.astype(int), row.astype(int), seed=401 + seed)
    fade = np.clip(0.12 / s.px_m, 0, 1).astype(np.float32)
    own = own * fade + 0.5 * (1 - fade)
    paint = np.array(look.get("tile", (0.52, 0.30, 0.22)), dtype=np.float32)
    grain = waves((s.u, s.v), s.px_m, 411 + seed, 2.2, 0.004, 0.9)
    out = tinted(tinted(paint, own - 0.5, 0.5), grain, 0.15)
    dark = np.maximum(np.clip(1 - fv * 5, 0, 1), np.clip(1 - np.minimum(fu, 1 - fu) * 14, 0, 1))
    return out * (1 - 0.5 * fade * dark)[:, None]


MATERIALS.update({"brick": brick, "plaster": plaster, "tiles": tiles})
