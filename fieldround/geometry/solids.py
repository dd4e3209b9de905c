"""Where the edges of a cylinder, a cone, a ball and a section lie as a station sees them.

In: stations, axes, radii (metres). Out: points in space (n, 3) to be projected into a photo.
"""

from __future__ import annotations

import numpy as np

from fieldround.geometry.rotations import square_basis


def limb_points(
    station: np.ndarray,
    point: np.ndarray,
    axis: np.ndarray,
    radius: float,
    taper: float,
    heights: np.ndarray,
    side: float,
) -> np.ndarray:
    """Points of a limb of a cone at given heights along its axis.

    station : (3,); point : (3,) on the axis at height 0; axis : (3,) unit
    radius  : metres at height 0; taper : change of the radius per metre
    heights : (n,); side : +1 or -1
    returns : (n, 3), NaN where the station sees no limb (inside the cone)
    """
    centres = point + heights[:, None] * axis
    radii = radius + taper * heights
    away = station - centres
    along = away @ axis
    across = away - along[:, None] * axis
    distance = np.linalg.norm(across, axis=1)
    u = across / distance[:, None]
    v = side * np.cross(axis, u)
    # The surface normal leans by the taper: n . (station - contact) = 0 with n = (cos, sin, -t).
    cosine = (radii + taper * along) / distance
    with np.errstate(invalid="ignore"):
        sine = np.sqrt(1.0 - cosine**2)
    return centres + radii[:, None] * (cosine[:, None] * u + sine[:, None] * v)


def outline_rays(station: np.ndarray, centre: np.ndarray, radius: float, count: int) -> np.ndarray:
    """Unit rays along the outline of a ball, (count, 3), once around and closed."""
    away = centre - station
    distance = float(np.linalg.norm(away))
    direction = away / distance
    sine = radius / distance
    turn = np.linspace(0.0, 2.0 * np.pi, count)
    across = square_basis(direction) @ np.stack([np.cos(turn), np.sin(turn)])
    return np.sqrt(max(0.0, 1.0 - sine**2)) * direction + sine * across.T


def near_half_section(
    station: np.ndarray, centre: np.ndarray, axis: np.ndarray, radius: float, count: int
) -> np.ndarray:
    """Points of the half of a section circle that faces the station, (count, 3)."""
    away = station - centre
    across = away - (away @ axis) * axis
    u = across / np.linalg.norm(across)
    v = np.cross(axis, u)
    turn = np.linspace(-0.5 * np.pi, 0.5 * np.pi, count)
    return centre + radius * (np.cos(turn)[:, None] * u + np.sin(turn)[:, None] * v)


def ellipse_perimeter(semi_major: np.ndarray, semi_minor: np.ndarray) -> np.ndarray:
    """Girth of an ellipse, metres; good to a part in 10,000 even for a flat one.

    source : S. Ramanujan, "Modular equations and approximations to pi" (1914), second formula
    """
    a, b = np.asarray(semi_major, dtype=float), np.asarray(semi_minor, dtype=float)
    h = ((a - b) / (a + b)) ** 2
    return np.pi * (a + b) * (1.0 + 3.0 * h / (10.0 + np.sqrt(4.0 - 3.0 * h)))
