"""Cameras found by a round, read from its run.json and written as cards. Invented values."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from fieldround.deliver.facts import write_facts
from fieldround.rounds.cards import read_cards
from fieldround.rounds.errors import SheetsError
from fieldround.rounds.model import Camera
from fieldround.run.cameras_kept import KeepError, add_cards, cards_text, found_cameras
from tests.run.invented import CAMERA, a_result, a_round, an_object

FOUND = replace(
    CAMERA,
    name='phone "x", main lens',
    make="Maker",
    model="Model 1",
    focal_mm=5.1,
    focal_px=(311.25, 311.5),
    focal_sd_px=0.75,
    distortion=(0.02, -0.05, 0.0003, -0.0002, 0.001),
    distortion_sd=(0.002, 0.004, 0.0002, 0.0002, 0.001),
)


def run_json(out: Path, found: Camera | None) -> Path:
    """run.json as the program itself writes it."""
    out.mkdir(parents=True)
    round_ = replace(a_round(out), cameras={FOUND.name: FOUND})
    result = a_result(round_, [an_object("T1")])
    cameras = {} if found is None else {found.name: found}
    write_facts(out / "run.json", replace(result, cameras_found=cameras))
    return out


def test_a_camera_goes_through_run_json_and_a_card_unchanged(tmp_path: Path) -> None:
    found = found_cameras(run_json(tmp_path / "out", FOUND))
    assert found == {FOUND.name: FOUND}
    path = tmp_path / "cameras.toml"
    add_cards(path, list(found.values()))
    faults: list = []
    (card,) = read_cards(path, faults)
    assert faults == []
    assert card.camera == FOUND
    assert "focal length known to 0.24 %" in path.read_text(encoding="utf-8")


def test_cards_are_added_behind_those_that_are_there(tmp_path: Path) -> None:
    path = tmp_path / "cameras.toml"
    before = "# mine\n" + cards_text([replace(CAMERA, name="other")]).rstrip("\n")
    path.write_text(before, encoding="utf-8")
    add_cards(path, [FOUND])
    assert path.read_text(encoding="utf-8").startswith(before)
    assert [card.camera.name for card in read_cards(path, [])] == ["other", FOUND.name]
    kept = path.read_bytes()
    with pytest.raises(KeepError, match="under another name"):
        add_cards(path, [FOUND])
    assert path.read_bytes() == kept
    assert [p.name for p in tmp_path.iterdir()] == ["cameras.toml"]


def test_a_wrong_cameras_file_is_left_alone(tmp_path: Path) -> None:
    path = tmp_path / "cameras.toml"
    path.write_text("[[camera]]\nname = 3\n", encoding="utf-8")
    with pytest.raises(SheetsError):
        add_cards(path, [FOUND])
    assert path.read_text(encoding="utf-8") == "[[camera]]\nname = 3\n"


@pytest.mark.parametrize("content", [None, "{", "[]", '{"cameras": {"x": 3}}', '{"run": 1}'])
def test_a_missing_or_odd_run_is_a_sentence(tmp_path: Path, content: str | None) -> None:
    if content is not None:
        (tmp_path / "run.json").write_text(content, encoding="utf-8")
    with pytest.raises(KeepError, match=r"run\.json"):
        found_cameras(tmp_path)


def test_a_round_without_result_has_no_camera(tmp_path: Path) -> None:
    assert found_cameras(run_json(tmp_path / "out", None)) == {}
