"""What one photo's EXIF says of camera, place, direction and time, and what it says badly.

In: the bytes or the path of a photo file. Out: `ExifFacts`; whatever cannot be used is a sentence
in `problems`, never an exception and never a wait.
"""

from __future__ import annotations

import contextlib
import io
import logging
import math
import warnings
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Any, BinaryIO, cast

from fieldround.rounds.errors import PictureError
from fieldround.rounds.exif_fix import read_direction, read_fix
from fieldround.rounds.exif_time import read_time
from fieldround.rounds.exif_values import USED_TAGS, Tags, number, number_list, text
from fieldround.rounds.model import Fix
from fieldround.rounds.picture_files import is_heif, open_picture

# Reads that a garbled directory may cost before it is given up; a photo takes 300 to 800.
_MOST_READS = 30_000
# No text tag of use is longer; a garbled count must not reserve gigabytes.
_LONGEST_READ = 1 << 20

_IMAGE, _EXIF = "Image", "EXIF"
_MAKE, _MODEL, _ORIENTATION = (_IMAGE, 0x010F), (_IMAGE, 0x0110), (_IMAGE, 0x0112)
_FOCAL, _FOCAL_35, _ZOOM = (_EXIF, 0x920A), (_EXIF, 0xA405), (_EXIF, 0xA404)
_LENS, _WIDTH = (_EXIF, 0xA434), (_EXIF, 0xA002)
_PLANE_X, _PLANE_UNIT = (_EXIF, 0xA20E), (_EXIF, 0xA210)
# EXIF 2.32, FocalPlaneResolutionUnit as ResolutionUnit (2, 3), with TIFF/EP's 4 and 5.
_PLANE_UNIT_MM = {2: 25.4, 3: 10.0, 4: 1.0, 5: 0.001}


@dataclass(frozen=True)
class ExifFacts:
    """The usable facts of one photo's EXIF, None where it states none.

    orientation  : EXIF Orientation, 1 to 8
    digital_zoom : ratio above 1, None without digital zoom
    plane_px_per_mm, plane_width_px : focal-plane resolution and the width it was stated for
    taken_at, fix, direction_deg, direction_from : as in `model.Photo`
    """

    orientation: int = 1
    make: str | None = None
    model: str | None = None
    lens: str | None = None
    focal_mm: float | None = None
    focal_35mm: float | None = None
    digital_zoom: float | None = None
    plane_px_per_mm: float | None = None
    plane_width_px: float | None = None
    taken_at: datetime | None = None
    fix: Fix | None = None
    direction_deg: float | None = None
    direction_from: str | None = None
    problems: tuple[str, ...] = ()


def read_exif(source: bytes | Path) -> ExifFacts:
    """Read the EXIF of one photo (JPEG, HEIC, TIFF, PNG).

    source  : the file's bytes, or its path
    returns : facts; empty with one problem when the EXIF cannot be read at all
    source of the tags' meaning: CIPA DC-008 (EXIF 2.32), sections 4.6.4 to 4.6.6
    """
    problems: list[str] = []
    try:
        # `open` and not `source.open`, which takes longer than reading a small block.
        with io.BytesIO(source) if isinstance(source, bytes) else open(source, "rb") as stream:
            tags = _tags(stream, problems)
    except OSError as wrong:
        return ExifFacts(problems=(f"the file cannot be read ({wrong.strerror or wrong})",))
    fix = _guarded(lambda: read_fix(tags, problems), None, "the GPS position", problems)
    taken_at = _guarded(lambda: read_time(tags, problems), None, "the time", problems)
    direction = _guarded(
        lambda: read_direction(tags, problems), (None, None), "the image direction", problems
    )
    orientation = number(tags, _ORIENTATION)
    if orientation is not None and orientation not in range(1, 9):
        # 0 is written by some software for "unknown"; EXIF knows 1 to 8.
        if orientation != 0:
            problems.append(f"EXIF Orientation {orientation:g} is not one of 1 to 8; taken as 1")
        orientation = None
    zoom = number(tags, _ZOOM)
    plane = number(tags, _PLANE_X)
    unit_mm = _PLANE_UNIT_MM.get(int(number(tags, _PLANE_UNIT) or 2))
    widths = number_list(tags, _WIDTH)
    return ExifFacts(
        orientation=int(orientation or 1),
        make=text(tags, _MAKE),
        model=text(tags, _MODEL),
        lens=text(tags, _LENS),
        focal_mm=_within(number(tags, _FOCAL), 0.3, 5000.0, "focal length", problems),
        focal_35mm=_within(
            number(tags, _FOCAL_35), 2.0, 10_000.0, "35 mm equivalent focal length", problems
        ),
        digital_zoom=zoom if zoom is not None and 1.0 < zoom < 1000.0 else None,
        plane_px_per_mm=plane / unit_mm if plane and plane > 0 and unit_mm else None,
        plane_width_px=widths[0] if widths and widths[0] is not None and widths[0] > 0 else None,
        taken_at=taken_at,
        fix=fix,
        direction_deg=direction[0],
        direction_from=direction[1],
        problems=tuple(problems),
    )


class _EndlessError(Exception):
    """The EXIF led the reader round in circles."""


class _Metered:
    """A file that may be read so often and no more, so that garbled EXIF cannot hang the reader."""

    def __init__(self, stream: BinaryIO) -> None:
        self.seek = stream.seek
        self.tell = stream.tell
        self.read = _metered(stream.read, _MOST_READS)


def _metered(read: Callable[[int], bytes], left: int) -> Callable[[int], bytes]:
    """The read method, a closure since it is called some 700 times a photo."""

    def metered(size: int = _LONGEST_READ) -> bytes:
        nonlocal left
        left -= 1
        if size > 4096:
            left -= size >> 12
            size = min(size, _LONGEST_READ)
        if left < 0:
            raise _EndlessError
        return read(size)

    return metered


def _tags(stream: BinaryIO, problems: list[str]) -> Tags:
    """Every tag by (directory, number): names differ between versions of the EXIF library.

    Some tags come without a name (GPSHPositioningError as `GPS Tag 0x001F`), so the name is
    never asked for.
    """
    import exifread

    logger = logging.getLogger("exifread")
    if logger.level != logging.CRITICAL:
        logger.setLevel(logging.CRITICAL)
    if is_heif(stream.read(12)):
        # The EXIF library misses the block of many HEIF files; their decoder finds it.
        stream.seek(0)
        stream = io.BytesIO(_heif_block(stream.read(), problems))
    try:
        named: Mapping[str, Any] = exifread.process_file(
            cast(BinaryIO, _Metered(stream)), details=False, extract_thumbnail=False
        )
    except Exception as wrong:
        # The library raises whatever its parsing trips over; the photo must live on.
        endless = isinstance(wrong, _EndlessError)
        how = "its directories have no end" if endless else type(wrong).__name__
        tags = _salvaged(stream)
        used = "only part of it was used" if tags else "it was not used"
        problems.append(f"the EXIF is garbled ({how}); {used}")
        return tags
    return {
        (name.partition(" ")[0], tag.tag): tag.values
        for name, tag in named.items()
        if tag.tag in USED_TAGS
    }


def _salvaged(stream: BinaryIO) -> Tags:
    """What PIL still reads of a block on which the EXIF library gave up; empty when nothing."""
    from PIL import Image

    tags: dict[tuple[str, int], Any] = {}
    with contextlib.suppress(Exception), warnings.catch_warnings():
        warnings.simplefilter("ignore")
        stream.seek(0)
        block = open_picture(stream.read()).info.get("exif") or b""
        # A block of a JPEG has 64 KiB at most; PIL takes its time over hostile larger ones.
        if len(block) <= 1 << 16:
            found = Image.Exif()
            found.load(block)
            for name, directory in (
                (_IMAGE, dict(found)),
                (_EXIF, found.get_ifd(0x8769)),
                ("GPS", found.get_ifd(0x8825)),
            ):
                for tag, value in directory.items():
                    if tag in USED_TAGS:
                        tags[name, tag] = list(value) if isinstance(value, tuple) else value
    return tags


def _heif_block(data: bytes, problems: list[str]) -> bytes:
    """The TIFF block of a HEIF file's EXIF, empty when it has none."""
    try:
        block = open_picture(data).info.get("exif") or b""
    except PictureError as wrong:
        problems.append(f"the EXIF was not found: {wrong}")
        return b""
    return bytes(block).removeprefix(b"Exif\0\0")


def _guarded(read: Callable[[], Any], otherwise: Any, what: str, problems: list[str]) -> Any:
    """The reader's answer; a value it did not foresee costs that fact only, not the photo."""
    try:
        return read()
    except (ArithmeticError, AttributeError, LookupError, TypeError, ValueError) as wrong:
        problems.append(f"{what} in the EXIF is garbled ({type(wrong).__name__})")
        return otherwise


def _within(
    value: float | None, least: float, most: float, what: str, problems: list[str]
) -> float | None:
    """The value if it can be one; 0 means "unknown" in EXIF and is no fact."""
    if value is None or value == 0 or not math.isfinite(value):
        return None
    if not least <= value <= most:
        problems.append(f"the EXIF {what} of {value:g} mm cannot be right and was not used")
        return None
    return value
