"""Where objects and stations stand and where photos lie, as the results say it.

In: a `RoundResult`. Out: placed points whose coordinates are numbers, relative paths.
"""

from __future__ import annotations

import functools
import math
import os
from pathlib import Path

from fieldround.place.frames import PlacedPoint
from fieldround.rounds.model import Round
from fieldround.solve.results import RoundResult


def place_of(result: RoundResult, name: str) -> PlacedPoint | None:
    """Where an object stands, or None."""
    return None if result.placement is None else _sound(result.placement.objects.get(name))


def station_of(result: RoundResult, pair: str, photo: str) -> PlacedPoint | None:
    """Where the camera stood for a photo of a pair, or None."""
    placed = None if result.placement is None else result.placement.pairs.get(pair)
    return None if placed is None else _sound(placed.stations.get(photo))


def _sound(at: PlacedPoint | None) -> PlacedPoint | None:
    """The point if its coordinates are numbers: what is no number is no place."""
    if at is None:
        return None
    numbers = (at.easting_m, at.northing_m, at.longitude_deg, at.latitude_deg)
    return at if all(map(math.isfinite, numbers)) else None


def photo_path(round_: Round, name: str | None, out_dir: Path) -> str | None:
    """Path of a photo relative to the results, with forward slashes; None for a lost photo."""
    photo = round_.photos.get(name) if name else None
    if photo is None:
        return None
    folder, file = os.path.split(photo.path)
    return f"{_relative(folder, str(out_dir))}/{file}"


@functools.lru_cache(maxsize=256)
def _relative(folder: str, start: str) -> str:
    try:
        return Path(os.path.relpath(folder, start)).as_posix()
    except ValueError:  # another drive: no relative path exists
        return Path(folder).as_posix()
