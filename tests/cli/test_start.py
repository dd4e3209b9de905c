"""`fieldround start` on a folder of photos: the demo round's and invented ones."""

from __future__ import annotations

import csv
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from fieldround.cli.main import main
from tests.run.marked_round import make_round

DEMO = Path(__file__).resolve().parents[2] / "demo_site"


def start(folder: Path, *more: str) -> Result:
    return CliRunner().invoke(main, ["start", str(folder), *more])


def test_the_photos_of_a_pair_are_proposed_together(tmp_path: Path) -> None:
    (tmp_path / "photos").mkdir()
    with (DEMO / "pairs.csv").open(encoding="utf-8-sig", newline="") as file:
        first = next(csv.DictReader(file))
    for name in (first["photo_a"], first["photo_b"]):
        (tmp_path / "photos" / name).parent.mkdir(parents=True, exist_ok=True)
        shutil.copy(DEMO / "photos" / name, tmp_path / "photos" / name)
    result = start(tmp_path)
    assert result.exit_code == 0, result.output
    with (tmp_path / "pairs.csv").open(encoding="utf-8", newline="") as file:
        (row,) = csv.DictReader(file)
    assert {row["photo_a"], row["photo_b"]} == {first["photo_a"], first["photo_b"]}
    assert row["tape_m"] == ""
    assert "Still to be filled in:" in result.stdout
    assert f"pair {row['pair']}: tape_m" in result.stdout
    assert "Compare photos" in result.stderr


def test_sheets_that_are_there_stay_as_they_are(tmp_path: Path) -> None:
    folder = make_round(tmp_path / "round", 1).folder
    before = {path.name: path.read_bytes() for path in folder.iterdir() if path.is_file()}
    result = start(folder)
    assert result.exit_code == 0, result.output
    assert {p.name: p.read_bytes() for p in folder.iterdir() if p.is_file()} == before
    assert f"There already, left as it is: {folder / 'pairs.csv'}" in result.stdout


@pytest.mark.parametrize("made", [False, True])
def test_a_folder_without_photos_is_a_sentence(tmp_path: Path, made: bool) -> None:
    if made:
        (tmp_path / "round").mkdir()
    result = start(tmp_path / "round")
    assert result.exit_code == 1
    assert result.stderr.startswith("The work failed: ")
    assert "Traceback" not in result.stderr


def test_quiet_prints_only_what_is_missing(tmp_path: Path) -> None:
    folder = make_round(tmp_path / "round", 1).folder
    (folder / "pairs.csv").unlink()
    result = start(folder, "--quiet")
    assert result.exit_code == 0
    assert result.stderr == ""
    assert all(
        line.startswith(("Still to be filled in:", "  ")) for line in result.stdout.splitlines()
    )
