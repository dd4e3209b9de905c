"""What a made-up place consists of: solids, panels, sun, and the stations that look at it.

In: nothing. Out: frozen dataclasses in a local east-north-up frame (metres, the ground at z = 0)
and functions that put boxes, houses and trees together from them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from types import MappingProxyType
from typing import Any

import numpy as np

from fieldround.geometry.rotations import square_basis

_PLAIN: Mapping[str, Any] = MappingProxyType({})


@dataclass(frozen=True)
class Cone:
    """A round bar: cylinder or truncated cone from `base` along the unit `axis`.

    radius_m at the base changes by taper_m_per_m (of the RADIUS) a metre along the axis.
    """

    base: tuple[float, float, float]
    axis: tuple[float, float, float]
    radius_m: float
    length_m: float
    material: str
    taper_m_per_m: float = 0.0
    look: Mapping[str, Any] = field(default_factory=lambda: _PLAIN)
    object: str = ""


@dataclass(frozen=True)
class Ball:
    """A ball; `leaves` > 0 makes it a clump of leaves with gaps that share of it wide."""

    centre: tuple[float, float, float]
    radius_m: float
    material: str
    leaves: float = 0.0
    look: Mapping[str, Any] = field(default_factory=lambda: _PLAIN)
    object: str = ""


@dataclass(frozen=True)
class Panel:
    """A flat piece: origin + u * across + v * up, 0 <= u <= width_m, 0 <= v <= height_m.

    shape : 'whole', 'gable' (a triangle) or 'wood' (its top edge is ragged, as a row of trees)
    """

    origin: tuple[float, float, float]
    across: tuple[float, float, float]
    up: tuple[float, float, float]
    width_m: float
    height_m: float
    material: str
    shape: str = "whole"
    look: Mapping[str, Any] = field(default_factory=lambda: _PLAIN)
    object: str = ""

    @cached_property
    def frame(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Unit vectors across, up and out."""
        across, up = np.array(self.across), np.array(self.up)
        return across, up, np.cross(across, up)


Piece = Cone | Ball | Panel


def corners(piece: Piece) -> np.ndarray:
    """Points whose hull holds the piece, (n, 3)."""
    if isinstance(piece, Ball):
        signs = np.array(np.meshgrid([-1, 1], [-1, 1], [-1, 1])).reshape(3, -1).T
        return np.array(piece.centre) + piece.radius_m * signs
    if isinstance(piece, Panel):
        a, b = np.array(piece.across) * piece.width_m, np.array(piece.up) * piece.height_m
        return np.array(piece.origin) + np.array([0 * a, a, a + b, b])
    turn = np.linspace(0.0, 2.0 * np.pi, 12, endpoint=False)
    ring = (square_basis(np.array(piece.axis)) @ np.stack([np.cos(turn), np.sin(turn)])).T
    ends = []
    for along in (0.0, piece.length_m):
        radius = 1.04 * (piece.radius_m + piece.taper_m_per_m * along)
        ends.append(np.array(piece.base) + along * np.array(piece.axis) + radius * ring)
    return np.concatenate(ends)


@dataclass(frozen=True)
class Scene:
    """A place: its pieces, where the sun stands (degrees) and its grain's number."""

    pieces: tuple[Piece, ...]
    sun_azimuth_deg: float = 215.0
    sun_height_deg: float = 55.0
    seed: int = 1

    @cached_property
    def bounds(self) -> tuple[np.ndarray, np.ndarray]:
        """Centres (n, 3) and radii (n,) of balls around the pieces."""
        spots = [corners(piece) for piece in self.pieces]
        centres = np.array([0.5 * (s.min(axis=0) + s.max(axis=0)) for s in spots])
        gaps = zip(spots, centres, strict=True)
        return centres, np.array([np.linalg.norm(s - c, axis=1).max() for s, c in gaps])

    @property
    def sun(self) -> np.ndarray:
        """Unit vector towards the sun, (3,)."""
        return direction(self.sun_azimuth_deg, self.sun_height_deg)


@dataclass(frozen=True)
class Lens:
    """The true camera: size of its landscape picture, (9,) card values, blur and noise."""

    name: str
    size_px: tuple[int, int]
    values: tuple[float, float, float, float, float, float, float, float, float]
    blur_px: float = 0.6
    noise: float = 1.2


@dataclass(frozen=True)
class View:
    """One photo: where the camera stands, what it aims at, how it is held.

    roll_deg is small; `portrait` turns the camera by a quarter (EXIF orientation 6).
    """

    photo: str
    lens: Lens
    station: tuple[float, float, float]
    aim: tuple[float, float, float]
    roll_deg: float = 0.0
    portrait: bool = False
    seed: int = 1

    @property
    def turn_deg(self) -> int:
        """Clockwise turn that makes the stored picture upright."""
        return 90 if self.portrait else 0

    @property
    def upright_px(self) -> tuple[int, int]:
        """Width and height of the picture as a person sees it."""
        width, height = self.lens.size_px
        return (height, width) if self.portrait else (width, height)

    @property
    def rotation(self) -> np.ndarray:
        """(3, 3) from east-north-up into the camera of the STORED picture (right, down, ahead)."""
        ahead = np.subtract(self.aim, self.station)
        ahead = ahead / np.linalg.norm(ahead)
        right = np.cross(ahead, (0.0, 0.0, 1.0))
        right /= np.linalg.norm(right)
        down = np.cross(ahead, right)
        c, s = np.cos(np.radians(self.roll_deg)), np.sin(np.radians(self.roll_deg))
        right, down = c * right + s * down, c * down - s * right
        if self.portrait:
            right, down = down, -right
        return np.stack([right, down, ahead])

    @property
    def heading_deg(self) -> float:
        """Azimuth of the optical axis, clockwise from true north."""
        ahead = np.subtract(self.aim, self.station)
        return float(np.degrees(np.arctan2(ahead[0], ahead[1])) % 360.0)


def direction(azimuth_deg: float, height_deg: float) -> np.ndarray:
    """Unit vector of an azimuth (from north, clockwise) and a height above the horizon."""
    a, h = np.radians(azimuth_deg), np.radians(height_deg)
    return np.array([np.sin(a) * np.cos(h), np.cos(a) * np.cos(h), np.sin(h)])


def leaning_axis(lean_deg: float, to_deg: float) -> tuple[float, float, float]:
    """Axis that leans from the vertical towards an azimuth."""
    x, y, z = direction(to_deg, 90.0 - lean_deg)
    return (float(x), float(y), float(z))


def box(
    corner: tuple[float, float, float],
    size: tuple[float, float, float],
    material: str,
    turn_deg: float = 0.0,
    top: str | None = None,
    look: Mapping[str, Any] = _PLAIN,
) -> list[Panel]:
    """Four sides and a top; `corner` is the low south-west one before the turn about it."""
    c, s = np.cos(np.radians(turn_deg)), np.sin(np.radians(turn_deg))
    east, north, up = np.array([c, s, 0.0]), np.array([-s, c, 0.0]), np.array([0.0, 0.0, 1.0])
    at, (dx, dy, dz) = np.array(corner), size

    def piece(
        origin: np.ndarray, a: np.ndarray, b: np.ndarray, w: float, h: float, m: str
    ) -> Panel:
        return Panel(_t(origin), _t(a), _t(b), w, h, m, look=look)

    return [
        piece(at, east, up, dx, dz, material),
        piece(at + dx * east, north, up, dy, dz, material),
        piece(at + dx * east + dy * north, -east, up, dx, dz, material),
        piece(at + dy * north, -north, up, dy, dz, material),
        piece(at + dz * up, east, north, dx, dy, top or material),
    ]


def house(
    corner: tuple[float, float],
    size: tuple[float, float],
    eaves_m: float,
    ridge_m: float,
    wall: str,
    roof: str,
    turn_deg: float = 0.0,
    look: Mapping[str, Any] = _PLAIN,
    chimney: bool = True,
) -> list[Panel]:
    """A house with its ridge along its first side; walls, gables, roof with eaves, chimney."""
    c, s = np.cos(np.radians(turn_deg)), np.sin(np.radians(turn_deg))
    east, north, up = np.array([c, s, 0.0]), np.array([-s, c, 0.0]), np.array([0.0, 0.0, 1.0])
    at, (dx, dy) = np.array([*corner, 0.0]), size
    rise = ridge_m - eaves_m
    found: list[Panel] = []
    sides = [
        (at, east, dx), (at + dx * east, north, dy),
        (at + dx * east + dy * north, -east, dx), (at + dy * north, -north, dy),
    ]  # fmt: skip
    for number, (origin, along, width) in enumerate(sides):
        facing = {**look, "seed": look.get("seed", 1) * 7 + number, "end": number % 2}
        found.append(Panel(_t(origin), _t(along), _t(up), width, eaves_m, wall, look=facing))
        if number % 2:
            found.append(
                Panel(_t(origin + eaves_m * up), _t(along), _t(up), width, rise, wall, "gable",
                      {**facing, "blank": True})
            )  # fmt: skip
    out = 0.35
    slope = np.hypot(dy / 2, rise)
    climb = rise / (dy / 2)
    for side in (1.0, -1.0):
        low = at + (dy / 2 - side * (dy / 2 + out)) * north + (eaves_m - out * climb + 0.06) * up
        inward = (side * north * dy / 2 + rise * up) / slope
        length = slope * (1 + out / (dy / 2))
        found.append(
            Panel(_t(low - out * east), _t(east), _t(inward), dx + 2 * out, length, roof, look=look)
        )
    if chimney:
        spot = at + 0.75 * dx * east + (dy / 2 - 0.35) * north + (ridge_m - 0.5) * up
        found += box(_t(spot), (0.9, 0.7, 1.5), "brick", turn_deg, look={**look, "blank": True})
    return found


def crown(
    centre: tuple[float, float, float], size_m: float, count: int, seed: int, gaps: float = 0.5
) -> list[Ball]:
    """Clumps of leaves about a centre."""
    rng = np.random.default_rng(seed)
    found = []
    for number in range(count):
        away = rng.normal(size=3)
        away *= size_m * rng.uniform(0.42, 0.82) * np.array([1.0, 1.0, 0.72]) / np.linalg.norm(away)
        radius = size_m * rng.uniform(0.20, 0.42)
        if number < 2:
            away, radius = 0.25 * away, size_m * 0.55
        place = np.add(centre, away)
        look = {"seed": seed + number, "tint": float(rng.uniform(0.1, 0.9))}
        found.append(Ball(_t(place), float(radius), "leaves", gaps, look))
    return found


def _t(vector: Any) -> tuple[float, float, float]:
    return (float(vector[0]), float(vector[1]), float(vector[2]))
