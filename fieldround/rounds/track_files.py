"""GPX and NMEA files under tracks/.

In: the files. Out: a `Track` each, or a sentence why there is none. A receiver writes broken lines
now and then: they are counted and left out, they stop nothing.
"""

from __future__ import annotations

import contextlib
import math
from datetime import UTC, date, datetime, time, timedelta
from pathlib import Path
from typing import Any

import numpy as np

from fieldround.rounds.track_settings import TrackSettings
from fieldround.rounds.tracks import Track, make_track

# Receivers that state no sd: that of each axis for a dilution of precision of 1, and the least.
SD_A_DOP_M, LEAST_SD_M, UNSTATED_SD_M = 3.0, 3.0, 5.0
# GGA quality without a GST sentence beside it (common practice): differential, RTK fixed, float.
QUALITY_SD_M = {2: 1.0, 4: 0.03, 5: 0.4, 9: 1.0}
_ESTIMATED = (0, 6, 7, 8)
_LARGEST_BYTES = 200_000_000


def read_gpx(path: Path) -> tuple[Track | None, str | None]:
    """A GPX 1.0 or 1.1 file: its track points that have a time, else a sentence.

    source : GPX 1.1 schema (Topografix, 2004): times in UTC, elevation in metres, hdop
    """
    import gpxpy
    from gpxpy.gpx import GPXException

    name = f"tracks/{path.name}"
    try:
        with path.open("rb") as file:
            text = file.read(_LARGEST_BYTES).decode("utf-8-sig", "replace")
        found = gpxpy.parse(text)
    except (GPXException, OSError, ValueError, AttributeError, KeyError, TypeError) as wrong:
        first = " ".join(str(wrong).split())[:120]
        return None, f"{name} cannot be read as GPX ({first}); export it again"
    points = [p for track in found.tracks for segment in track.segments for p in segment.points]
    rows = []
    for point in points:
        if point.time is None or not _on_earth(point.longitude, point.latitude):
            continue
        at = point.time if point.time.utcoffset() is not None else point.time.replace(tzinfo=UTC)
        dop = point.horizontal_dilution
        sd = UNSTATED_SD_M if dop is None or not dop > 0 else max(LEAST_SD_M, SD_A_DOP_M * dop)
        rows.append((at.timestamp(), point.longitude, point.latitude, point.elevation, sd, None))
    if not rows:
        return None, f"{name} has no track point with a time, so no photo can be placed by it"
    left_out = len(points) - len(rows)
    notes = (f"{name}: {left_out} points without time or place were left out",) if left_out else ()
    return _track(name, rows, "sea level", False, notes), None


def read_nmea(path: Path, settings: TrackSettings) -> tuple[Track | None, str | None]:
    """An NMEA 0183 log: GGA with the sds of GST, dated by RMC or ZDA.

    source : NMEA 0183 sentences as pynmea2 takes them apart; sentences whose checksum is wrong
             are left out
    """
    import pynmea2

    name = f"tracks/{path.name}"
    log = _Nmea(settings)
    try:
        with path.open("r", encoding="ascii", errors="replace") as file:
            for line in file:
                start = line.find("$")
                if start < 0 or line[start + 3 : start + 6] not in ("GGA", "GST", "RMC", "ZDA"):
                    continue
                try:
                    log.take(pynmea2.parse(line[start:].strip(), check=True))
                except (pynmea2.ParseError, ValueError, TypeError, AttributeError):
                    log.broken += 1
    except OSError as wrong:
        return None, f"{name} cannot be read ({wrong.strerror or wrong})"
    log.close()
    if not log.rows:
        if log.undated:
            return None, (
                f"{name} has positions but no date (RMC or ZDA): write date under [tracks] in "
                "round.toml"
            )
        return None, f"{name} has no GGA sentence with a position"
    notes = []
    if log.broken:
        notes.append(f"{name}: {log.broken} broken sentences were left out")
    if log.undated:
        notes.append(f"{name}: {log.undated} positions before the first date were left out")
    return _track(name, log.rows, "sea level", log.stated, tuple(notes)), None


class _Nmea:
    """A log taken sentence by sentence; GST of the same second belongs to its GGA."""

    def __init__(self, settings: TrackSettings) -> None:
        self.given: date | None = settings.date
        self.day: date | None = None
        self.waiting: tuple[time, Any] | None = None
        self.sds: dict[time, tuple[float | None, float | None]] = {}
        self.rows: list[tuple[float, float, float, float | None, float, float | None]] = []
        self.last: datetime | None = None
        self.broken = self.undated = 0
        self.stated = False

    def take(self, sentence: Any) -> None:
        kind = sentence.sentence_type
        if kind == "GGA":
            self.close()
            if isinstance(sentence.timestamp, time):
                self.waiting = (sentence.timestamp.replace(tzinfo=None), sentence)
        elif kind == "GST" and isinstance(sentence.timestamp, time):
            clock = sentence.timestamp.replace(tzinfo=None)
            # The sd of a float position of each axis: mean of both variances.
            lat, lon = _positive(sentence.std_dev_latitude), _positive(sentence.std_dev_longitude)
            level = None if lat is None or lon is None else math.sqrt(0.5 * (lat**2 + lon**2))
            self.sds = {clock: (level, _positive(sentence.std_dev_altitude))}
        elif kind in ("RMC", "ZDA"):
            with contextlib.suppress(ValueError, TypeError, AttributeError):
                if kind == "RMC":
                    day = sentence.datestamp
                else:
                    day = date(int(sentence.year), int(sentence.month), int(sentence.day))
                if isinstance(day, date):
                    self._dated(day, sentence.timestamp)

    def _dated(self, day: date, clock: Any) -> None:
        """A sentence's date holds for its own time; its GGA may stand across midnight."""
        if self.waiting is not None and isinstance(clock, time):
            off = _seconds(self.waiting[0]) - _seconds(clock.replace(tzinfo=None))
            if off > 43_200.0:
                day -= timedelta(days=1)
            elif off < -43_200.0:
                day += timedelta(days=1)
        self.day = day

    def close(self) -> None:
        """Put the waiting GGA away, with the date and sds known by now."""
        if self.waiting is None:
            return
        (clock, gga), self.waiting = self.waiting, None
        try:
            quality = int(gga.gps_qual or 0)
            lon, lat = float(gga.longitude), float(gga.latitude)
        except (ValueError, TypeError):
            self.broken += 1
            return
        if quality in _ESTIMATED or not gga.lat or not gga.lon or not _on_earth(lon, lat):
            return
        day = self.day or self.given
        if day is None:
            self.undated += 1
            return
        at = datetime.combine(day, clock, UTC)
        if self.last is not None and at < self.last - timedelta(hours=12):
            # Midnight passed since the last date was said.
            self.day = day + timedelta(days=1)
            self.given = self.day
            at += timedelta(days=1)
        self.last = at
        level, height_sd = self.sds.pop(clock, (None, None))
        if level is None:
            dop = _positive(gga.horizontal_dil)
            level = QUALITY_SD_M.get(quality)
            if level is None:
                level = UNSTATED_SD_M if dop is None else max(LEAST_SD_M, SD_A_DOP_M * dop)
        else:
            self.stated = True
        height = _finite(gga.altitude)
        self.rows.append((at.timestamp(), lon, lat, height, level, height_sd))


def _track(
    name: str, rows: list[Any], altitude_is: str, stated: bool, notes: tuple[str, ...]
) -> Track | None:
    table = np.array([[np.nan if v is None else v for v in row] for row in rows], dtype=float)
    return make_track(
        name, table[:, 0], table[:, 1:4], table[:, 4], table[:, 5], altitude_is, stated, notes
    )


def _on_earth(lon: float, lat: float) -> bool:
    whole = math.isfinite(lon) and math.isfinite(lat) and not (lon == 0.0 and lat == 0.0)
    return whole and abs(lat) <= 90.0 and abs(lon) <= 180.0


def _finite(value: Any) -> float | None:
    with contextlib.suppress(ValueError, TypeError):
        number = float(value)
        return number if math.isfinite(number) else None
    return None


def _positive(value: Any) -> float | None:
    number = _finite(value)
    return number if number is not None and number > 0.0 else None


def _seconds(clock: time) -> float:
    return clock.hour * 3600.0 + clock.minute * 60.0 + clock.second + clock.microsecond / 1e6
