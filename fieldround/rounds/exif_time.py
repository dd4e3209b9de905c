"""When a photo was taken, from the camera's clock, its UTC offset and the GNSS time.

In: the tag table of one photo. Out: a datetime, aware when the offset or the GNSS time is known.
"""

from __future__ import annotations

import contextlib
import re
from datetime import datetime, timedelta, timezone

from fieldround.rounds.exif_values import Tags, number_list, text

# Local time, sub-seconds and UTC offset of: original, digitised, changed (CIPA DC-008, 4.6.5 F).
_CLOCKS = (
    (("EXIF", 0x9003), ("EXIF", 0x9291), ("EXIF", 0x9011)),
    (("EXIF", 0x9004), ("EXIF", 0x9292), ("EXIF", 0x9012)),
    (("Image", 0x0132), ("EXIF", 0x9290), ("EXIF", 0x9010)),
)
_GNSS_TIME, _GNSS_DATE = ("GPS", 0x07), ("GPS", 0x1D)
_LOCAL = re.compile(
    r"(\d{4})[:/.-](\d\d?)[:/.-](\d\d?)[ T]+(\d\d?):(\d\d?)(?::(\d\d?)(?:\.\d*)?)?", re.ASCII
)
_OFFSET = re.compile(r"([+-])(\d\d?):?(\d\d)", re.ASCII)

# Offsets in use are multiples of a quarter of an hour, from -12:00 to +14:00.
_QUARTER = timedelta(minutes=15)
# A GNSS stamp may be as old as the last fix: so far it may differ from the clock and still tell
# which quarter of an hour the clock is off UTC.
_STALE = timedelta(minutes=5)


def read_time(tags: Tags, problems: list[str]) -> datetime | None:
    """The time of the photo, None when the EXIF has none.

    With an offset tag: local time with that offset. Without: when the EXIF also has a GNSS date
    and time (UTC), the offset is their difference to the quarter of an hour; a clock further off
    than 5 minutes from any such offset is wrong and the GNSS time is returned. Else naive local
    time.
    """
    gnss = _gnss_time(tags, problems)
    for local_tag, fraction_tag, offset_tag in _CLOCKS:
        written = text(tags, local_tag)
        if not written or not re.search(r"[1-9]", written):
            continue
        local = _local_time(written, text(tags, fraction_tag))
        if local is None:
            problems.append(f"the EXIF time {written[:30]!r} is no date and time")
            continue
        zone = _zone(text(tags, offset_tag), problems)
        if zone is not None:
            return local.replace(tzinfo=zone)
        if gnss is None:
            return local
        difference = local - gnss.replace(tzinfo=None)
        quarters = round(difference / _QUARTER)
        if abs(difference - quarters * _QUARTER) <= _STALE and -48 <= quarters <= 56:
            return local.replace(tzinfo=timezone(quarters * _QUARTER))
        problems.append("the camera's clock contradicts the GNSS time, which was used instead")
        return gnss
    return gnss


def _local_time(written: str, fraction: str | None) -> datetime | None:
    found = _LOCAL.match(written)
    if found is None:
        return None
    parts = [int(part or 0) for part in found.groups()]
    if parts[5] > 60:
        return None
    digits = fraction if fraction and re.fullmatch(r"\d+", fraction, re.ASCII) else ""
    try:
        # Seconds are added, since a leap second is written as 60.
        moment = datetime(parts[0], parts[1], parts[2], parts[3], parts[4])
        moment += timedelta(seconds=parts[5])
        return moment + timedelta(microseconds=int(f"{digits:0<6}"[:6] or 0))
    except (OverflowError, ValueError):
        return None


def _zone(written: str | None, problems: list[str]) -> timezone | None:
    if not written or written.strip(" :-+") == "":
        return None
    if written.upper() == "Z":
        return timezone(timedelta(0))
    found = _OFFSET.fullmatch(written.replace("\N{MINUS SIGN}", "-"))
    if found is not None:
        minutes = int(found[2]) * 60 + int(found[3])
        minutes = -minutes if found[1] == "-" else minutes
        if -12 * 60 <= minutes <= 14 * 60 and int(found[3]) < 60:
            return timezone(timedelta(minutes=minutes))
    problems.append(f"the EXIF UTC offset {written[:20]!r} was not used")
    return None


def _gnss_time(tags: Tags, problems: list[str]) -> datetime | None:
    """The UTC moment of the GNSS stamp, None when date or time is missing or blank."""
    date = text(tags, _GNSS_DATE)
    clock = number_list(tags, _GNSS_TIME)
    if not date or len(clock) != 3 or not re.search(r"[1-9]", date):
        return None
    found = re.fullmatch(r"(\d{4})[:/.-](\d\d?)[:/.-](\d\d?)", date, re.ASCII)
    hours, minutes, seconds = clock
    if found and hours is not None and minutes is not None and seconds is not None:
        day: datetime | None = None
        with contextlib.suppress(ValueError):
            day = datetime(int(found[1]), int(found[2]), int(found[3]))
        if day and 0 <= hours < 24 and 0 <= minutes < 60 and 0 <= seconds <= 60:
            past = timedelta(hours=hours, minutes=minutes, seconds=round(seconds, 6))
            return (day + past).replace(tzinfo=timezone(timedelta(0)))
    problems.append(f"the GNSS date and time {date[:20]!r} cannot be right and were not used")
    return None
