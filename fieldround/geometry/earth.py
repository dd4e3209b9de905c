"""WGS 84 positions as earth-centred and local east-north-up coordinates.

In: degrees and metres, (n,) or (n, 3). Out: metres, (n, 3), and back.
Source: EPSG Guidance Note 7-2 (IOGP 373-7-2), methods 9602 (geographic/geocentric) and 9837
(geocentric/topocentric); the way back by Bowring's iteration.
"""

from __future__ import annotations

import numpy as np

SEMI_MAJOR_M = 6_378_137.0
FLATTENING = 1.0 / 298.257223563
ECCENTRICITY_2 = FLATTENING * (2.0 - FLATTENING)


def to_ecef(
    longitude_deg: np.ndarray, latitude_deg: np.ndarray, height_m: np.ndarray
) -> np.ndarray:
    """Earth-centred coordinates of geodetic positions, (n,) each -> (n, 3) metres."""
    lam, phi = np.radians(longitude_deg), np.radians(latitude_deg)
    normal = SEMI_MAJOR_M / np.sqrt(1.0 - ECCENTRICITY_2 * np.sin(phi) ** 2)
    return np.stack(
        [
            (normal + height_m) * np.cos(phi) * np.cos(lam),
            (normal + height_m) * np.cos(phi) * np.sin(lam),
            (normal * (1.0 - ECCENTRICITY_2) + height_m) * np.sin(phi),
        ],
        axis=-1,
    )


def from_ecef(xyz_m: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Longitude, latitude (degrees) and ellipsoidal height (metres) of (n, 3) coordinates."""
    x, y, z = np.moveaxis(np.asarray(xyz_m, dtype=float), -1, 0)
    around = np.hypot(x, y)
    phi = np.arctan2(z, around * (1.0 - ECCENTRICITY_2))
    for _ in range(6):
        normal = SEMI_MAJOR_M / np.sqrt(1.0 - ECCENTRICITY_2 * np.sin(phi) ** 2)
        phi = np.arctan2(z + ECCENTRICITY_2 * normal * np.sin(phi), around)
    normal = SEMI_MAJOR_M / np.sqrt(1.0 - ECCENTRICITY_2 * np.sin(phi) ** 2)
    # Near the poles the cosine vanishes; this form of the height holds everywhere.
    height = around * np.cos(phi) + z * np.sin(phi) - SEMI_MAJOR_M**2 / normal
    return np.degrees(np.arctan2(y, x)), np.degrees(phi), height


def east_north_up(longitude_deg: float, latitude_deg: float) -> np.ndarray:
    """Rotation from earth-centred to local axes: rows east, north, up, (3, 3)."""
    lam, phi = np.radians(longitude_deg), np.radians(latitude_deg)
    return np.array(
        [
            [-np.sin(lam), np.cos(lam), 0.0],
            [-np.sin(phi) * np.cos(lam), -np.sin(phi) * np.sin(lam), np.cos(phi)],
            [np.cos(phi) * np.cos(lam), np.cos(phi) * np.sin(lam), np.sin(phi)],
        ]
    )


def to_local(
    longitude_deg: np.ndarray,
    latitude_deg: np.ndarray,
    height_m: np.ndarray,
    origin: tuple[float, float, float],
) -> np.ndarray:
    """East, north, up from an origin (longitude, latitude, height), (n, 3) metres."""
    start = to_ecef(*(np.asarray(value, dtype=float) for value in origin))
    away = to_ecef(longitude_deg, latitude_deg, height_m) - start
    return away @ east_north_up(origin[0], origin[1]).T


def from_local(
    enu_m: np.ndarray, origin: tuple[float, float, float]
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Longitude, latitude, height of east-north-up coordinates (n, 3) about an origin."""
    start = to_ecef(*(np.asarray(value, dtype=float) for value in origin))
    return from_ecef(enu_m @ east_north_up(origin[0], origin[1]) + start)
