"""Wrong sheets through the command line: every fault told, exit code 2, nothing under out/ touched.

All rounds are invented.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from fieldround.cli.main import main
from tests.rounds.folders import MARKS, OBJECTS, PAIRS, write_photo, write_round


def run(folder: Path, *more: str) -> Result:
    return CliRunner().invoke(main, ["run", str(folder), *more])


def snapshot(folder: Path) -> dict[str, tuple[int, bytes]]:
    """Time of change and content of every file, and of every folder its time of change."""
    return {
        path.relative_to(folder).as_posix(): (
            path.stat().st_mtime_ns,
            path.read_bytes() if path.is_file() else b"",
        )
        for path in sorted([folder, *folder.rglob("*")])
    }


WRONG = {
    "a column is missing": (
        {"pairs_csv": "pair,photo_a,tape_m\nP1,a.jpg,1.5\n"},
        ["pairs.csv", "photo_b"],
    ),
    "a photo is unknown": (
        {"pairs_csv": PAIRS.replace("b.jpg", "bb.jpg")},
        ["pairs.csv, row 2, column photo_b is 'bb.jpg'"],
    ),
    "text stands where a number belongs": (
        {"pairs_csv": PAIRS.replace("1.5", "one and a half")},
        ["pairs.csv, row 2, column tape_m is 'one and a half'", "metres"],
    ),
    "a pair is there twice": (
        {"pairs_csv": PAIRS + "P1,b.jpg,a.jpg,1.5\n"},
        ["pairs.csv, row 3, column pair is 'P1'", "row 2"],
    ),
    "an object is there twice": (
        {"pairs_csv": PAIRS, "objects_csv": OBJECTS + "T1,pole,P1\n"},
        ["objects.csv, row 3, column object is 'T1'"],
    ),
    "the same photo is A and B": (
        {"pairs_csv": "pair,photo_a,photo_b,tape_m\nP1,a.jpg,a.jpg,1.5\n"},
        ["pairs.csv, row 2, column photo_b is 'a.jpg'"],
    ),
    "a decimal comma in a sheet of commas": (
        {"pairs_csv": 'pair,photo_a,photo_b,tape_m\nP1,a.jpg,b.jpg,"1,5"\n'},
        ["pairs.csv, row 2, column tape_m is '1,5'"],
    ),
    "the sheet of pairs is empty": ({"pairs_csv": ""}, ["pairs.csv"]),
    "a mark lies outside its photo": (
        {"objects_csv": OBJECTS, "marks_csv": MARKS.replace("10,20", "640,20")},
        ["marks.csv, row 2, column x_px is '640'"],
    ),
    "a kind is misspelt": (
        {"objects_csv": OBJECTS.replace("trunk", "trunck")},
        ["objects.csv, row 2, column kind is 'trunck'", "trunk"],
    ),
    "round.toml is no TOML": ({"round_toml": "[round\n"}, ["round.toml, row 1"]),
}


@pytest.mark.parametrize("case", WRONG, ids=lambda case: case.replace(" ", "-"))
def test_a_wrong_sheet_is_told_and_nothing_is_written(tmp_path: Path, case: str) -> None:
    sheets, told = WRONG[case]
    folder = write_round(tmp_path / "round", **sheets)
    (folder / "out" / "cache").mkdir(parents=True)
    (folder / "out" / "results.csv").write_text("of the run before\n")
    before = snapshot(folder)
    result = run(folder)
    assert result.exit_code == 2, result.output
    for part in told:
        assert part in result.stderr
    assert result.stdout == ""
    assert "Traceback" not in result.stderr
    assert snapshot(folder) == before


def test_nothing_is_made_where_no_results_were(tmp_path: Path) -> None:
    folder = write_round(tmp_path / "round", pairs_csv="")
    assert run(folder).exit_code == 2
    assert not (folder / "out").exists()
    assert run(folder, "--out", str(tmp_path / "elsewhere")).exit_code == 2
    assert not (tmp_path / "elsewhere").exists()


def test_every_fault_of_every_sheet_is_told_in_one_go(tmp_path: Path) -> None:
    folder = write_round(
        tmp_path / "round",
        pairs_csv=PAIRS.replace("1.5", "x") + "P2,a.jpg,c.jpg,2\nP1,a.jpg,b.jpg,-1\n",
        objects_csv="object,kind,pair,ref_height_m\nT1,trunk,P9,high\n",
        marks_csv=MARKS.replace("10,20", "abc,20") + "T2,a.jpg,middle,1,1,\n",
    )
    told = run(folder).stderr.splitlines()
    places = [line.split(" is ")[0] for line in told]
    assert told[0] == "8 things are wrong in the sheets; nothing was written."
    assert set(places[2:]) == {
        "pairs.csv, row 2, column tape_m",
        "pairs.csv, row 3, column photo_b",
        "pairs.csv, row 4, column tape_m",
        "pairs.csv, row 4, column pair",
        "objects.csv, row 2, column pair",
        "objects.csv, row 2, column ref_height_m",
        "marks.csv, row 2, column x_px",
        "marks.csv, row 4, column object",
    }
    assert [p.split(",")[0] for p in places[2:]] == ["pairs.csv"] * 4 + ["objects.csv"] * 2 + [
        "marks.csv"
    ] * 2
    assert all(": " in line for line in told[2:])


def test_a_folder_that_is_not_there_is_a_sentence(tmp_path: Path) -> None:
    result = run(tmp_path / "nowhere")
    assert result.exit_code == 2
    assert "nowhere: there is no such folder" in result.stderr


def test_quiet_still_tells_faults(tmp_path: Path) -> None:
    result = run(write_round(tmp_path / "round", pairs_csv=""), "--quiet")
    assert result.exit_code == 2
    assert "pairs.csv" in result.stderr


def test_results_cannot_go_where_a_file_stands(tmp_path: Path) -> None:
    folder = write_round(tmp_path / "round")
    (tmp_path / "file").write_text("x")
    result = run(folder, "--out", str(tmp_path / "file"))
    assert result.exit_code == 2
    assert (tmp_path / "file").read_text() == "x"


def test_a_photo_whose_name_differs_in_case_only_is_no_fault(tmp_path: Path) -> None:
    pairs = PAIRS + "P2,a.jpg,z.jpg,1\n"
    folder = write_round(tmp_path / "round", photos=("a.jpg",), pairs_csv=pairs)
    write_photo(folder / "photos" / "B.JPG")
    result = run(folder)
    assert result.exit_code == 2
    assert "'b.jpg'" not in result.stderr
    assert "'z.jpg'" in result.stderr
