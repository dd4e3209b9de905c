"""The header of a picture file: its format, its stored size, and whether the file is whole.

In: the bytes of a JPEG, HEIF, TIFF or PNG file. Out: size in pixels; `PictureError` with a
sentence for what cannot be used. Nothing is decoded here.
"""

from __future__ import annotations

import io
import warnings
from typing import Any

from fieldround.rounds.errors import PictureError

# Above any camera in the field; a larger header is garbled or hostile.
MOST_PIXELS = 500_000_000

# A JPEG of several pictures (MPO) comes through "JPEG"; its first picture is the photo.
FORMATS = ("JPEG", "TIFF", "PNG")
_HEIF_BRANDS = (b"heic", b"heix", b"hevc", b"hevx", b"heim", b"heis", b"mif1", b"msf1")


def is_heif(data: bytes) -> bool:
    """True for a HEIF file (ISO/IEC 23008-12) by its brand."""
    return data[4:8] == b"ftyp" and data[8:12] in _HEIF_BRANDS


def is_jpeg(data: bytes) -> bool:
    """True for a JPEG file by its first bytes."""
    return data[:3] == b"\xff\xd8\xff"


def open_picture(data: bytes) -> Any:
    """The picture behind its header, not decoded: a PIL image, or pillow-heif's for HEIF.

    raises : PictureError
    """
    if not data:
        raise PictureError("the file is empty; copy it from the camera again")
    picture: Any
    try:
        if is_heif(data):
            import pillow_heif

            picture = pillow_heif.open_heif(data, convert_hdr_to_8bit=True)
        else:
            from PIL import Image

            with warnings.catch_warnings():
                # PIL's limit would refuse 200-megapixel phones; ours is checked below.
                warnings.simplefilter("ignore")
                limit, Image.MAX_IMAGE_PIXELS = Image.MAX_IMAGE_PIXELS, None
                try:
                    picture = Image.open(io.BytesIO(data), formats=FORMATS)
                finally:
                    Image.MAX_IMAGE_PIXELS = limit
        width, height = picture.size
    except Exception as wrong:
        # Decoders raise whatever a garbled header trips them over.
        raise PictureError(_unreadable(wrong)) from None
    if width < 16 or height < 16 or width * height > MOST_PIXELS:
        raise PictureError(f"a picture of {width} x {height} pixels cannot be a photo")
    return picture


def size_of(data: bytes) -> tuple[int, int]:
    """Width and height as the decoder will give them, before any EXIF Orientation.

    raises : PictureError
    """
    picture = open_picture(data)
    width, height = picture.size
    if getattr(picture, "format", None) == "TIFF":
        # PIL gives the size of a turned TIFF already swapped, but not in all its versions.
        width, height = picture.tag_v2[0x0100], picture.tag_v2[0x0101]
    return int(width), int(height)


def check_whole(data: bytes) -> None:
    """Refuse a JPEG whose file ends before its picture does; decoders would fill it with grey.

    raises : PictureError
    """
    if is_jpeg(data) and data.rfind(b"\xff\xd9", _jpeg_scan(data)) < 0:
        raise PictureError("the file ends before its picture does; copy it from the camera again")


def _jpeg_scan(data: bytes) -> int:
    """Where the first scan begins (ITU-T T.81, annex B): behind previews held in the header."""
    place = 2
    while place + 4 <= len(data) and data[place] == 0xFF:
        marker = data[place + 1]
        if marker == 0xFF:
            place += 1
        elif marker == 0x01 or 0xD0 <= marker <= 0xD8:
            place += 2
        else:
            place += 2 + int.from_bytes(data[place + 2 : place + 4], "big")
            if marker == 0xDA:
                return place
    return min(place, len(data))


def _unreadable(wrong: Exception) -> str:
    from PIL import UnidentifiedImageError

    if isinstance(wrong, UnidentifiedImageError):
        return "the file is not a JPEG, HEIC, TIFF or PNG picture"
    said = " ".join(str(wrong).split())[:120]
    return f"the picture cannot be read ({said or type(wrong).__name__})"
