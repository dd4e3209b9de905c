"""Where an outing's objects truly lie in its photos, and where they stand on the Earth.

In: an `Outing`. Out: exact limb, outline, base and top points in upright pixels, what hides them,
and WGS 84 positions of local points.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from demo_site.camera import seen_at
from demo_site.inventory import Thing
from demo_site.scene import Ball, Cone, Scene, View
from demo_site.tracing import distance_to
from fieldround.geometry.solids import limb_points, outline_rays

# WGS 84, NIMA TR8350.2.
EQUATOR_M, FLATTENING = 6_378_137.0, 1.0 / 298.257223563
RIM_PX = 6.0


def limb_pixels(view: View, thing: Thing, heights: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Points of the left and the right limb at heights along the axis, two (n, 2) of pixels.

    Left and right as seen along the axis from low to high (for a pipe: along its run).
    """
    solid = thing.solid
    assert isinstance(solid, Cone)
    sides = [limb_space(view, solid, heights, side) for side in (1.0, -1.0)]
    pixels = [seen_at(view, points) for points in sides]
    run = seen_at(view, np.array(solid.base) + np.outer(heights[[0, -1]], solid.axis))
    run = run[1] - run[0]
    gap = pixels[1] - pixels[0]
    turned = run[0] * gap[:, 1] - run[1] * gap[:, 0]
    return (pixels[0], pixels[1]) if np.nanmean(turned) > 0 else (pixels[1], pixels[0])


def limb_space(view: View, solid: Cone, heights: np.ndarray, side: float) -> np.ndarray:
    """Points in space where sight lines touch a bar, (n, 3)."""
    return limb_points(
        np.array(view.station), np.array(solid.base), np.array(solid.axis), solid.radius_m,
        solid.taper_m_per_m, heights, side,
    )  # fmt: skip


def outline_pixels(view: View, ball: Ball, count: int) -> np.ndarray:
    """Points around a ball's outline, (count, 2) upright pixels, not closed."""
    rays = outline_rays(np.array(view.station), np.array(ball.centre), ball.radius_m, count + 1)
    return seen_at(view, np.array(view.station) + rays[:-1])


def inside(view: View, pixels: np.ndarray, rim_px: float = RIM_PX) -> np.ndarray:
    """Which pixels lie in the picture, a little off its rim."""
    size = np.array(view.upright_px)
    with np.errstate(invalid="ignore"):
        return np.all((pixels > rim_px) & (pixels < size - 1 - rim_px), axis=1)


def unhidden(scene: Scene, view: View, thing: Thing, points: np.ndarray) -> np.ndarray:
    """Which points just at a thing's surface nothing else hides from the station, (n,) bool."""
    station = np.array(view.station)
    away = points - station
    far = np.linalg.norm(away, axis=1)
    towards = away / far[:, None]
    seen = np.ones(len(points), dtype=bool)
    # Only pieces whose ball the bundle of sight lines may meet.
    middle = towards.mean(axis=0)
    middle /= np.linalg.norm(middle)
    half = np.arccos(np.clip((towards @ middle).min(), -1.0, 1.0))
    centres, reach = scene.bounds
    gap = centres - station
    distance = np.linalg.norm(gap, axis=1)
    turn = np.arccos(np.clip(gap @ middle / distance, -1.0, 1.0))
    wide = np.where(distance > reach, np.arcsin(np.minimum(reach / distance, 1.0)), np.pi)
    for number in np.flatnonzero(turn < half + wide + 1e-6):
        piece = scene.pieces[number]
        if piece != thing.solid:
            seen &= distance_to(piece, station, towards) > far - 0.02
    return seen


def visible_heights(scene: Scene, view: View, thing: Thing) -> dict[str, np.ndarray]:
    """Heights (n,) between the thing's marked ones at which each limb is seen."""
    solid = thing.solid
    assert isinstance(solid, Cone)
    heights = np.linspace(*thing.marked_m, 49)
    left = limb_pixels(view, thing, heights)[0]
    found = {}
    for side in (1.0, -1.0):
        points = limb_space(view, solid, heights, side)
        pixels = seen_at(view, points)
        good = inside(view, pixels) & unhidden(scene, view, thing, points)
        found["left" if np.allclose(pixels, left) else "right"] = heights[good]
    return found


def chosen(heights: np.ndarray, count: int) -> np.ndarray:
    """`count` of the given heights, spread over their whole extent."""
    if len(heights) <= count:
        return heights
    return heights[np.round(np.linspace(0, len(heights) - 1, count)).astype(int)]


def geodetic(site: tuple[float, float, float], points: np.ndarray) -> np.ndarray:
    """Longitude, latitude (degrees), ellipsoid height (m) of local points, (n, 3).

    source : J. Zhu, "Conversion of Earth-centered Earth-fixed coordinates" (IEEE AES, 1994) for
    the sums; iterated here on latitude until it stands still
    """
    lon, lat = np.radians(site[0]), np.radians(site[1])
    e2 = FLATTENING * (2.0 - FLATTENING)
    n = EQUATOR_M / np.sqrt(1.0 - e2 * np.sin(lat) ** 2)
    up = np.array([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)])
    east = np.array([-np.sin(lon), np.cos(lon), 0.0])
    origin = np.array([(n + site[2]) * up[0], (n + site[2]) * up[1],
                       (n * (1.0 - e2) + site[2]) * up[2]])  # fmt: skip
    xyz = origin + np.atleast_2d(points) @ np.stack([east, np.cross(up, east), up])
    x, y, z = xyz.T
    p = np.hypot(x, y)
    phi = np.arctan2(z, p * (1.0 - e2))
    for _ in range(8):
        n = EQUATOR_M / np.sqrt(1.0 - e2 * np.sin(phi) ** 2)
        phi = np.arctan2(z + e2 * n * np.sin(phi), p)
    height = p / np.cos(phi) - EQUATOR_M / np.sqrt(1.0 - e2 * np.sin(phi) ** 2)
    return np.stack([np.degrees(np.arctan2(y, x)), np.degrees(phi), height], axis=1)


def range_m(view: View, things: Iterable[Thing]) -> list[float]:
    """Distance from a station to each thing's place."""
    return [float(np.linalg.norm(thing.place - view.station)) for thing in things]
