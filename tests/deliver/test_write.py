from __future__ import annotations

import json
from dataclasses import replace

import pytest

from fieldround.deliver.facts import facts
from fieldround.deliver.write import WriteError, write_results
from fieldround.place.frames import Ellipse
from fieldround.rounds.errors import PictureError
from tests.deliver import invented
from tests.deliver.geopackage_rules import faults

NAMES = {"results.gpkg", "results.csv", "results.geojson", "run.json", "map.html", "report.html"}


def contents(folder):
    return {path.name: path.read_bytes() for path in folder.iterdir() if path.is_file()}


def test_writes_every_file_and_leaves_nothing_else(tmp_path):
    out = tmp_path / "round" / "out"
    (out / "cache").mkdir(parents=True)
    paths = write_results(invented.small_round(tmp_path / "round"), out, invented.picture)
    assert {path.name for path in paths} == NAMES
    assert {path.name for path in out.iterdir()} == NAMES | {"cache"}
    assert all(path.parent == out for path in paths)


def test_equal_rounds_give_equal_bytes_and_nothing_of_the_clock(tmp_path):
    first, second = tmp_path / "a" / "out", tmp_path / "b" / "out"
    write_results(invented.small_round(tmp_path / "a"), first, invented.picture)
    write_results(invented.small_round(tmp_path / "b"), second, invented.picture)
    assert contents(first) == contents(second)


def test_a_failure_leaves_the_old_results_whole(tmp_path, monkeypatch):
    out = tmp_path / "out"
    result = invented.small_round(tmp_path)
    write_results(result, out)
    before = contents(out)

    def broken(*_args):
        raise RuntimeError("no room")

    monkeypatch.setattr("fieldround.deliver.report.write_report", broken)
    changed = replace(result, objects=result.objects[:5])
    with pytest.raises(RuntimeError, match="no room"):
        write_results(changed, out)
    assert contents(out) == before
    assert {path.name for path in out.iterdir()} == NAMES  # nor a folder left behind


def test_a_file_held_open_is_said_in_a_sentence(tmp_path, monkeypatch):
    result = invented.small_round(tmp_path)
    write_results(result, tmp_path / "out")

    def held(self, target):
        raise PermissionError(13, "held")

    monkeypatch.setattr("pathlib.Path.replace", held)
    with pytest.raises(WriteError, match=r"results\.gpkg .* another program holds it open"):
        write_results(result, tmp_path / "out")


def test_the_old_layers_log_does_not_outlive_it(tmp_path):
    """A GIS that had the old file open leaves -wal beside it; SQLite would replay it."""
    out = tmp_path / "out"
    out.mkdir()
    (out / "results.gpkg").write_bytes(b"old")
    (out / "results.gpkg-wal").write_bytes(b"old log")
    (out / "results.gpkg-shm").write_bytes(b"old index")
    write_results(invented.small_round(tmp_path), out)
    assert {path.name for path in out.iterdir()} == NAMES


def test_photos_that_cannot_be_read_only_lose_their_crops(tmp_path):
    def pictures(name):
        if name == "P01a.jpg":
            raise PictureError("P01a.jpg is cut short")
        return invented.picture(name)

    write_results(invented.small_round(tmp_path), tmp_path / "out", pictures)
    report = (tmp_path / "out" / "report.html").read_text("utf-8")
    assert "P01a.jpg" not in report.split("Object by object")[1]
    assert "P01b.jpg" in report.split("Object by object")[1]


@pytest.mark.parametrize("n", [0, 1])
def test_small_and_empty_rounds(tmp_path, n):
    result = invented.large_round(1)
    if n == 0:
        result = replace(result, objects=(), pairs=(), readings=(), checks=())
    paths = write_results(result, tmp_path / "out", invented.picture)
    assert {path.name for path in paths} == NAMES


def test_run_json_tells_settings_counts_cameras_and_the_runs_own_facts(tmp_path):
    result = invented.small_round(tmp_path)
    write_results(result, tmp_path / "out")
    told = json.loads((tmp_path / "out" / "run.json").read_text("utf-8"))
    assert told["counts"]["by_verdict"] == {"accept": 17, "remeasure": 2, "no result": 1}
    assert sum(told["counts"]["by_kind"].values()) == told["counts"]["objects"] == 20
    assert told["settings"]["tolerance_pct"] == 3.0
    assert told["cameras"]["crew phone"]["card"]["focal_px"] == [950.0, 950.0]
    assert told["cameras"]["crew phone"]["found"]["focal_px"] == [956.4, 956.4]
    assert told["seconds"] == {"tie": 1.5, "solve": 0.5}
    assert told["crs"]["epsg"] == 32632
    assert str(tmp_path) not in json.dumps(told)


def test_run_json_holds_no_nan_and_merges_the_runs_counts():
    result = replace(
        invented.large_round(2),
        run_facts={"counts": {"ties": 5}, "odd": float("nan"), "seen": {"b", "a"}},
    )
    told = facts(result)
    assert told["counts"]["ties"] == 5
    assert told["counts"]["objects"] == 2
    assert told["odd"] is None
    assert told["seen"] == ["a", "b"]
    json.dumps(told, allow_nan=False)


def test_places_that_are_no_numbers_are_no_places(tmp_path):
    result = invented.small_round(tmp_path)
    placement = result.placement
    name, pair = result.objects[0].object, result.pairs[0].pair
    nowhere = replace(placement.objects[name], easting_m=float("nan"))
    vague = replace(
        placement.objects["B004"],
        ellipse=Ellipse(float("nan"), float("nan"), 0.0),
        position_sd_m=float("nan"),
    )
    stations = dict(placement.pairs[pair].stations)
    stations["P01a.jpg"] = replace(stations["P01a.jpg"], longitude_deg=float("inf"))
    broken = replace(
        placement,
        objects={**placement.objects, name: nowhere, "B004": vague},
        pairs={**placement.pairs, pair: replace(placement.pairs[pair], stations=stations)},
    )
    reading = replace(result.readings[0], sd_m=float("nan"))
    write_results(
        replace(result, placement=broken, readings=(reading, *result.readings[1:])),
        tmp_path / "out",
    )
    assert faults(tmp_path / "out" / "results.gpkg") == []
    rows = (tmp_path / "out" / "results.csv").read_text("utf-8")
    assert "nan" not in rows.lower()
    report = (tmp_path / "out" / "report.html").read_text("utf-8")
    assert "nan" not in report.lower().replace("quadrance", "")
