"""What the adjustment knows of one pair's geometry before anybody knows where north is.

In: nothing. Out: frozen dataclasses handed from solve to place (`PairFrame`) and back
(`Placement`).

The levelled frame of a pair: metres, origin at station A, z up along the pair's vertical, y the
horizontal direction of camera A's optical axis, x to its right. Its heading (the azimuth of y,
clockwise from true north) is what placing finds.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Sighting:
    """Direction from one photo's station to a landmark it shows, in the pair's levelled frame.

    direction : (3,) unit; sd_deg : of the direction, as the mark and the camera give it
    """

    landmark: str
    photo: str
    direction: np.ndarray
    sd_deg: float


@dataclass(frozen=True)
class PairFrame:
    """Stations, sight directions and objects of one pair in its levelled frame.

    photos          : names, in the order of the stations
    stations_m      : (v, 3) stations, A at the origin
    stations_cov_m2 : (v, 3, 3) covariance of each station (zero for A)
    looks           : (v, 3) unit directions of the optical axes
    objects_m       : object -> (3,) point: where the axis meets the ground line (a ball's centre)
    objects_cov_m2  : object -> (3, 3) covariance of that point, relative to station A
    vertical_sd_deg : sd of the vertical about each horizontal axis
    sightings       : of landmarks with known coordinates
    """

    pair: str
    photos: tuple[str, ...]
    stations_m: np.ndarray
    stations_cov_m2: np.ndarray
    looks: np.ndarray
    objects_m: Mapping[str, np.ndarray]
    objects_cov_m2: Mapping[str, np.ndarray]
    vertical_sd_deg: float
    vertical_from: str
    sightings: tuple[Sighting, ...] = ()


@dataclass(frozen=True)
class Ellipse:
    """95 % error ellipse of a position: semi-axes in metres, azimuth of the major in degrees."""

    semi_major_m: float
    semi_minor_m: float
    azimuth_deg: float


@dataclass(frozen=True)
class PlacedPoint:
    """A station or an object on the map.

    longitude_deg, latitude_deg : WGS 84; easting_m, northing_m : in the round's CRS
    elevation_m : None where no height is known; `elevation_is` says what it is
    cov_m2      : (2, 2) covariance east, north (true north, not grid)
    position_sd_m : sqrt of the larger eigenvalue of cov_m2
    """

    longitude_deg: float
    latitude_deg: float
    easting_m: float
    northing_m: float
    elevation_m: float | None
    elevation_is: str
    cov_m2: np.ndarray
    position_sd_m: float
    ellipse: Ellipse


@dataclass(frozen=True)
class PlacedPair:
    """Heading of one pair's levelled frame and its points on the map."""

    pair: str
    heading_deg: float | None
    heading_sd_deg: float | None
    heading_from: str
    stations: Mapping[str, PlacedPoint]
    objects: Mapping[str, PlacedPoint]
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class NearDuplicate:
    """Two objects of one kind, seen from different pairs, that may be the same thing."""

    first: str
    second: str
    kind: str
    apart_m: float


@dataclass(frozen=True)
class Placement:
    """The whole round on the map.

    crs_wkt, crs_name : the CRS of eastings and northings
    convergence_deg   : grid convergence at the round's middle (grid north minus true north sense
                        as `convergence_note` states), scale_factor : grid length / ground length
    objects           : each object once, from every pair that sees it
    near_duplicates   : objects that lie within each other's ellipses; listed, never merged
    """

    crs_wkt: str
    crs_name: str
    epsg: int | None
    convergence_deg: float
    scale_factor: float
    pairs: Mapping[str, PlacedPair]
    objects: Mapping[str, PlacedPoint]
    notes: tuple[str, ...] = ()
    near_duplicates: tuple[NearDuplicate, ...] = ()
