"""Photos placed by time on GNSS tracks.

In: tracks, photos, section [tracks] of round.toml. Out: the photos with the tracks' fixes, each
with the sd of its interpolation, clock and arm; sentences on what was done.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime

import numpy as np

from fieldround.geometry.earth import enu_from_geodetic, geodetic_from_enu
from fieldround.rounds.model import Fix, Photo
from fieldround.rounds.track_clock import Clock, find_clock
from fieldround.rounds.track_settings import TrackSettings

# Between two epochs further apart than this nobody knows where the antenna was.
LONGEST_GAP_S = 60.0
# Somebody who stands sways by this much (an assumption); a track that bends tells more.
LEAST_BEND_M_S2 = 0.05
# A position that its clock or its gaps leave less sure than this is none.
WORST_SD_M = 25.0
# Clock of a photo whose offset is given, and of one that says its UTC offset but has no fix to
# compare: phones keep time to a second or two (common practice).
GIVEN_CLOCK_SD_S = 0.5
UNTRIED_CLOCK_SD_S = 2.0
_CLOCK_NODES, _CLOCK_WEIGHTS = np.polynomial.hermite_e.hermegauss(7)


@dataclass(frozen=True)
class Track:
    """One file of positions.

    seconds  : (n,) since 1970 UTC, rising
    geodetic : (n, 3) longitude deg, latitude deg, height m (NaN where unknown)
    sd_m     : (n,) of each horizontal axis; height_sd_m : (n,), NaN where not stated
    stated   : the file states its sds (else they are this program's guess)
    """

    name: str
    seconds: np.ndarray
    geodetic: np.ndarray
    sd_m: np.ndarray
    height_sd_m: np.ndarray
    altitude_is: str
    stated: bool = True
    notes: tuple[str, ...] = ()


def make_track(
    name: str, seconds: np.ndarray, geodetic: np.ndarray, sd_m: np.ndarray,
    height_sd_m: np.ndarray, altitude_is: str, stated: bool = True, notes: tuple[str, ...] = (),
) -> Track | None:  # fmt: skip
    """A track in the order of time, the first of several positions at one time; None if empty."""
    order = np.argsort(seconds, kind="stable")
    _, first = np.unique(seconds[order], return_index=True)
    keep = order[first]
    if not len(keep):
        return None
    return Track(
        name, seconds[keep], geodetic[keep], sd_m[keep], height_sd_m[keep], altitude_is, stated,
        notes,
    )  # fmt: skip


def photo_seconds(photo: Photo) -> float | None:
    """Seconds since 1970 of a photo; local time without offset is taken as if it were UTC."""
    at: datetime | None = photo.taken_at
    if at is None:
        return None
    return (at.replace(tzinfo=UTC) if at.utcoffset() is None else at).timestamp()


class Path2D:
    """A track in east and north about its own first point."""

    def __init__(self, track: Track) -> None:
        self.track = track
        self.origin = np.array([*track.geodetic[0, :2], 0.0])
        flat = track.geodetic.copy()
        flat[:, 2] = 0.0
        self.xy = enu_from_geodetic(flat, self.origin)[:, :2]
        self.bend = self._bends()

    def _bends(self) -> np.ndarray:
        """Size of the acceleration at every epoch, (n,) m/s^2."""
        bend = np.zeros(len(self.xy))
        if len(self.xy) > 2:
            step = np.diff(self.track.seconds)[:, None]
            speed = np.diff(self.xy, axis=0) / step
            turned = np.diff(speed, axis=0) / (0.5 * (step[1:] + step[:-1]))
            bend[1:-1] = np.linalg.norm(turned, axis=1) / np.sqrt(2.0)
        return np.maximum(bend, LEAST_BEND_M_S2)

    def at(self, seconds: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Positions (..., 2), sds of the interpolation (...), and whether the track covers them."""
        times = self.track.seconds
        right = np.clip(np.searchsorted(times, seconds), 1, max(len(times) - 1, 1))
        left = right - 1
        right = np.minimum(right, len(times) - 1)
        gap = times[right] - times[left]
        into = np.clip(seconds - times[left], 0.0, gap)
        share = np.divide(into, gap, out=np.zeros_like(into), where=gap > 0.0)
        xy = self.xy[left] + share[..., None] * (self.xy[right] - self.xy[left])
        # A parabola leaves its chord by a t (T - t) / 2.
        sd = 0.5 * into * (gap - into) * np.maximum(self.bend[left], self.bend[right])
        outside = (seconds < times[0] - 0.5) | (seconds > times[-1] + 0.5)
        exact = (into == 0.0) | (into == gap)
        return xy, sd, ~outside & (exact | (gap <= LONGEST_GAP_S))

    def mixed(self, values: np.ndarray, seconds: float) -> float:
        """A value of the epochs at one time; NaN where either neighbour has none."""
        return float(np.interp(seconds, self.track.seconds, values))


def place_on_tracks(
    photos: Mapping[str, Photo],
    tracks: Sequence[Track],
    points: Mapping[str, Fix],
    settings: TrackSettings,
) -> tuple[dict[str, Photo], list[str]]:
    """The photos with the fixes that the tracks give them, and sentences for the report.

    points : fixes that a sheet under tracks/ gives to photos by name; they go before any track

    A track's fix replaces that of the EXIF: whoever carried a receiver meant it.
    """
    paths = [Path2D(track) for track in tracks]
    clocks, notes = _clocks(photos, paths, settings) if paths else ({}, [])
    placed: dict[str, Photo] = {}
    counts: dict[str, int] = {}
    left_out: dict[str, list[str]] = {}
    for name, photo in photos.items():
        fix = _with_arm(points[name], settings) if name in points else None
        if fix is None and paths:
            fix, reason = _fix_of(photo, paths, clocks.get(clock_of(photo)), settings)
            if reason:
                left_out.setdefault(reason, []).append(name)
        placed[name] = photo if fix is None else replace(photo, fix=fix)
        if fix is not None:
            counts[fix.source] = counts.get(fix.source, 0) + 1
    notes += [
        f"{count} photo{'s were' if count > 1 else ' was'} placed by {source}"
        for source, count in sorted(counts.items())
    ]
    notes += [f"not placed by a track, {why}: {_some(names)}" for why, names in left_out.items()]
    return placed, notes


def clock_of(photo: Photo) -> str:
    """The clock a photo's time comes from: the device, apart for times with and without offset."""
    device = " ".join(part for part in (photo.make, photo.model) if part) or photo.camera
    plain = photo.taken_at is not None and photo.taken_at.utcoffset() is None
    return f"{device} (local time)" if plain else device


def _clocks(
    photos: Mapping[str, Photo], paths: Sequence[Path2D], settings: TrackSettings
) -> tuple[dict[str, Clock], list[str]]:
    by_clock: dict[str, list[Photo]] = {}
    for photo in photos.values():
        if photo.taken_at is not None:
            by_clock.setdefault(clock_of(photo), []).append(photo)
    clocks: dict[str, Clock] = {}
    notes: list[str] = []
    for name, mine in sorted(by_clock.items()):
        if settings.clock_offset_s is not None:
            clocks[name] = Clock(settings.clock_offset_s, GIVEN_CLOCK_SD_S)
            continue
        local = mine[0].taken_at is not None and mine[0].taken_at.utcoffset() is None
        both = [photo for photo in mine if photo.fix is not None]
        found = find_clock(both, [photo_seconds(p) or 0.0 for p in both], paths, local)
        if found is not None:
            clocks[name] = found
            notes.append(
                f"the clock of {name} was found from {len(both)} photos with a fix of their own: "
                f"{found.offset_s:+.1f} s (sd {found.sd_s:.1f} s) to the track's time"
            )
        elif not local:
            clocks[name] = Clock(0.0, UNTRIED_CLOCK_SD_S)
            notes.append(
                f"the clock of {name} could not be compared with the track and was believed "
                f"(sd {UNTRIED_CLOCK_SD_S:.0f} s)"
            )
        else:
            notes.append(
                f"the photos of {name} state local time without its UTC offset, and too few have "
                "a fix to find it: write clock_offset_s under [tracks] in round.toml"
            )
    return clocks, notes


def _fix_of(
    photo: Photo, paths: Sequence[Path2D], clock: Clock | None, settings: TrackSettings
) -> tuple[Fix | None, str | None]:
    """The best fix that any track gives a photo, or why there is none."""
    taken = photo_seconds(photo)
    if taken is None:
        return None, "the photo has no time"
    if clock is None:
        return None, "the photo's clock is not known"
    found = [fix_on_path(path, taken + clock.offset_s, clock.sd_s) for path in paths]
    fixes = [fix for fix in found if fix is not None]
    if not fixes:
        return None, "no track covers its time"
    best = min(fixes, key=lambda fix: fix.horizontal_sd_m or np.inf)
    if (best.horizontal_sd_m or 0.0) > WORST_SD_M:
        return None, "its clock or a gap of the track leaves it too unsure"
    return _with_arm(best, settings), None


def fix_on_path(path: Path2D, seconds: float, clock_sd_s: float) -> Fix | None:
    """The fix at a time whose clock has an sd: what that moves along the track is in the sd."""
    here, bent, covered = path.at(np.array([seconds]))
    if not covered[0]:
        return None
    near, _, _ = path.at(seconds + clock_sd_s * _CLOCK_NODES)
    weights = _CLOCK_WEIGHTS / _CLOCK_WEIGHTS.sum()
    moved2 = float(weights @ ((near - here[0]) ** 2).sum(axis=1))
    base = path.mixed(path.track.sd_m, seconds)
    sd = float(np.sqrt(base**2 + bent[0] ** 2 + moved2))
    lon, lat, _ = geodetic_from_enu(np.array([[*here[0], 0.0]]), path.origin)[0]
    height = path.mixed(path.track.geodetic[:, 2], seconds)
    height_sd = path.mixed(path.track.height_sd_m, seconds)
    return Fix(
        longitude_deg=float(lon),
        latitude_deg=float(lat),
        altitude_m=height if np.isfinite(height) else None,
        horizontal_sd_m=sd,
        vertical_sd_m=height_sd if np.isfinite(height_sd) else None,
        altitude_is=path.track.altitude_is,
        source=path.track.name,
    )


def _with_arm(fix: Fix, settings: TrackSettings) -> Fix:
    """The fix with the arm from antenna to camera; its level part waits for the heading."""
    sd = settings.arm_sd_m
    wider = None if fix.horizontal_sd_m is None else float(np.hypot(fix.horizontal_sd_m, sd))
    higher = None if fix.vertical_sd_m is None else float(np.hypot(fix.vertical_sd_m, sd))
    right, forward, up = settings.arm_m
    return replace(
        fix,
        altitude_m=None if fix.altitude_m is None else fix.altitude_m + up,
        horizontal_sd_m=wider,
        vertical_sd_m=higher,
        arm_m=(right, forward),
    )


def _some(names: Sequence[str], most: int = 5) -> str:
    shown = ", ".join(names[:most])
    return shown if len(names) <= most else f"{shown} and {len(names) - most} more"
