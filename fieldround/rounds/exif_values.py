"""Single EXIF values as plain numbers and text, whatever type the file gave them.

In: the tag table of one photo. Out: floats, lists and strings, None for what is not a value
(0/0 rationals, wrong types, blanks).
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

Tags = Mapping[tuple[str, int], Any]


def number_list(tags: Tags, tag: tuple[str, int]) -> list[float | None]:
    """All values of a numeric tag, None for each that is no number; empty when it is absent."""
    values = tags.get(tag)
    if not isinstance(values, list | tuple):
        values = [] if values is None else [values]
    return [_number(value) for value in values]


def number(tags: Tags, tag: tuple[str, int]) -> float | None:
    """The first value of a numeric tag, None when it is absent or no number."""
    values = number_list(tags, tag)
    return values[0] if values else None


def text(tags: Tags, tag: tuple[str, int]) -> str | None:
    """A text tag without padding, None when it is absent, blank or not text."""
    value = tags.get(tag)
    if isinstance(value, list | tuple):
        # Text stored as bytes: a frequent slip of small cameras.
        if not all(isinstance(part, int) and 0 <= part < 256 for part in value):
            return None
        value = bytes(value)
    if isinstance(value, bytes):
        value = value.split(b"\0", 1)[0].decode("latin-1")
    if not isinstance(value, str):
        return None
    kept = "".join(letter for letter in value if letter.isprintable()).strip()
    return kept or None


def _number(value: Any) -> float | None:
    if isinstance(value, tuple) and len(value) == 1:
        value = value[0]
    if getattr(value, "denominator", 1) == 0:
        return None
    try:
        found = float(value)
    except (ArithmeticError, TypeError, ValueError):
        return None
    return found if math.isfinite(found) else None
