"""results.csv: the objects as a sheet that any spreadsheet opens.

In: the `objects` layer and its coordinates. Out: UTF-8 text, comma between, decimal point, one
row an object, empty where there is no figure.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from pathlib import Path

from fieldround.deliver.fields import COORDINATE_FIELDS, Field
from fieldround.deliver.layers import Layer, Value


def write_sheet(path: Path, layer: Layer, coordinates: Sequence[tuple[Value, ...]]) -> None:
    """Write the sheet; the passed-through columns stand last."""
    own = len(layer.table.fields)
    fields = layer.fields[:own] + COORDINATE_FIELDS + layer.fields[own:]
    text = io.StringIO(newline="")
    sheet = csv.writer(text, lineterminator="\r\n")  # RFC 4180
    sheet.writerow(f.name for f in fields)
    for row, place in zip(layer.rows, coordinates, strict=True):
        values = row[:own] + place + row[own:]
        sheet.writerow(_cell(v, f) for v, f in zip(values, fields, strict=True))
    path.write_text(text.getvalue(), encoding="utf-8", newline="")


def _cell(value: Value, field: Field) -> str:
    if value is None:
        return ""
    if isinstance(value, float):
        return f"{value:.{field.digits}f}".rstrip("0").rstrip(".")
    return str(value)
