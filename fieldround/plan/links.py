"""How well two photos go together as a pair, judged by time, place and common scene.

In: two photos, and what their pictures share. Out: a score and what speaks for it, in words.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.geometry.earth import enu_from_geodetic
from fieldround.place.fixes import difference_correlation, seconds_between, worth
from fieldround.plan.overlap import Shared
from fieldround.rounds.model import Photo

# Photos of a pair are rarely taken more than some minutes apart, or from further than this.
LONGEST_S, FURTHEST_M = 600.0, 120.0
# Shared points that make an overlap doubtful, fair, and sure; share of the look-alikes that agree.
DOUBTFUL, FAIR, SURE = 15, 25, 60
AGREEING = 0.4
# Median movement below which two photos were taken from the same spot, in the same direction.
STILL = 0.004
# Two photos left over are proposed without any shared point when they were taken as near as this.
QUICK_S, QUICK_M, QUICK_DEG = 60.0, 15.0, 60.0

Sharing = Callable[[int, int], Shared]


@dataclass(frozen=True)
class Link:
    """How well two photos go together: above 0 they do; `why` says what speaks for it."""

    score: float
    why: str


def link(photos: Sequence[Photo], i: int, j: int, sharing: Sharing) -> Link:
    """How well two photos go together; their pictures are asked when time and place allow it."""
    a, b = photos[i], photos[j]
    apart_s = seconds_between(a.taken_at, b.taken_at)
    if apart_s is not None and apart_s > LONGEST_S:
        return Link(-1.0, f"they were taken {_span(apart_s)} apart")
    apart = _metres(a, b)
    if apart is not None and apart[0] - 2.0 * apart[1] > FURTHEST_M:
        return Link(-1.0, f"their positions are {apart[0]:.0f} m apart")
    found = sharing(i, j)
    if found.points < DOUBTFUL or found.points < AGREEING * found.matches:
        return Link(-1.0, "no common scene was found in them")
    if found.moved < STILL:
        return Link(-1.0, "they were taken from the same spot")
    shared = f"{found.points} shared points"
    if found.points < FAIR:
        shared += " (few: check that both show the same objects)"
    score = float(np.clip(np.log(found.points / DOUBTFUL) / np.log(SURE / DOUBTFUL), 0.1, 1.0))
    # The crew walks on after a pair: the longer the pause and the way, the less a pair.
    if apart_s is not None:
        score -= 0.5 * min(apart_s / LONGEST_S, 1.0)
    if apart is not None:
        score -= 0.3 * min(max(apart[0] - apart[1], 0.0) / FURTHEST_M, 1.0)
    return Link(max(score, 0.05), ", ".join([*_where_and_when(apart_s, apart), shared]))


def quick_mates(
    photos: Sequence[Photo], alone: Sequence[int], links: Mapping[tuple[int, int], Link]
) -> list[tuple[int, int, str]]:
    """Neighbours left over, taken so soon and near each other that they may be a pair."""
    found = []
    taken: set[int] = set()
    for i, j in itertools.pairwise(alone):
        a, b = photos[i], photos[j]
        apart_s, apart = seconds_between(a.taken_at, b.taken_at), _metres(a, b)
        if i in taken or apart_s is None or not 0.0 < apart_s <= QUICK_S:
            continue
        one = links.get((i, j))
        if one is not None and "same spot" in one.why:
            continue
        if apart is None or apart[0] - apart[1] > QUICK_M or _turned(a, b) > QUICK_DEG:
            continue
        told = ", ".join(_where_and_when(apart_s, apart))
        why = f"{told}, but no common scene was found: check, and mark ties by hand"
        found.append((i, j, why))
        taken |= {i, j}
    return found


def seconds_apart(a: Photo, b: Photo) -> float:
    """Seconds between two photos, infinite where unknown."""
    apart = seconds_between(a.taken_at, b.taken_at)
    return float("inf") if apart is None else apart


def _turned(a: Photo, b: Photo) -> float:
    if a.direction_deg is None or b.direction_deg is None or a.direction_from != b.direction_from:
        return 0.0
    return abs((a.direction_deg - b.direction_deg + 180.0) % 360.0 - 180.0)


def _metres(a: Photo, b: Photo) -> tuple[float, float] | None:
    """Distance between two fixes and its sd, None when one is missing."""
    if a.fix is None or b.fix is None:
        return None
    origin = np.array([a.fix.longitude_deg, a.fix.latitude_deg, 0.0])
    there = np.array([[b.fix.longitude_deg, b.fix.latitude_deg, 0.0]])
    distance = float(np.hypot(*enu_from_geodetic(there, origin)[0, :2]))
    sd_a, sd_b = worth(a.fix).sd_m, worth(b.fix).sd_m
    variance = sd_a**2 + sd_b**2 - 2.0 * difference_correlation(a, b) * sd_a * sd_b
    return distance, float(np.sqrt(variance))


def _where_and_when(apart_s: float | None, apart: tuple[float, float] | None) -> list[str]:
    told = [] if apart_s is None else [f"{_span(apart_s)} apart"]
    if apart is not None:
        digits = 2 if apart[1] < 0.1 else 0
        told.append(f"{apart[0]:.{digits}f} m by GNSS (sd {apart[1]:.{digits}f} m)")
    return told


def _span(seconds: float) -> str:
    if seconds < 120.0:
        return f"{seconds:.0f} s"
    if seconds < 7200.0:
        return f"{seconds / 60.0:.0f} min"
    return f"{seconds / 3600.0:.0f} h"
