"""How the files under tracks/ are to be read: section [tracks] of round.toml.

In: keys and values of the section. Out: `TrackSettings`.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from datetime import date
from typing import Any

COLUMN_WORDS = ("time", "east", "north", "height", "sd", "height_sd", "photo")


@dataclass(frozen=True)
class TrackSettings:
    """Section [tracks] of round.toml.

    clock_offset_s : seconds to add to the photos' times to get the track's; None = find it
    utc_offset_min : UTC offset of the times in CSV files, minutes
    date           : day of NMEA files that carry none
    crs            : of the coordinates in CSV files; None = longitude and latitude on WGS 84
    arm_m          : from the antenna to the camera: right, forward (level, along the view), up
    arm_sd_m       : sd of each of these
    time_column ... photo_column : titles of the columns in CSV files; None = the known titles
    """

    clock_offset_s: float | None = None
    utc_offset_min: float = 0.0
    date: date | None = None
    crs: str | None = None
    arm_m: tuple[float, float, float] = (0.0, 0.0, 0.0)
    arm_sd_m: float = 0.0
    time_column: str | None = None
    east_column: str | None = None
    north_column: str | None = None
    height_column: str | None = None
    sd_column: str | None = None
    height_sd_column: str | None = None
    photo_column: str | None = None


def _number(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise ValueError("write a finite number, without quotes and without its unit")
    return float(value)


def _not_negative(value: Any) -> float:
    number = _number(value)
    if number < 0.0:
        raise ValueError("write 0 or a number above")
    return number


def _minutes(value: Any) -> float:
    text = value.strip() if isinstance(value, str) else ""
    found = re.fullmatch(r"([+-])(\d\d?):?(\d\d)", text)
    minutes = 60 * int(found[2]) + int(found[3]) if found else 24 * 60
    if minutes > 14 * 60:
        raise ValueError('write a UTC offset such as "+02:00" or "-03:30"')
    assert found is not None
    return float(-minutes if found[1] == "-" else minutes)


def _day(value: Any) -> date:
    # TOML has dates of its own; a quoted one is as clear.
    if isinstance(value, str):
        try:
            return date.fromisoformat(value.strip())
        except ValueError:
            pass
    elif type(value) is date:
        return value
    raise ValueError("write a date such as 2026-05-14")


def _arm(value: Any) -> tuple[float, float, float]:
    if not isinstance(value, list) or len(value) != 3:
        raise ValueError("write three numbers, metres from antenna to camera: [right, forward, up]")
    right, forward, up = (_number(part) for part in value)
    if max(abs(right), abs(forward), abs(up)) > 10.0:
        raise ValueError("an arm of more than 10 m is not carried by hand; write metres")
    return right, forward, up


def _column(value: Any) -> str:
    if not isinstance(value, str) or not value.strip():
        raise ValueError("write the column's title in double quotes")
    return value.strip()


def track_keys(crs: Callable[[Any], str | None]) -> dict[str, Callable[[Any], Any]]:
    """The keys of [tracks], each with what judges its value; `crs` judges a CRS text."""
    return {
        "clock_offset_s": _number,
        "utc_offset": _minutes,
        "date": _day,
        "crs": crs,
        "arm_m": _arm,
        "arm_sd_m": _not_negative,
        **{f"{word}_column": _column for word in COLUMN_WORDS},
    }
