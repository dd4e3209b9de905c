"""Baselines from the GNSS fixes of a pair's photos, each with what it is worth.

In: a `Round`. Out: `GnssBaseline` by pair: length, azimuth, their sds, and whether the length may
be used. The chord is earth-centred, so it is right at any latitude.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fieldround.geometry.earth import east_north_up, to_ecef
from fieldround.rounds.model import Fix, Photo, Round

# A fix that states less than this was made with corrections (RTK or PPP); a phone's own estimate
# is often missing or too small (steps of a real walk were 30 % off), so it has a floor.
PRECISE_BELOW_M = 0.5
PHONE_FLOOR_M = 3.0
PRECISE_FLOOR_M = 0.01
PHONE_UNSTATED_M = 5.0
# A phone's vertical error is about twice the horizontal one (common practice).
VERTICAL_FACTOR = 2.0
# Fixes of one device close in time share part of their error. Half is claimed at most, fading
# over minutes: an assumption on the careful side, for a difference only gains from it.
CORRELATION = 0.5
CORRELATION_S = 60.0
# The length of a noisy difference is biased long: below 5 sds it is refused, below 20 flagged.
REFUSED_SDS = 5.0
FLAGGED_SDS = 20.0


@dataclass(frozen=True)
class GnssBaseline:
    """Baseline A to B from two fixes.

    enu_m, cov_m2 : (3,), (3, 3) station B minus station A, east north up at A
    azimuth_deg   : clockwise from true north; azimuth_sd_deg its sd
    usable        : False where the length is too noisy to be a baseline
    reasons       : sentences about refusal or caution
    """

    length_m: float
    length_sd_m: float
    azimuth_deg: float
    azimuth_sd_deg: float
    enu_m: np.ndarray
    cov_m2: np.ndarray
    usable: bool
    reasons: tuple[str, ...] = ()


def fix_sds(fix: Fix) -> tuple[float, float]:
    """Horizontal sd of each axis and vertical sd that a fix deserves, metres."""
    stated = fix.horizontal_sd_m
    if stated is None:
        horizontal = PHONE_UNSTATED_M
    elif stated < PRECISE_BELOW_M:
        horizontal = max(stated, PRECISE_FLOOR_M)
    else:
        horizontal = max(stated, PHONE_FLOOR_M)
    if fix.vertical_sd_m is not None:
        vertical = max(fix.vertical_sd_m, VERTICAL_FACTOR * PRECISE_FLOOR_M)
    else:
        vertical = VERTICAL_FACTOR * horizontal
    return horizontal, vertical


def is_precise(fix: Fix) -> bool:
    """Was the fix made with corrections, by what it states?"""
    return fix.horizontal_sd_m is not None and fix.horizontal_sd_m < PRECISE_BELOW_M


def correlation(first: Photo, second: Photo) -> float:
    """Share of error two fixes have in common: one device, close in time."""
    if first.fix is None or second.fix is None:
        return 0.0
    if (first.make, first.model) != (second.make, second.model):
        return 0.0
    if is_precise(first.fix) or is_precise(second.fix):
        return 0.0
    if first.taken_at is None or second.taken_at is None:
        return 0.0
    if (first.taken_at.tzinfo is None) != (second.taken_at.tzinfo is None):
        return 0.0
    apart = abs((second.taken_at - first.taken_at).total_seconds())
    return CORRELATION * float(np.exp(-apart / CORRELATION_S))


def gnss_baselines(round_: Round) -> Mapping[str, GnssBaseline]:
    """Baselines of all pairs whose photos A and B both have a fix."""
    out = {}
    for pair in round_.pairs:
        photos = [round_.photos.get(name) for name in pair.photos[:2]]
        if all(photo is not None and photo.fix is not None for photo in photos):
            first, second = photos
            assert first is not None
            assert second is not None
            out[pair.pair] = gnss_baseline(first, second)
    return out


def gnss_baseline(first: Photo, second: Photo) -> GnssBaseline:
    """Baseline from the fixes of two photos, which both must have one."""
    a, b = first.fix, second.fix
    assert a is not None
    assert b is not None
    heights = [0.0, 0.0]
    if a.altitude_m is not None and b.altitude_m is not None:
        heights = [a.altitude_m, b.altitude_m]
    points = to_ecef(
        np.array([a.longitude_deg, b.longitude_deg]),
        np.array([a.latitude_deg, b.latitude_deg]),
        np.array(heights),
    )
    enu = east_north_up(a.longitude_deg, a.latitude_deg) @ (points[1] - points[0])
    (flat_a, high_a), (flat_b, high_b) = fix_sds(a), fix_sds(b)
    shared = correlation(first, second)
    flat = flat_a**2 + flat_b**2 - 2.0 * shared * flat_a * flat_b
    high = high_a**2 + high_b**2 - 2.0 * shared * high_a * high_b
    cov = np.diag([flat, flat, high])
    length = float(np.linalg.norm(enu))
    sd = float(np.sqrt(max(flat, 1e-12)))
    if length > 0:
        along = enu / length
        sd = float(np.sqrt(along @ cov @ along))
    ground = float(np.hypot(enu[0], enu[1]))
    azimuth_sd = float(np.degrees(np.sqrt(flat) / ground)) if ground > 0 else 180.0
    ratio = length / sd
    reasons: tuple[str, ...] = ()
    if ratio < REFUSED_SDS:
        reasons = (
            f"GNSS gives a baseline of {length:.1f} m \N{PLUS-MINUS SIGN}{sd:.1f} m, which is too "
            "uncertain to size anything: read a tape between the stations",
        )
    elif ratio < FLAGGED_SDS:
        reasons = (
            f"the baseline of {length:.2f} m comes from GNSS, good to "
            f"\N{PLUS-MINUS SIGN}{sd:.2f} m only",
        )
    return GnssBaseline(
        length_m=length,
        length_sd_m=sd,
        azimuth_deg=float(np.degrees(np.arctan2(enu[0], enu[1])) % 360.0),
        azimuth_sd_deg=min(azimuth_sd, 180.0),
        enu_m=enu,
        cov_m2=cov,
        usable=ratio >= REFUSED_SDS,
        reasons=reasons,
    )
