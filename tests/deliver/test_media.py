from __future__ import annotations

import io
import sqlite3

import pyogrio
from PIL import Image

from fieldround.deliver.write import Extras, write_results
from tests.deliver import invented
from tests.deliver.geopackage_rules import faults


def test_crops_stand_inside_and_lead_to_their_objects(tmp_path):
    result = invented.small_round(tmp_path)
    write_results(result, tmp_path / "out", invented.picture, Extras(embed_crops=True))
    path = tmp_path / "out" / "results.gpkg"
    assert faults(path) == []
    db = sqlite3.connect(path)
    rows = db.execute(
        "SELECT o.object, c.object, c.photo, c.shows, c.data, c.content_type FROM objects o"
        " JOIN objects_crops m ON m.base_id = o.fid JOIN crops c ON c.fid = m.related_id"
    ).fetchall()
    crops = db.execute("SELECT count(*) FROM crops").fetchone()[0]
    db.close()
    drawn = sum(len(o.drawings) for o in result.objects)
    assert sum(row[3] == "whole" for row in rows) == drawn == 40
    assert len(rows) == crops > drawn  # sections beside them
    for base, own, photo, _, data, kind in rows:
        assert base == own
        assert photo in result.round.photos
        assert kind == "image/jpeg"
        image = Image.open(io.BytesIO(data))
        assert image.format == "JPEG"
        assert not image.getexif()
    assert "crops" in {str(name) for name, _ in pyogrio.list_layers(path)}


def test_crops_are_left_out_unless_asked_for(tmp_path):
    write_results(invented.large_round(2, folder=tmp_path), tmp_path / "out", invented.picture)
    db = sqlite3.connect(tmp_path / "out" / "results.gpkg")
    names = {row[0] for row in db.execute("SELECT name FROM sqlite_master")}
    db.close()
    assert not names & {"crops", "objects_crops", "gpkgext_relations"}


def test_equal_rounds_give_equal_bytes_with_crops_too(tmp_path):
    made = []
    for name in ("a", "b"):
        result = invented.large_round(4, folder=tmp_path / name)
        write_results(result, tmp_path / name / "out", invented.picture, Extras(embed_crops=True))
        made.append((tmp_path / name / "out" / "results.gpkg").read_bytes())
    assert made[0] == made[1]
