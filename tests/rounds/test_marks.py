"""Sheets of marks written by the program read back to the same bits."""

from __future__ import annotations

import csv
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldround.rounds.errors import SheetsError
from fieldround.rounds.marks import read_marks, write_marks
from fieldround.rounds.model import MARK_NAMES, Mark, Settings

MARK = Mark("T1", "a.jpg", "left", 10.25, 20.5, 0.7)

_NAME = (
    st.text(st.characters(codec="utf-8", exclude_categories=["Cc", "Cs"]), min_size=1, max_size=10)
    .map(str.strip)
    .filter(bool)
)
_PLACE = st.floats(-1e5, 1e5)


@settings(deadline=None, max_examples=100)
@given(
    st.lists(
        st.builds(
            Mark,
            object=_NAME,
            photo=_NAME,
            mark=st.sampled_from(MARK_NAMES),
            x_px=_PLACE,
            y_px=_PLACE,
            sd_px=st.floats(1e-6, 1e3),
        ),
        max_size=5,
    ),
    st.booleans(),
)
def test_marks_read_back_the_same(
    tmp_path_factory: pytest.TempPathFactory, marks: list[Mark], confident: bool
) -> None:
    path = tmp_path_factory.mktemp("marks") / "marks_found.csv"
    write_marks(path, marks, [0.5] * len(marks) if confident else None)
    found = read_marks(path)
    assert [replace(mark, row=None) for mark in found] == marks
    assert [mark.row for mark in found] == list(range(2, len(marks) + 2))


def test_the_columns_are_those_of_marks_csv_and_a_confidence(tmp_path: Path) -> None:
    path = tmp_path / "marks_found.csv"
    write_marks(path, [MARK], [0.93])
    assert path.read_bytes() == (
        b"object,photo,mark,x_px,y_px,sd_px,confidence\nT1,a.jpg,left,10.25,20.5,0.7,0.93\n"
    )
    write_marks(path, [MARK])
    with path.open(newline="") as file:
        assert list(csv.DictReader(file)) == [
            {
                "object": "T1",
                "photo": "a.jpg",
                "mark": "left",
                "x_px": "10.25",
                "y_px": "20.5",
                "sd_px": "0.7",
            }
        ]


def test_a_blank_sd_is_the_setting(tmp_path: Path) -> None:
    path = tmp_path / "marks.csv"
    path.write_text("object,photo,mark,x_px,y_px\nT1,a.jpg,left,1,2\n")
    assert read_marks(path)[0].sd_px == 0.7
    assert read_marks(path, Settings(mark_sd_px=0.4))[0].sd_px == 0.4


@pytest.mark.parametrize("change", [{"x_px": float("nan")}, {"sd_px": float("inf")}])
def test_no_nan_reaches_the_file(tmp_path: Path, change: dict[str, float]) -> None:
    path = tmp_path / "marks.csv"
    write_marks(path, [MARK])
    before = path.read_bytes()
    with pytest.raises(ValueError, match="not finite"):
        write_marks(path, [replace(MARK, **change)])  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="not finite"):
        write_marks(path, [MARK], [float("nan")])
    assert path.read_bytes() == before
    assert [entry.name for entry in tmp_path.iterdir()] == ["marks.csv"]


def test_faults_of_a_sheet_read_on_its_own(tmp_path: Path) -> None:
    path = tmp_path / "marks.csv"
    with pytest.raises(SheetsError, match=r"marks\.csv: the file is missing"):
        read_marks(path)
    path.write_text("object,photo,mark,x_px,y_px\nT1,a.jpg,left,1,x\n,a.jpg,left,1,1\n")
    with pytest.raises(SheetsError) as caught:
        read_marks(path)
    assert [(fault.row, fault.column) for fault in caught.value.faults] == [
        (2, "y_px"),
        (3, "object"),
    ]
