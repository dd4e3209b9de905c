"""Camera cards made from EXIF: start values, their sds, and which photos share one."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from fieldround.rounds.exif import ExifFacts
from fieldround.rounds.exif_cards import camera_from_exif

SIZE = (4032, 3024)
FACTS = ExifFacts(make="Alder", model="A7", lens="main", focal_mm=5.1, focal_35mm=26.0)


def test_the_focal_length_starts_between_the_two_rules() -> None:
    camera, note = camera_from_exif(FACTS, SIZE)
    by_width = 26.0 * 4032 / 36.0
    by_diagonal = 26.0 * 5040.0 / 43.27
    assert by_width < camera.focal_px[0] < by_diagonal
    assert camera.focal_px[0] == pytest.approx(math.sqrt(by_width * by_diagonal), rel=1e-4)
    assert camera.focal_px[0] == camera.focal_px[1]
    assert camera.focal_sd_px == pytest.approx(0.05 * camera.focal_px[0])
    assert camera.focal_heavy_tailed
    assert camera.source == "exif"
    assert camera.ratio_sd == 0.0
    assert camera.size_px == SIZE
    assert camera.centre_px == (2015.5, 1511.5)
    assert camera.centre_sd_px == pytest.approx(40.32)
    assert camera.distortion == (0.0,) * 5
    assert camera.distortion_sd == (0.03, 0.03, 0.001, 0.001, 0.0)
    assert "35 mm equivalent of 26 mm, sd 5%" in note


def test_focal_plane_resolution_stands_in_and_follows_a_smaller_copy() -> None:
    facts = ExifFacts(focal_mm=20.0, plane_px_per_mm=200.0, plane_width_px=4032.0)
    camera, note = camera_from_exif(facts, SIZE)
    assert camera.focal_px[0] == pytest.approx(4000.0)
    assert "focal-plane resolution, sd 5%" in note
    assert camera_from_exif(facts, (2016, 1512))[0].focal_px[0] == pytest.approx(2000.0)


@pytest.mark.parametrize(
    "facts",
    [
        ExifFacts(),
        ExifFacts(focal_mm=5.1),
        ExifFacts(focal_35mm=9000.0),
        ExifFacts(focal_35mm=3.0),
        ExifFacts(focal_mm=135.0, plane_px_per_mm=9000.0),
    ],
)
def test_without_a_possible_tag_the_angle_of_view_is_guessed(facts: ExifFacts) -> None:
    camera, note = camera_from_exif(facts, SIZE)
    angle_deg = 2 * math.degrees(math.atan(2520.0 / camera.focal_px[0]))
    assert angle_deg == pytest.approx(65.0)
    assert camera.focal_sd_px == pytest.approx(0.2 * camera.focal_px[0])
    assert "65 degrees, sd 20%" in note


def test_an_impossible_35_mm_tag_falls_back_to_the_focal_plane() -> None:
    facts = ExifFacts(focal_35mm=3.0, focal_mm=20.0, plane_px_per_mm=200.0)
    assert camera_from_exif(facts, SIZE)[0].focal_px[0] == pytest.approx(4000.0)


@pytest.mark.parametrize(
    "changes",
    [
        {"make": "Birch"},
        {"model": "A8"},
        {"lens": "wide"},
        {"focal_mm": 5.2},
        {"focal_35mm": 52.0},
        {"digital_zoom": 2.0},
    ],
)
def test_what_separates_cameras(changes: dict[str, object]) -> None:
    other = replace(FACTS, **changes)  # type: ignore[arg-type]
    assert camera_from_exif(other, SIZE)[0].name != camera_from_exif(FACTS, SIZE)[0].name


def test_size_separates_cameras_and_other_facts_do_not() -> None:
    camera = camera_from_exif(FACTS, SIZE)[0]
    assert camera_from_exif(FACTS, (4032, 2268))[0].name != camera.name
    assert camera_from_exif(replace(FACTS, orientation=6, problems=("x",)), SIZE)[0] == camera
