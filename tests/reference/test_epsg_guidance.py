"""Grids against worked examples of IOGP Publication 373-7-2 (EPSG Guidance Note 7, part 2).

The Transverse Mercator example (method 9807, OSGB 1936 / British National Grid) is as quoted by
epsg.io's description of the method. Datum shifts are left out: positions are on the grid's datum.
"""

from __future__ import annotations

import pytest
from pyproj import Transformer

from fieldround.geometry.earth import ecef_from_geodetic
from fieldround.place.crs import read_crs, utm_epsg


def test_transverse_mercator_of_the_british_national_grid() -> None:
    # With the example's own rounded parameters; EPSG:27700 itself has 0.9996012717.
    crs = read_crs(
        "+proj=tmerc +lat_0=49 +lon_0=-2 +k=0.9996013 +x_0=400000 +y_0=-100000 "
        "+a=6377563.396 +rf=299.32496 +units=m +type=crs"
    )
    to_grid = Transformer.from_crs(crs.geodetic_crs, crs, always_xy=True)
    east, north = to_grid.transform(0.5, 50.5)
    assert (east, north) == pytest.approx((577274.99, 69740.50), abs=0.006)
    lon, lat = to_grid.transform(577274.99, 69740.50, direction="INVERSE")
    assert (lon, lat) == pytest.approx((0.5, 50.5), abs=1e-7)


def test_utm_zones_and_their_central_meridians() -> None:
    """UTM parameters of the note: zone n is centred on 6 n - 183 degrees, E 500 000 there."""
    for zone in range(1, 61):
        middle = 6.0 * zone - 183.0
        for lat in (-33.0, 5.0):
            code = utm_epsg(middle, lat)
            assert code == (32600 if lat > 0 else 32700) + zone
        crs = read_crs(str(32600 + zone))
        to_grid = Transformer.from_crs(crs.geodetic_crs, crs, always_xy=True)
        east, north = to_grid.transform(middle, 0.0)
        assert (east, north) == pytest.approx((500000.0, 0.0), abs=1e-6)


def test_geographic_to_geocentric() -> None:
    """Method 9602, example from memory: 53 48 33.820 N, 2 07 46.380 E, 73.0 m on WGS 84."""
    lon = 2 + 7 / 60 + 46.380 / 3600
    lat = 53 + 48 / 60 + 33.820 / 3600
    wanted = (3771793.968, 140253.342, 5124304.349)
    assert tuple(ecef_from_geodetic([[lon, lat, 73.0]])[0]) == pytest.approx(wanted, abs=0.001)
