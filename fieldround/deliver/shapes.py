"""Circles, ellipses and lines of the layers, true to scale in whatever CRS the round has.

In: positions and sizes as arrays. Out: shapely geometries in the round's CRS.
"""

from __future__ import annotations

import numpy as np
import shapely
from pyproj import CRS, Transformer

# Corners of a drawn circle: the chord stays within 0.1 % of the radius of the true circle.
CORNERS = 72
# WGS 84 (NIMA TR8350.2, 3rd edition, table 3.1).
_SEMI_MAJOR_M = 6378137.0
_ECCENTRICITY2 = 0.0066943799901413165
_STEP_M = 10.0
_PART = 5000


def degrees_per_metre(latitude_deg: np.ndarray) -> np.ndarray:
    """How many degrees of longitude and latitude one metre east and north is.

    latitude_deg : (n,); returns (n, 2), from the ellipsoid's two radii of curvature
    """
    latitude = np.radians(np.asarray(latitude_deg, float))
    w2 = 1.0 - _ECCENTRICITY2 * np.sin(latitude) ** 2
    prime = _SEMI_MAJOR_M / np.sqrt(w2)
    meridian = _SEMI_MAJOR_M * (1.0 - _ECCENTRICITY2) / w2**1.5
    # At a pole a metre east is no angle at all; a metre off the pole is still a fair drawing.
    east = np.maximum(prime * np.cos(latitude), 1.0)
    return np.degrees(np.stack([1.0 / east, 1.0 / meridian], axis=-1))


def grid_axes(crs_wkt: str, longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> np.ndarray:
    """What one metre east and one metre north on the ground are in the CRS.

    longitude_deg, latitude_deg : (n,) WGS 84
    returns : (n, 2, 2), column 0 the step east, column 1 the step north, in units of the CRS;
              so scale, grid convergence and units other than metres are all in it
    """
    to_grid = Transformer.from_crs("EPSG:4326", CRS.from_wkt(crs_wkt), always_xy=True)
    lon, lat = np.asarray(longitude_deg, float), np.asarray(latitude_deg, float)
    step = degrees_per_metre(lat) * _STEP_M
    lons = np.stack([lon + step[:, 0], lon - step[:, 0], lon, lon])
    lats = np.stack([lat, lat, lat + step[:, 1], lat - step[:, 1]])
    east, north = to_grid.transform(lons, np.clip(lats, -90.0, 90.0))
    at = np.stack([east, north], axis=-1)
    return np.stack([at[0] - at[1], at[2] - at[3]], axis=-1) / (2.0 * _STEP_M)


def rings(
    centre: np.ndarray,
    axes: np.ndarray,
    semi_major_m: np.ndarray,
    semi_minor_m: np.ndarray,
    azimuth_deg: np.ndarray,
) -> np.ndarray:
    """Polygons of ellipses, counter-clockwise, closed.

    centre : (n, 2) in the CRS; axes : (n, 2, 2) from `grid_axes`; semi-axes (n,) metres;
    azimuth_deg : (n,) of the longer axis, clockwise from true north
    returns : (n, CORNERS + 1, 2)
    """
    turn = np.linspace(0.0, 2.0 * np.pi, CORNERS, endpoint=False)
    along = np.asarray(semi_major_m)[:, None] * np.cos(turn)
    across = np.asarray(semi_minor_m)[:, None] * np.sin(turn)
    azimuth = np.radians(np.asarray(azimuth_deg, float))[:, None]
    east = along * np.sin(azimuth) - across * np.cos(azimuth)
    north = along * np.cos(azimuth) + across * np.sin(azimuth)
    local = np.stack([east, north], axis=-1)
    ring = centre[:, None, :] + np.einsum("nij,nkj->nki", axes, local)
    return np.concatenate([ring, ring[:, :1]], axis=1)


def ellipses(centre: np.ndarray, axes: np.ndarray, sizes: np.ndarray) -> np.ndarray:
    """n shapely polygons; sizes is (n, 3): semi-major m, semi-minor m, azimuth degrees.

    centre and axes are as in `rings`; worked off in parts, as their corners need much room
    """
    parts = [
        shapely.polygons(rings(centre[k], axes[k], *sizes[k].T))
        for start in range(0, len(centre), _PART)
        for k in [slice(start, start + _PART)]
    ]
    return np.concatenate(parts) if parts else np.empty(0, object)


def points(xy: np.ndarray) -> np.ndarray:
    """(n, 2) as n shapely points, None where a coordinate is not finite."""
    found = np.full(len(xy), None, object)
    good = np.isfinite(xy).all(axis=1) if len(xy) else np.zeros(0, bool)
    found[good] = shapely.points(xy[good])
    return found


def lines(start: np.ndarray, end: np.ndarray) -> np.ndarray:
    """(n, 2) starts and ends as n shapely lines, None where a coordinate is not finite."""
    found = np.full(len(start), None, object)
    if len(start):
        ends = np.stack([start, end], axis=1)
        good = np.isfinite(ends).all(axis=(1, 2))
        found[good] = shapely.linestrings(ends[good])
    return found
