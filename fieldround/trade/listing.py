"""A list of one trade: columns, rows, and what must be said beside them.

In: values. Out: CSV text; the page shows the same rows.
"""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from fieldround.trade.measured import Measured


@dataclass(frozen=True)
class Column:
    """One column: name in the CSV, heading on paper, unit, decimals."""

    name: str
    head: str
    unit: str = ""
    digits: int | None = None


@dataclass(frozen=True)
class Listing:
    """One list; rows are in the order of the columns, None = not known.

    sections : of the constants that it used
    """

    name: str
    title: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Any, ...], ...]
    notes: tuple[str, ...] = ()
    sections: tuple[str, ...] = ()

    def csv_text(self) -> str:
        """The rows as CSV, comma and decimal point."""
        text = io.StringIO(newline="")
        sheet = csv.writer(text, lineterminator="\r\n")
        sheet.writerow(column.name for column in self.columns)
        for row in self.rows:
            sheet.writerow(cell(v, c) for v, c in zip(row, self.columns, strict=True))
        return text.getvalue()


def cell(value: Any, column: Column) -> str:
    """A value as it is written: rounded to the column's decimals, empty where unknown."""
    if value is None or (isinstance(value, float) and not math.isfinite(value)):
        return ""
    if isinstance(value, float) and column.digits is not None:
        return f"{round(value, column.digits) + 0.0:.{column.digits}f}"
    return str(value)


def usable(
    items: Sequence[Measured], kinds: Sequence[str], verdicts: Sequence[str]
) -> tuple[list[Measured], tuple[str, ...]]:
    """The objects of some kinds that a list may use, and what to say of the others."""
    of_kind = [item for item in items if item.kind in kinds]
    kept = [i for i in of_kind if i.verdict in verdicts and i.diameter_m and i.diameter_m > 0.0]
    left = len(of_kind) - len(kept)
    if not left:
        return kept, ()
    names = ", ".join(i.object for i in of_kind if i not in kept)
    return kept, (f"{left} of {len(of_kind)} are not in this list (not accepted): {names}",)
