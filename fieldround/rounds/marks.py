"""marks.csv: the pixel positions that mean something, read and written.

In: the sheet (or `Mark`s to write). Out: `Mark`s as written; whether their photos and objects
exist is judged by `judge_marks`, once everything else of the round is known.
"""

from __future__ import annotations

import csv
import io
import math
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from fieldround.rounds.errors import Fault, SheetsError
from fieldround.rounds.model import MARK_NAMES, OTHERS_NAMES, Mark, RoundObject, Settings
from fieldround.rounds.photos import PhotoFolder
from fieldround.rounds.sheets import Row, nearest_hint, read_table

COLUMNS = ("object", "photo", "mark", "x_px", "y_px", "sd_px")
REQUIRED = ("object", "photo", "mark", "x_px", "y_px")


@dataclass(frozen=True)
class MarksSheet:
    """The marks of a sheet, each with its row for faults that come to light later.

    notes : sentences about what was not read
    """

    marks: tuple[tuple[Row, Mark], ...]
    notes: tuple[str, ...] = ()


def read_marks_sheet(path: Path, settings: Settings, faults: list[Fault]) -> MarksSheet:
    """Read marks.csv; a missing file means no marks."""
    if not path.exists():
        return MarksSheet(())
    table = read_table(path, COLUMNS, REQUIRED, faults)
    if table is None:
        return MarksSheet(())
    marks = [(row, _mark(row, settings)) for row in table.rows]
    return MarksSheet(tuple((row, mark) for row, mark in marks if mark is not None), table.notes)


def read_marks(path: Path, settings: Settings | None = None) -> tuple[Mark, ...]:
    """Read a sheet of marks on its own, such as one that `write_marks` wrote.

    raises : SheetsError
    """
    faults: list[Fault] = []
    if not path.exists():
        faults.append(Fault(path.name, None, None, None, "the file is missing"))
    sheet = read_marks_sheet(path, settings or Settings(), faults)
    if faults:
        raise SheetsError(faults)
    return tuple(mark for _, mark in sheet.marks)


def write_marks(
    path: Path, marks: Sequence[Mark], confidences: Sequence[float] | None = None
) -> None:
    """Write marks in the columns of marks.csv, and a confidence column when it is given.

    Numbers are written so that they read back to the same bits. The file appears whole or not
    at all.
    raises : ValueError for a number that is not finite
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([*COLUMNS, "confidence"] if confidences is not None else COLUMNS)
    for place, mark in enumerate(marks):
        numbers = [float(mark.x_px), float(mark.y_px), float(mark.sd_px)]
        if confidences is not None:
            numbers.append(float(confidences[place]))
        if not all(math.isfinite(number) for number in numbers):
            raise ValueError(f"a {mark.mark} mark of {mark.object!r} has a number not finite")
        writer.writerow([mark.object, mark.photo, mark.mark, *map(repr, numbers)])
    partial = path.with_name(path.name + ".partial")
    partial.write_text(text.getvalue(), encoding="utf-8", newline="")
    os.replace(partial, path)


def judge_marks(
    sheet: MarksSheet,
    folder: PhotoFolder | None,
    written_photos: Mapping[str, str | None],
    paired: Sequence[str],
    sizes: Mapping[str, tuple[int, int]],
    objects: Mapping[str, RoundObject] | None,
    object_names: Sequence[str],
    landmarks: Sequence[str] = (),
) -> tuple[Mark, ...]:
    """The marks with their photos' names as on disk; whatever does not fit the round is a fault.

    written_photos : photo texts of pairs.csv -> name on disk, None where that was a fault
    paired         : photos of the pairs; sizes : upright sizes of those that could be read
    objects        : of objects.csv by name, None when there is no such sheet
    object_names   : every id written in objects.csv
    landmarks      : names in landmarks.csv
    """
    marks = []
    finder = _PhotoFinder(folder, written_photos, paired)
    ties: dict[tuple[str, str], int] = {}
    for row, mark in sheet.marks:
        if objects is not None and mark.mark not in OTHERS_NAMES and mark.object:
            if mark.object not in object_names:
                remedy = "objects.csv has no such object; add it there or correct the name"
                row.fault("object", mark.object, remedy + nearest_hint(mark.object, object_names))
            elif mark.mark == "outline" and mark.object in objects:
                kind = objects[mark.object].kind
                if kind != "ball":
                    remedy = f"the object is a {kind}; mark its limbs left and right"
                    row.fault("mark", mark.mark, remedy)
        if mark.mark == "landmark" and mark.object and mark.object not in landmarks:
            remedy = "landmarks.csv has no such landmark; add it there with its coordinates"
            row.fault("object", mark.object, remedy + nearest_hint(mark.object, landmarks))
        photo = finder.find(row, mark.photo)
        if photo is None:
            continue
        if mark.mark == "tie":
            first = ties.setdefault((mark.object, photo), row.row)
            if first != row.row:
                remedy = f"row {first} has this tie in the same photo; give each tie its own name"
                row.fault("object", mark.object, remedy)
        if photo in sizes:
            _judge_place(row, mark, sizes[photo])
        marks.append(replace(mark, photo=photo))
    return tuple(marks)


class _PhotoFinder:
    """The name on disk of a mark's photo, each text looked up once."""

    def __init__(
        self,
        folder: PhotoFolder | None,
        written_photos: Mapping[str, str | None],
        paired: Sequence[str],
    ) -> None:
        self.folder, self.paired = folder, set(paired)
        # None: nothing to add, pairs.csv has the fault already.
        self.known: dict[str, str | ValueError | None] = dict(written_photos)

    def find(self, row: Row, written: str) -> str | None:
        if not written or self.folder is None:
            return None
        if written not in self.known:
            try:
                name = self.folder.find(written)
                if name not in self.paired:
                    raise ValueError(
                        "no pair of pairs.csv has this photo; add it there or correct the name"
                        + nearest_hint(name, self.paired)
                    )
                self.known[written] = name
            except ValueError as wrong:
                self.known[written] = wrong
        found = self.known[written]
        if isinstance(found, ValueError):
            row.fault("photo", written, str(found))
            return None
        return found


def _mark(row: Row, settings: Settings) -> Mark | None:
    """One row as a mark, None when a cell of it is wrong."""
    name = row.required("object", "the object's name")
    photo = row.required("photo", "the file name of a photo")
    row.required("mark", f"one of {', '.join(MARK_NAMES)}")
    mark = row.choice("mark", MARK_NAMES)
    row.required("x_px", "the column in pixels")
    row.required("y_px", "the row in pixels")
    x_px = row.number("x_px", "pixels")
    y_px = row.number("y_px", "pixels")
    sd_px = row.number("sd_px", "pixels", above=0.0)
    if row.ragged:
        return None
    # A row that is wrong in one cell is still judged in the others: NaN is inside every photo.
    # Such a mark never leaves the reader, since its fault stops the round.
    return Mark(
        object=name,
        photo=photo,
        mark=mark or "middle",
        x_px=math.nan if x_px is None else x_px,
        y_px=math.nan if y_px is None else y_px,
        sd_px=settings.mark_sd_px if sd_px is None else sd_px,
        row=row.row,
    )


def _judge_place(row: Row, mark: Mark, size_px: tuple[int, int]) -> None:
    width, height = size_px
    swapped = mark.x_px <= height - 0.5 and mark.y_px <= width - 0.5
    for column, place, side, name in (
        ("x_px", mark.x_px, width, "x"),
        ("y_px", mark.y_px, height, "y"),
    ):
        if place < -0.5 or place > side - 0.5:
            remedy = (
                f"the mark lies outside its photo, which is {width} x {height} pixels turned "
                f"upright; {name} must be between -0.5 and {side - 0.5:g}"
            )
            if swapped and width != height and min(mark.x_px, mark.y_px) >= -0.5:
                remedy += "; was the photo marked lying on its side?"
            row.fault(column, row.text(column), remedy)
