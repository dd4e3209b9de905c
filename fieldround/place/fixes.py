"""What a GNSS fix is worth: its sd, its device, and how far two fixes share their error.

In: photos with fixes. Out: sds in metres and correlations between 0 and 1. Every default stands
here, with its reason.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime

import numpy as np

from fieldround.rounds.model import Fix, Photo

# A stated sd below this is a carrier-phase (RTK) solution; no code-only receiver states it.
SURVEY_GRADE_M = 0.1
# No antenna held by hand stands over its point better than this (an assumption).
SURVEY_FLOOR_M = 0.01
# Phones under open sky are good to 3 to 5 m; what they state is often smaller (common practice).
PHONE_FLOOR_M = 3.0
# A fix that states nothing.
UNSTATED_SD_M = 5.0
# One axis' sd for a dilution of precision of 1 (user range error of a single-frequency receiver).
SD_A_DOP_M = 3.0
# EXIF does not say of what its error is the measure. The reader takes a 68 % radius, the smaller
# reading; an sd of each axis is 1.51 times that, and stated errors tend to be too small.
EXIF_CAUTION = 1.51
# Heights are about twice as uncertain as positions (satellites are above only), common practice.
VERTICAL_OVER_HORIZONTAL = 2.0

# Two fixes of one phone: the least share of variance that their difference is taken to lose, and
# how fast that fades. Both are conservative: multipath and the phone's filter share far more.
SHARED_AT_ONCE = 0.5
DIFFERENCE_FADES_S = 300.0
# The same for a mean of fixes, where caution asks for MORE sharing: atmosphere and orbits stay
# alike for half an hour.
MEAN_FADES_S = 1800.0
# Variance of the mean of two fixes taken at once, in variances of one: a phone's second fix tells
# nothing new; a carrier-phase one averages noise and pole, not the base station's coordinates.
MEAN_OF_TWO = 1.0
SURVEY_MEAN_OF_TWO = 0.75


@dataclass(frozen=True)
class FixWorth:
    """A fix as the placing weighs it.

    sd_m          : sd of each horizontal axis
    vertical_sd_m : sd of the height
    survey        : carrier-phase grade
    stated        : the source stated an error (else a default stands here)
    """

    sd_m: float
    vertical_sd_m: float
    survey: bool
    stated: bool


def worth(fix: Fix) -> FixWorth:
    """What a fix is worth, with floors for sources that state too little."""
    stated = fix.horizontal_sd_m
    caution = EXIF_CAUTION if fix.source == "exif" else 1.0
    survey = stated is not None and stated * caution < SURVEY_GRADE_M
    if stated is not None and survey:
        sd = max(stated * caution, SURVEY_FLOOR_M)
    elif stated is not None and fix.source == "exif":
        sd = max(stated * caution, PHONE_FLOOR_M)
    elif stated is not None:
        sd = max(stated, SURVEY_FLOOR_M)
    else:
        sd = max(UNSTATED_SD_M, SD_A_DOP_M * (fix.dop or 0.0))
    vertical = fix.vertical_sd_m
    least = VERTICAL_OVER_HORIZONTAL * sd
    if vertical is None or (fix.source == "exif" and not survey):
        vertical = max(vertical or 0.0, least)
    return FixWorth(sd, max(vertical, SURVEY_FLOOR_M), survey, stated is not None)


def device(photo: Photo) -> str:
    """What took a photo, for errors that its photos share: maker and model, else its camera."""
    named = " ".join(part for part in (photo.make, photo.model) if part)
    return named or photo.camera


def receiver(photo: Photo) -> str:
    """What received a photo's fix: the device itself, or the track's file."""
    source = "exif" if photo.fix is None else photo.fix.source
    return device(photo) if source == "exif" else source


def seconds_between(a: datetime | None, b: datetime | None) -> float | None:
    """Seconds between two times, None when one is unknown or only one knows its UTC offset."""
    if a is None or b is None or (a.utcoffset() is None) != (b.utcoffset() is None):
        return None
    return abs((a - b).total_seconds())


def difference_correlation(a: Photo, b: Photo) -> float:
    """Least correlation of two fixes' errors, for the sd of their difference."""
    apart = seconds_between(a.taken_at, b.taken_at)
    if receiver(a) != receiver(b) or apart is None or a.fix is None or b.fix is None:
        return 0.0
    if worth(a.fix).survey or worth(b.fix).survey:
        # What is left of a carrier-phase fix is mostly noise and the pole: nothing is claimed.
        return 0.0
    return SHARED_AT_ONCE * float(np.exp(-apart / DIFFERENCE_FADES_S))


def mean_correlation(a: Photo, b: Photo) -> float:
    """Largest correlation of two fixes' errors, for the sd of their mean.

    Unknown times count as at once; different receivers share nothing.
    """
    if receiver(a) != receiver(b):
        return 0.0
    apart = seconds_between(a.taken_at, b.taken_at)
    return 1.0 if apart is None else float(np.exp(-apart / MEAN_FADES_S))


def position_covariance(photos: Sequence[Photo]) -> np.ndarray:
    """Covariance of one axis of the errors of a pair's fixes, (v, v) square metres.

    Each fix has an own part o and a part common with its receiver's other fixes. o is 1 minus the
    LEAST correlation, so that no difference is too sharp; the common part is what makes the mean
    of two fixes as good as `MEAN_OF_TWO` says. Both cautions at once make a fix's whole variance
    larger than its sd squared.
    """
    count = len(photos)
    worths = [worth(photo.fix) for photo in photos if photo.fix is not None]
    sd = np.array([w.sd_m for w in worths])
    mean = np.array([SURVEY_MEAN_OF_TWO if w.survey else MEAN_OF_TWO for w in worths])
    timeless = any(photo.taken_at is None for photo in photos)
    least, most = np.ones((count, count)), np.zeros((count, count))
    for i, a in enumerate(photos):
        for j, b in enumerate(photos):
            if i != j and receiver(a) == receiver(b):
                least[i, j] = difference_correlation(a, b)
                most[i, j] = 1.0 if timeless else mean_correlation(a, b)
    alone = most.max(axis=1, initial=0.0) == 0.0
    own = np.where(alone, 1.0, 1.0 - least.min(axis=1, initial=1.0))
    share = np.where(alone, 0.0, mean - 0.5 * own)
    np.fill_diagonal(most, 1.0)
    common = most * np.sqrt(np.outer(share, share))
    return (np.diag(own) + common) * np.outer(sd, sd)
