"""What the cameras write into their photos, as EXIF 2.32 tags.

In: an `Outing`, a pair, a view. Out: a Pillow `Exif` and the drawn errors of its GNSS fix.
Phone-grade: a fix wanders by metres, most of it common to a pair; a compass errs by degrees.
"""

from __future__ import annotations

import numpy as np
from PIL import Image
from PIL.TiffImagePlugin import IFDRational

from demo_site.outing import DECLINATION_DEG, Outing, Walked
from demo_site.scene import View
from demo_site.truth import geodetic

COMMON_SD_M, OWN_SD_M = 2.2, 0.9
COMPASS_COMMON_SD_DEG, COMPASS_OWN_SD_DEG = 2.5, 2.5
UTC_OFFSET = "+01:00"
# A radius that holds 68 % is 1.51 sds of one axis of a circular normal distribution.
RADIUS_68 = 1.51

_MAKE, _MODEL, _ORIENTATION, _SOFTWARE, _DATE = 0x010F, 0x0110, 0x0112, 0x0131, 0x0132
_EXIF, _GPS = 0x8769, 0x8825


def gnss_fix(outing: Outing, pair: Walked, number: int) -> tuple[np.ndarray, float, float]:
    """Longitude, latitude, altitude as the receiver has them; stated radius (m); compass (deg)."""
    name = sum(map(ord, pair.pair))
    shared = np.random.default_rng([outing.seed, name, 1])
    own = np.random.default_rng([outing.seed, name, 2, number])
    error = shared.normal(0, COMMON_SD_M, 3) + own.normal(0, OWN_SD_M, 3)
    error[2] *= 1.6
    radius = RADIUS_68 * np.hypot(COMMON_SD_M, OWN_SD_M) * np.exp(own.normal(0, 0.12))
    turn = shared.normal(0, COMPASS_COMMON_SD_DEG) + own.normal(0, COMPASS_OWN_SD_DEG)
    view = pair.views[number]
    place = geodetic(outing.site, np.array(view.station) + error)[0]
    return place, float(radius), (view.heading_deg + float(turn)) % 360.0


def exif_of(outing: Outing, pair: Walked, number: int) -> Image.Exif:
    """All tags of one photo."""
    body, view = pair.body, pair.views[number]
    place, radius, heading = gnss_fix(outing, pair, number)
    if body.direction_ref == "M":
        heading = (heading - DECLINATION_DEG) % 360.0
    taken = _later(pair.taken_at, 14 * number + (number * number) % 5)
    exif = Image.Exif()
    exif[_MAKE], exif[_MODEL], exif[_DATE] = body.make, body.model, taken
    exif[_ORIENTATION] = 6 if view.portrait else 1
    exif[_SOFTWARE] = "demo_site/render.py"
    exif.get_ifd(_EXIF).update(_photo_tags(body, view, taken))
    exif.get_ifd(_GPS).update(_gps_tags(body.direction_ref, place, radius, heading, taken))
    return exif


def _photo_tags(body, view: View, taken: str) -> dict[int, object]:  # type: ignore[no-untyped-def]
    width, height = view.lens.size_px
    tags: dict[int, object] = {
        0x829A: IFDRational(1, 400), 0x829D: IFDRational(28, 10), 0x8827: 100,
        0x9000: b"0232", 0x9003: taken, 0x9004: taken, 0x9010: UTC_OFFSET, 0x9011: UTC_OFFSET,
        0x920A: IFDRational(round(body.focal_mm * 100), 100), 0xA001: 1, 0xA002: width,
        0xA003: height, 0xA404: IFDRational(1, 1), 0xA405: body.focal_35mm,
    }  # fmt: skip
    if body.lens_model:
        tags[0xA434] = body.lens_model
    return tags


def _gps_tags(
    direction_ref: str, place: np.ndarray, radius: float, heading: float, taken: str
) -> dict[int, object]:
    longitude, latitude, altitude = place
    hours, minutes, seconds = (int(part) for part in taken[11:].split(":"))
    offset = int(UTC_OFFSET[:3])
    return {
        0x00: b"\x02\x03\x00\x00",
        0x01: "N" if latitude >= 0 else "S", 0x02: _sexagesimal(abs(latitude)),
        0x03: "E" if longitude >= 0 else "W", 0x04: _sexagesimal(abs(longitude)),
        0x05: b"\x00" if altitude >= 0 else b"\x01",
        0x06: IFDRational(round(abs(altitude) * 100), 100),
        0x07: (IFDRational(hours - offset), IFDRational(minutes), IFDRational(seconds)),
        0x10: direction_ref, 0x11: IFDRational(round(heading * 100), 100), 0x12: "WGS-84",
        0x1D: taken[:10], 0x1F: IFDRational(round(radius * 1000), 1000),
    }  # fmt: skip


def _sexagesimal(degrees: float) -> tuple[IFDRational, IFDRational, IFDRational]:
    whole = int(degrees)
    minutes = int((degrees - whole) * 60)
    seconds = round(((degrees - whole) * 60 - minutes) * 60 * 10_000)
    return IFDRational(whole), IFDRational(minutes), IFDRational(seconds, 10_000)


def _later(taken: str, seconds: int) -> str:
    hours, minutes, start = (int(part) for part in taken[11:].split(":"))
    total = hours * 3600 + minutes * 60 + start + seconds
    return f"{taken[:11]}{total // 3600:02d}:{total // 60 % 60:02d}:{total % 60:02d}"
