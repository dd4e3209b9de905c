"""The folder tracks/ of a round: every file in it by its kind.

In: the folder. Out: tracks, fixes by photo, sentences; faults of sheets.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import Fix
from fieldround.rounds.photos import PhotoFolder
from fieldround.rounds.track_files import read_gpx, read_nmea
from fieldround.rounds.track_settings import TrackSettings
from fieldround.rounds.track_sheets import read_positions
from fieldround.rounds.tracks import Track

NMEA_ENDINGS = (".nmea", ".nma", ".ubx", ".log", ".txt")


@dataclass
class TrackFolder:
    """What tracks/ holds."""

    tracks: list[Track] = field(default_factory=list)
    points: dict[str, Fix] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)


def read_tracks(
    folder: Path, settings: TrackSettings, photos: PhotoFolder | None, faults: list[Fault]
) -> TrackFolder:
    """Read every file under tracks/; a missing folder is an empty one."""
    found = TrackFolder()
    if not folder.is_dir():
        return found
    for path in sorted(folder.iterdir()):
        ending = path.suffix.casefold()
        if path.name.startswith(".") or not path.is_file():
            continue
        track: Track | None = None
        reason: str | None = None
        if ending == ".gpx":
            track, reason = read_gpx(path)
        elif ending in NMEA_ENDINGS:
            track, reason = read_nmea(path, settings)
        elif ending == ".csv":
            sheet = read_positions(path, settings, photos, faults)
            track = sheet.track
            found.points.update(sheet.points)
            found.notes += sheet.notes
        else:
            reason = f"tracks/{path.name} was not read; tracks are *.gpx, *.nmea and *.csv"
        if track is not None:
            found.tracks.append(track)
            found.notes += track.notes
        if reason:
            found.notes.append(reason)
    return found
