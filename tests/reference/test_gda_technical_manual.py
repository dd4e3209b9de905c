"""Grid convergence and scale factor against an example published by a national mapping body.

Geocentric Datum of Australia Technical Manual, version 2.3 (Intergovernmental Committee on
Surveying and Mapping, 2006), Flinders Peak in zone 55 of MGA94, as quoted in open test suites. The
manual ADDS its convergence to an azimuth to get a grid bearing; ours is subtracted.
"""

from __future__ import annotations

import numpy as np
import pytest
from pyproj import Transformer

from fieldround.geometry.earth import ecef_from_geodetic
from fieldround.place.crs import round_grid

LON = 144 + 25 / 60 + 29.52440 / 3600
LAT = -(37 + 57 / 60 + 3.72030 / 3600)
EAST, NORTH = 273741.297, 5796489.777
CONVERGENCE = -(1 + 35 / 60 + 3.65 / 3600)
POINT_SCALE = 1.00023056


def test_flinders_peak_on_the_grid() -> None:
    grid = round_grid("EPSG:28355", np.array([LON]), np.array([LAT]))
    assert grid.convergence_deg == pytest.approx(-CONVERGENCE, abs=0.006 / 3600)
    assert grid.scale_factor == pytest.approx(POINT_SCALE, abs=6e-9)
    to_grid = Transformer.from_crs(grid.crs.geodetic_crs, grid.crs, always_xy=True)
    assert to_grid.transform(LON, LAT) == pytest.approx((EAST, NORTH), abs=0.0006)


def test_our_convergence_turns_true_bearings_into_grid_bearings() -> None:
    grid = round_grid("EPSG:28355", np.array([LON]), np.array([LAT]))
    to_grid = Transformer.from_crs(grid.crs.geodetic_crs, grid.crs, always_xy=True)
    start = np.array(to_grid.transform(LON, LAT))
    step = np.array(to_grid.transform(LON, LAT + 1e-4)) - start
    grid_bearing_of_north = np.degrees(np.arctan2(step[0], step[1]))
    assert grid_bearing_of_north == pytest.approx(-grid.convergence_deg, abs=1e-5)


def test_flinders_peak_earth_centred() -> None:
    """Height 350.948 m; the manual's ellipsoid is GRS80, 0.1 mm flatter at the pole."""
    found = ecef_from_geodetic(np.array([[144 + 25 / 60 + 29.52442 / 3600, LAT, 350.948]]))[0]
    assert found == pytest.approx([-4096088.424, 2929823.08435, -3901375.4540], abs=0.001)
