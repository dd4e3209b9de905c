"""The figures of a round as the lists take them: one record an object.

In: a `RoundResult`, or results.gpkg of an earlier run. Out: `Measured` records.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Mapping
from contextlib import closing
from dataclasses import dataclass, field, fields
from pathlib import Path
from types import MappingProxyType
from typing import Any

from fieldround.deliver.fields import COORDINATE_FIELDS, OBJECT_FIELDS
from fieldround.rounds.errors import RoundError
from fieldround.solve.results import RoundResult

_EMPTY: Mapping[str, str] = MappingProxyType({})


@dataclass(frozen=True)
class Measured:
    """One object with the figures the trades ask for; None where a figure was not found.

    common_sd_m : the part of diameter_sd_m that all objects of the round share (the camera)
    extra       : columns that a person added to objects.csv
    """

    object: str
    kind: str
    label: str
    verdict: str
    diameter_m: float | None = None
    diameter_sd_m: float | None = None
    diameter_lo_m: float | None = None
    diameter_hi_m: float | None = None
    ref_height_m: float | None = None
    ground_diameter_m: float | None = None
    taper_mm_per_m: float | None = None
    height_m: float | None = None
    height_sd_m: float | None = None
    lean_deg: float | None = None
    lean_sd_deg: float | None = None
    lean_to_deg: float | None = None
    position_sd_m: float | None = None
    longitude: float | None = None
    latitude: float | None = None
    common_sd_m: float = 0.0
    extra: Mapping[str, str] = field(default_factory=lambda: _EMPTY)

    @property
    def own_sd_m(self) -> float:
        """The part of the diameter's sd that is this object's alone."""
        sd = self.diameter_sd_m or 0.0
        return float(max(sd**2 - self.common_sd_m**2, 0.0) ** 0.5)


def from_result(result: RoundResult) -> list[Measured]:
    """The records of a round that was just run."""
    records = []
    for found in result.objects:
        at = None if result.placement is None else result.placement.objects.get(found.object)
        own = [f.name for f in fields(Measured) if hasattr(found, f.name)]
        values = {name: getattr(found, name) for name in own}
        if at is not None:
            values |= {
                "longitude": at.longitude_deg,
                "latitude": at.latitude_deg,
                "position_sd_m": at.position_sd_m,
            }
        values["common_sd_m"] = max(found.budget.get("camera", 0.0), 0.0) ** 0.5
        records.append(Measured(**values))
    return records


def from_geopackage(path: Path) -> list[Measured]:
    """The records of an earlier run, from the file it wrote.

    raises : RoundError when there is no such file or it is not one of ours
    """
    if not path.exists():
        raise RoundError(
            f"{path} is not there: run `fieldround run` on the folder first, the lists are made "
            "of its results"
        )
    try:
        with closing(sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True)) as db:
            db.row_factory = sqlite3.Row
            rows = [dict(row) for row in db.execute("SELECT * FROM objects ORDER BY fid")]
            shared = dict(
                db.execute("SELECT object, variance_m2 FROM budget WHERE source = 'camera'")
            )
            srs = db.execute(
                "SELECT definition_12_063 FROM gpkg_spatial_ref_sys JOIN gpkg_geometry_columns"
                " USING (srs_id) WHERE table_name = 'objects'"
            ).fetchone()[0]
    except (sqlite3.Error, TypeError) as error:
        raise RoundError(f"{path} cannot be read as results of a run: {error}") from error
    places = _places([row["geom"] for row in rows], srs)
    return [
        _record(row, place, shared.get(row["object"], 0.0))
        for row, place in zip(rows, places, strict=True)
    ]


def _record(row: Mapping[str, Any], place: tuple[float, float] | None, shared: float) -> Measured:
    ours = {f.name for f in OBJECT_FIELDS + COORDINATE_FIELDS} | {"fid", "geom"}
    own = {f.name for f in fields(Measured)}
    values = {name: value for name, value in row.items() if name in own & ours}
    return Measured(
        **{**values, "label": values.get("label") or ""},
        longitude=None if place is None else place[0],
        latitude=None if place is None else place[1],
        common_sd_m=max(shared or 0.0, 0.0) ** 0.5,
        extra={name: str(v) for name, v in row.items() if name not in ours and v is not None},
    )


def _places(blobs: list[bytes | None], wkt: str) -> list[tuple[float, float] | None]:
    """Longitude and latitude of points in GeoPackage binary (29 bytes: header, then WKB)."""
    import shapely
    from pyproj import CRS, Transformer

    points = [None if blob is None else shapely.from_wkb(blob[8:]) for blob in blobs]
    if all(point is None for point in points):
        return [None] * len(points)
    to_world = Transformer.from_crs(CRS.from_wkt(wkt), "EPSG:4326", always_xy=True)
    return [None if p is None else to_world.transform(p.x, p.y) for p in points]
