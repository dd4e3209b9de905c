"""What can be wrong with a round, said to the person who holds the spreadsheet.

In: nothing. Out: the exception family and the `Fault` record every reader collects.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, order=True)
class Fault:
    """One thing that is wrong in one sheet, and what would be right.

    file   : name of the sheet as it lies in the round folder
    row    : line of the file as an editor counts it (the header is 1), None for the whole file
    column : column or key name, None for the whole row
    value  : what was read, as text
    remedy : what to write instead, a sentence
    """

    file: str
    row: int | None
    column: str | None
    value: str | None
    remedy: str

    def sentence(self) -> str:
        """The fault as one line of text: place, value seen, remedy."""
        place = self.file
        if self.row is not None:
            place += f", row {self.row}"
        if self.column is not None:
            place += f", column {self.column}"
        seen = "" if self.value is None else f" is {self.value!r}"
        return f"{place}{seen}: {self.remedy}"


class RoundError(Exception):
    """The top of the family: anything that stops work on a round."""


class SheetsError(RoundError):
    """The sheets of a round are wrong; carries every fault found, in file order."""

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = tuple(faults)
        super().__init__("\n".join(fault.sentence() for fault in self.faults))


class PictureError(RoundError):
    """One photo cannot be read; the round goes on without it."""
