"""The photo files of a round: found by the name in a sheet, measured without decoding them.

In: the photos/ folder and names from the sheets. Out: names as they lie on disk, and for each
photo its size, orientation, EXIF and digest (`PhotoFile`).
"""

from __future__ import annotations

import hashlib
import os
import re
import unicodedata
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from fieldround.rounds.errors import PictureError
from fieldround.rounds.exif import ExifFacts, read_exif
from fieldround.rounds.picture_files import check_whole, is_heif, size_of
from fieldround.rounds.sheets import nearest_hint

# Clockwise turn from the sensor's picture to the upright one, and whether it is also mirrored
# (EXIF 2.32, Orientation). A mirrored picture is first mirrored left-right, then turned.
TURN_DEG = {1: 0, 2: 0, 3: 180, 4: 180, 5: 270, 6: 90, 7: 90, 8: 270}


@dataclass(frozen=True)
class PhotoFile:
    """What one photo file says of itself.

    size_px     : width, height turned upright
    orientation : EXIF Orientation that the decoded pixels still need (1 when they need none)
    turn_deg    : clockwise turn from a landscape picture of the sensor to the upright picture
    digest      : SHA-256 of the file's bytes
    """

    path: Path
    size_px: tuple[int, int]
    orientation: int
    turn_deg: int
    exif: ExifFacts
    digest: str


class PhotoFolder:
    """The names under photos/, asked exactly first and then whatever their case."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.names: set[str] = set()
        self.by_fold: dict[str, list[str]] = {}
        for root, _, files in os.walk(folder):
            for file in files:
                name = Path(root, file).relative_to(folder).as_posix()
                self.names.add(name)
                self.by_fold.setdefault(_fold(name), []).append(name)

    def find(self, written: str) -> str:
        """The name under photos/ that a sheet's text means.

        raises : ValueError whose text is the remedy
        """
        name = written.replace("\\", "/")
        if name.startswith("/") or re.match(r"[A-Za-z]:", name) or ".." in name.split("/"):
            raise ValueError("write the photo's name inside photos/, without '..' or a drive")
        name = PurePosixPath(name).as_posix()
        if name in self.names:
            return name
        alike = self.by_fold.get(_fold(name), [])
        if len(alike) == 1:
            return alike[0]
        if alike:
            options = " and ".join(sorted(alike))
            raise ValueError(f"photos/ holds {options}; write the name exactly as one of them")
        if (self.folder / name).is_file():
            return name
        if name.startswith("photos/") and name.removeprefix("photos/") in self.names:
            raise ValueError("names are relative to photos/; leave 'photos/' off")
        hint = nearest_hint(name, self.names)
        raise ValueError(f"there is no such file under photos/{hint}")


def read_photo(path: Path) -> PhotoFile:
    """Measure one photo file.

    raises : PictureError with a sentence when the file is no whole picture of a known format
    """
    try:
        data = path.read_bytes()
    except OSError as wrong:
        raise PictureError(f"the file cannot be read ({wrong.strerror or wrong})") from None
    width, height = size_of(data)
    check_whole(data)
    exif = read_exif(data)
    turn_deg = TURN_DEG[exif.orientation]
    # A HEIF decoder turns the picture itself (ISO/IEC 23008-12, irot and imir); its EXIF
    # Orientation only tells how the sensor was held.
    orientation = 1 if is_heif(data) else exif.orientation
    if orientation >= 5:
        width, height = height, width
    if is_heif(data):
        held_upright = turn_deg in (90, 270)
        if held_upright != (height > width):
            turn_deg = 90 if height > width else 0
    elif (width < height) != (turn_deg in (90, 270)) and width != height:
        # Software stored the picture as a portrait; which way it turned it is not known.
        turn_deg = (turn_deg + 90) % 360
    return PhotoFile(
        path=path,
        size_px=(width, height),
        orientation=orientation,
        turn_deg=turn_deg,
        exif=exif,
        digest=hashlib.sha256(data).hexdigest(),
    )


def _fold(name: str) -> str:
    return unicodedata.normalize("NFC", name).casefold()
