"""The reader of CSV sheets: forms of a spreadsheet's output, and the place of every fault."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldround.rounds.errors import Fault
from fieldround.rounds.sheets import Table, nearest_hint, parse_number, read_table

KNOWN = ("object", "width_m", "note")


def read(path: Path, content: str | bytes) -> tuple[Table | None, list[Fault]]:
    raw = content.encode("utf-8") if isinstance(content, str) else content
    path.joinpath("sheet.csv").write_bytes(raw)
    faults: list[Fault] = []
    table = read_table(path / "sheet.csv", KNOWN, ("object", "width_m"), faults)
    return table, faults


def widths(table: Table | None) -> list[float | None]:
    assert table is not None
    return [row.number("width_m", "metres") for row in table.rows]


@pytest.mark.parametrize("ending", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("mark", ["", "\ufeff"])
@pytest.mark.parametrize(
    "lines",
    [
        ["object,width_m,note", "T1,0.25,by a fence", "T2,.5,"],
        ["object;width_m;note", "T1;0,25;by a fence", "T2;,5;"],
        ["object;width_m;note", "T1;0.25;by a fence", "T2;0.5;"],
        ["sep=;", "object;width_m;note", "T1;0,25;by a fence", "T2;0,5;"],
        ["", "Object , WIDTH_M,note,,", 'T1," 0.25 ",by a fence,,', "", "T2,5e-1,,,", ",,,,"],
    ],
)
def test_forms_that_spreadsheets_write(
    tmp_path: Path, lines: list[str], mark: str, ending: str
) -> None:
    table, faults = read(tmp_path, mark + ending.join(lines) + ending)
    assert faults == []
    assert table is not None
    assert [row.text("object") for row in table.rows] == ["T1", "T2"]
    assert widths(table) == [0.25, 0.5]
    assert [row.text("note") for row in table.rows] == ["by a fence", ""]
    assert faults == []


def test_rows_are_counted_as_an_editor_counts_lines(tmp_path: Path) -> None:
    table, faults = read(tmp_path, '\nobject,width_m,note\nT1,1,"two\nlines"\n\nT2,wide,\n')
    assert table is not None
    assert [row.row for row in table.rows] == [3, 6]
    assert table.rows[0].text("note") == "two\nlines"
    widths(table)
    assert [(fault.row, fault.column, fault.value) for fault in faults] == [(6, "width_m", "wide")]


def test_unknown_columns_keep_their_order_and_spelling(tmp_path: Path) -> None:
    table, faults = read(tmp_path, "Zone,object,Asset No,width_m,ash\n7,T1,x9,1,\n")
    assert table is not None
    assert faults == []
    assert table.extra_columns == ("Zone", "Asset No", "ash")
    assert list(table.extra(table.rows[0]).items()) == [
        ("Zone", "7"), ("Asset No", "x9"), ("ash", ""),
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("content", "row", "column", "value", "word"),
    [
        ("", None, None, None, "empty"),
        (" \n \n", None, None, None, "empty"),
        ("object,note\nT1,x\n", 1, "width_m", None, "lacks this column"),
        ("\n\nobject,note\nT1,x\n", 3, "width_m", None, "lacks this column"),
        ("object,widthm\nT1,1\n", 1, "width_m", None, "did you mean 'widthm'"),
        ("object,width_m,object\nT1,1,T2\n", 1, "object", "object", "two columns"),
        ("object,width_m,Object\nT1,1,T2\n", 1, "object", "Object", "two columns"),
        ("object,width_m,zone,zone\nT1,1,2,3\n", 1, "zone", "zone", "two columns"),
        ("object,,width_m\nT1,x,1\n", 1, "(column 2)", "", "name this column"),
        ("object,width_m\nT1\n", 2, None, "T1", "1 cell but the header 2"),
        ("object,width_m\nT1,1,x,2\n", 2, None, "T1,1,x,2", "in double quotes"),
        ("object,width_m\nT1,1\nT2,1,778\n", 3, None, "T2,1,778", "'1.778'"),
        ('object,width_m\nT1,1\n"T2,2\n', 3, None, None, "quotes"),
        ('object,width_m\n"T1"x,1\nT2,2\n', 2, None, None, "quotes"),
        ("object\twidth_m\nT1\t1\n", 1, None, None, "tabs"),
        (b"object,width_m,note\nT1,1,ok\nT2,2,gr\xfcn\n", 3, None, "T2,2,gr\u00fcn", "UTF-8"),
        ("object,width_m\nT1,1\n".encode("utf-16"), None, None, None, "UTF-16"),
        (b"object,width_m\nT1,\x001\n", None, None, None, "binary"),
    ],
)
def test_faults_of_the_whole_sheet(
    tmp_path: Path, content: str | bytes, row: int | None, column: str | None, value: str | None,
    word: str,
) -> None:  # fmt: skip
    _, faults = read(tmp_path, content)
    assert [(fault.file, fault.row, fault.column, fault.value) for fault in faults] == [
        ("sheet.csv", row, column, value)
    ]
    assert word in faults[0].remedy


@pytest.mark.parametrize(
    ("separator", "cell", "word"),
    [
        (",", "wide", "in digits"),
        (",", "1.5 m", "without its unit"),
        (",", "30cm", "without its unit"),
        (",", "nan", "finite"),
        (",", "-inf", "finite"),
        (",", "Infinity", "finite"),
        (",", "1e999", "finite"),
        (",", '"1,5"', "decimal point, 1.5"),
        (",", "1_000", "in digits"),
        (",", '"1,234.5"', "thousands"),
        (",", "١٢", "in digits"),
        (",", "0x10", "in digits"),
        (",", "=A1", "in digits"),
        (",", "0", "above 0"),
        (",", "-0.0", "above 0"),
        (",", "\u22120.5", "above 0"),
        (",", "7", "at most 6"),
        (";", "1.234,5", "thousands"),
        (";", "1,2,3", "in digits"),
    ],
)
def test_faults_of_a_number(tmp_path: Path, separator: str, cell: str, word: str) -> None:
    lines = [["object", "width_m", "note"], ["T1", cell, ""]]
    table, faults = read(tmp_path, "\n".join(separator.join(line) for line in lines))
    assert table is not None
    assert table.rows[0].number("width_m", "metres", above=0.0, most=6.0) is None
    assert [(fault.file, fault.row, fault.column, fault.value) for fault in faults] == [
        ("sheet.csv", 2, "width_m", cell.strip('"'))
    ]
    assert word in faults[0].remedy
    assert "metres" in faults[0].remedy


def test_a_line_of_wrong_length_is_not_judged_again_in_its_cells(tmp_path: Path) -> None:
    table, faults = read(tmp_path, "object,width_m\nT1,1,50,x\nT2,bad\n")
    widths(table)
    assert [(fault.row, fault.column) for fault in faults] == [(2, None), (3, "width_m")]


def test_blank_cells_and_choices(tmp_path: Path) -> None:
    table, faults = read(tmp_path, "object,width_m,note\n,1,POLE\nT2,1,pol\nT3,1,\n")
    assert table is not None
    kinds = [row.choice("note", ("pole", "mast")) for row in table.rows]
    assert kinds == ["pole", None, None]
    assert table.rows[0].required("object", "a name") == ""
    assert [(fault.row, fault.column, fault.value) for fault in faults] == [
        (3, "note", "pol"), (2, "object", ""),
    ]  # fmt: skip
    assert "did you mean 'pole'" in faults[0].remedy


def test_nearest_hint_stays_silent_without_a_near_word() -> None:
    assert nearest_hint("IMG_12.jpg", ["img_12.JPG"]) == "; did you mean 'img_12.JPG'?"
    assert nearest_hint("qqqq", ["pole", "mast"]) == ""


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_numbers_read_back_to_the_same_bits(number: float) -> None:
    assert parse_number(repr(number)) == number
    assert parse_number(repr(number).replace(".", ","), ";") == number


_TEXT = st.text(st.characters(codec="utf-8", exclude_categories=["Cc", "Cs"]), max_size=12).map(
    str.strip
)


@settings(deadline=None, max_examples=150)
@given(
    rows=st.lists(
        st.tuples(
            _TEXT.filter(bool),
            st.floats(allow_nan=False, allow_infinity=False, width=32),
            st.tuples(_TEXT, _TEXT).map("\n".join).map(str.strip),
        ),
        min_size=1,
        max_size=6,
    ),
    separator=st.sampled_from(",;"),
    decimal=st.sampled_from(".,"),
    mark=st.booleans(),
    ending=st.sampled_from(["\n", "\r\n"]),
)
def test_tables_read_back_as_written(
    tmp_path_factory: pytest.TempPathFactory,
    rows: list[tuple[str, float, str]],
    separator: str,
    decimal: str,
    mark: bool,
    ending: str,
) -> None:
    if separator == ",":
        decimal = "."
    text = io.StringIO()
    writer = csv.writer(text, delimiter=separator, lineterminator=ending)
    writer.writerow(["object", "width_m", "remark"])
    for name, number, remark in rows:
        writer.writerow([name, repr(number).replace(".", decimal), remark])
    folder = tmp_path_factory.mktemp("sheet")
    table, faults = read(folder, ("\ufeff" if mark else "") + text.getvalue())
    assert table is not None
    assert widths(table) == [number for _, number, _ in rows]
    assert [row.text("object") for row in table.rows] == [name for name, _, _ in rows]
    assert [table.extra(row)["remark"] for row in table.rows] == [remark for _, _, remark in rows]
    assert faults == []
