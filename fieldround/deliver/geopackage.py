"""results.gpkg: all layers and tables in one file that every GIS opens (OGC 12-128r18).

In: `Layer`s, the CRS, the time of the round. Out: a GeoPackage whose bytes depend on nothing
else. Written with sqlite3 alone, so that no other program's clock or defaults are in the file.
"""

from __future__ import annotations

import json
import sqlite3
import struct
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from fieldround.deliver.crops import CropsByView
from fieldround.deliver.fields import Field
from fieldround.deliver.geopackage_sql import CORE_SQL, INDEX_TRIGGERS
from fieldround.deliver.layers import Layer
from fieldround.deliver.media import write_media

_APPLICATION_ID = 0x47504B47  # "GPKG", requirement 2
_VERSION = 10301  # 12-128r18 is GeoPackage 1.3.1
_SPEC = "http://www.geopackage.org/spec131/"
_CHUNK = 5000
_UNDEFINED = "undefined"
_POINT = int(shapely.GeometryType.POINT)

# Scope, table (None for the whole file) and content of one row of gpkg_metadata.
_Record = tuple[str, str | None, Mapping[str, Any]]


@dataclass(frozen=True)
class Srs:
    """One row of gpkg_spatial_ref_sys."""

    name: str
    srs_id: int
    organization: str
    code: int
    wkt1: str
    wkt2: str


_NO_CARTESIAN = Srs("Undefined Cartesian SRS", -1, "NONE", -1, _UNDEFINED, _UNDEFINED)
_NO_GEOGRAPHIC = Srs("Undefined geographic SRS", 0, "NONE", 0, _UNDEFINED, _UNDEFINED)


def srs_of(crs_wkt: str | None, epsg: int | None) -> Srs:
    """The row that describes the round's CRS; the undefined Cartesian one where there is none."""
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    if crs_wkt is None:
        return _NO_CARTESIAN
    crs = CRS.from_epsg(epsg) if epsg else CRS.from_wkt(crs_wkt)
    wkt = {}
    for version in ("WKT1_GDAL", "WKT2_2015"):
        try:
            wkt[version] = crs.to_wkt(version)
        except CRSError:  # not every CRS can be written in the old form
            wkt[version] = _UNDEFINED
    if epsg:
        return Srs(crs.name, epsg, "EPSG", epsg, wkt["WKT1_GDAL"], wkt["WKT2_2015"])
    return Srs(crs.name, 100000, "NONE", 100000, wkt["WKT1_GDAL"], wkt["WKT2_2015"])


def write_geopackage(
    path: Path,
    layers: Iterable[Layer],
    srs: Srs,
    when: str,
    metadata: Mapping[str, Any],
    crops: CropsByView | None = None,
) -> None:
    """Write every layer and table into a new file.

    when     : UTC time that stands for "last changed" (`2031-05-04T10:02:03.000Z`)
    metadata : what is to be known of the file as a whole; written as JSON
    crops    : pictures to be put inside, None = none
    """
    path.unlink(missing_ok=True)
    db = sqlite3.connect(path, isolation_level=None)
    try:
        # The file is new and renamed only when whole, so a journal would protect nothing.
        db.executescript(
            "PRAGMA encoding = 'UTF-8'; PRAGMA page_size = 4096; PRAGMA auto_vacuum = NONE;"
            "PRAGMA journal_mode = OFF; PRAGMA synchronous = OFF;"
            f"PRAGMA application_id = {_APPLICATION_ID}; PRAGMA user_version = {_VERSION};"
        )
        db.execute("BEGIN")
        for statement in CORE_SQL.split(";\n"):
            if statement.strip():
                db.execute(statement)
        _write_srs(db, srs)
        for name in ("gpkg_data_columns", "gpkg_data_column_constraints"):
            _extension(db, name, None, "gpkg_schema", "extension_schema", "read-write")
        for name in ("gpkg_metadata", "gpkg_metadata_reference"):
            _extension(db, name, None, "gpkg_metadata", "extension_metadata", "read-write")
        records: list[_Record] = [("dataset", None, metadata)]
        for layer in layers:
            _write_layer(db, layer, srs, when)
            records.append(_about_layer(layer))
            if crops is not None and layer.table.name == "objects":
                write_media(db, crops, [str(row[0]) for row in layer.rows], when)
        _write_metadata(db, records, when)
        db.execute("COMMIT")
    finally:
        db.close()


def _write_srs(db: sqlite3.Connection, srs: Srs) -> None:
    from pyproj import CRS

    world = CRS.from_epsg(4326)
    rows = {
        -1: _NO_CARTESIAN,
        0: _NO_GEOGRAPHIC,
        4326: Srs(
            world.name, 4326, "EPSG", 4326, world.to_wkt("WKT1_GDAL"), world.to_wkt("WKT2_2015")
        ),
    }
    rows.setdefault(srs.srs_id, srs)
    db.executemany(
        "INSERT INTO gpkg_spatial_ref_sys VALUES (?, ?, ?, ?, ?, ?, ?)",
        [(r.name, r.srs_id, r.organization, r.code, r.wkt1, None, r.wkt2) for r in rows.values()],
    )
    _extension(
        db,
        "gpkg_spatial_ref_sys",
        "definition_12_063",
        "gpkg_crs_wkt",
        "extension_crs_wkt",
        "read-write",
    )


def _extension(
    db: sqlite3.Connection, table: str, column: str | None, name: str, anchor: str, scope: str
) -> None:
    db.execute(
        "INSERT INTO gpkg_extensions VALUES (?, ?, ?, ?, ?)",
        (table, column, name, f"{_SPEC}#{anchor}", scope),
    )


def _write_layer(db: sqlite3.Connection, layer: Layer, srs: Srs, when: str) -> None:
    name = layer.table.name
    has_geometry = layer.table.geometry is not None
    columns = ["fid INTEGER PRIMARY KEY AUTOINCREMENT NOT NULL"]
    if has_geometry:
        columns.append(f"geom {layer.table.geometry}")
    columns += [f'"{f.name}" {f.type}' for f in layer.fields]
    db.execute(f'CREATE TABLE "{name}" ({", ".join(columns)})')
    bounds: tuple[float | None, ...] = (None,) * 4
    if layer.geometry is not None:
        drawn = layer.geometry[~shapely.is_missing(layer.geometry)]
        if len(drawn):
            bounds = tuple(float(v) for v in shapely.total_bounds(drawn))
    db.execute(
        "INSERT INTO gpkg_contents VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        (
            name,
            "features" if has_geometry else "attributes",
            name,
            layer.table.description,
            when,
            *bounds,
            srs.srs_id if has_geometry else None,
        ),
    )
    if has_geometry:
        db.execute(
            "INSERT INTO gpkg_geometry_columns VALUES (?, 'geom', ?, ?, 0, 0)",
            (name, layer.table.geometry, srs.srs_id),
        )
        _extension(db, name, "geom", "gpkg_rtree_index", "extension_rtree", "write-only")
    _insert_rows(db, layer, srs.srs_id)
    _describe(db, layer)


def _insert_rows(db: sqlite3.Connection, layer: Layer, srs_id: int) -> None:
    name = layer.table.name
    width = len(layer.fields) + 1 + (layer.geometry is not None)
    insert = f'INSERT INTO "{name}" VALUES ({", ".join("?" * width)})'
    if layer.geometry is None:
        db.executemany(insert, ((i, *row) for i, row in enumerate(layer.rows, 1)))
        return
    db.execute(f'CREATE VIRTUAL TABLE "rtree_{name}_geom" USING rtree(id, minx, maxx, miny, maxy)')
    for start in range(0, len(layer.rows), _CHUNK):
        shapes = layer.geometry[start : start + _CHUNK]
        rows = layer.rows[start : start + _CHUNK]
        db.executemany(
            insert,
            (
                (i, blob, *row)
                for i, (blob, row) in enumerate(
                    zip(_blobs(shapes, srs_id), rows, strict=True), start + 1
                )
            ),
        )
        drawn = np.flatnonzero(~shapely.is_missing(shapes))
        box = shapely.bounds(shapes[drawn]).tolist()
        db.executemany(
            f'INSERT INTO "rtree_{name}_geom" VALUES (?, ?, ?, ?, ?)',
            (
                (int(i) + start + 1, west, east, south, north)
                for i, (west, south, east, north) in zip(drawn, box, strict=True)
            ),
        )
    # The triggers call functions that only a GIS provides, so they come after the rows.
    triggers = INDEX_TRIGGERS.format(t=name, c="geom", i="fid")
    for trigger in triggers.split("END;\n"):
        if trigger.strip():
            db.execute(trigger + "END")


def _blobs(shapes: np.ndarray, srs_id: int) -> Iterator[bytes | None]:
    """GeoPackage binary of each geometry (clause 2.1.3): header, envelope but for points, WKB."""
    wkb = shapely.to_wkb(shapes, byte_order=1)
    kinds = shapely.get_type_id(shapes).tolist()
    boxes = shapely.bounds(shapes).tolist()
    bare = struct.pack("<2sBBi", b"GP", 0, 0b0001, srs_id)
    for body, kind, box in zip(wkb, kinds, boxes, strict=True):
        if body is None:
            yield None
        elif kind == _POINT:
            yield bare + body
        else:
            west, south, east, north = box
            yield (
                struct.pack("<2sBBidddd", b"GP", 0, 0b0011, srs_id, west, east, south, north) + body
            )


def _describe(db: sqlite3.Connection, layer: Layer) -> None:
    """Alias, description and allowed values of each field (schema extension)."""
    for field in layer.fields:
        constraint = _constraint(db, field)
        unit = f" Unit: {field.unit}." if field.unit else ""
        db.execute(
            "INSERT INTO gpkg_data_columns VALUES (?, ?, ?, ?, ?, NULL, ?)",
            (
                layer.table.name,
                field.name,
                field.name,
                field.alias,
                field.description + unit,
                constraint,
            ),
        )


def _constraint(db: sqlite3.Connection, field: Field) -> str | None:
    if not field.choices:
        return None
    db.executemany(
        "INSERT OR IGNORE INTO gpkg_data_column_constraints"
        " VALUES (?, 'enum', ?, NULL, NULL, NULL, NULL, NULL)",
        [(field.name, choice) for choice in field.choices],
    )
    return field.name


def _about_layer(layer: Layer) -> _Record:
    """Metadata of one table: what it is and the unit of each field."""
    return (
        "featureType" if layer.table.geometry else "attributeType",
        layer.table.name,
        {
            "title": layer.table.title,
            "about": layer.table.description,
            "units": {f.name: f.unit for f in layer.fields if f.unit},
        },
    )


def _write_metadata(db: sqlite3.Connection, records: Iterable[_Record], when: str) -> None:
    """The first record is of the whole file and the parent of the others."""
    for i, (scope, table, content) in enumerate(records, 1):
        db.execute(
            "INSERT INTO gpkg_metadata VALUES (?, ?, ?, 'application/json', ?)",
            (i, scope, "https://www.rfc-editor.org/rfc/rfc8259", _json(content)),
        )
        db.execute(
            "INSERT INTO gpkg_metadata_reference VALUES (?, ?, NULL, NULL, ?, ?, ?)",
            ("geopackage" if table is None else "table", table, when, i, None if i == 1 else 1),
        )


def _json(content: Mapping[str, Any] | Sequence[Any]) -> str:
    return json.dumps(content, ensure_ascii=False, indent=1, allow_nan=False)
