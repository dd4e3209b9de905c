"""Ellipsoid and level-plane kernels against pymap3d (test dependency), point by point.

pymap3d 3.x, M. Hirsch, "PyMap3D: 3-D coordinate conversions for terrestrial and geospace
environments", Journal of Open Source Software 3 (2018) 580.
"""

from __future__ import annotations

import numpy as np
import pytest

from fieldround.geometry.earth import (
    ecef_from_geodetic,
    enu_from_geodetic,
    geodetic_from_ecef,
    geodetic_from_enu,
)

pymap3d = pytest.importorskip("pymap3d")


def points(count: int = 500) -> np.ndarray:
    rng = np.random.default_rng(1)
    lon = rng.uniform(-180.0, 180.0, count)
    lat = np.degrees(np.arcsin(rng.uniform(-1.0, 1.0, count)))
    return np.stack([lon, lat, rng.uniform(-400.0, 9000.0, count)], axis=-1)


def test_ecef_of_geodetic() -> None:
    at = points()
    theirs = np.stack(pymap3d.geodetic2ecef(at[:, 1], at[:, 0], at[:, 2]), axis=-1)
    assert np.abs(ecef_from_geodetic(at) - theirs).max() < 3e-9


def test_geodetic_of_ecef() -> None:
    ecef = ecef_from_geodetic(points())
    lat, lon, height = pymap3d.ecef2geodetic(*ecef.T)
    ours = geodetic_from_ecef(ecef)
    assert np.abs(ours[:, 0] - lon).max() < 1e-12
    assert np.abs(ours[:, 1] - lat).max() < 1e-11
    assert np.abs(ours[:, 2] - height).max() < 1e-6


def test_east_north_up() -> None:
    rng = np.random.default_rng(2)
    for lon, lat, height in [(13.0, 52.0, 40.0), (180.0, -17.8, 3.0), (18.4, 69.2, 0.0)]:
        enu = rng.uniform(-300.0, 300.0, (50, 3))
        origin = np.array([lon, lat, height])
        their_lat, their_lon, their_height = pymap3d.enu2geodetic(*enu.T, lat, lon, height)
        ours = geodetic_from_enu(enu, origin)
        assert np.abs((ours[:, 0] - their_lon + 180.0) % 360.0 - 180.0).max() < 1e-12
        assert np.abs(ours[:, 1] - their_lat).max() < 1e-12
        assert np.abs(ours[:, 2] - their_height).max() < 1e-6
        theirs = np.stack(
            pymap3d.geodetic2enu(ours[:, 1], ours[:, 0], ours[:, 2], lat, lon, height), axis=-1
        )
        assert np.abs(enu_from_geodetic(ours, origin) - theirs).max() < 1e-8
