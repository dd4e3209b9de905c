"""CSV files of survey receivers under tracks/: epochs by time, or one position a photo.

In: the sheet and [tracks] of round.toml, which may name its columns and its CRS. Out: a `Track`,
or fixes by photo name; what is wrong is a fault with its row.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path
from typing import Any

import numpy as np

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import Fix
from fieldround.rounds.photos import PhotoFolder
from fieldround.rounds.sheets import Row, Table, nearest_hint, read_table
from fieldround.rounds.track_settings import TrackSettings
from fieldround.rounds.tracks import Track, make_track

# Titles that are understood by themselves, whatever their case, blanks as underscores.
KNOWN: Mapping[str, tuple[str, ...]] = {
    "time": ("time", "time_utc", "utc", "utc_time", "datetime", "date_time", "timestamp"),
    "east": ("east", "easting", "easting_m", "e", "x", "longitude", "longitude_deg", "lon"),
    "north": ("north", "northing", "northing_m", "n", "y", "latitude", "latitude_deg", "lat"),
    "height": ("height", "height_m", "h", "z", "ellipsoidal_height", "elevation", "elevation_m",
               "altitude", "altitude_m"),
    "sd": ("sd", "sd_m", "horizontal_sd", "horizontal_sd_m", "hrms", "sd_h"),
    "height_sd": ("height_sd", "height_sd_m", "vertical_sd", "vertical_sd_m", "vrms", "sd_v"),
    "photo": ("photo", "photo_name"),
}  # fmt: skip
_DEGREES = ("longitude", "longitude_deg", "lon", "latitude", "latitude_deg", "lat")
# Titles of heights above the sea; all others are taken above the ellipsoid, which is what a
# receiver measures.
_SEA = re.compile(r"elev|alt|ortho|msl|sea", re.IGNORECASE)
_DOTTED = re.compile(r"(\d\d?)\.(\d\d?)\.(\d{4})[ T](.+)")


@dataclass(frozen=True)
class PointSheet:
    """What a CSV file of positions holds: a track, or fixes by photo."""

    track: Track | None
    points: Mapping[str, Fix]
    notes: tuple[str, ...] = ()


def read_positions(
    path: Path, settings: TrackSettings, folder: PhotoFolder | None, faults: list[Fault]
) -> PointSheet:
    """Read a CSV file of positions."""
    table = read_table(path, (), (), faults)
    if table is None:
        return PointSheet(None, {})
    columns = _columns(table, settings, faults)
    if columns is None:
        return PointSheet(None, {})
    reader = _Reader(table, columns, settings)
    rows = [found for row in table.rows if (found := reader.row(row)) is not None]
    if not rows:
        return PointSheet(None, {}, (f"tracks/{path.name} holds no position",))
    try:
        lon, lat = reader.degrees(rows)
    except ValueError as wrong:
        faults.append(Fault(table.name, None, columns["east"], None, str(wrong)))
        return PointSheet(None, {})
    name = f"tracks/{table.name}"
    above = "sea level" if _SEA.search(columns.get("height", "")) else "ellipsoid"
    if "photo" in columns:
        return PointSheet(None, _points(name, rows, lon, lat, above, folder))
    values = np.array([[r.height, r.sd, r.height_sd] for r in rows], dtype=float)
    track = make_track(
        name,
        np.array([r.seconds for r in rows], dtype=float),
        np.stack([lon, lat, values[:, 0]], axis=-1),
        np.where(np.isfinite(values[:, 1]), values[:, 1], reader.unstated_sd),
        values[:, 2],
        above,
        bool(np.isfinite(values[:, 1]).any()),
    )
    return PointSheet(track, {})


@dataclass(frozen=True)
class _Position:
    row: Row
    seconds: float | None
    photo: str
    east: float
    north: float
    height: float | None
    sd: float | None
    height_sd: float | None


def _columns(
    table: Table, settings: TrackSettings, faults: list[Fault]
) -> dict[str, str] | None:
    """Our word -> title in the sheet; None when a needed one is missing (a fault)."""
    titles = {re.sub(r"[\s-]+", "_", title.strip()).casefold(): title
              for title in table.extra_columns}  # fmt: skip
    found: dict[str, str] = {}
    ok = True
    for word, known in KNOWN.items():
        asked = getattr(settings, f"{word}_column")
        if asked is not None:
            title = next((t for t in table.extra_columns if t.casefold() == asked.casefold()), None)
            if title is None:
                remedy = f"the sheet has no such column, which {word}_column in round.toml names"
                remedy += nearest_hint(asked, table.extra_columns)
                faults.append(Fault(table.name, 1, asked, None, remedy))
                ok = False
            else:
                found[word] = title
            continue
        title = next((titles[name] for name in known if name in titles), None)
        if title is not None:
            found[word] = title
    for word in ("east", "north"):
        if word not in found and getattr(settings, f"{word}_column") is None:
            remedy = f"no column holds the {word}ing; name it as {word}_column in round.toml"
            faults.append(Fault(table.name, 1, None, None, remedy))
            ok = False
    if "time" not in found and "photo" not in found:
        remedy = (
            "a sheet of positions needs a column of times, or one of photo names; name it as "
            "time_column or photo_column under [tracks] in round.toml"
        )
        faults.append(Fault(table.name, 1, None, None, remedy))
        ok = False
    return found if ok else None


class _Reader:
    """The rows of one sheet, read by its columns."""

    unstated_sd = 5.0

    def __init__(self, table: Table, columns: Mapping[str, str], settings: TrackSettings) -> None:
        self.table, self.columns, self.settings = table, columns, settings
        self.zone = timezone(timedelta(minutes=settings.utc_offset_min))

    def row(self, row: Row) -> _Position | None:
        east = row.number(self.columns["east"], "metres or degrees")
        north = row.number(self.columns["north"], "metres or degrees")
        height = self._optional(row, "height")
        sd = self._optional(row, "sd", above=0.0)
        height_sd = self._optional(row, "height_sd", above=0.0)
        photo = row.text(self.columns["photo"]) if "photo" in self.columns else ""
        seconds = None
        if "photo" not in self.columns:
            seconds = self._seconds(row)
            if seconds is None:
                return None
        elif not photo:
            return None
        if east is None or north is None:
            return None
        return _Position(row, seconds, photo, east, north, height, sd, height_sd)

    def _optional(self, row: Row, word: str, above: float | None = None) -> float | None:
        if word not in self.columns:
            return None
        return row.number(self.columns[word], "metres", above=above)

    def _seconds(self, row: Row) -> float | None:
        title = self.columns["time"]
        written = row.text(title)
        if not written:
            return None
        day = row.text("date") if "date" in self.table.extra_columns and title != "date" else ""
        try:
            return seconds_of(f"{day} {written}".strip(), self.zone)
        except ValueError as wrong:
            row.fault(title, written, str(wrong))
            return None

    def degrees(self, rows: list[_Position]) -> tuple[np.ndarray, np.ndarray]:
        """Longitudes and latitudes on WGS 84.

        raises : ValueError whose text is the remedy
        """
        east = np.array([r.east for r in rows], dtype=float)
        north = np.array([r.north for r in rows], dtype=float)
        if self.settings.crs is not None:
            from pyproj import Transformer
            from pyproj.exceptions import ProjError

            try:
                change: Any = Transformer.from_crs(self.settings.crs, "EPSG:4326", always_xy=True)
                lon, lat = change.transform(east, north, errcheck=True)
            except ProjError:
                lon, lat = np.full(len(east), np.inf), north
        else:
            titled = re.sub(r"[\s-]+", "_", self.columns["east"]).casefold() in _DEGREES
            if not titled and (np.abs(east).max() > 180.0 or np.abs(north).max() > 90.0):
                raise ValueError(
                    "these are not degrees: write the coordinates' CRS as crs under [tracks] in "
                    'round.toml, such as "EPSG:25833"'
                )
            lon, lat = east, north
        wrong = ~(np.isfinite(lon) & np.isfinite(lat) & (np.abs(lon) <= 180) & (np.abs(lat) <= 90))
        if wrong.any():
            first = rows[int(np.argmax(wrong))]
            raise ValueError(
                f"row {first.row.row} ({first.east:g}, {first.north:g}) is no place on earth; "
                "check which column is the easting, and crs under [tracks] in round.toml"
            )
        return np.asarray(lon, dtype=float), np.asarray(lat, dtype=float)


def _points(
    name: str,
    rows: list[_Position],
    lon: np.ndarray,
    lat: np.ndarray,
    above: str,
    folder: PhotoFolder | None,
) -> dict[str, Fix]:
    points: dict[str, Fix] = {}
    for found, x, y in zip(rows, lon, lat, strict=True):
        photo = found.photo
        if folder is not None:
            try:
                photo = folder.find(found.photo)
            except ValueError as wrong:
                found.row.fault("photo", found.photo, str(wrong))
                continue
        points[photo] = Fix(
            float(x), float(y), found.height, found.sd, found.height_sd, above, source=name
        )
    return points


def seconds_of(written: str, zone: timezone = UTC) -> float:
    """Seconds since 1970 of a time as receivers write it; `zone` holds when it states no offset.

    ISO 8601, the same with slashes, day.month.year, or seconds since 1970.
    raises : ValueError whose text is the remedy
    """
    if re.fullmatch(r"\d{9,11}(\.\d*)?", written):
        return float(written)
    text = written.replace("/", "-")
    dotted = _DOTTED.fullmatch(text)
    if dotted is not None:
        day, month, year, clock = dotted.groups()
        text = f"{year}-{int(month):02d}-{int(day):02d} {clock}"
    text = re.sub(r"\s*(utc|z)$", "+00:00", text, flags=re.IGNORECASE)
    # Fractions of any length; Python's reader wants at most six digits.
    text = re.sub(r"([.,]\d{6})\d+", r"\1", text)
    try:
        at = datetime.fromisoformat(text)
    except ValueError:
        raise ValueError(
            "write date and time such as 2026-05-14T09:10:00.25Z or 14.05.2026 09:10:00"
        ) from None
    if re.fullmatch(r"\d{4}-?\d\d-?\d\d", text):
        raise ValueError("a time is missing; write it after the date, or name its column")
    return (at.replace(tzinfo=zone) if at.utcoffset() is None else at).timestamp()
