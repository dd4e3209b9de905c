"""The baseline of a pair from the GNSS fixes of its photos.

In: a `Round`. Out: a `GnssBaseline` for every pair whose photos A and B both have a fix: length
and azimuth, each with its sd, and whether it may be used.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fieldround.geometry.earth import ecef_from_geodetic, enu_axes
from fieldround.place.fixes import difference_correlation, worth
from fieldround.rounds.model import Fix, Photo, Round

# A length below this many of its sds is refused, below the other used and flagged: the length of
# a noisy difference is biased long, by sd^2 / (2 length) an axis across it.
REFUSED_SDS = 5.0
FLAGGED_SDS = 20.0
# How much the camera turns between the two photos of a pair (sd, an assumption).
TURNED_RAD = 0.35


@dataclass(frozen=True)
class GnssBaseline:
    """Vector from station A to station B as the fixes give it.

    length_m    : chord in the earth-centred frame, freed of the bias of a noisy difference
    azimuth_deg : clockwise from true north, from A to B
    usable      : the length is at least 5 of its sds; `reasons` says so when not, or when it is
                  below 20
    survey      : both fixes are of carrier-phase grade
    """

    pair: str
    length_m: float
    length_sd_m: float
    azimuth_deg: float
    azimuth_sd_deg: float
    usable: bool
    survey: bool
    reasons: tuple[str, ...] = ()


def gnss_baselines(round_: Round) -> Mapping[str, GnssBaseline]:
    """Baselines from GNSS by pair; pairs without two fixes are missing."""
    found = {}
    for pair in round_.pairs:
        photos = [round_.photos.get(name) for name in pair.photos[:2]]
        a, b = (photos[0], photos[1]) if len(photos) == 2 else (None, None)
        if a is not None and b is not None and a.fix is not None and b.fix is not None:
            found[pair.pair] = _baseline(pair.pair, (a, a.fix), (b, b.fix))
    return found


def _baseline(name: str, start: tuple[Photo, Fix], end: tuple[Photo, Fix]) -> GnssBaseline:
    a, b = start[1], end[1]
    worth_a, worth_b = worth(a), worth(b)
    shared = difference_correlation(start[0], end[0])
    level_var = _difference_variance(worth_a.sd_m, worth_b.sd_m, shared)
    # Arms from antenna to camera are alike but for how far the camera turned between the photos.
    level_var += TURNED_RAD**2 * (_square(a.arm_m) + _square(b.arm_m)) / 2.0
    rise_var = _difference_variance(worth_a.vertical_sd_m, worth_b.vertical_sd_m, shared)
    survey = worth_a.survey and worth_b.survey

    heights = [a.altitude_m, b.altitude_m]
    high = [height for height in heights if height is not None]
    middle = float(np.mean(high)) if high else 0.0
    # Phone heights are too rough to tell a slope: both stations are then taken as equally high.
    told = survey and len(high) == 2 and a.altitude_is == b.altitude_is
    rise = high[1] - high[0] if told else 0.0
    points = ecef_from_geodetic(
        np.array(
            [
                [a.longitude_deg, a.latitude_deg, middle - rise / 2.0],
                [b.longitude_deg, b.latitude_deg, middle + rise / 2.0],
            ]
        )
    )
    axes = enu_axes(np.array(a.longitude_deg), np.array(a.latitude_deg))
    east, north, up = axes @ (points[1] - points[0])
    level = float(np.hypot(east, north))
    chord = float(np.linalg.norm([east, north, up]))
    slope2 = (up / chord) ** 2 if chord > 0.0 else 0.0
    length_var = (1.0 - slope2) * level_var + (slope2 * rise_var if told else 0.0)
    # Expected square of a noisy length: the true one plus the variances across it.
    across = level_var + (rise_var if told else 0.0)
    length = float(np.sqrt(max(chord**2 - across, 0.0)))
    sd = float(np.sqrt(length_var))
    azimuth_sd = float(np.degrees(np.arctan2(np.sqrt(level_var), level)))
    usable = length >= REFUSED_SDS * sd
    return GnssBaseline(
        pair=name,
        length_m=length,
        length_sd_m=sd,
        azimuth_deg=float(np.degrees(np.arctan2(east, north)) % 360.0),
        azimuth_sd_deg=azimuth_sd,
        usable=usable,
        survey=survey,
        reasons=_reasons(chord, length, sd),
    )


def _difference_variance(sd_a: float, sd_b: float, shared: float) -> float:
    return sd_a**2 + sd_b**2 - 2.0 * shared * sd_a * sd_b


def _square(arm_m: tuple[float, float]) -> float:
    return arm_m[0] ** 2 + arm_m[1] ** 2


def _reasons(chord: float, length: float, sd: float) -> tuple[str, ...]:
    digits = 1 if sd >= 0.1 else 2
    if length < REFUSED_SDS * sd:
        return (
            f"the GNSS fixes are {chord:.{digits}f} m apart with an sd of {sd:.2g} m, too near for "
            "a baseline; read a tape between the stations or stand at least "
            f"{REFUSED_SDS * sd:.{digits - 1}f} m apart",
        )
    if length < FLAGGED_SDS * sd:
        return (
            f"the baseline of {length:.2f} m from GNSS has an sd of {sd:.2g} m, "
            f"{100 * sd / length:.0f} % of it, and every length of the pair with it",
        )
    return ()
