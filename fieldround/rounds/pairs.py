"""pairs.csv: which photos belong together, and what was read between their stations.

In: the sheet and the photo folder. Out: `Pair`s with the photos' names as they lie on disk.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import Pair, Settings
from fieldround.rounds.photos import PhotoFolder
from fieldround.rounds.sheets import Row, Table, read_table

COLUMNS = ("pair", "photo_a", "photo_b", "tape_m", "tape_sd_m", "bearing_deg", "bearing_sd_deg",
           "note")  # fmt: skip
REQUIRED = ("pair", "photo_a", "photo_b")

# A slope distance above this was not taped between two stations of one pair.
LONGEST_TAPE_M = 1000.0

_PHOTO_COLUMN = re.compile(r"photo_[a-z]")


@dataclass(frozen=True)
class PairsSheet:
    """What pairs.csv holds.

    names  : every pair id written, also those of faulty rows, in file order
    photos : every photo text written -> its name on disk, None where that is a fault
    notes  : sentences about what was read otherwise than written
    """

    pairs: tuple[Pair, ...]
    names: tuple[str, ...]
    photos: dict[str, str | None]
    notes: tuple[str, ...]


def read_pairs(
    path: Path, folder: PhotoFolder | None, settings: Settings, faults: list[Fault]
) -> PairsSheet:
    """Read pairs.csv; `folder` is None when there is no photos/ (already a fault)."""
    if not path.exists():
        remedy = "the file is missing; it lists the photo pairs of the round"
        faults.append(Fault(path.name, None, None, None, remedy))
        return PairsSheet((), (), {}, ())
    table = read_table(path, COLUMNS, REQUIRED, faults, lambda c: bool(_PHOTO_COLUMN.fullmatch(c)))
    if table is None:
        return PairsSheet((), (), {}, ())
    if not table.rows:
        remedy = "the sheet has a header but no pair; write one line a pair"
        faults.append(Fault(path.name, None, None, None, remedy))
    reader = _PairsReader(table, folder, settings)
    pairs = [reader.pair(row) for row in table.rows]
    return PairsSheet(
        tuple(pair for pair in pairs if pair is not None),
        tuple(dict.fromkeys(reader.names)),
        reader.photos,
        (*table.notes, *reader.notes),
    )


class _PairsReader:
    def __init__(self, table: Table, folder: PhotoFolder | None, settings: Settings) -> None:
        self.table, self.folder, self.settings = table, folder, settings
        self.names: dict[str, int] = {}
        self.photos: dict[str, str | None] = {}
        self.notes: list[str] = []
        self.photo_columns = sorted(c for c in table.columns if _PHOTO_COLUMN.fullmatch(c))

    def pair(self, row: Row) -> Pair | None:
        """One row as a pair, None where its id is missing or taken."""
        name = row.required("pair", "a name for the pair")
        photos = self._photos_of(row)
        tape_m = row.number(
            "tape_m", "metres", above=0.0, most=LONGEST_TAPE_M,
            hint="leave the cell blank if no tape was read",
        )  # fmt: skip
        tape_sd_m = row.number("tape_sd_m", "metres", above=0.0)
        if tape_m is not None and tape_sd_m is not None and tape_sd_m >= tape_m:
            remedy = "the sd is as large as the tape reading itself; write it in metres"
            row.fault("tape_sd_m", row.text("tape_sd_m"), remedy)
        bearing_deg = row.number("bearing_deg", "degrees", least=-360.0, most=360.0)
        bearing_sd_deg = row.number("bearing_sd_deg", "degrees", above=0.0, most=180.0)
        if not name:
            return None
        if name in self.names:
            remedy = f"row {self.names[name]} has this pair already; give each pair its own name"
            row.fault("pair", name, remedy)
            return None
        self.names[name] = row.row
        return Pair(
            pair=name,
            photos=photos,
            tape_m=tape_m,
            tape_sd_m=self.settings.tape_sd_m if tape_sd_m is None else tape_sd_m,
            bearing_deg=None if bearing_deg is None else bearing_deg % 360.0,
            bearing_sd_deg=bearing_sd_deg,
            note=row.text("note"),
            extra=self.table.extra(row),
            row=row.row,
        )

    def _photos_of(self, row: Row) -> tuple[str, ...]:
        """Names on disk of the photos of one row; each photo may stand in it once."""
        for column in ("photo_a", "photo_b"):
            row.required(column, "the file name of a photo")
        found: dict[str, str] = {}
        for column in self.photo_columns:
            written = row.text(column)
            if not written:
                continue
            name = self._find(row, column, written)
            key = name or written
            if key in found:
                remedy = f"{found[key]} names the same photo; a pair needs different photos"
                row.fault(column, written, remedy)
            else:
                found[key] = column
        return tuple(found)

    def _find(self, row: Row, column: str, written: str) -> str | None:
        if self.folder is None:
            return self.photos.setdefault(written, None)
        try:
            name = self.folder.find(written)
        except ValueError as wrong:
            row.fault(column, written, str(wrong))
            self.photos[written] = None
            return None
        if name != written and written not in self.photos:
            self.notes.append(f"{row.sheet}, row {row.row}: {written!r} was read as {name!r}")
        self.photos[written] = name
        return name
