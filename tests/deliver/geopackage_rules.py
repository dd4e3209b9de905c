"""An independent reading of the GeoPackage standard: does a file keep its requirements?

Source: OGC 12-128r18 (GeoPackage Encoding Standard 1.3.1); the number of the requirement stands
beside each check. It shares no code with the writer: sqlite3, struct and shapely alone.
"""

from __future__ import annotations

import re
import sqlite3
import struct
from pathlib import Path

import shapely

_COLUMNS = {
    "gpkg_spatial_ref_sys": {
        "srs_name": ("TEXT", 1, 0),
        "srs_id": ("INTEGER", 1, 1),
        "organization": ("TEXT", 1, 0),
        "organization_coordsys_id": ("INTEGER", 1, 0),
        "definition": ("TEXT", 1, 0),
        "description": ("TEXT", 0, 0),
        "definition_12_063": ("TEXT", 1, 0),
    },
    "gpkg_contents": {
        "table_name": ("TEXT", 1, 1),
        "data_type": ("TEXT", 1, 0),
        "identifier": ("TEXT", 0, 0),
        "description": ("TEXT", 0, 0),
        "last_change": ("DATETIME", 1, 0),
        "min_x": ("DOUBLE", 0, 0),
        "min_y": ("DOUBLE", 0, 0),
        "max_x": ("DOUBLE", 0, 0),
        "max_y": ("DOUBLE", 0, 0),
        "srs_id": ("INTEGER", 0, 0),
    },
    "gpkg_geometry_columns": {
        "table_name": ("TEXT", 1, 1),
        "column_name": ("TEXT", 1, 2),
        "geometry_type_name": ("TEXT", 1, 0),
        "srs_id": ("INTEGER", 1, 0),
        "z": ("TINYINT", 1, 0),
        "m": ("TINYINT", 1, 0),
    },
    "gpkg_extensions": {
        "table_name": ("TEXT", 0, 0),
        "column_name": ("TEXT", 0, 0),
        "extension_name": ("TEXT", 1, 0),
        "definition": ("TEXT", 1, 0),
        "scope": ("TEXT", 1, 0),
    },
    "gpkg_data_columns": {
        "table_name": ("TEXT", 1, 1),
        "column_name": ("TEXT", 1, 2),
        "name": ("TEXT", 0, 0),
        "title": ("TEXT", 0, 0),
        "description": ("TEXT", 0, 0),
        "mime_type": ("TEXT", 0, 0),
        "constraint_name": ("TEXT", 0, 0),
    },
    "gpkg_data_column_constraints": {
        "constraint_name": ("TEXT", 1, 0),
        "constraint_type": ("TEXT", 1, 0),
        "value": ("TEXT", 0, 0),
        "min": ("NUMERIC", 0, 0),
        "min_is_inclusive": ("BOOLEAN", 0, 0),
        "max": ("NUMERIC", 0, 0),
        "max_is_inclusive": ("BOOLEAN", 0, 0),
        "description": ("TEXT", 0, 0),
    },
    "gpkg_metadata": {
        "id": ("INTEGER", 1, 1),
        "md_scope": ("TEXT", 1, 0),
        "md_standard_uri": ("TEXT", 1, 0),
        "mime_type": ("TEXT", 1, 0),
        "metadata": ("TEXT", 1, 0),
    },
    "gpkg_metadata_reference": {
        "reference_scope": ("TEXT", 1, 0),
        "table_name": ("TEXT", 0, 0),
        "column_name": ("TEXT", 0, 0),
        "row_id_value": ("INTEGER", 0, 0),
        "timestamp": ("DATETIME", 1, 0),
        "md_file_id": ("INTEGER", 1, 0),
        "md_parent_id": ("INTEGER", 0, 0),
    },
}
_TYPES = {
    "BOOLEAN", "TINYINT", "SMALLINT", "MEDIUMINT", "INT", "INTEGER", "FLOAT", "DOUBLE", "REAL",
    "TEXT", "BLOB", "DATE", "DATETIME",
}  # fmt: skip
_GEOMETRIES = {
    "GEOMETRY", "POINT", "LINESTRING", "POLYGON", "MULTIPOINT", "MULTILINESTRING", "MULTIPOLYGON",
    "GEOMETRYCOLLECTION",
}  # fmt: skip
_TIME = re.compile(r"^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d+Z$")
_INDEX_COLUMNS = "(id, minx, maxx, miny, maxy)"


def faults(path: Path) -> list[str]:
    """Every requirement the file breaks, as sentences; empty for a valid file."""
    found: list[str] = []

    def rule(number: int | str, holds: bool, what: str) -> None:
        if not holds:
            found.append(f"requirement {number}: {what}")

    head = path.read_bytes()[:100]
    rule(1, head[:16] == b"SQLite format 3\0", "not an SQLite 3 file")
    rule(2, head[68:72] == b"GPKG", "application_id is not GPKG")
    rule(2, struct.unpack(">I", head[60:64])[0] == 10301, "user_version is not 10301")
    rule(3, path.suffix == ".gpkg", "file name does not end in .gpkg")
    db = sqlite3.connect(f"file:{path}?mode=ro", uri=True)
    try:
        ask = _Ask(db)
        rule(6, ask.all("PRAGMA integrity_check") == [("ok",)], "integrity_check")
        rule(7, ask.all("PRAGMA foreign_key_check") == [], "foreign_key_check")
        _core(ask, rule)
        _contents(ask, rule)
        _features(ask, rule)
        _index(ask, rule)
        _schema(ask, rule)
        _metadata(ask, rule)
        _related(ask, rule)
        _nothing_else(ask, rule)
    finally:
        db.close()
    return found


class _Ask:
    def __init__(self, db: sqlite3.Connection) -> None:
        self.db = db

    def all(self, sql: str, *values: object) -> list[tuple]:
        return self.db.execute(sql, values).fetchall()

    def columns(self, table: str) -> list[tuple]:
        return self.all(f'PRAGMA table_info("{table}")')

    def tables(self) -> dict[str, str]:
        return dict(self.all("SELECT name, sql FROM sqlite_master WHERE type = 'table'"))


def _core(ask: _Ask, rule) -> None:
    tables = ask.tables()
    for table, expected in _COLUMNS.items():
        rule("10-141", table in tables, f"no table {table}")
        found = {c[1]: (c[2], c[3], c[5]) for c in ask.columns(table)}
        rule("10-141", found == expected, f"{table} has other columns: {found}")
    srs = {
        row[0]: row
        for row in ask.all(
            "SELECT srs_id, organization, organization_coordsys_id, definition,"
            " definition_12_063 FROM gpkg_spatial_ref_sys"
        )
    }
    rule(11, srs.get(-1, ())[1:] == ("NONE", -1, "undefined", "undefined"), "row -1")
    rule(11, srs.get(0, ())[1:] == ("NONE", 0, "undefined", "undefined"), "row 0")
    rule(11, srs.get(4326, ())[1:3] == ("EPSG", 4326), "row 4326")
    for number, row in srs.items():
        if number not in (-1, 0):
            rule(117, set(row[3:]) != {"undefined"}, f"no definition of srs {number}")
    used = {r[0] for r in ask.all("SELECT srs_id FROM gpkg_contents WHERE srs_id NOT NULL")}
    used |= {r[0] for r in ask.all("SELECT srs_id FROM gpkg_geometry_columns")}
    rule(12, used <= set(srs), f"srs without a row: {used - set(srs)}")


def _contents(ask: _Ask, rule) -> None:
    tables = ask.tables()
    for table, kind, when in ask.all(
        "SELECT table_name, data_type, last_change FROM gpkg_contents"
    ):
        rule(14, table in tables, f"gpkg_contents names {table}, which is not there")
        rule(15, bool(_TIME.match(when)), f"last_change of {table} is {when}")
        rule(17, kind in ("features", "attributes"), f"data_type {kind}")
        columns = ask.columns(table)
        keys = [c for c in columns if c[5]]
        number = 29 if kind == "features" else 119
        rule(number, [c[2] for c in keys] == ["INTEGER"], f"{table} has no integer key")
        rule(number, "AUTOINCREMENT" in tables[table], f"key of {table}")
        for column in columns:
            known = column[2] in _TYPES or column[2] in _GEOMETRIES
            rule(5, known, f"{table}.{column[1]} has type {column[2]}")
        for column in columns:
            if column[2] == "DATETIME":
                for (value,) in ask.all(f'SELECT "{column[1]}" FROM "{table}"'):
                    rule(5, value is None or bool(_TIME.match(value)), f"time {value} in {table}")
            if column[2] in ("REAL", "INTEGER", "TEXT"):
                kinds = {
                    r[0] for r in ask.all(f'SELECT DISTINCT typeof("{column[1]}") FROM "{table}"')
                }
                wrong = kinds - {column[2].lower(), "null"}
                rule(5, not wrong, f"{table}.{column[1]} holds {wrong}")


def _features(ask: _Ask, rule) -> None:
    features = [
        r[0] for r in ask.all("SELECT table_name FROM gpkg_contents WHERE data_type = 'features'")
    ]
    listed = ask.all("SELECT * FROM gpkg_geometry_columns")
    rule(22, sorted(features) == sorted(r[0] for r in listed), "gpkg_geometry_columns rows")
    rule(24, len({r[0] for r in listed}) == len(listed), "one geometry column a table")
    for table, column, kind, srs, z, m in listed:
        rule(25, kind in _GEOMETRIES, f"geometry type {kind}")
        types = {c[1]: c[2] for c in ask.columns(table)}
        rule(31, types.get(column) == kind, f"{table}.{column} is declared {types.get(column)}")
        rule(27, (z, m) == (0, 0), "z and m prohibited")
        own = ask.all("SELECT srs_id FROM gpkg_contents WHERE table_name = ?", table)
        rule(146, own == [(srs,)], f"srs of {table} differs between its two rows")
        bodies = []
        for key, blob in ask.all(f'SELECT rowid, "{column}" FROM "{table}"'):
            if blob is None:
                continue
            body = _geometry(blob, srs, rule, f"{table} row {key}")
            bodies.append(body)
            rule(32, body.geom_type.upper() == kind, f"{table} row {key} is {body.geom_type}")
        box = ask.all(
            "SELECT min_x, min_y, max_x, max_y FROM gpkg_contents WHERE table_name = ?", table
        )[0]
        if bodies:
            true = tuple(float(v) for v in shapely.total_bounds(bodies))
            rule(16, box == true, f"box of {table} is {box}, not {true}")
        else:
            rule(16, box == (None,) * 4, f"box of the empty {table} is {box}")


def _geometry(blob: bytes, srs: int, rule, where: str) -> shapely.Geometry:
    magic, version, flags, own = struct.unpack("<2sBBi", blob[:8])
    rule(19, magic == b"GP" and version == 0, f"{where}: header")
    rule(19, flags & 0b1 == 1, f"{where}: byte order of the header")
    rule(19, own == srs, f"{where}: srs {own}")
    rule(19, flags & 0b11110000 == 0, f"{where}: flags {flags:08b}")
    envelope = (flags >> 1) & 0b111
    size = {0: 0, 1: 32}.get(envelope)
    rule(19, size is not None, f"{where}: envelope code {envelope}")
    body = shapely.from_wkb(blob[8 + (size or 0) :])
    if envelope == 1:
        west, east, south, north = struct.unpack("<4d", blob[8:40])
        rule(19, (west, south, east, north) == body.bounds, f"{where}: envelope")
    rule(20, not body.is_empty and body.is_valid, f"{where}: not a valid geometry")
    return body


def _index(ask: _Ask, rule) -> None:
    rows = ask.all(
        "SELECT table_name, column_name, scope FROM gpkg_extensions"
        " WHERE extension_name = 'gpkg_rtree_index'"
    )
    for table, column, scope in rows:
        rule(76, scope == "write-only", f"scope of the index of {table}")
        name = f"rtree_{table}_{column}"
        made = ask.tables().get(name, "")
        expected = f'CREATE VIRTUAL TABLE "{name}" USING rtree{_INDEX_COLUMNS}'
        rule(77, made == expected, f"{name}: {made}")
        triggers = {
            r[0]
            for r in ask.all(
                "SELECT name FROM sqlite_master WHERE type = 'trigger' AND tbl_name = ?", table
            )
        }
        ends = ("insert", "update1", "update2", "update3", "update4", "delete")
        rule(77, triggers == {f"{name}_{end}" for end in ends}, f"triggers of {table}: {triggers}")
        indexed = {r[0]: r[1:] for r in ask.all(f'SELECT * FROM "{name}"')}
        true = {}
        for key, blob in ask.all(f'SELECT rowid, "{column}" FROM "{table}"'):
            if blob is not None:
                start = 8 + (32 if (blob[3] >> 1) & 0b111 else 0)
                true[key] = shapely.from_wkb(blob[start:]).bounds
        rule(77, set(indexed) == set(true), f"rows of {name}")
        for key in set(indexed) & set(true):
            west, south, east, north = true[key]
            box = indexed[key]
            # 32-bit floats, rounded outward (note below requirement 78).
            room = 4e-7 * max(abs(v) for v in true[key]) + 1e-9
            holds = (
                box[0] <= west and box[1] >= east and box[2] <= south and box[3] >= north
                and box[1] - box[0] <= east - west + 2 * room
                and box[3] - box[2] <= north - south + 2 * room
            )  # fmt: skip
            rule(77, holds, f"{name} row {key}: {box} of {true[key]}")


def _schema(ask: _Ask, rule) -> None:
    rows = ask.all(
        "SELECT table_name, column_name, scope FROM gpkg_extensions"
        " WHERE extension_name = 'gpkg_schema' ORDER BY table_name"
    )
    expected = [
        ("gpkg_data_column_constraints", None, "read-write"),
        ("gpkg_data_columns", None, "read-write"),
    ]
    rule(141, rows == expected, f"extension rows {rows}")
    tables = {r[0] for r in ask.all("SELECT table_name FROM gpkg_contents")}
    constraints = ask.all("SELECT * FROM gpkg_data_column_constraints")
    for row in constraints:
        rule(108, row[1] in ("range", "enum", "glob") and row[0] == row[0].lower(), f"{row}")
        if row[1] == "enum":
            rule(113, row[3:7] == (None,) * 4, f"{row}")
            rule(114, row[2] is not None, f"{row}")
    names = {row[0] for row in constraints}
    described: dict[str, set[str]] = {}
    for table, column, _, title, about, _, constraint in ask.all("SELECT * FROM gpkg_data_columns"):
        rule(104, table in tables, f"gpkg_data_columns names {table}")
        rule(105, column in {c[1] for c in ask.columns(table)}, f"{table}.{column}")
        rule(106, constraint is None or constraint in names, f"constraint {constraint}")
        if constraint is not None:
            allowed = {row[2] for row in constraints if row[0] == constraint}
            values = {r[0] for r in ask.all(f'SELECT DISTINCT "{column}" FROM "{table}"')}
            rule(106, values - {None} <= allowed, f"{table}.{column} holds {values - allowed}")
        rule("ours", bool(title and about), f"{table}.{column} has no words")
        described.setdefault(table, set()).add(column)
    for table in tables:
        own = {c[1] for c in ask.columns(table)} - {"fid", "geom"}
        rule("ours", described.get(table, set()) == own, f"fields of {table} not described")


def _metadata(ask: _Ask, rule) -> None:
    rows = ask.all(
        "SELECT table_name, column_name, scope FROM gpkg_extensions"
        " WHERE extension_name = 'gpkg_metadata' ORDER BY table_name"
    )
    expected = [
        ("gpkg_metadata", None, "read-write"),
        ("gpkg_metadata_reference", None, "read-write"),
    ]
    rule(140, rows == expected, f"extension rows {rows}")
    ids = {r[0] for r in ask.all("SELECT id FROM gpkg_metadata")}
    tables = {r[0] for r in ask.all("SELECT table_name FROM gpkg_contents")}
    for scope, table, column, row, when, own, parent in ask.all(
        "SELECT * FROM gpkg_metadata_reference"
    ):
        rule(96, scope in ("geopackage", "table", "column", "row", "row/col"), scope)
        rule(97, (table is None) == (scope == "geopackage"), f"{scope} of {table}")
        rule(97, table is None or table in tables, f"metadata of {table}")
        rule(98, column is None, "column of a table's metadata")
        rule(99, row is None, "row of a table's metadata")
        rule(100, bool(_TIME.match(when)), f"timestamp {when}")
        rule(101, own in ids, f"md_file_id {own}")
        rule(102, parent is None or (parent in ids and parent != own), f"md_parent_id {parent}")


def _related(ask: _Ask, rule) -> None:
    """OGC 18-000 (Related Tables Extension 1.0): its own numbers, with an R before them."""
    rows = ask.all(
        "SELECT table_name, column_name, scope FROM gpkg_extensions"
        " WHERE extension_name IN ('gpkg_related_tables', 'related_tables')"
    )
    tables = ask.tables()
    rule("R1", bool(rows) == ("gpkgext_relations" in tables), "extension row and table")
    if not rows:
        return
    rule("R2", ("gpkgext_relations", None, "read-write") in rows, f"{rows}")
    found = {c[1]: c[2] for c in ask.columns("gpkgext_relations")}
    names = "base_table_name base_primary_column related_table_name related_primary_column"
    expected = {"id": "INTEGER"} | dict.fromkeys(
        f"{names} relation_name mapping_table_name".split(), "TEXT"
    )
    rule("R4", found == expected, f"{found}")
    contents = dict(ask.all("SELECT table_name, data_type FROM gpkg_contents"))
    for base, base_key, related, related_key, relation, mapping in ask.all(
        "SELECT base_table_name, base_primary_column, related_table_name,"
        " related_primary_column, relation_name, mapping_table_name FROM gpkgext_relations"
    ):
        rule("R3", (mapping, None, "read-write") in rows, f"no extension row for {mapping}")
        rule("R5", base in contents, base)
        rule("R6", related in contents, related)
        keys = {c[1]: c[5] for c in ask.columns(base)}, {c[1]: c[5] for c in ask.columns(related)}
        rule("R7", keys[0].get(base_key) == 1 and keys[1].get(related_key) == 1, "keys")
        pair = [c[1:4] for c in ask.columns(mapping)][:2]
        rule("R9", pair == [("base_id", "INTEGER", 1), ("related_id", "INTEGER", 1)], f"{pair}")
        lost = ask.all(
            f'SELECT count(*) FROM "{mapping}" WHERE base_id NOT IN (SELECT "{base_key}" FROM'
            f' "{base}") OR related_id NOT IN (SELECT "{related_key}" FROM "{related}")'
        )
        rule("R10", lost == [(0,)], f"{lost} rows of {mapping} lead nowhere")
        if relation == "media":
            own = {c[1]: (c[2], c[3]) for c in ask.columns(related)}
            rule("R11", own.get("data") == ("BLOB", 1), f"{own}")
            rule("R11", own.get("content_type") == ("TEXT", 1), f"{own}")


def _nothing_else(ask: _Ask, rule) -> None:
    """Requirement 4: no table that neither the core nor an extension row speaks of."""
    known = {r[0] for r in ask.all("SELECT table_name FROM gpkg_contents")}
    known |= {r[0] for r in ask.all("SELECT table_name FROM gpkg_extensions")}
    known |= {"gpkg_spatial_ref_sys", "gpkg_contents", "gpkg_geometry_columns", "gpkg_extensions"}
    for name in ask.tables():
        own = name in known or name.startswith(("sqlite_", "rtree_"))
        rule(4, own, f"table {name} is not spoken for")
    for (name,) in ask.all("SELECT name FROM sqlite_master WHERE type = 'view'"):
        rule(4, False, f"view {name}")
    scopes = {r[0] for r in ask.all("SELECT scope FROM gpkg_extensions")}
    rule(64, scopes <= {"read-write", "write-only"}, f"scopes {scopes}")
