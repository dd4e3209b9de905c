from __future__ import annotations

import builtins
import json

import geopandas
import pytest

from fieldround.deliver.write import Extras, write_results
from fieldround.rounds.errors import RoundError
from tests.deliver import invented

LAYERS = {"objects", "sections", "stations", "sightlines", "ellipses"}


@pytest.fixture
def written(tmp_path):
    parquet = pytest.importorskip("pyarrow.parquet", reason="pyarrow is not installed")
    result = invented.small_round(tmp_path)
    write_results(result, tmp_path / "out", None, Extras(parquet=True))
    return parquet, result, tmp_path / "out"


def test_every_layer_is_there_as_in_the_geopackage(written):
    _, result, out = written
    for name in LAYERS:
        frame = geopandas.read_parquet(out / f"{name}.parquet")
        layer = geopandas.read_file(out / "results.gpkg", layer=name)
        assert frame.crs.to_epsg() == 32632
        assert len(frame) == len(layer)
        assert list(frame.columns.drop(["geometry", "bbox"], errors="ignore")) == list(
            layer.columns.drop("geometry")
        )
        assert frame.geometry.geom_equals(layer.geometry)[layer.geometry.notna()].all()
    objects = geopandas.read_parquet(out / "objects.parquet")
    assert list(objects["object"]) == [o.object for o in result.objects]
    assert objects["taken_at"][0].isoformat() == "2031-05-04T07:12:05+00:00"
    assert objects["diameter_m"].isna().sum() == 1


def test_the_files_say_what_geoparquet_asks_for(written):
    """GeoParquet specification 1.x: key `geo` with version, primary_column, columns."""
    parquet, _, out = written
    meta = json.loads(parquet.read_metadata(out / "objects.parquet").metadata[b"geo"])
    assert meta["version"].startswith("1.")
    column = meta["columns"][meta["primary_column"]]
    assert column["encoding"] == "WKB"
    assert column["geometry_types"] == ["Point"]
    assert column["crs"]["id"] == {"authority": "EPSG", "code": 32632}


def test_equal_rounds_give_equal_bytes(written, tmp_path):
    _, result, out = written
    before = {name: (out / f"{name}.parquet").read_bytes() for name in LAYERS}
    write_results(result, out, None, Extras(parquet=True))
    assert {name: (out / f"{name}.parquet").read_bytes() for name in LAYERS} == before


def test_a_round_without_positions(tmp_path):
    pytest.importorskip("pyarrow", reason="pyarrow is not installed")
    result = invented.without_places(invented.large_round(3, folder=tmp_path))
    write_results(result, tmp_path / "out", None, Extras(parquet=True))
    frame = geopandas.read_parquet(tmp_path / "out" / "objects.parquet")
    assert len(frame) == 3
    assert frame.geometry.isna().all()


def test_without_pyarrow_the_remedy_is_said(tmp_path, monkeypatch):
    real = builtins.__import__

    def no_pyarrow(name, *args, **kwargs):
        if name == "pyarrow":
            raise ImportError(name)
        return real(name, *args, **kwargs)

    monkeypatch.setattr(builtins, "__import__", no_pyarrow)
    with pytest.raises(RoundError, match="pip install"):
        write_results(
            invented.large_round(1, folder=tmp_path), tmp_path / "out", None, Extras(parquet=True)
        )
    assert list((tmp_path / "out").iterdir()) == []  # nothing half done
