"""The GNSS position and compass direction that a photo's EXIF states.

In: the tag table of one photo. Out: a `Fix`, a direction with its reference; sentences for what
is there but cannot be used.
"""

from __future__ import annotations

import re

from fieldround.rounds.exif_values import Tags, number, number_list, text
from fieldround.rounds.model import Fix

# A 68 % radius of a circular normal is sqrt(-2 ln(1 - 0.68)) = 1.51 sds of one axis.
RADIUS_68_IN_SDS = 1.51

_GPS = "GPS"
_LATITUDE_REF, _LATITUDE = (_GPS, 0x01), (_GPS, 0x02)
_LONGITUDE_REF, _LONGITUDE = (_GPS, 0x03), (_GPS, 0x04)
_ALTITUDE_REF, _ALTITUDE = (_GPS, 0x05), (_GPS, 0x06)
_STATUS, _DOP, _DATUM = (_GPS, 0x09), (_GPS, 0x0B), (_GPS, 0x12)
_DIRECTION_REF, _DIRECTION = (_GPS, 0x10), (_GPS, 0x11)
_ERROR = (_GPS, 0x1F)


def read_fix(tags: Tags, problems: list[str]) -> Fix | None:
    """The position of a photo, None when the EXIF has none that can be used.

    GPSHPositioningError is what makers loosely call a 68 % radius: divided by 1.51 it is the sd
    of each horizontal axis. A latitude and longitude of exactly 0, 0 is an unset receiver.
    """
    latitude = _angle(tags, _LATITUDE, _LATITUDE_REF, "NS", 90.0, "latitude", problems)
    longitude = _angle(tags, _LONGITUDE, _LONGITUDE_REF, "EW", 180.0, "longitude", problems)
    if latitude is None or longitude is None:
        return None
    if latitude == 0.0 and longitude == 0.0:
        problems.append("GPS latitude and longitude are both exactly 0; the receiver had no fix")
        return None
    if (text(tags, _STATUS) or "").upper() == "V":
        problems.append("the GPS status says that the receiver had no valid fix")
        return None
    altitude_m, altitude_is = _altitude(tags, problems)
    error_m = number(tags, _ERROR)
    if error_m is not None and not 0.0 < error_m < 100_000.0:
        if error_m != 0.0:
            problems.append(f"a GPS error of {error_m:g} m cannot be right and was not used")
        error_m = None
    dop = number(tags, _DOP)
    datum = text(tags, _DATUM)
    if datum and re.sub(r"[\W_]+", "", datum.upper()) not in ("WGS84", "WORLDGEODETICSYSTEM1984"):
        problems.append(f"the GPS map datum is {datum!r}; the position was taken as WGS 84")
    return Fix(
        longitude_deg=longitude,
        latitude_deg=latitude,
        altitude_m=altitude_m,
        horizontal_sd_m=None if error_m is None else error_m / RADIUS_68_IN_SDS,
        altitude_is=altitude_is,
        dop=dop if dop is not None and 0.0 < dop < 1000.0 else None,
        datum=datum,
        source="exif",
    )


def read_direction(tags: Tags, problems: list[str]) -> tuple[float | None, str | None]:
    """Where the camera pointed, degrees clockwise, and 'true' or 'magnetic'; both None if unusable.

    A direction that does not say from which north is not used: they can be 20 degrees apart.
    """
    direction_deg = number(tags, _DIRECTION)
    if direction_deg is None:
        return None, None
    reference = (text(tags, _DIRECTION_REF) or "").upper()[:1]
    if not 0.0 <= direction_deg <= 360.0:
        problems.append(f"an image direction of {direction_deg:g} degrees was not used")
        return None, None
    if reference not in ("T", "M"):
        problems.append("the image direction does not say true or magnetic and was not used")
        return None, None
    return direction_deg % 360.0, "true" if reference == "T" else "magnetic"


def _angle(
    tags: Tags,
    tag: tuple[str, int],
    reference_tag: tuple[str, int],
    signs: str,
    most_deg: float,
    what: str,
    problems: list[str],
) -> float | None:
    """Degrees, minutes and seconds with a hemisphere as signed degrees."""
    if tag not in tags:
        return None
    parts = number_list(tags, tag)[:3]
    if not parts or parts[0] is None:
        problems.append(f"the GPS {what} is not a number and was not used")
        return None
    # Trailing 0/0 parts are blanks: the degrees or minutes then carry the fraction.
    while parts[-1] is None:
        parts.pop()
    degrees = 0.0
    for place, part in enumerate(parts):
        if part is None or part < 0 or (place and part > 60.0):
            problems.append(f"the GPS {what} is not in degrees, minutes and seconds")
            return None
        degrees += part / 60.0**place
    if degrees > most_deg:
        problems.append(f"a GPS {what} of {degrees:g} degrees is out of range and was not used")
        return None
    reference = (text(tags, reference_tag) or "").upper()[:1]
    if not reference or reference not in signs:
        problems.append(f"the GPS {what} does not say {signs[0]} or {signs[1]} and was not used")
        return None
    return degrees if reference == signs[0] else -degrees


def _altitude(tags: Tags, problems: list[str]) -> tuple[float | None, str]:
    """Altitude in metres and what it is above (reference 0, 1 sea level; 2, 3 ellipsoid)."""
    altitude_m = number(tags, _ALTITUDE)
    reference = number(tags, _ALTITUDE_REF) or 0.0
    above = "ellipsoid" if reference in (2.0, 3.0) else "sea level"
    if altitude_m is None:
        return None, above
    if reference in (1.0, 3.0):
        altitude_m = -abs(altitude_m)
    if not -1000.0 <= altitude_m <= 20_000.0:
        problems.append(f"a GPS altitude of {altitude_m:g} m was not used")
        return None, above
    return altitude_m, above
