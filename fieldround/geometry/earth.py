"""The earth's ellipsoid and the level plane at a point of it.

In: WGS 84 longitudes, latitudes (degrees) and ellipsoidal heights (metres), or earth-centred
vectors. Out: the same points in the other frame; directions of east, north and up.
"""

from __future__ import annotations

import numpy as np

# WGS 84 (NIMA TR8350.2, 3rd edition, table 3.1): semi-major axis and flattening.
SEMI_MAJOR_M = 6378137.0
FLATTENING = 1.0 / 298.257223563
ECCENTRICITY2 = FLATTENING * (2.0 - FLATTENING)
_SEMI_MINOR_M = SEMI_MAJOR_M * (1.0 - FLATTENING)
# Bowring's step multiplies the error by less than 0.002 a pass for points within 10,000 km of
# the surface, so that eight passes reach the last digit from any start.
_PASSES = 8


def ecef_from_geodetic(geodetic: np.ndarray) -> np.ndarray:
    """Earth-centred, earth-fixed coordinates of geodetic points.

    geodetic : (n, 3) longitude deg, latitude deg, ellipsoidal height m
    returns  : (n, 3) metres
    source   : EPSG Guidance Note 7-2, section 4.1.1 (method 9602)
    """
    geodetic = np.asarray(geodetic, dtype=float)
    lon, lat = np.radians(geodetic[:, 0]), np.radians(geodetic[:, 1])
    height = geodetic[:, 2]
    prime = SEMI_MAJOR_M / np.sqrt(1.0 - ECCENTRICITY2 * np.sin(lat) ** 2)
    level = (prime + height) * np.cos(lat)
    z = (prime * (1.0 - ECCENTRICITY2) + height) * np.sin(lat)
    return np.stack([level * np.cos(lon), level * np.sin(lon), z], axis=-1)


def geodetic_from_ecef(ecef: np.ndarray) -> np.ndarray:
    """Geodetic points of earth-centred, earth-fixed coordinates.

    ecef    : (n, 3) metres, not within 50 km of the earth's centre
    returns : (n, 3) longitude deg in -180 .. 180, latitude deg, ellipsoidal height m
    source  : B. R. Bowring, Transformation from spatial to geographical coordinates,
              Survey Review 23 (1976), the step repeated; height as in Bowring (1985)
    """
    ecef = np.asarray(ecef, dtype=float)
    x, y, z = ecef[:, 0], ecef[:, 1], ecef[:, 2]
    level = np.hypot(x, y)
    second2 = ECCENTRICITY2 / (1.0 - ECCENTRICITY2)
    reduced = np.arctan2(z, level * (1.0 - FLATTENING))
    lat = reduced
    for _ in range(_PASSES):
        lat = np.arctan2(
            z + second2 * _SEMI_MINOR_M * np.sin(reduced) ** 3,
            level - ECCENTRICITY2 * SEMI_MAJOR_M * np.cos(reduced) ** 3,
        )
        reduced = np.arctan2((1.0 - FLATTENING) * np.sin(lat), np.cos(lat))
    height = (
        level * np.cos(lat)
        + z * np.sin(lat)
        - SEMI_MAJOR_M * np.sqrt(1.0 - ECCENTRICITY2 * np.sin(lat) ** 2)
    )
    return np.stack([np.degrees(np.arctan2(y, x)), np.degrees(lat), height], axis=-1)


def enu_axes(longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> np.ndarray:
    """Directions of east, north and up in the earth-centred frame.

    longitude_deg, latitude_deg : (n,); returns : (n, 3, 3), rows east, north, up, so that
    axes @ (ecef - origin) is east, north, up
    """
    lon, lat = np.radians(np.asarray(longitude_deg)), np.radians(np.asarray(latitude_deg))
    sin_lon, cos_lon, sin_lat, cos_lat = np.sin(lon), np.cos(lon), np.sin(lat), np.cos(lat)
    axes = np.empty((*lon.shape, 3, 3))
    axes[..., 0, 0], axes[..., 0, 1], axes[..., 0, 2] = -sin_lon, cos_lon, 0.0
    axes[..., 1, 0], axes[..., 1, 1] = -sin_lat * cos_lon, -sin_lat * sin_lon
    axes[..., 1, 2] = cos_lat
    axes[..., 2, 0], axes[..., 2, 1] = cos_lat * cos_lon, cos_lat * sin_lon
    axes[..., 2, 2] = sin_lat
    return axes


def enu_from_geodetic(geodetic: np.ndarray, origin: np.ndarray) -> np.ndarray:
    """East, north and up of geodetic points, from one origin.

    geodetic : (n, 3); origin : (3,) longitude deg, latitude deg, height m; returns : (n, 3) metres
    """
    origin = np.asarray(origin, dtype=float)
    axes = enu_axes(origin[0], origin[1])
    offset = ecef_from_geodetic(geodetic) - ecef_from_geodetic(origin[None, :])
    return offset @ axes.T


def geodetic_from_enu(enu: np.ndarray, origin: np.ndarray) -> np.ndarray:
    """Geodetic points of east, north and up, from one origin; undoes `enu_from_geodetic`.

    enu : (n, 3) metres; origin : (3,); returns : (n, 3) longitude deg, latitude deg, height m
    """
    origin = np.asarray(origin, dtype=float)
    axes = enu_axes(origin[0], origin[1])
    start = ecef_from_geodetic(origin[None, :])
    return geodetic_from_ecef(np.asarray(enu, dtype=float) @ axes + start)
