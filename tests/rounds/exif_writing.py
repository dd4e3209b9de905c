"""EXIF blocks for tests, byte by byte, so that broken ones can be written too.

Layout: TIFF 6.0 header and directories, EXIF 2.32 pointers. All contents invented.
"""

from __future__ import annotations

import struct
from collections.abc import Mapping
from typing import Any

BYTE, ASCII, SHORT, LONG, RATIONAL, UNDEFINED, SRATIONAL, FLOAT = 1, 2, 3, 4, 5, 7, 10, 11
_SIZES = {BYTE: 1, ASCII: 1, SHORT: 2, LONG: 4, RATIONAL: 8, UNDEFINED: 1, SRATIONAL: 8, FLOAT: 4}
_LETTERS = {BYTE: "B", SHORT: "H", LONG: "I", FLOAT: "f"}

# A value is (type, payload): text for ASCII, bytes for UNDEFINED, a list of numbers, or of
# (numerator, denominator) for the rationals.
Value = tuple[int, Any]

GOOD_GPS: dict[int, Value] = {
    0x01: (ASCII, "N"),
    0x02: (RATIONAL, [(52, 1), (30, 1), (1800, 100)]),
    0x03: (ASCII, "W"),
    0x04: (RATIONAL, [(1, 1), (15, 1), (3600, 100)]),
    0x05: (BYTE, [0]),
    0x06: (RATIONAL, [(8125, 100)]),
    0x0B: (RATIONAL, [(12, 10)]),
    0x10: (ASCII, "T"),
    0x11: (RATIONAL, [(27350, 100)]),
    0x12: (ASCII, "WGS-84"),
    0x1F: (RATIONAL, [(453, 100)]),
}


def rational(value: float, denominator: int = 1000) -> Value:
    return (RATIONAL, [(round(value * denominator), denominator)])


def exif_block(
    image: Mapping[int, Value] = {},
    exif: Mapping[int, Value] = {},
    gps: Mapping[int, Value] = {},
    order: str = "<",
) -> bytes:
    """A TIFF block with an image directory and, where given, EXIF and GPS directories."""
    image = dict(image)
    if exif:
        image[0x8769] = (LONG, [0])
    if gps:
        image[0x8825] = (LONG, [0])
    start = 8
    exif_start = start + _length(image)
    gps_start = exif_start + (_length(exif) if exif else 0)
    if exif:
        image[0x8769] = (LONG, [exif_start])
    if gps:
        image[0x8825] = (LONG, [gps_start])
    head = (b"II" if order == "<" else b"MM") + struct.pack(order + "HI", 42, start)
    block = head + _directory(image, start, order)
    if exif:
        block += _directory(exif, exif_start, order)
    if gps:
        block += _directory(gps, gps_start, order)
    return block


def _payload(value: Value, order: str) -> tuple[int, bytes]:
    kind, content = value
    if kind == ASCII:
        raw = content.encode("utf-8") + b"\0"
        return len(raw), raw
    if kind == UNDEFINED:
        return len(content), content
    if kind in (RATIONAL, SRATIONAL):
        letter = "I" if kind == RATIONAL else "i"
        raw = b"".join(struct.pack(order + 2 * letter, *pair) for pair in content)
        return len(content), raw
    return len(content), struct.pack(f"{order}{len(content)}{_LETTERS[kind]}", *content)


def _length(directory: Mapping[int, Value]) -> int:
    length = 2 + 12 * len(directory) + 4
    for value in directory.values():
        raw = _payload(value, "<")[1]
        if len(raw) > 4:
            length += len(raw) + len(raw) % 2
    return length


def _directory(directory: Mapping[int, Value], start: int, order: str) -> bytes:
    entries, tail = b"", b""
    tail_start = start + 2 + 12 * len(directory) + 4
    for tag, value in sorted(directory.items()):
        count, raw = _payload(value, order)
        if len(raw) > 4:
            place = struct.pack(order + "I", tail_start + len(tail))
            tail += raw + b"\0" * (len(raw) % 2)
        else:
            place = raw.ljust(4, b"\0")
        entries += struct.pack(order + "HHI", tag, value[0], count) + place
    return struct.pack(order + "H", len(directory)) + entries + b"\0" * 4 + tail
