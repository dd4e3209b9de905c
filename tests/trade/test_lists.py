from __future__ import annotations

import csv
from dataclasses import replace

import pytest

from fieldround.deliver.report_section import insert_section
from fieldround.deliver.write import write_results
from fieldround.rounds.errors import RoundError, SheetsError
from fieldround.trade.lists import write_lists
from fieldround.trade.measured import from_geopackage, from_result
from tests.deliver import invented


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    folder = tmp_path_factory.mktemp("round")
    result = invented.small_round(folder)
    write_results(result, folder / "out")
    return folder, result


def test_the_file_says_what_the_result_said(run):
    folder, result = run
    direct, read = from_result(result), from_geopackage(folder / "out" / "results.gpkg")
    assert [m.object for m in read] == [m.object for m in direct]
    for a, b in zip(direct, read, strict=True):
        assert (b.diameter_m is None) == (a.diameter_m is None)
        if a.diameter_m is not None:
            assert b.diameter_m == pytest.approx(a.diameter_m, abs=5e-6)
            assert b.common_sd_m == pytest.approx(a.common_sd_m, abs=1e-6)
        assert (a.longitude is None) == (b.longitude is None)
        if a.longitude is not None:
            assert b.longitude == pytest.approx(a.longitude, abs=1e-9)
            assert b.latitude == pytest.approx(a.latitude, abs=1e-9)
        assert a.kind == b.kind
        assert a.verdict == b.verdict
    assert read[0].extra["note"] == "by the gate"
    assert "verdict" not in read[0].extra


def test_lists_are_written_and_stand_in_the_report_once(run):
    folder, _ = run
    first = write_lists(folder)
    names = {path.name for path in first}
    assert {
        "forestry-classes.csv", "forestry-stand.csv", "forestry-stems.csv", "utility-poles.csv",
        "utility-spans.csv", "municipal-tubes.csv", "municipal-assets.csv", "tanks-standing.csv",
        "tanks-lying.csv", "tanks-levels.csv", "balls.csv", "constants.csv", "report.html",
    } == names  # fmt: skip
    before = {path: path.read_bytes() for path in first}
    assert {path: path.read_bytes() for path in write_lists(folder)} == before
    page = (folder / "out" / "report.html").read_text("utf-8")
    assert page.count('<section id="lists"') == 1
    assert "Quadratic mean diameter" in page
    assert "rule of thumb" in page
    assert page.index("Object by object") < page.index('id="lists"') < page.index("<h2>Method")
    assert "<script" not in page
    with (folder / "out" / "lists" / "utility-poles.csv").open(encoding="utf-8", newline="") as f:
        rows = list(csv.DictReader(f))
    assert {row["object"] for row in rows} == {"P001", "P015"}
    assert float(rows[0]["girth_cm"]) > 0


def test_every_source_stands_beside_its_constant(run):
    folder, _ = run
    write_lists(folder)
    with (folder / "out" / "lists" / "constants.csv").open(encoding="utf-8", newline="") as f:
        rows = list(csv.DictReader(f))
    assert len(rows) > 20
    assert all(row["source"] for row in rows)


def test_a_list_without_objects_goes_away(tmp_path):
    result = invented.large_round(7, folder=tmp_path)
    write_results(result, tmp_path / "out")
    write_lists(tmp_path)
    assert (tmp_path / "out" / "lists" / "balls.csv").exists()
    fewer = replace(result, objects=result.objects[:6])
    write_results(fewer, tmp_path / "out")
    write_lists(tmp_path)
    assert not (tmp_path / "out" / "lists" / "balls.csv").exists()


def test_faulty_constants_leave_everything_as_it_was(tmp_path):
    write_results(invented.large_round(7, folder=tmp_path), tmp_path / "out")
    write_lists(tmp_path)
    before = {p: p.read_bytes() for p in (tmp_path / "out").rglob("*") if p.is_file()}
    (tmp_path / "lists.toml").write_text("[forestry]\nvolume = 'import os'\n", encoding="utf-8")
    with pytest.raises(SheetsError, match="arithmetic"):
        write_lists(tmp_path)
    assert {p: p.read_bytes() for p in (tmp_path / "out").rglob("*") if p.is_file()} == before


def test_a_round_that_was_not_run_is_told_so(tmp_path):
    (tmp_path / "out").mkdir()
    with pytest.raises(RoundError, match="fieldround run"):
        write_lists(tmp_path)
    (tmp_path / "out" / "results.gpkg").write_bytes(b"no database")
    with pytest.raises(RoundError, match="cannot be read"):
        write_lists(tmp_path)


def test_without_positions_there_are_lists_but_no_spans(tmp_path):
    write_results(
        invented.without_places(invented.large_round(7, folder=tmp_path)), tmp_path / "out"
    )
    names = {path.name for path in write_lists(tmp_path)}
    assert "utility-poles.csv" in names
    assert "utility-spans.csv" not in names


def test_a_report_without_the_place_is_said():
    with pytest.raises(RoundError, match="no place for the lists"):
        insert_section("<html></html>", "x")


def test_names_from_the_sheets_are_text_in_the_lists(run):
    folder, _ = run
    write_lists(folder)
    page = (folder / "out" / "report.html").read_text("utf-8")
    section = page[page.index('id="lists"') :]
    assert invented.NASTY not in section
    assert "&lt;script&gt;" in section
