"""Stations and objects of one pair in east and north, with everything that moves them.

In: a pair's frame, its fix fit, its heading. Out: `Spot`s: where, how uncertain, and how they
follow the heading, so that spots of several pairs can be combined honestly.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldround.place.fitting import FixFit, turn, turn_slope
from fieldround.place.fixes import mean_correlation
from fieldround.place.frames import PairFrame
from fieldround.place.headings import Heading, Headings
from fieldround.rounds.model import Photo


@dataclass(frozen=True)
class Spot:
    """A point of one pair about the pair's origin.

    east_north_m : (2,)
    cov_m2       : (2, 2), everything in it
    up_m         : height above station A
    slope_m_rad  : (2,) how it follows the heading; zero where no heading is known
    """

    east_north_m: np.ndarray
    cov_m2: np.ndarray
    up_m: float
    slope_m_rad: np.ndarray


@dataclass(frozen=True)
class LocatedPair:
    """One pair on the ground.

    origin     : (3,) longitude, latitude (deg), height (m) of the plane's zero
    photos     : those with fixes, for what pairs share; fix_sd_m: sd of the position an axis
    altitude_m : of station A, None when unknown; altitude_is: above what
    """

    pair: str
    origin: np.ndarray
    heading: Heading
    stations: dict[str, Spot]
    objects: dict[str, Spot]
    photos: tuple[Photo, ...]
    fix_sd_m: float
    altitude_m: float | None
    altitude_is: str


def located_spots(
    frame: PairFrame, fit: FixFit, heading: Heading
) -> tuple[dict[str, Spot], dict[str, Spot]]:
    """Stations and objects of a pair whose heading is known, about the pair's origin."""
    assert heading.heading_deg is not None
    assert heading.sd_deg is not None
    rotation, slope = turn(heading.heading_deg), turn_slope(heading.heading_deg)
    origin, origin_slope = fit.origin(heading.heading_deg), fit.origin_slope(heading.heading_deg)
    variance = float(np.radians(heading.sd_deg) ** 2)

    def spot(at: np.ndarray, own: np.ndarray) -> Spot:
        moves = slope @ at[:2] + origin_slope
        cov = fit.axis_var_m2 * np.eye(2) + rotation @ own[:2, :2] @ rotation.T
        cov = cov + variance * np.outer(moves, moves)
        # A heading this uncertain bends the ellipse: E[(d^2 / 2)^2] = 3/4 sd^4 along the sight.
        along = np.array([moves[1], -moves[0]])
        cov = cov + 0.75 * variance**2 * np.outer(along, along)
        return Spot(origin + rotation @ at[:2], cov, float(at[2]), moves)

    stations = {
        name: spot(frame.stations_m[i], frame.stations_cov_m2[i])
        for i, name in enumerate(frame.photos)
    }
    objects = {
        name: spot(at, np.asarray(frame.objects_cov_m2[name]))
        for name, at in frame.objects_m.items()
    }
    return stations, objects


def unturned_spots(
    frame: PairFrame, fit: FixFit
) -> tuple[dict[str, Spot], dict[str, Spot]]:
    """Spots of a pair without a heading: all at the mid-point of its stations.

    The sd of each is as large as its distance from there.
    """
    middle = fit.weights @ fit.fixes_m
    centre = fit.weights @ fit.stations_m
    base = fit.axis_var_m2 * np.eye(2)

    def spot(at: np.ndarray, own: np.ndarray) -> Spot:
        reach2 = float(((at[:2] - centre) ** 2).sum()) + 0.5 * float(np.trace(own[:2, :2]))
        return Spot(middle, base + reach2 * np.eye(2), float(at[2]), np.zeros(2))

    stations = {
        name: spot(frame.stations_m[i], frame.stations_cov_m2[i])
        for i, name in enumerate(frame.photos)
    }
    objects = {
        name: spot(at, np.asarray(frame.objects_cov_m2[name]))
        for name, at in frame.objects_m.items()
    }
    return stations, objects


def shared_covariance(
    a: LocatedPair, spot_a: Spot, b: LocatedPair, spot_b: Spot, headings: Headings
) -> np.ndarray:
    """Covariance of two spots of different pairs, (2, 2): compass bias and fixes shared."""
    bias = float(a.heading.follows @ headings.bias_cov_deg2 @ b.heading.follows)
    cov = np.radians(1.0) ** 2 * bias * np.outer(spot_a.slope_m_rad, spot_b.slope_m_rad)
    alike = max((mean_correlation(p, q) for p in a.photos for q in b.photos), default=0.0)
    return np.asarray(cov + alike * a.fix_sd_m * b.fix_sd_m * np.eye(2))
