from __future__ import annotations

import csv
import json

import geopandas
import pytest

from fieldround.deliver.fields import COORDINATE_FIELDS, OBJECT_FIELDS
from fieldround.deliver.geojson import bounding_box, wrap, write_geojson
from fieldround.deliver.layers import coordinates, layers_of
from fieldround.deliver.sheet import write_sheet
from tests.deliver import invented


def write(folder, result):
    objects = next(iter(layers_of(result, folder)))
    write_sheet(folder / "results.csv", objects, coordinates(result))
    write_geojson(folder / "results.geojson", objects, coordinates(result))
    with (folder / "results.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    return rows, json.loads((folder / "results.geojson").read_text("utf-8"))


def test_the_sheet_has_the_layers_columns_and_the_coordinates(tmp_path):
    result = invented.small_round()
    rows, _ = write(tmp_path, result)
    names = [f.name for f in OBJECT_FIELDS + COORDINATE_FIELDS]
    assert list(rows[0])[: len(names)] == names
    assert [row["object"] for row in rows] == [o.object for o in result.objects]
    at = result.placement.objects[rows[0]["object"]]
    assert float(rows[0]["easting"]) == pytest.approx(at.easting_m, abs=1e-4)
    assert float(rows[0]["longitude"]) == pytest.approx(at.longitude_deg, abs=1e-9)
    assert rows[0]["Diameter_M_given"] == "12"
    assert rows[1]["note"] == "=1+1"


def test_the_sheet_is_empty_where_there_is_no_figure(tmp_path):
    rows, _ = write(tmp_path, invented.small_round())
    assert rows[7]["verdict"] == "no result"
    assert rows[7]["diameter_m"] == rows[7]["agreement"] == ""
    assert rows[11]["easting"] == rows[11]["latitude"] == ""
    text = (tmp_path / "results.csv").read_text("utf-8").lower()
    assert "nan" not in text.replace("quay", "")
    assert "inf" not in text


def test_geojson_is_what_rfc_7946_asks_for(tmp_path):
    result = invented.small_round()
    _, found = write(tmp_path, result)
    assert found["type"] == "FeatureCollection"
    assert "crs" not in found  # section 4
    assert len(found["features"]) == 20
    assert found["features"][11]["geometry"] is None
    west, south, east, north = found["bbox"]
    for feature in found["features"]:
        assert feature["type"] == "Feature"
        assert "properties" in feature
        if feature["geometry"] is not None:
            lon, lat = feature["geometry"]["coordinates"]
            assert west <= lon <= east
            assert south <= lat <= north
    frame = geopandas.read_file(tmp_path / "results.geojson")
    assert frame.crs.to_epsg() == 4326
    assert list(frame["object"]) == [o.object for o in result.objects]


def test_a_round_across_longitude_180_has_a_narrow_box(tmp_path):
    result = invented.large_round(16, epsg=32660, centre=(179.9999, -17.0))
    _, found = write(tmp_path, result)
    west, south, east, north = found["bbox"]
    assert 179.99 < west < 180.0  # section 5.2: west of the line stands first
    assert -180.0 < east < -179.99
    assert south < north
    lons = [f["geometry"]["coordinates"][0] for f in found["features"]]
    assert min(lons) < 0 < max(lons)
    assert all(-180.0 <= lon <= 180.0 for lon in lons)


def test_boxes_and_meridians():
    assert bounding_box([(10.0, 1.0)]) == (10.0, 1.0, 10.0, 1.0)
    assert bounding_box([(-10.0, 1.0), (20.0, -3.0)]) == (-10.0, -3.0, 20.0, 1.0)
    assert bounding_box([(170.0, 1.0), (-170.0, 2.0)]) == (170.0, 1.0, -170.0, 2.0)
    assert wrap(180.0) == 180.0
    assert wrap(190.0) == -170.0
    assert wrap(-190.0) == 170.0


def test_without_positions(tmp_path):
    rows, found = write(tmp_path, invented.without_places(invented.small_round()))
    assert len(rows) == len(found["features"]) == 20
    assert "bbox" not in found
    assert {f["geometry"] is None for f in found["features"]} == {True}
