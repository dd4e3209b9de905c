"""`fieldround lists` after a run. The round is invented (tests/run/marked_round.py)."""

from __future__ import annotations

from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from fieldround.cli.main import main
from tests.run.marked_round import make_round


def lists(folder: Path, *more: str) -> Result:
    return CliRunner().invoke(main, ["lists", str(folder), *more])


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A round of two poles that was run."""
    made = make_round(tmp_path_factory.mktemp("lists") / "round", 2)
    assert CliRunner().invoke(main, ["run", str(made.folder), "--quiet"]).exit_code == 0
    return made.folder


def test_the_lists_of_a_round_are_written_and_named(folder: Path) -> None:
    result = lists(folder)
    assert result.exit_code == 0, result.output
    written = {Path(line).name for line in result.stdout.splitlines()}
    assert {"utility-poles.csv", "constants.csv", "report.html"} <= written
    poles = (folder / "out" / "lists" / "utility-poles.csv").read_text(encoding="utf-8")
    assert "T1" in poles
    assert "T2" in poles


def test_a_wrong_lists_file_is_told_and_nothing_is_written(folder: Path) -> None:
    assert lists(folder).exit_code == 0
    before = {p.name: p.read_bytes() for p in (folder / "out" / "lists").iterdir()}
    (folder / "lists.toml").write_text("[utility\n", encoding="utf-8")
    try:
        result = lists(folder)
    finally:
        (folder / "lists.toml").unlink()
    assert result.exit_code == 2
    assert "lists.toml" in result.stderr
    assert {p.name: p.read_bytes() for p in (folder / "out" / "lists").iterdir()} == before


def test_a_round_that_was_not_run_is_a_sentence(tmp_path: Path) -> None:
    result = lists(make_round(tmp_path / "round", 1).folder)
    assert result.exit_code == 1
    assert "Traceback" not in result.stderr
    assert result.stderr.startswith("The work failed: ")
