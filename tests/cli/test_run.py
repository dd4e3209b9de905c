"""`fieldround run` on whole rounds: what it finds, what it writes, what it does when parts fail.

The rounds are invented (tests/run/marked_round.py); their true diameters are exact.
"""

from __future__ import annotations

import csv
import hashlib
import json
import shutil
import sqlite3
from contextlib import closing
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from fieldround.cli.main import main
from fieldround.run import solving, tying, work
from tests.run.marked_round import Made, make_round

RESULTS = ("results.gpkg", "results.csv", "results.geojson", "map.html", "report.html")


@pytest.fixture(scope="module")
def two_pairs(tmp_path_factory: pytest.TempPathFactory) -> Made:
    return make_round(tmp_path_factory.mktemp("rounds") / "two", 2)


@pytest.fixture
def made(two_pairs: Made, tmp_path: Path) -> Made:
    """A copy of the round, for a test to spoil."""
    return Made(Path(shutil.copytree(two_pairs.folder, tmp_path / "round")), two_pairs.diameters_m)


def search_pictures(folder: Path) -> None:
    """Let the run look for ties in the pictures, which the round leaves out to be quick."""
    (folder / "round.toml").unlink()


def run(folder: Path, *more: str) -> Result:
    return CliRunner().invoke(main, ["run", str(folder), *more])


def sheet(folder: Path) -> dict[str, dict[str, str]]:
    with (folder / "out" / "results.csv").open(encoding="utf-8-sig", newline="") as file:
        return {row["object"]: row for row in csv.DictReader(file)}


def digests(folder: Path) -> dict[str, str]:
    return {n: hashlib.sha256((folder / "out" / n).read_bytes()).hexdigest() for n in RESULTS}


def holds_truth(row: dict[str, str], true_m: float) -> bool:
    return float(row["diameter_lo_m"]) <= true_m <= float(row["diameter_hi_m"])


def test_a_round_becomes_results_that_hold_the_truth(made: Made) -> None:
    result = run(made.folder)
    assert result.exit_code == 0, result.output
    rows = sheet(made.folder)
    assert set(rows) == set(made.diameters_m)
    for name, true_m in made.diameters_m.items():
        # Invented scatter with a fixed seed: 4 sds of 0.3 px marks and a 2 mm tape.
        found, sd = float(rows[name]["diameter_m"]), float(rows[name]["diameter_sd_m"])
        assert abs(found - true_m) < 4.0 * sd
        assert sd < 0.02 * true_m
        assert rows[name]["verdict"] == "accept", rows[name]["reasons"]
    for name in (*RESULTS, "run.json"):
        assert (made.folder / "out" / name).stat().st_size > 0
    assert "2 objects in 2 pairs: 2 accept" in result.stdout
    assert "P1" in result.stderr
    assert "P2" in result.stderr


def test_run_json_says_what_repeats_the_run(made: Made) -> None:
    assert run(made.folder, "--draws", "400").exit_code == 0
    facts = json.loads((made.folder / "out" / "run.json").read_text(encoding="utf-8"))
    assert facts["counts"]["by_verdict"] == {"accept": 2, "remeasure": 0, "no result": 0}
    assert {"python", "fieldround", "numpy", "opencv-python-headless"} <= set(facts["versions"])
    assert set(facts["seconds"]) == {"read", "ties", "solve", "place"}
    assert facts["options"]["draws"] == 400
    assert facts["cameras"]["invented"]["found"]["focal_px"][0] == pytest.approx(1500, abs=12)
    assert facts["settings"]["title"] == "Invented quay"


def test_the_same_round_gives_the_same_bytes(made: Made) -> None:
    assert run(made.folder, "--quiet").exit_code == 0
    first = digests(made.folder)
    assert run(made.folder, "--quiet").exit_code == 0
    assert digests(made.folder) == first
    assert run(made.folder, "--quiet", "--fresh").exit_code == 0
    assert digests(made.folder) == first


def test_results_can_go_elsewhere(made: Made, tmp_path: Path) -> None:
    assert run(made.folder, "--out", str(tmp_path / "there")).exit_code == 0
    assert (tmp_path / "there" / "results.gpkg").exists()
    assert not (made.folder / "out").exists()


def test_crops_and_parquet_are_written_when_asked_for(made: Made) -> None:
    pytest.importorskip("pyarrow")
    assert run(made.folder, "--embed-crops", "--parquet").exit_code == 0
    assert (made.folder / "out" / "objects.parquet").exists()
    with closing(sqlite3.connect(made.folder / "out" / "results.gpkg")) as table:
        names = {row[0] for row in table.execute("SELECT name FROM sqlite_master")}
    assert any("crop" in name for name in names)


def test_an_output_whose_package_is_missing_is_refused_before_the_work(
    made: Made, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("fieldround.cli.run_command.find_spec", lambda name: None)
    for option, package in ((["--parquet"], "pyarrow"), (["--postgis", "dbname=x"], "psycopg")):
        result = run(made.folder, *option)
        assert result.exit_code == 2
        assert package in result.stderr
    assert not (made.folder / "out").exists()


def test_a_database_that_is_not_there_leaves_the_files(made: Made) -> None:
    pytest.importorskip("psycopg")
    result = run(made.folder, "--postgis", "host=127.0.0.1 port=1 dbname=none connect_timeout=2")
    assert result.exit_code == 1
    assert result.stderr.splitlines()[-1].startswith("The work failed: ")
    assert (made.folder / "out" / "results.gpkg").exists()


def test_quiet_prints_nothing_when_all_is_well(made: Made) -> None:
    result = run(made.folder, "--quiet")
    assert (result.exit_code, result.output) == (0, "")


@pytest.mark.parametrize(
    "content", [b"", b"no picture at all", None], ids=["empty", "text", "cut-off"]
)
def test_an_unreadable_photo_takes_only_its_pair_along(made: Made, content: bytes | None) -> None:
    path = made.folder / "photos" / "p1b.jpg"
    whole = path.read_bytes()
    path.write_bytes(whole[: len(whole) // 2] if content is None else content)
    result = run(made.folder)
    assert result.exit_code == 0, result.output
    rows = sheet(made.folder)
    assert rows["T1"]["verdict"] == "no result"
    assert rows["T1"]["diameter_m"] == ""
    assert "p1b.jpg" in rows["T1"]["reasons"]
    assert rows["T2"]["verdict"] == "accept"
    assert holds_truth(rows["T2"], made.diameters_m["T2"])
    assert "p1b.jpg" in result.stderr
    assert "Pair P1 has no result" in result.stdout


def test_a_picture_that_only_fails_to_decode_takes_only_its_pair_along(
    made: Made, monkeypatch: pytest.MonkeyPatch
) -> None:
    from fieldround.rounds.errors import PictureError
    from fieldround.rounds.pictures import load_picture

    def load(photo):  # type: ignore[no-untyped-def]
        if photo.name == "p2a.jpg":
            raise PictureError("p2a.jpg: the picture cannot be decoded (invented)")
        return load_picture(photo)

    class Held(work.PicturesHeld):
        def __init__(self, round_) -> None:  # type: ignore[no-untyped-def]
            super().__init__(round_, load=load)

    search_pictures(made.folder)
    monkeypatch.setattr(work, "PicturesHeld", Held)
    assert run(made.folder).exit_code == 0
    rows = sheet(made.folder)
    assert (rows["T1"]["verdict"], rows["T2"]["verdict"]) == ("accept", "no result")
    assert "photo p2a.jpg: the picture cannot be decoded (invented)" in rows["T2"]["reasons"]
    facts = json.loads((made.folder / "out" / "run.json").read_text(encoding="utf-8"))
    assert list(facts["lost_photos"]) == ["p2a.jpg"]


def without_ties(folder: Path, photo: str) -> None:
    path = folder / "marks.csv"
    lines = path.read_text(encoding="utf-8").splitlines()
    kept = [line for line in lines if f",{photo},tie," not in line]
    assert len(kept) < len(lines)
    path.write_text("\n".join(kept) + "\n", encoding="utf-8")


def test_a_pair_without_ties_is_never_a_silent_number(made: Made) -> None:
    without_ties(made.folder, "p1a.jpg")
    assert run(made.folder).exit_code == 0
    rows = sheet(made.folder)
    assert rows["T1"]["verdict"] != "accept"
    assert "ties" in rows["T1"]["reasons"]
    assert rows["T2"]["verdict"] == "accept"


def test_a_search_for_ties_that_raises_leaves_the_marked_ties(
    made: Made, monkeypatch: pytest.MonkeyPatch
) -> None:
    def find_ties(*_: object) -> None:
        raise MemoryError("invented")

    search_pictures(made.folder)
    monkeypatch.setattr(tying, "find_ties", find_ties)
    result = run(made.folder)
    assert result.exit_code == 0
    assert {row["verdict"] for row in sheet(made.folder).values()} == {"accept"}
    assert "MemoryError: invented" in result.stderr
    with closing(sqlite3.connect(made.folder / "out" / "results.gpkg")) as table:
        reasons = [row[0] for row in table.execute("SELECT reasons FROM pairs")]
    assert len(reasons) == 2
    assert all("MemoryError: invented" in reason for reason in reasons)


def test_an_adjustment_that_raises_on_one_pair_is_no_result_with_its_reason(
    made: Made, monkeypatch: pytest.MonkeyPatch
) -> None:
    solve_round = solving.solve_round

    def breaking(round_, *more):  # type: ignore[no-untyped-def]
        if any(pair.pair == "P1" for pair in round_.pairs):
            raise FloatingPointError("invented")
        return solve_round(round_, *more)

    monkeypatch.setattr(solving, "solve_round", breaking)
    result = run(made.folder)
    assert result.exit_code == 0, result.output
    rows = sheet(made.folder)
    assert (rows["T1"]["verdict"], rows["T2"]["verdict"]) == ("no result", "accept")
    assert rows["T1"]["reasons"] == "pair P1: the adjustment failed (FloatingPointError: invented)"
    assert holds_truth(rows["T2"], made.diameters_m["T2"])


@pytest.mark.parametrize("step", ["gnss_baselines", "place_round"])
def test_placing_that_raises_leaves_the_diameters(
    made: Made, monkeypatch: pytest.MonkeyPatch, step: str
) -> None:
    def broken(*_: object) -> None:
        raise ZeroDivisionError("invented")

    monkeypatch.setattr(work, step, broken)
    assert run(made.folder).exit_code == 0
    assert {row["verdict"] for row in sheet(made.folder).values()} == {"accept"}
    notes = json.loads((made.folder / "out" / "run.json").read_text(encoding="utf-8"))["notes"]
    assert any("ZeroDivisionError: invented" in note for note in notes)


def test_results_that_cannot_be_written_are_a_failure_in_one_sentence(
    made: Made, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(work, "write_results", broken)
    result = run(made.folder)
    assert result.exit_code == 1
    last = result.stderr.splitlines()[-1]
    assert last.startswith("The work failed: OSError: [Errno 28] No space")
    assert "Traceback" not in result.stderr
    assert "Traceback" in run(made.folder, "--debug").stderr


def test_a_file_in_the_place_of_out_is_told_before_the_work(made: Made) -> None:
    (made.folder / "out").write_text("mine")
    result = run(made.folder)
    assert result.exit_code == 1
    assert "out is a file" in result.stderr
    assert "Find ties" not in result.stderr
    assert (made.folder / "out").read_text() == "mine"
