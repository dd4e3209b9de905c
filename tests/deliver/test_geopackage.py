from __future__ import annotations

import json
import sqlite3
from pathlib import Path

import geopandas
import numpy as np
import pyogrio
import pytest
import shapely
from pyproj import Geod

from fieldround.deliver.fields import TABLES
from fieldround.deliver.geopackage import srs_of, write_geopackage
from fieldround.deliver.layers import layers_of
from tests.deliver import invented
from tests.deliver.geopackage_rules import faults

WHEN = "2031-05-04T10:02:03.000Z"


def write(folder: Path, result, name: str = "results.gpkg") -> Path:
    path = folder / name
    at = result.placement
    srs = srs_of(None, None) if at is None else srs_of(at.crs_wkt, at.epsg)
    write_geopackage(path, layers_of(result, folder), srs, WHEN, {"program": "test"})
    return path


@pytest.fixture(scope="module")
def small(tmp_path_factory) -> Path:
    return write(tmp_path_factory.mktemp("gpkg"), invented.small_round())


def test_keeps_the_standard(small):
    assert faults(small) == []


@pytest.mark.parametrize(
    "where",
    [
        {"epsg": 2263, "centre": (-73.97, 40.78)},  # US survey feet
        {"epsg": 3857, "centre": (11.4, 48.0)},
        {"epsg": 4326},
        {"epsg": None, "crs": "+proj=tmerc +lat_0=48 +lon_0=11 +x_0=500 +y_0=300 +ellps=GRS80"},
        {"epsg": 32660, "centre": (179.9999, -17.0)},  # the round crosses longitude 180
    ],
)
def test_keeps_the_standard_in_other_crs(tmp_path, where):
    assert faults(write(tmp_path, invented.large_round(20, **where))) == []


def test_keeps_the_standard_without_any_position(tmp_path):
    path = write(tmp_path, invented.without_places(invented.small_round()))
    assert faults(path) == []
    objects = geopandas.read_file(path, layer="objects")
    assert len(objects) == 20
    assert objects.geometry.isna().all()
    assert objects["diameter_m"].notna().sum() == 19


def test_the_rules_find_what_is_broken(small, tmp_path):
    breakages = {
        "UPDATE gpkg_contents SET max_x = max_x + 1 WHERE table_name = 'objects'": "16",
        "UPDATE gpkg_contents SET last_change = 'today' WHERE table_name = 'round'": "15",
        "DELETE FROM gpkg_spatial_ref_sys WHERE srs_id = 0": "11",
        "UPDATE readings SET sd_m = 'wide' WHERE fid = 1": "5",
        "DELETE FROM rtree_objects_geom WHERE id = 1": "77",
        "DROP TRIGGER rtree_objects_geom_update3": "77",
        "CREATE TABLE stray (x)": "4",
        "UPDATE gpkg_data_columns SET column_name = 'gone' WHERE column_name = 'kind'": "105",
    }
    for i, (statement, number) in enumerate(breakages.items()):
        broken = tmp_path / f"broken{i}.gpkg"
        broken.write_bytes(small.read_bytes())
        db = sqlite3.connect(broken)
        db.execute(statement)
        db.commit()
        db.close()
        assert any(f.startswith(f"requirement {number}:") for f in faults(broken)), statement


def test_equal_rounds_give_equal_bytes(tmp_path):
    first = write(tmp_path, invented.small_round(), "a.gpkg").read_bytes()
    second = write(tmp_path, invented.small_round(), "b.gpkg").read_bytes()
    assert first == second


def test_opens_in_gdal_with_every_layer(small):
    names = {str(name): kind for name, kind in pyogrio.list_layers(small)}
    assert set(names) == {table.name for table in TABLES}
    assert names["objects"] == "Point"
    assert names["sections"] == names["ellipses"] == "Polygon"
    assert names["sightlines"] == "LineString"
    assert names["budget"] is None
    info = pyogrio.read_info(small, layer="objects")
    assert info["crs"] == "EPSG:32632"
    assert info["features"] == 20


def test_geopandas_reads_what_the_round_says(small):
    result = invented.small_round()
    objects = geopandas.read_file(small, layer="objects")
    assert list(objects["object"]) == [o.object for o in result.objects]
    at = result.placement.objects[result.objects[0].object]
    assert objects.geometry[0].x == at.easting_m
    assert objects.geometry[0].y == at.northing_m
    assert objects["diameter_m"][0] == pytest.approx(result.objects[0].diameter_m, abs=5.1e-6)
    assert objects.geometry[11] is None  # the object without a position
    assert str(objects["taken_at"].dtype).startswith("datetime64")
    assert objects["taken_at"][0].isoformat() == "2031-05-04T07:12:05+00:00"
    assert objects["taken_local"][0] == "2031-05-04T09:12:05+02:00"
    assert objects["photo_a_path"][0].endswith("round/photos/P01a.jpg")


def test_times_without_an_offset_are_not_called_utc(small):
    objects = geopandas.read_file(small, layer="objects").set_index("object")
    row = objects.loc[invented.small_round().objects[9].object]
    assert row["taken_local"] == "2031-05-04T10:00:00"
    assert row.isna()["taken_at"]


def test_nan_becomes_empty(small):
    objects = geopandas.read_file(small, layer="objects")
    db = sqlite3.connect(small)
    stored = db.execute("SELECT diameter_sd_m, agreement FROM objects WHERE fid = 9").fetchone()
    db.close()
    assert stored == (None, None)
    assert objects["diameter_sd_m"].isna()[8]


def test_passed_through_columns_that_collide_are_kept_beside(small):
    db = sqlite3.connect(small)
    row = dict(
        zip(
            [c[1] for c in db.execute("PRAGMA table_info(objects)")],
            db.execute("SELECT * FROM objects WHERE fid = 1").fetchone(),
            strict=True,
        )
    )
    second = db.execute(
        'SELECT note, fid_given, geom_given, easting_given, "column" FROM objects WHERE fid = 2'
    ).fetchone()
    db.close()
    assert row["verdict"] == "accept"
    assert row["verdict_given"] == "good"
    assert row["Diameter_M_given"] == "12"
    assert row["note"] == "by the gate"
    assert row["bad 'name' here"] == "x"
    assert second == ("=1+1", "7", "POINT(0 0)", "5", "empty")


@pytest.mark.parametrize(
    "where", [{"epsg": 32632}, {"epsg": 2263, "centre": (-73.97, 40.78)}, {"epsg": 4326}]
)
def test_sections_are_true_to_scale_on_the_ground(tmp_path, where):
    """Every corner lies a radius from the object on the ellipsoid (pyproj's geodesic).

    The field is rounded to 0.01 mm, the circle is drawn with the unrounded diameter.
    """
    path = write(tmp_path, invented.large_round(7, **where))
    sections = geopandas.read_file(path, layer="sections").to_crs("EPSG:4326")
    objects = geopandas.read_file(path, layer="objects").to_crs("EPSG:4326")
    for row, at in zip(sections.itertuples(), objects.geometry, strict=True):
        corners = np.array(row.geometry.exterior.coords)
        n = len(corners)
        _, _, reach = Geod(ellps="WGS84").inv([at.x] * n, [at.y] * n, *corners.T)
        assert np.allclose(reach, row.diameter_m / 2, rtol=2e-5, atol=2.6e-6)
        assert row.geometry.exterior.is_ccw


def test_ellipses_point_along_their_azimuth_from_true_north(tmp_path):
    geod = Geod(ellps="WGS84")
    path = write(tmp_path, invented.large_round(3, epsg=32632, centre=(8.2, 48.0)))
    ellipses = geopandas.read_file(path, layer="ellipses").to_crs("EPSG:4326")
    objects = geopandas.read_file(path, layer="objects").to_crs("EPSG:4326")
    for row, at in zip(ellipses.itertuples(), objects.geometry, strict=True):
        corners = np.array(row.geometry.exterior.coords)
        n = len(corners)
        azimuth, _, reach = geod.inv([at.x] * n, [at.y] * n, corners[:, 0], corners[:, 1])
        far = int(np.argmax(reach))
        assert reach[far] == pytest.approx(row.semi_major_m, rel=1e-4)
        assert min(reach) == pytest.approx(row.semi_minor_m, rel=1e-4)
        assert azimuth[far] % 180.0 == pytest.approx(row.azimuth_deg, abs=0.01)


def test_sightlines_run_from_station_to_object(small):
    lines = geopandas.read_file(small, layer="sightlines")
    objects = geopandas.read_file(small, layer="objects").set_index("object")
    stations = geopandas.read_file(small, layer="stations").set_index(["pair", "photo"])
    drawn = lines[lines.geometry.notna()]
    assert len(lines) == 40
    assert len(drawn) == 38  # not to the object without a position
    for row in drawn.itertuples():
        start, end = shapely.get_point(row.geometry, [0, -1])
        assert start.equals(stations.geometry[row.pair, row.photo])
        assert end.equals(objects.geometry[row.object])


def test_budget_shares_sum_to_the_whole(small):
    budget = geopandas.read_file(small, layer="budget")
    sums = budget.groupby("object")["share_pct"].sum()
    assert np.allclose(sums, 100.0, atol=0.01)
    objects = geopandas.read_file(small, layer="objects").set_index("object")
    variance = budget.groupby("object")["variance_m2"].sum()
    sd = objects["diameter_sd_m"].dropna()
    assert np.allclose(np.sqrt(variance[sd.index]), sd, atol=2e-5)


def test_metadata_says_units_and_method(small):
    db = sqlite3.connect(small)
    rows = db.execute(
        "SELECT r.table_name, m.metadata FROM gpkg_metadata m"
        " JOIN gpkg_metadata_reference r ON r.md_file_id = m.id"
    ).fetchall()
    db.close()
    about = {table: json.loads(text) for table, text in rows}
    assert about[None] == {"program": "test"}
    assert about["objects"]["units"]["lean_deg"] == "degree"
    assert set(about) == {None} | {table.name for table in TABLES}


def test_an_edit_keeps_the_index_when_a_gis_makes_it(tmp_path):
    """GDAL brings the functions that the triggers call."""
    path = write(tmp_path, invented.large_round(4))
    frame = geopandas.read_file(path, layer="objects").head(1)
    frame["object"] = "new one"
    frame.to_file(path, layer="objects", mode="a", engine="pyogrio")
    db = sqlite3.connect(path)
    assert db.execute("SELECT count(*) FROM rtree_objects_geom").fetchone() == (5,)
    db.close()
