"""landmarks.csv: points of known coordinates that photos show.

In: the sheet and the round's CRS. Out: `Landmark`s in longitude and latitude.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import Landmark, Settings
from fieldround.rounds.sheets import Row, read_table

COLUMNS = ("landmark", "easting", "northing", "longitude", "latitude", "height_m", "sd_m", "note")
REQUIRED = ("landmark",)

# A surveyed point and what of it was marked in the photo (our assumption).
UNSTATED_SD_M = 0.1


def read_landmarks(
    path: Path, settings: Settings, faults: list[Fault]
) -> tuple[tuple[Landmark, ...], tuple[str, ...]]:
    """Landmarks and notes; a missing sheet means none."""
    if not path.exists():
        return (), ()
    table = read_table(path, COLUMNS, REQUIRED, faults)
    if table is None or table.missing:
        return (), ()
    change = _Change(settings.crs)
    taken: dict[str, int] = {}
    found = []
    for row in table.rows:
        name = row.required("landmark", "a name for the landmark")
        place = _place(row, change)
        height_m = row.number("height_m", "metres")
        sd_m = row.number("sd_m", "metres", above=0.0)
        if name in taken:
            remedy = f"row {taken[name]} has this landmark already; list each landmark once"
            row.fault("landmark", name, remedy)
            continue
        if name:
            taken[name] = row.row
        if name and place is not None:
            sd = UNSTATED_SD_M if sd_m is None else sd_m
            found.append(Landmark(name, *place, height_m, sd, row.text("note"), row.row))
    return tuple(found), table.notes


class _Change:
    """From the round's CRS to longitude and latitude, made when it is first needed."""

    def __init__(self, crs: str | None) -> None:
        self.crs = crs
        self._transformer: Any = None

    def degrees(self, east: float, north: float) -> tuple[float, float] | None:
        from pyproj import Transformer
        from pyproj.exceptions import ProjError

        if self._transformer is None:
            self._transformer = Transformer.from_crs(self.crs, "EPSG:4326", always_xy=True)
        try:
            lon, lat = self._transformer.transform(east, north, errcheck=True)
        except ProjError:
            return None
        return (float(lon), float(lat)) if np.isfinite([lon, lat]).all() else None


def _place(row: Row, change: _Change) -> tuple[float, float] | None:
    """Longitude and latitude of a row; None when they are missing or wrong (a fault)."""
    lon = row.number("longitude", "degrees", least=-180.0, most=180.0)
    lat = row.number("latitude", "degrees", least=-90.0, most=90.0)
    east, north = row.number("easting", "metres"), row.number("northing", "metres")
    written = {name: bool(row.text(name)) for name in COLUMNS[1:5]}
    if written["longitude"] and written["latitude"]:
        return None if lon is None or lat is None else (lon, lat)
    if not (written["easting"] and written["northing"]):
        row.fault(None, None, "write easting and northing, or longitude and latitude")
        return None
    if east is None or north is None:
        return None
    if change.crs is None:
        remedy = (
            "an easting needs its CRS: write crs under [round] in round.toml, or give longitude "
            "and latitude here"
        )
        row.fault("easting", row.text("easting"), remedy)
        return None
    place = change.degrees(east, north)
    if place is None:
        remedy = "these coordinates lie nowhere in the round's CRS; is the easting the first?"
        row.fault("easting", row.text("easting"), remedy)
    return place
