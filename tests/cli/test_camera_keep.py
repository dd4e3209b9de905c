"""`fieldround camera keep`: cards on stdout or in another round's cameras.toml. Invented values."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from fieldround.cli.main import main
from fieldround.deliver.facts import write_facts
from fieldround.rounds.cards import read_cards
from tests.run.invented import CAMERA, a_result, a_round, an_object


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A round whose run found two cameras."""
    cameras = {name: replace(CAMERA, name=name, make=name) for name in ("first", "second")}
    (tmp_path / "round" / "out").mkdir(parents=True)
    round_ = replace(a_round(tmp_path), cameras=cameras)
    result = replace(a_result(round_, [an_object("T1")]), cameras_found=cameras)
    write_facts(tmp_path / "round" / "out" / "run.json", result)
    return tmp_path / "round"


def keep(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, ["camera", "keep", *map(str, arguments)])


def test_cards_are_printed_as_a_cameras_file_holds_them(folder: Path, tmp_path: Path) -> None:
    result = keep(folder)
    assert result.exit_code == 0
    (tmp_path / "cameras.toml").write_text(result.stdout, encoding="utf-8")
    faults: list = []
    names = [card.camera.name for card in read_cards(tmp_path / "cameras.toml", faults)]
    assert (names, faults) == (["first", "second"], [])


def test_one_card_can_be_chosen_named_and_added(folder: Path, tmp_path: Path) -> None:
    target = tmp_path / "next.toml"
    result = keep(folder, "--camera", "second", "--name", "quay phone", "--to", target)
    assert result.exit_code == 0
    (card,) = read_cards(target, [])
    assert (card.camera.name, card.camera.make) == ("quay phone", "second")
    again = keep(folder, "--camera", "second", "--name", "quay phone", "--to", target)
    assert again.exit_code == 1
    assert "'quay phone' already" in again.stderr


def test_the_round_that_found_a_camera_does_not_get_it_back(folder: Path) -> None:
    result = keep(folder, "--to", folder / "cameras.toml")
    assert result.exit_code == 1
    assert "another round" in result.stderr
    assert not (folder / "cameras.toml").exists()


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        (["--camera", "third"], "no camera 'third'"),
        (["--name", "x"], "--name needs one camera"),
        (["--out", "nowhere"], "run `fieldround run` on the round first"),
    ],
)
def test_what_cannot_be_kept_is_a_sentence(folder: Path, arguments: list[str], told: str) -> None:
    result = keep(folder, *arguments)
    assert result.exit_code == 1
    assert told in result.stderr
    assert "Traceback" not in result.stderr
