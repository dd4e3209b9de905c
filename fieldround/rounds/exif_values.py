"""Single EXIF values as plain numbers and text, whatever type the file gave them.

In: the tag table of one photo. Out: floats, lists and strings, None for what is not a value
(0/0 rationals, wrong types, blanks).
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

Tags = Mapping[tuple[str, int], Any]

# Numbers of the tags that the readers of this package ask for, in any directory.
# fmt: off
USED_TAGS = frozenset((
    *range(0x01, 0x20), 0x010F, 0x0110, 0x0112, 0x0132, 0x9003, 0x9004, 0x9010, 0x9011, 0x9012,
    0x9290, 0x9291, 0x9292, 0x920A, 0xA002, 0xA20E, 0xA210, 0xA404, 0xA405, 0xA434,
))
# fmt: on


def number_list(tags: Tags, tag: tuple[str, int]) -> list[float | None]:
    """All values of a numeric tag, None for each that is no number; empty when it is absent."""
    values = tags.get(tag)
    if values is None:
        return []
    return [_number(value) for value in (values if isinstance(values, list) else [values])]


def number(tags: Tags, tag: tuple[str, int]) -> float | None:
    """The first value of a numeric tag, None when it is absent or no number."""
    values = tags.get(tag)
    if isinstance(values, list):
        return _number(values[0]) if values else None
    return None if values is None else _number(values)


def text(tags: Tags, tag: tuple[str, int]) -> str | None:
    """A text tag without padding, None when it is absent, blank or not text."""
    value = tags.get(tag)
    if value is None:
        return None
    if isinstance(value, list):
        # Text stored as bytes: a frequent slip of small cameras.
        if not all(isinstance(part, int) and 0 <= part < 256 for part in value):
            return None
        value = bytes(value)
    if isinstance(value, bytes):
        value = value.split(b"\0", 1)[0].decode("latin-1")
    if not isinstance(value, str):
        return None
    if not value.isprintable():
        value = "".join(letter for letter in value if letter.isprintable())
    return value.strip() or None


def _number(value: Any) -> float | None:
    if type(value) is int:
        return float(value)
    if isinstance(value, tuple) and len(value) == 1:
        value = value[0]
    if getattr(value, "denominator", 1) == 0:
        return None
    try:
        found = float(value)
    except (ArithmeticError, TypeError, ValueError):
        return None
    return found if math.isfinite(found) else None
