"""What ties one pair to the ground: the fixes of its photos and the known points among its objects.

In: photos, the pair's frame, landmarks. Out: a `Ground`, and the frame laid onto it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.geometry.earth import enu_from_geodetic
from fieldround.place.crs import middle
from fieldround.place.fitting import FixFit, fit_fixes
from fieldround.place.fixes import position_covariance, worth
from fieldround.place.frames import PairFrame
from fieldround.rounds.model import Landmark, Photo

# A camera that looks straight up or down has no level direction for the arm of its antenna.
_LEVEL_ENOUGH = 0.1


@dataclass(frozen=True)
class Ground:
    """Known places of one pair, east and north about their own middle.

    origin  : (3,) longitude, latitude (deg), height (m)
    fixed   : indices of the stations with a fix; known: objects that are landmarks
    at_m    : (f + k, 2) places of both, in that order
    cov_m2  : (f + k, f + k) of one axis
    """

    origin: np.ndarray
    fixed: tuple[int, ...]
    known: tuple[str, ...]
    at_m: np.ndarray
    cov_m2: np.ndarray


def ground_of(
    photos: Sequence[Photo], frame: PairFrame, landmarks: Mapping[str, Landmark]
) -> Ground | None:
    """The ground of a pair, None when nothing of it has a known place."""
    fixed = tuple(i for i, photo in enumerate(photos) if photo.fix is not None)
    known = tuple(name for name in frame.objects_m if name in landmarks)
    fixes = [fix for photo in photos if (fix := photo.fix) is not None]
    if not fixes and not known:
        return None
    points = [landmarks[name] for name in known]
    places = [(fix.longitude_deg, fix.latitude_deg) for fix in fixes]
    places += [(point.longitude_deg, point.latitude_deg) for point in points]
    lonlat = np.array(places)
    heights = [fix.altitude_m for fix in fixes if fix.altitude_m is not None]
    height = float(np.mean(heights)) if heights else 0.0
    origin = np.array([*middle(lonlat[:, 0], lonlat[:, 1]), height])
    # Heights are left out: one height for all keeps the plane level.
    level = np.full((len(lonlat), 1), height)
    at = enu_from_geodetic(np.hstack([lonlat, level]), origin)[:, :2]
    cov = np.zeros((len(lonlat), len(lonlat)))
    count = len(fixed)
    if fixes:
        own = 0.5 * np.trace(frame.stations_cov_m2[list(fixed)][:, :2, :2], axis1=1, axis2=2)
        cov[:count, :count] = position_covariance([photos[i] for i in fixed]) + np.diag(own)
    for k, (name, point) in enumerate(zip(known, points, strict=True)):
        # One figure for both axes: the larger, which is that along the sight.
        frame_var = float(np.linalg.eigvalsh(np.asarray(frame.objects_cov_m2[name])[:2, :2])[-1])
        cov[count + k, count + k] = point.sd_m**2 + frame_var
    return Ground(origin, fixed, known, at, cov)


def fit_ground(
    frame: PairFrame, photos: Sequence[Photo], ground: Ground | None, heading_deg: float | None
) -> FixFit | None:
    """The frame laid onto its ground, see `fit_fixes`."""
    if ground is None:
        return None
    points = [_antenna(frame, photos[i], i) for i in ground.fixed]
    points += [np.asarray(frame.objects_m[name])[:2] for name in ground.known]
    return fit_fixes(ground.at_m, np.array(points), ground.cov_m2, heading_deg)


def shared_sd(ground: Ground, fit: FixFit) -> float:
    """sd an axis of the position that comes from the photos' fixes, metres."""
    count = len(ground.fixed)
    weights = fit.weights[:count]
    variance = float(weights @ ground.cov_m2[:count, :count] @ weights)
    return float(min(np.sqrt(variance) * fit.enlarged, np.sqrt(fit.axis_var_m2)))


def altitude_of(photos: Sequence[Photo], frame: PairFrame) -> tuple[float | None, str]:
    """Altitude of station A by the fixes, weighted, and what it is above."""
    told: dict[str, list[tuple[float, float]]] = {}
    for photo, station in zip(photos, frame.stations_m, strict=True):
        fix = photo.fix
        if fix is not None and fix.altitude_m is not None:
            weight = 1.0 / worth(fix).vertical_sd_m ** 2
            told.setdefault(fix.altitude_is, []).append((fix.altitude_m - station[2], weight))
    if not told:
        return None, "not known"
    above = max(told, key=lambda kind: (sum(w for _, w in told[kind]), kind))
    rows = np.array(told[above])
    return float(rows[:, 0] @ rows[:, 1] / rows[:, 1].sum()), height_is(above)


def height_is(kind: str) -> str:
    """What a height is, for the results."""
    if kind == "sea level":
        return "height above sea level, as the fixes state it"
    return "height above the WGS 84 ellipsoid"


def _antenna(frame: PairFrame, photo: Photo, i: int) -> np.ndarray:
    """Where the antenna of a station is in the frame, (2,): the camera less its arm."""
    station = np.asarray(frame.stations_m[i, :2])
    level = frame.looks[i, :2]
    length = float(np.hypot(*level))
    if photo.fix is None or length < _LEVEL_ENOUGH:
        return station
    right, forward = photo.fix.arm_m
    ahead = level / length
    return np.asarray(station - forward * ahead - right * np.array([ahead[1], -ahead[0]]))
