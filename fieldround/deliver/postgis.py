"""The layers and tables in a PostgreSQL database with PostGIS.

In: `Layer`s, the CRS, an address of a database. Out: tables of a schema, all written in one
transaction: either the whole round is there afterwards or nothing has changed.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import shapely

from fieldround.deliver.fields import Field
from fieldround.deliver.layers import Layer
from fieldround.rounds.errors import RoundError

SCHEMA = "fieldround"
_TYPES = {
    "TEXT": "text",
    "INTEGER": "bigint",
    "REAL": "double precision",
    "DATETIME": "timestamptz",
}
_ROUND = "round_name"
_PART = 2000


class DatabaseError(RoundError):
    """The database could not be written; nothing in it has changed."""


def write_postgis(
    dsn: str,
    layers: Iterable[Layer],
    round_name: str,
    epsg: int | None,
    *,
    mode: str = "replace",
    schema: str = SCHEMA,
) -> dict[str, int]:
    """Write every layer and table of a round; returns the rows written by table.

    dsn        : address of the database, as PostgreSQL's own tools take it
    round_name : stands in the column round_name of every row, so that rounds can be told apart
    epsg       : of the round's CRS; geometries are turned into that of a table that is there
    mode       : 'replace' takes this round's earlier rows away first, 'append' refuses a round
                 that is there already; rows of other rounds are never touched
    raises     : DatabaseError, with the database's own words
    """
    if mode not in ("append", "replace"):
        raise ValueError(f"mode is {mode!r}; it must be 'append' or 'replace'")
    try:
        import psycopg
    except ImportError as error:
        raise DatabaseError(
            "Writing to PostGIS needs the Python package psycopg. Install it with: "
            "pip install 'fieldround[postgis]'"
        ) from error
    try:
        with psycopg.connect(dsn) as db, db.cursor() as cursor:
            target = _Target(cursor, schema, round_name, epsg)
            target.prepare()
            return {layer.table.name: target.write(layer, mode) for layer in layers}
    except psycopg.Error as error:
        said = " ".join(str(error).split())
        raise DatabaseError(f"the database refused the round, nothing was written: {said}") from (
            error
        )


class _Target:
    """One schema of an open transaction."""

    def __init__(self, cursor: Any, schema: str, round_name: str, epsg: int | None) -> None:
        from psycopg import sql

        self.sql = sql
        self.cursor = cursor
        self.schema = schema
        self.round_name = round_name
        self.epsg = epsg

    def prepare(self) -> None:
        if self._one("SELECT 1 FROM pg_extension WHERE extname = 'postgis'") is None:
            self.cursor.execute("CREATE EXTENSION postgis")
        self._run("CREATE SCHEMA IF NOT EXISTS {}", self.schema)

    def write(self, layer: Layer, mode: str) -> int:
        name = layer.table.name
        self._create(layer)
        there = self._one(
            f"SELECT 1 FROM {{}}.{{}} WHERE {_ROUND} = %s LIMIT 1",
            self.schema,
            name,
            values=(self.round_name,),
        )
        if there is not None and mode == "append":
            raise DatabaseError(
                f"round {self.round_name!r} is in {self.schema}.{name} already; "
                "replace it, or give the round another title. Nothing was written."
            )
        self._run(
            f"DELETE FROM {{}}.{{}} WHERE {_ROUND} = %s",
            self.schema,
            name,
            values=(self.round_name,),
        )
        self._insert(layer)
        return len(layer.rows)

    def _create(self, layer: Layer) -> None:
        name = layer.table.name
        self._run(
            "CREATE TABLE IF NOT EXISTS {}.{} ("
            f"fid bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY, {_ROUND} text NOT NULL)",
            self.schema,
            name,
        )
        self._run(
            f"CREATE INDEX IF NOT EXISTS {{}} ON {{}}.{{}} ({_ROUND})",
            f"{name}_{_ROUND}",
            self.schema,
            name,
        )
        if layer.table.geometry is not None:
            # A round without positions may come first: 0 is PostGIS's "unknown".
            kind = f"geometry({layer.table.geometry}, {int(self.epsg or 0)})"
            self._run(f"ALTER TABLE {{}}.{{}} ADD COLUMN IF NOT EXISTS geom {kind}",
                      self.schema, name)  # fmt: skip
            self._run(
                "CREATE INDEX IF NOT EXISTS {} ON {}.{} USING gist (geom)",
                f"{name}_geom",
                self.schema,
                name,
            )
        for field in layer.fields:
            self._run(
                f"ALTER TABLE {{}}.{{}} ADD COLUMN IF NOT EXISTS {{}} {_TYPES[field.type]}",
                self.schema,
                name,
                _column(field),
            )
            unit = f" Unit: {field.unit}." if field.unit else ""
            self.cursor.execute(
                self.sql.SQL("COMMENT ON COLUMN {}.{}.{} IS {}").format(
                    *map(self.sql.Identifier, (self.schema, name, _column(field))),
                    self.sql.Literal(field.description + unit),
                )
            )
        self.cursor.execute(
            self.sql.SQL("COMMENT ON TABLE {}.{} IS {}").format(
                self.sql.Identifier(self.schema),
                self.sql.Identifier(name),
                self.sql.Literal(layer.table.description),
            )
        )

    def _insert(self, layer: Layer) -> None:
        names = [_ROUND, *(_column(field) for field in layer.fields)]
        places = ["%s"] * len(names)
        own = int(self.epsg or 0)
        if layer.geometry is not None:
            names.append("geom")
            srid = self._srid(layer.table.name)
            made = f"ST_GeomFromWKB(%s::bytea, {own})"
            if srid != own and own != 0 and srid != 0:
                made = f"ST_Transform({made}, {srid})"
            elif srid != own:
                made = f"ST_SetSRID({made}, {srid})"
            places.append(made)
        statement = self.sql.SQL("INSERT INTO {}.{} ({}) VALUES (" + ", ".join(places) + ")")
        insert = statement.format(
            self.sql.Identifier(self.schema),
            self.sql.Identifier(layer.table.name),
            self.sql.SQL(", ").join(map(self.sql.Identifier, names)),
        )
        for start in range(0, len(layer.rows), _PART):
            rows = layer.rows[start : start + _PART]
            if layer.geometry is None:
                values = [(self.round_name, *row) for row in rows]
            else:
                wkb = shapely.to_wkb(layer.geometry[start : start + _PART])
                values = [
                    (self.round_name, *row, body) for row, body in zip(rows, wkb, strict=True)
                ]
            self.cursor.executemany(insert, values)

    def _srid(self, table: str) -> int:
        found = self._one("SELECT Find_SRID(%s, %s, 'geom')", values=(self.schema, table))
        return int(found)

    def _run(self, statement: str, *names: str, values: Sequence[Any] = ()) -> None:
        self.cursor.execute(
            self.sql.SQL(statement).format(*map(self.sql.Identifier, names)), values or None
        )

    def _one(self, statement: str, *names: str, values: Sequence[Any] = ()) -> Any:
        self._run(statement, *names, values=values)
        row = self.cursor.fetchone()
        return None if row is None else row[0]


def _column(field: Field) -> str:
    """A column name PostgreSQL takes: at most 63 bytes of UTF-8."""
    return field.name.encode("utf-8")[:63].decode("utf-8", "ignore")
