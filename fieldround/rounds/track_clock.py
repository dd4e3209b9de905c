"""How far the photos' clock is from the track's, found from photos that have a fix of their own.

In: photos with time and fix, tracks as paths. Out: a `Clock`, None when they do not tell.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from fieldround.geometry.earth import enu_from_geodetic
from fieldround.rounds.model import Photo

# How far a clock that states its UTC offset may be off; local time may be any zone as well.
FURTHEST_S = 600.0
FURTHEST_LOCAL_S = 14.25 * 3600.0
FEWEST_PHOTOS = 2
# Own fixes are phone fixes: what they state tends to be too small.
_LEAST_SD_M, _UNSTATED_SD_M = 3.0, 5.0
# Fixes of one phone share most of their error, so that a walk of photos says less than it seems.
_SHARED = 4.0
# What a photo costs that no track covers or that lies far off: robust, in squared sds.
_CAP = 12.0
_COARSE_S, _FINE_S = 2.0, 0.1
# EXIF times are often whole seconds.
_LEAST_SD_S = 0.5
# An offset less sure than this tells nothing of where a walker was.
_WORST_SD_S = 30.0
# Prior of a clock that states its UTC offset.
_PRIOR_SD_S = 60.0


@dataclass(frozen=True)
class Clock:
    """Seconds to add to a photo's time to get the track's, with sd."""

    offset_s: float
    sd_s: float


class Walk(Protocol):
    """A track as `find_clock` asks it: an origin, and positions about it at given times."""

    origin: np.ndarray

    def at(self, seconds: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Positions (..., 2), sds, whether covered."""


def find_clock(
    photos: Sequence[Photo], seconds: Sequence[float], walks: Sequence[Walk], local: bool
) -> Clock | None:
    """The offset under which the photos' own fixes lie on the tracks; None when it is not clear.

    seconds : times of the photos by their clock
    local   : the times are local without UTC offset, so that any zone is possible
    """
    if len(photos) < FEWEST_PHOTOS or not walks:
        return None
    taken = np.array(seconds, dtype=float)
    furthest = FURTHEST_LOCAL_S if local else FURTHEST_S
    coarse = np.arange(-furthest, furthest + _COARSE_S, _COARSE_S)
    cost = _costs(photos, taken, walks, coarse)
    if not local:
        cost = cost + (coarse / _PRIOR_SD_S) ** 2
    best = float(coarse[int(np.argmin(cost))])
    fine = np.arange(best - 120.0, best + 120.0, _FINE_S)
    near = _costs(photos, taken, walks, fine)
    if not local:
        near = near + (fine / _PRIOR_SD_S) ** 2
    if not _clear(cost, coarse, best, len(photos)):
        return None
    mass = np.exp(-0.5 * (near - near.min()))
    mass /= mass.sum()
    offset = float(mass @ fine)
    sd = float(np.sqrt(mass @ (fine - offset) ** 2))
    return Clock(offset, max(sd, _LEAST_SD_S)) if sd <= _WORST_SD_S else None


def _costs(
    photos: Sequence[Photo], taken: np.ndarray, walks: Sequence[Walk], offsets: np.ndarray
) -> np.ndarray:
    """Robust sum of squared misfits of all photos, for each offset, (o,)."""
    total = np.zeros(len(offsets))
    for photo, second in zip(photos, taken, strict=True):
        fix = photo.fix
        assert fix is not None
        sd = max(fix.horizontal_sd_m or _UNSTATED_SD_M, _LEAST_SD_M)
        lowest = np.full(len(offsets), _CAP)
        for walk in walks:
            own = enu_from_geodetic(
                np.array([[fix.longitude_deg, fix.latitude_deg, 0.0]]), walk.origin
            )[0, :2]
            xy, bent, covered = walk.at(second + offsets)
            square = ((xy - own) ** 2).sum(axis=1) / (sd**2 + bent**2)
            lowest = np.where(covered, np.minimum(lowest, square), lowest)
        total += lowest
    return total / _SHARED


def _clear(cost: np.ndarray, offsets: np.ndarray, best: float, count: int) -> bool:
    """Most photos lie on the track, and no offset elsewhere is nearly as good."""
    lowest = float(cost.min())
    if lowest > 0.5 * _CAP * count / _SHARED:
        return False
    elsewhere = np.abs(offsets - best) > 120.0
    return not elsewhere.any() or float(cost[elsewhere].min()) > lowest + 6.0
