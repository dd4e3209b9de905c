"""A CSV sheet as a person's spreadsheet writes it, read so that every fault has its place.

In: a file of comma- or semicolon-separated text. Out: a `Table` of `Row`s whose cells are fetched
as text or numbers; whatever is wrong is added to the list of faults the caller collects.
"""

from __future__ import annotations

import csv
import difflib
import io
import itertools
import math
import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from fieldround.rounds.errors import Fault

_NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?", re.ASCII)
_NOT_FINITE = re.compile(r"[+-]?(nan|inf(inity)?)", re.IGNORECASE)
_LINE_END = re.compile(r"\r\n|\r|\n")
_QUOTED = re.compile(r'"[^"]*"')
_SEPARATOR_LINE = re.compile(r'"?sep=(.)"?\s*', re.IGNORECASE)


@dataclass(frozen=True)
class Row:
    """One line of a sheet.

    sheet     : the sheet's name, row : its line in the file (header = 1)
    cells     : column -> text without outer blanks; known columns under their known name
    separator : ',' or ';' of the file, which decides whether a decimal comma is meant
    ragged    : the line has too many or too few cells: that was said, its cells stay unjudged
    """

    sheet: str
    row: int
    cells: Mapping[str, str]
    separator: str
    faults: list[Fault] = field(repr=False, compare=False)
    ragged: bool = False

    def fault(self, column: str | None, value: str | None, remedy: str) -> None:
        """Add one fault of this line."""
        if not self.ragged:
            self.faults.append(Fault(self.sheet, self.row, column, value, remedy))

    def text(self, column: str) -> str:
        """The cell's text, empty when the cell is blank or the sheet has no such column."""
        return self.cells.get(column, "")

    def required(self, column: str, what: str) -> str:
        """The cell's text; a blank cell is a fault. `what` says what belongs there."""
        value = self.text(column)
        if not value and column in self.cells:
            self.fault(column, value, f"write {what}")
        return value

    def choice(self, column: str, allowed: Sequence[str]) -> str | None:
        """The cell's text if it is one of `allowed` whatever its case, None if blank or wrong."""
        value = self.text(column)
        if not value:
            return None
        found = value.casefold()
        if found in allowed:
            return found
        remedy = f"write one of {', '.join(allowed)}"
        self.fault(column, value, remedy + nearest_hint(found, allowed))
        return None

    def number(
        self,
        column: str,
        unit: str,
        *,
        above: float | None = None,
        least: float | None = None,
        most: float | None = None,
        hint: str = "",
    ) -> float | None:
        """The cell as a finite number, None if blank or wrong (a fault).

        above, least, most : bounds (exclusive, inclusive, inclusive); `hint` is added to the
        remedy of a number out of bounds.
        """
        value = self.text(column)
        if not value:
            return None
        try:
            number = parse_number(value, self.separator)
        except ValueError as wrong:
            self.fault(column, value, f"{wrong} ({unit})")
            return None
        bounds = []
        if above is not None and not number > above:
            bounds.append(f"above {above:g}")
        if least is not None and number < least:
            bounds.append(f"{least:g} or more")
        if most is not None and number > most:
            bounds.append(f"at most {most:g}")
        if bounds:
            remedy = f"write a number {' and '.join(bounds)} ({unit})"
            self.fault(column, value, remedy + (f"; {hint}" if hint else ""))
            return None
        return number


@dataclass(frozen=True)
class Table:
    """A sheet that could be taken apart.

    columns : known columns it has, extra_columns : the others, each in the order of the header
    missing : required columns it lacks (each already a fault)
    notes   : sentences on columns that look like a known one but are not
    """

    name: str
    columns: tuple[str, ...]
    extra_columns: tuple[str, ...]
    missing: tuple[str, ...]
    rows: tuple[Row, ...]
    notes: tuple[str, ...] = ()

    def extra(self, row: Row) -> dict[str, str]:
        """The cells of a row that no column of ours claims, in the order of the header."""
        return {column: row.text(column) for column in self.extra_columns}


def parse_number(text: str, separator: str = ",") -> float:
    """A finite number from a cell's text.

    separator : the sheet's column separator; with ';' a decimal comma is a decimal point
    raises    : ValueError whose text is the remedy
    """
    plain = text.strip().replace("\N{MINUS SIGN}", "-")
    if separator == ";" and plain.count(",") == 1 and "." not in plain:
        plain = plain.replace(",", ".")
    if _NUMBER.fullmatch(plain):
        number = float(plain)
        if math.isfinite(number):
            return number
        raise ValueError("write a finite number")
    if _NOT_FINITE.fullmatch(plain):
        raise ValueError("write a finite number, or leave the cell blank")
    if re.fullmatch(r"[+-]?\d+,\d+", plain):
        raise ValueError(
            "this sheet is separated by commas, so write the number with a decimal point, "
            f"{plain.replace(',', '.')}, or save the sheet with semicolons between the columns"
        )
    if re.match(r"[+-]?[\d.,]*\d\s*[^\d\s.,]+$", plain):
        raise ValueError("write the number alone, without its unit")
    raise ValueError("write a number in digits, without thousands separators")


def nearest_hint(value: str, known: Iterable[str], likeness: float = 0.6) -> str:
    """'; did you mean ...?' with the nearest known word, or nothing when none is near."""
    by_fold = {word.casefold(): word for word in known}
    near = difflib.get_close_matches(value.casefold(), list(by_fold), n=1, cutoff=likeness)
    return f"; did you mean {by_fold[near[0]]!r}?" if near else ""


def read_text(path: Path, faults: list[Fault]) -> str | None:
    """The text of a sheet or settings file; None with a fault when there is nothing to read.

    UTF-8, with or without a byte order mark. Other bytes are a fault, but the text is still
    returned (as Windows code page 1252) so that the file's other faults are found too.
    """
    name = path.name
    try:
        raw = path.read_bytes()
    except OSError as problem:
        remedy = f"the file cannot be read ({problem.strerror or problem}); check its permissions"
        faults.append(Fault(name, None, None, None, remedy))
        return None
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\0" in raw:
        remedy = "the file is not UTF-8 text (UTF-16 or binary); save it as 'CSV UTF-8'"
        faults.append(Fault(name, None, None, None, remedy))
        return None
    raw = raw.removeprefix(b"\xef\xbb\xbf")
    try:
        return raw.decode("utf-8")
    except UnicodeDecodeError as problem:
        row = len(_LINE_END.split(raw[: problem.start].decode("latin-1")))
        text = raw.decode("cp1252", "replace")
        seen = _LINE_END.split(text)[row - 1].strip()[:60]
        remedy = "this line holds letters that are not UTF-8; save the file as UTF-8"
        faults.append(Fault(name, row, None, seen, remedy))
        return text


def read_table(
    path: Path,
    known: Sequence[str],
    required: Sequence[str],
    faults: list[Fault],
    is_known: Callable[[str], bool] = lambda column: False,
) -> Table | None:
    """Take a sheet apart; None (with a fault) when it has no header.

    known    : the columns this program reads, whatever their case in the header
    required : those of them that must be there
    is_known : says whether a further column, such as photo_c, is one of ours
    """
    text = read_text(path, faults)
    if text is None:
        return None
    name = path.name
    if not text.strip():
        remedy = f"the file is empty; its first line must name the columns {', '.join(required)}"
        faults.append(Fault(name, None, None, None, remedy))
        return None
    separator, first_row = _separator_of(text, name, faults)
    lines = list(_records(text, separator, name, faults))
    lines = [(row, cells) for row, cells in lines if row >= first_row and any(cells)]
    if not lines:
        return None
    header_row, titles = lines[0]
    while (
        titles
        and not titles[-1]
        and all(not any(cells[len(titles) - 1 :]) for _, cells in lines[1:])
    ):
        titles = titles[:-1]
    columns = _named(titles, header_row, name, known, is_known, faults)
    found = [column for column in columns if column in known or is_known(column)]
    extra = [column for column in columns if column not in found]
    missing = [column for column in required if column not in found]
    for column in missing:
        remedy = "the header lacks this column; add it"
        faults.append(Fault(name, header_row, column, None, remedy + nearest_hint(column, extra)))
    rows = []
    for row, cells in lines[1:]:
        ragged = len(cells) < len(columns) or any(cells[len(columns) :])
        if ragged:
            faults.append(_ragged(name, row, cells, len(columns), separator))
        cells = [*cells, *[""] * (len(columns) - len(cells))]
        kept = dict(zip(columns, cells, strict=False))
        rows.append(Row(name, row, kept, separator, faults, ragged))
    absent = [column for column in known if column not in found and column not in missing]
    notes = [
        f"{name}: the column {column!r} is passed through unread{hint}"
        for column in extra
        if (hint := nearest_hint(column, absent, 0.75))
    ]
    return Table(name, tuple(found), tuple(extra), tuple(missing), tuple(rows), tuple(notes))


def _separator_of(text: str, name: str, faults: list[Fault]) -> tuple[str, int]:
    """The separator, and the line at which the header may begin."""
    lines = _LINE_END.split(text)
    first = next(index for index, line in enumerate(lines) if line.strip())
    told = _SEPARATOR_LINE.fullmatch(lines[first])
    if told and told[1] in ",;":
        return told[1], first + 2
    bare = _QUOTED.sub("", lines[first])
    commas, semicolons = bare.count(","), bare.count(";")
    if not commas and not semicolons and "\t" in bare:
        remedy = "the columns are separated by tabs; save the sheet as CSV with commas"
        faults.append(Fault(name, first + 1, None, None, remedy))
        return "\t", first + 1
    return (";" if semicolons > commas else ","), first + 1


def _records(
    text: str, separator: str, name: str, faults: list[Fault]
) -> Iterable[tuple[int, list[str]]]:
    """(line, stripped cells) of every record; a quote that does not close is a fault."""
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    row = 1
    while True:
        try:
            cells = next(reader)
        except StopIteration:
            return
        except csv.Error as problem:
            remedy = (
                "the double quotes of this line do not match; write a quote inside a quoted "
                'cell twice, ""'
            )
            faults.append(Fault(name, row, None, None, remedy))
            if "limit" in str(problem):
                return
        else:
            yield row, [cell.strip() for cell in cells]
        row = reader.line_num + 1


def _named(
    titles: list[str],
    row: int,
    name: str,
    known: Sequence[str],
    is_known: Callable[[str], bool],
    faults: list[Fault],
) -> list[str]:
    """The header's names, ours in our spelling; blank and repeated ones are faults."""
    columns: list[str] = []
    for place, title in enumerate(titles, start=1):
        folded = title.casefold()
        column = folded if folded in known or is_known(folded) else title
        if not column:
            column = f"(column {place})"
            faults.append(Fault(name, row, column, "", "name this column or delete it"))
        elif column in columns:
            remedy = "two columns have this name; delete or rename one"
            faults.append(Fault(name, row, column, title, remedy))
            column = f"{column} (column {place})"
        columns.append(column)
    return columns


def _ragged(name: str, row: int, cells: list[str], width: int, separator: str) -> Fault:
    count = f"{len(cells)} cell{'s' if len(cells) > 1 else ''}"
    remedy = f"the line has {count} but the header {width}"
    split = next(
        (
            f"{left},{right}"
            for left, right in itertools.pairwise(cells)
            if re.fullmatch(r"[+-]?\d+", left) and re.fullmatch(r"\d+", right)
        ),
        None,
    )
    if len(cells) > width and separator == "," and split:
        remedy += (
            f"; if {split!r} is one number, write it with a decimal point, "
            f"{split.replace(',', '.')!r}, or save the sheet with semicolons between the columns"
        )
    elif len(cells) > width:
        remedy += f"; put a cell that contains {separator!r} in double quotes"
    else:
        remedy += "; write a separator for every blank cell"
    return Fault(name, row, None, separator.join(cells)[:80], remedy)
