"""checks.csv: independent direct measurements of the same objects, by tape or caliper.

In: the sheet and the objects of the round. Out: `Check`s and notes.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import Check
from fieldround.rounds.objects import HIGHEST_M, THICKEST_M
from fieldround.rounds.sheets import nearest_hint, read_table

COLUMNS = ("object", "diameter_m", "sd_m", "method", "height_m", "measured_on", "by")
REQUIRED = ("object", "diameter_m")


def read_checks(
    path: Path, object_names: Sequence[str] | None, faults: list[Fault]
) -> tuple[tuple[Check, ...], tuple[str, ...]]:
    """Checks, and notes on what was not read; a missing checks.csv means no checks.

    object_names : the round's objects, None when they could not be read (nothing is compared)
    """
    if not path.exists():
        return (), ()
    table = read_table(path, COLUMNS, REQUIRED, faults)
    if table is None:
        return (), ()
    checks = []
    for row in table.rows:
        name = row.required("object", "the object's name")
        if name and object_names is not None and name not in object_names:
            remedy = "the round has no such object; correct the name or delete the line"
            row.fault("object", name, remedy + nearest_hint(name, object_names))
        row.required("diameter_m", "the measured diameter in metres")
        diameter_m = row.number("diameter_m", "metres", above=0.0, most=THICKEST_M)
        sd_m = row.number("sd_m", "metres", above=0.0)
        if diameter_m is not None and sd_m is not None and sd_m >= diameter_m:
            remedy = "the sd is as large as the diameter itself; write it in metres"
            row.fault("sd_m", row.text("sd_m"), remedy)
        height_m = row.number("height_m", "metres", least=0.0, most=HIGHEST_M)
        if name and diameter_m is not None:
            checks.append(
                Check(
                    object=name,
                    diameter_m=diameter_m,
                    sd_m=sd_m,
                    method=row.text("method"),
                    height_m=height_m,
                    measured_on=row.text("measured_on"),
                    by=row.text("by"),
                    extra=table.extra(row),
                    row=row.row,
                )
            )
    return tuple(checks), table.notes
