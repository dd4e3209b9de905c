"""The demo round is what it says: kinds, counts, ranges, sizes, EXIF, sheets that load."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from demo_site.outing import SITE, quillwater_round
from demo_site.render import different
from fieldround.rounds.load import load_round
from fieldround.rounds.model import KINDS, Round

DEMO = Path(__file__).resolve().parents[2] / "demo_site"
EXIF, GPS = 0x8769, 0x8825


def rows(name: str) -> list[dict[str, str]]:
    with (DEMO / name).open(encoding="utf-8", newline="") as sheet:
        return list(csv.DictReader(sheet))


@pytest.fixture(scope="module")
def loaded() -> Round:
    return load_round(DEMO)


def test_the_sheets_and_the_truth_are_what_the_script_makes() -> None:
    assert different(quillwater_round(), DEMO) == []


def test_the_round_loads_with_every_photo(loaded: Round) -> None:
    assert loaded.lost_photos == {}
    assert all(photo.problems == () for photo in loaded.photos.values())
    assert len(loaded.pairs) >= 9
    assert len(loaded.objects) >= 16
    assert {thing.kind for thing in loaded.objects} == set(KINDS)
    assert {thing.object for thing in loaded.objects} == {
        row["object"] for row in rows("truth.csv")
    }


def test_the_round_holds_the_special_pairs(loaded: Round) -> None:
    assert any(len(pair.photos) == 3 for pair in loaded.pairs)
    bare = [pair for pair in loaded.pairs if pair.tape_m is None]
    assert len(bare) == 1
    known = [thing for thing in loaded.objects if thing.known_diameter_m]
    assert [thing.kind for thing in known] == ["ball"]
    assert known[0].pairs == (bare[0].pair,)
    plumb = {mark.photo for mark in loaded.marks if mark.mark == "plumb"}
    leaning = next(
        row for row in rows("truth.csv") if row["lean_deg"] and float(row["lean_deg"]) > 5
    )
    assert set(next(p.photos for p in loaded.pairs if p.pair == leaning["pair"])) <= plumb


def test_ranges_reach_from_three_to_sixty_metres() -> None:
    ranges = [float(row["range_m"]) for row in rows("truth.csv")]
    assert 3.0 <= min(ranges) < 4.0
    assert 55.0 < max(ranges) <= 60.0


def test_cameras_with_and_without_a_card(loaded: Round) -> None:
    sources = {name: camera.source for name, camera in loaded.cameras.items()}
    without = [
        pair.pair
        for pair in loaded.pairs
        if all(sources[loaded.photos[name].camera] == "exif" for name in pair.photos)
    ]
    assert 3 <= len(without) < len(loaded.pairs) / 2
    truth = {row["photo"]: float(row["fx"]) for row in rows("truth_views.csv")}
    for name, photo in loaded.photos.items():
        camera = loaded.cameras[photo.camera]
        error = abs(camera.focal_px[0] / truth[name] - 1.0)
        if camera.source == "card":
            assert error < 4.0 * camera.focal_sd_px / camera.focal_px[0] < 0.004
        else:
            assert 0.02 < error < 0.08


def test_the_photos_are_small_enough_and_of_the_declared_size() -> None:
    photos = sorted((DEMO / "photos").glob("*.jpg"))
    assert sum(path.stat().st_size for path in photos) <= 12_000_000
    declared = {row["photo"]: row for row in rows("truth_views.csv")}
    assert [path.name for path in photos] == sorted(declared)
    orientations = set()
    for path in photos:
        row = declared[path.name]
        with Image.open(path) as picture:
            orientation = picture.getexif()[0x0112]
            size = picture.size if orientation == 1 else picture.size[::-1]
            assert picture.size[0] > picture.size[1]
        assert size == (int(row["width_px"]), int(row["height_px"]))
        assert orientation == {"0": 1, "90": 6}[row["turn_deg"]]
        orientations.add(orientation)
    assert orientations == {1, 6}


def test_every_photo_has_the_exif_of_a_phone() -> None:
    references = set()
    for path in sorted((DEMO / "photos").glob("*.jpg")):
        with Image.open(path) as picture:
            exif = picture.getexif()
        inner, gps = exif.get_ifd(EXIF), exif.get_ifd(GPS)
        assert exif[0x010F]
        assert exif[0x0110]
        assert inner[0x9011] == "+01:00"
        assert inner[0x9003].startswith("2026:")
        assert float(inner[0x920A]) > 0
        assert inner[0xA405] > 0
        assert {1, 2, 3, 4, 5, 6, 0x10, 0x11, 0x1F} <= set(gps)
        assert 2.0 < float(gps[0x1F]) < 8.0
        references.add(gps[0x10])
    assert references == {"T", "M"}


def test_fixes_and_compasses_err_as_a_phone_does(loaded: Round) -> None:
    pymap3d = pytest.importorskip("pymap3d")
    misses, turns = [], []
    for row in rows("truth_views.csv"):
        photo = loaded.photos[row["photo"]]
        assert photo.fix is not None
        assert photo.direction_deg is not None
        east, north, _ = pymap3d.geodetic2enu(
            photo.fix.latitude_deg, photo.fix.longitude_deg, SITE[2], SITE[1], SITE[0], SITE[2]
        )
        miss = np.hypot(east - float(row["east_m"]), north - float(row["north_m"]))
        misses.append(miss / photo.fix.horizontal_sd_m)
        turns.append((photo.direction_deg - float(row["heading_deg"]) + 180.0) % 360.0 - 180.0)
    assert max(misses) < 3.7  # a chi of two degrees of freedom passes this once in a thousand
    assert 0.3 < np.mean(misses) < 2.0
    assert 1.0 < np.sqrt(np.mean(np.square(turns))) < 8.0
