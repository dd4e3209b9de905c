"""Against a real PostgreSQL with PostGIS, started for these tests; skipped where there is none."""

from __future__ import annotations

import os
import pwd
import shutil
import subprocess
import tempfile
from dataclasses import replace
from pathlib import Path

import pytest

from fieldround.deliver.fields import TABLES
from fieldround.deliver.layers import layers_of
from fieldround.deliver.postgis import DatabaseError, write_postgis
from tests.deliver import invented

psycopg = pytest.importorskip("psycopg", reason="psycopg is not installed")


def _programs() -> Path | None:
    for folder in sorted(Path("/usr/lib/postgresql").glob("*/bin"), reverse=True):
        version = folder.parent.name
        control = Path(f"/usr/share/postgresql/{version}/extension/postgis.control")
        if (folder / "initdb").exists() and control.exists():
            return folder
    return None


PROGRAMS = _programs()
pytestmark = pytest.mark.skipif(PROGRAMS is None, reason="no PostgreSQL with PostGIS here")


@pytest.fixture(scope="module")
def server():
    """Address of a server of our own on a socket in a new folder; gone afterwards."""
    folder = Path(tempfile.mkdtemp(prefix="pg"))
    who: dict = {}
    if os.geteuid() == 0:  # PostgreSQL refuses to run as root
        user = pwd.getpwnam("postgres")
        os.chown(folder, user.pw_uid, user.pw_gid)
        who = {"user": user.pw_uid, "group": user.pw_gid, "cwd": folder}

    def run(program: str, *words: str) -> None:
        subprocess.run(
            [str(PROGRAMS / program), *words], check=True, capture_output=True, timeout=120, **who
        )

    data = str(folder / "data")
    run("initdb", "-D", data, "-U", "crew", "-A", "trust", "-E", "UTF8", "--locale=C.UTF-8", "-N")
    options = f"-k {folder} -c listen_addresses='' -c fsync=off"
    run("pg_ctl", "-D", data, "-o", options, "-l", str(folder / "log"), "-w", "start")
    yield f"host={folder} user=crew dbname=postgres"
    run("pg_ctl", "-D", data, "-m", "immediate", "stop")
    shutil.rmtree(folder, ignore_errors=True)


@pytest.fixture
def dsn(server):
    with psycopg.connect(server, autocommit=True) as db:
        db.execute("DROP DATABASE IF EXISTS rounds")
        db.execute("CREATE DATABASE rounds")
    return server.replace("dbname=postgres", "dbname=rounds")


def ask(dsn, statement):
    with psycopg.connect(dsn) as db:
        return db.execute(statement).fetchall()


def write(dsn, result, name="harbour", folder=Path("out"), **how):
    epsg = None if result.placement is None else result.placement.epsg
    return write_postgis(dsn, layers_of(result, folder), name, epsg, **how)


def test_every_layer_and_table_is_there(dsn):
    result = invented.small_round()
    written = write(dsn, result)
    assert list(written) == [table.name for table in TABLES]
    for name, rows in written.items():
        assert ask(dsn, f'SELECT count(*) FROM fieldround."{name}"') == [(rows,)]
    names = ask(dsn, "SELECT object FROM fieldround.objects ORDER BY fid")
    assert [row[0] for row in names] == [o.object for o in result.objects]
    east, north, srid = ask(
        dsn, "SELECT ST_X(geom), ST_Y(geom), ST_SRID(geom) FROM fieldround.objects WHERE fid = 1"
    )[0]
    at = result.placement.objects["P001"]
    assert (east, north, srid) == (at.easting_m, at.northing_m, 32632)
    assert ask(dsn, "SELECT count(*) FROM fieldround.objects WHERE geom IS NULL") == [(1,)]
    assert ask(dsn, "SELECT bool_and(ST_IsValid(geom)) FROM fieldround.sections") == [(True,)]
    assert ask(dsn, "SELECT verdict_given FROM fieldround.objects WHERE fid = 1") == [("good",)]
    taken = ask(dsn, "SELECT taken_at AT TIME ZONE 'UTC' FROM fieldround.objects WHERE fid = 1")
    assert taken[0][0].isoformat() == "2031-05-04T07:12:05"
    about = ask(dsn, "SELECT col_description('fieldround.objects'::regclass, attnum) FROM"
                     " pg_attribute WHERE attrelid = 'fieldround.objects'::regclass"
                     " AND attname = 'lean_deg'")  # fmt: skip
    assert "Unit: degree" in about[0][0]


def test_replace_takes_only_this_rounds_rows_away(dsn):
    write(dsn, invented.large_round(6), "first")
    write(dsn, invented.large_round(4), "second")
    write(dsn, invented.large_round(3), "first")
    rows = ask(dsn, "SELECT round_name, count(*) FROM fieldround.objects GROUP BY 1 ORDER BY 1")
    assert rows == [("first", 3), ("second", 4)]


def test_append_refuses_a_round_that_is_there(dsn):
    write(dsn, invented.large_round(6), "first", mode="append")
    with pytest.raises(DatabaseError, match="already"):
        write(dsn, invented.large_round(6), "first", mode="append")
    write(dsn, invented.large_round(6), "second", mode="append")
    assert ask(dsn, "SELECT count(*) FROM fieldround.objects") == [(12,)]


def test_a_failure_leaves_the_database_as_it_was(dsn):
    write(dsn, invented.large_round(6), "first")
    result = invented.large_round(5)

    def breaking():
        for layer in layers_of(result, Path("out")):
            if layer.table.name == "budget":
                yield replace(layer, rows=[("x", "y", "no number", 1.0, 1.0)])
            else:
                yield layer

    with pytest.raises(DatabaseError, match="nothing was written"):
        write_postgis(dsn, breaking(), "first", 32632)
    assert ask(dsn, "SELECT count(*) FROM fieldround.objects") == [(6,)]


def test_a_round_in_another_crs_joins_the_tables_crs(dsn):
    write(dsn, invented.large_round(4), "first")
    result = invented.large_round(4, epsg=3857)
    write(dsn, result, "second")
    east, north = ask(
        dsn,
        "SELECT a.d, b.d FROM (SELECT ST_X(geom) d FROM fieldround.objects WHERE object = 'P001'"
        " AND round_name = 'first') a, (SELECT ST_X(geom) d FROM fieldround.objects"
        " WHERE object = 'P001' AND round_name = 'second') b",
    )[0]
    assert east == pytest.approx(north, abs=1e-3)


def test_a_round_without_positions_before_one_with(dsn):
    write(dsn, invented.without_places(invented.large_round(3)), "first")
    write(dsn, invented.large_round(3), "second")
    assert ask(dsn, "SELECT count(geom), count(*) FROM fieldround.objects") == [(3, 6)]


def test_new_columns_join_tables_that_are_there(dsn):
    write(dsn, invented.large_round(2), "first")
    result = invented.large_round(2)
    long = "ü" * 60
    extra = {long: "kept", 'a "quoted" one': "kept too", "select": "word"}
    objects = (replace(result.objects[0], extra=extra), result.objects[1])
    write(dsn, replace(result, objects=objects), "second")
    columns = {r[0] for r in ask(dsn, "SELECT column_name FROM information_schema.columns"
                                      " WHERE table_name = 'objects'")}  # fmt: skip
    assert {"ü" * 31, "a 'quoted' one", "select"} <= columns


def test_an_address_that_leads_nowhere_is_said_without_its_password():
    with pytest.raises(DatabaseError) as told:
        write("host=/nowhere user=crew password=secret dbname=x", invented.large_round(1))
    assert "secret" not in str(told.value)


def test_names_cannot_become_sql(dsn):
    result = invented.large_round(2)
    nasty = "x'); DROP SCHEMA fieldround CASCADE; --"
    objects = tuple(replace(o, label=nasty, extra={nasty: nasty}) for o in result.objects)
    write(dsn, replace(result, objects=objects), nasty)
    assert ask(dsn, "SELECT DISTINCT label, round_name FROM fieldround.objects") == [(nasty, nasty)]
