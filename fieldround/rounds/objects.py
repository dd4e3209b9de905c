"""objects.csv: the round things of the outing, their kinds and what is known of them.

In: the sheet, or only the marks when there is none. Out: `RoundObject`s with every pair in which
they are listed or marked.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import KINDS, OTHERS_NAMES, Mark, Pair, RoundObject, Settings
from fieldround.rounds.sheets import Row, Table, nearest_hint, read_table

COLUMNS = ("object", "kind", "pair", "label", "ref_height_m", "known_diameter_m", "known_sd_m",
           "note")  # fmt: skip
REQUIRED = ("object",)

# No round object that is photographed whole is thicker or higher.
THICKEST_M = 200.0
HIGHEST_M = 500.0

# sd of a known diameter that states none: 0.5 % of it, 0.5 mm at least. Our own judgement:
# what a careful person with a tape or caliper stays within.
KNOWN_SD = 0.005
KNOWN_SD_LEAST_M = 0.0005


@dataclass(frozen=True)
class ObjectsSheet:
    """What objects.csv holds; `names` has every id written, also those of faulty rows.

    complete : the sheet exists and has an object column, so that a mark's object must be in it
    notes    : sentences about what was not read
    """

    objects: tuple[RoundObject, ...]
    names: tuple[str, ...]
    complete: bool
    notes: tuple[str, ...] = ()


def read_objects(
    path: Path, pair_names: Sequence[str], settings: Settings, faults: list[Fault]
) -> ObjectsSheet:
    """Read objects.csv; a missing file gives no objects (see `objects_from_marks`)."""
    if not path.exists():
        return ObjectsSheet((), (), False)
    table = read_table(path, COLUMNS, REQUIRED, faults)
    if table is None or table.missing:
        return ObjectsSheet((), (), False)
    taken: dict[str, int] = {}
    objects = [_object(row, table, pair_names, settings, taken) for row in table.rows]
    kept = tuple(one for one in objects if one is not None)
    return ObjectsSheet(kept, tuple(taken), True, table.notes)


def objects_from_marks(marks: Iterable[Mark], settings: Settings) -> tuple[RoundObject, ...]:
    """The objects of a round without objects.csv, in the order in which marks.csv names them.

    An object with `outline` marks is a ball, any other the kind that round.toml sets.
    """
    kinds: dict[str, str] = {}
    for mark in marks:
        if mark.mark in OTHERS_NAMES:
            continue
        kinds.setdefault(mark.object, settings.kind)
        if mark.mark == "outline":
            kinds[mark.object] = "ball"
    return tuple(RoundObject(object=name, kind=kind, extra={}) for name, kind in kinds.items())


def with_pairs(
    objects: Iterable[RoundObject], pairs: Sequence[Pair], marks: Iterable[Mark]
) -> tuple[RoundObject, ...]:
    """The objects with every pair in which they are listed or marked, in the order of pairs.csv."""
    by_photo: dict[str, list[str]] = {}
    for pair in pairs:
        for photo in pair.photos:
            by_photo.setdefault(photo, []).append(pair.pair)
    marked: dict[str, set[str]] = {}
    for mark in marks:
        if mark.mark not in OTHERS_NAMES:
            marked.setdefault(mark.object, set()).update(by_photo.get(mark.photo, ()))
    order = {pair.pair: place for place, pair in enumerate(pairs)}
    return tuple(
        replace(
            one,
            pairs=tuple(
                sorted(
                    (name for name in {*one.pairs, *marked.get(one.object, ())} if name in order),
                    key=order.__getitem__,
                )
            ),
        )
        for one in objects
    )


def _object(
    row: Row,
    table: Table,
    pair_names: Sequence[str],
    settings: Settings,
    taken: dict[str, int],
) -> RoundObject | None:
    name = row.required("object", "a name for the object")
    kind = row.choice("kind", KINDS) or settings.kind
    ref_height_m = row.number("ref_height_m", "metres", least=0.0, most=HIGHEST_M)
    known_m = row.number(
        "known_diameter_m", "metres", above=0.0, most=THICKEST_M,
        hint="leave the cell blank if the diameter is not known",
    )  # fmt: skip
    known_sd_m = row.number("known_sd_m", "metres", above=0.0)
    if row.text("known_sd_m") and not row.text("known_diameter_m"):
        remedy = "an sd needs its diameter; fill in known_diameter_m or clear this cell"
        row.fault("known_diameter_m", "", remedy)
    if known_m is not None and known_sd_m is not None and known_sd_m >= known_m:
        remedy = "the sd is as large as the diameter itself; write it in metres"
        row.fault("known_sd_m", row.text("known_sd_m"), remedy)
    if known_m is not None and known_sd_m is None:
        known_sd_m = max(KNOWN_SD * known_m, KNOWN_SD_LEAST_M)
    pairs = _pairs_of(row, pair_names)
    if not name:
        return None
    if name in taken:
        remedy = (
            f"row {taken[name]} has this object already; list an object once, with all its "
            "pairs in the pair column"
        )
        row.fault("object", name, remedy)
        return None
    taken[name] = row.row
    return RoundObject(
        object=name,
        kind=kind,
        pairs=pairs,
        label=row.text("label"),
        ref_height_m=ref_height_m,
        known_diameter_m=known_m,
        known_sd_m=known_sd_m if known_m is not None else None,
        note=row.text("note"),
        extra=table.extra(row),
        row=row.row,
    )


def _pairs_of(row: Row, pair_names: Sequence[str]) -> tuple[str, ...]:
    """The pairs a cell names: one whose name may hold spaces, or several by '|' or spaces."""
    written = row.text("pair")
    if not written or written in pair_names:
        return (written,) if written else ()
    found: list[str] = []
    for part in written.split("|"):
        part = part.strip()
        names = [part] if part in pair_names else re.split(r"\s+", part)
        for name in filter(None, names):
            if name not in pair_names:
                remedy = f"pairs.csv has no pair {name!r}; write one of its pairs"
                row.fault("pair", written, remedy + nearest_hint(name, pair_names))
            elif name not in found:
                found.append(name)
    return tuple(found)
