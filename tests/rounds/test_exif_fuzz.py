"""Damaged photos: three hundred truncated and bit-flipped files, none of which may raise or hang.

The damage is drawn with a fixed seed; the photos are invented.
"""

from __future__ import annotations

import io
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from fieldround.rounds.errors import PictureError
from fieldround.rounds.exif import ExifFacts, read_exif
from fieldround.rounds.load import load_round
from fieldround.rounds.photos import read_photo
from fieldround.rounds.pictures import load_picture
from tests.rounds.exif_writing import (
    ASCII,
    GOOD_GPS,
    RATIONAL,
    SHORT,
    UNDEFINED,
    Value,
    exif_block,
)
from tests.rounds.folders import picture, write_round
from tests.rounds.test_pictures import photo_of

FILES = 300

IMAGE: dict[int, Value] = {
    0x010F: (ASCII, "Alder"),
    0x0110: (ASCII, "A7"),
    0x0112: (SHORT, [6]),
    0x0132: (ASCII, "2026:05:14 12:00:07"),
}
EXIF: dict[int, Value] = {
    0x9003: (ASCII, "2026:05:14 12:00:07"),
    0x9011: (ASCII, "+02:00"),
    0x9291: (ASCII, "250"),
    0x920A: (RATIONAL, [(51, 10)]),
    0x927C: (UNDEFINED, bytes(range(256)) * 4),
    0xA20E: (RATIONAL, [(254_000, 1)]),
    0xA404: (RATIONAL, [(1, 1)]),
    0xA405: (SHORT, [26]),
    0xA434: (ASCII, "main lens"),
}


def damaged_files() -> list[bytes]:
    """Half of them cut, half with one to thirty bits flipped, mostly within the EXIF."""
    draw = np.random.default_rng(20260514)
    gps = {**GOOD_GPS, 0x07: (RATIONAL, [(10, 1), (0, 1), (7, 1)]), 0x1D: (ASCII, "2026:05:14")}
    whole = []
    for order in "<>":
        file = io.BytesIO()
        block = exif_block(IMAGE, EXIF, gps, order)
        picture((160, 120)).save(file, "JPEG", exif=b"Exif\0\0" + block)
        whole.append((file.getvalue(), len(block)))
    files = []
    for number in range(FILES):
        data, exif_length = whole[number % 2]
        if number % 4 < 2:
            files.append(data[: int(draw.integers(0, len(data)))])
            continue
        flipped = bytearray(data)
        end = exif_length if draw.random() < 0.8 else len(data)
        for place in draw.integers(0, end, draw.integers(1, 31)):
            flipped[place] ^= 1 << int(draw.integers(0, 8))
        files.append(bytes(flipped))
    return files


def judge(facts: ExifFacts) -> None:
    """Whatever was read of a damaged file must still be a possible fact."""
    assert facts.orientation in range(1, 9)
    assert facts.focal_mm is None or 0.3 <= facts.focal_mm <= 5000.0
    assert facts.focal_35mm is None or 2.0 <= facts.focal_35mm <= 10_000.0
    assert facts.taken_at is None or isinstance(facts.taken_at, datetime)
    assert facts.direction_deg is None or 0.0 <= facts.direction_deg < 360.0
    assert (facts.direction_deg is None) == (facts.direction_from is None)
    if facts.fix is not None:
        assert abs(facts.fix.latitude_deg) <= 90.0
        assert abs(facts.fix.longitude_deg) <= 180.0
        assert facts.fix.horizontal_sd_m is None or facts.fix.horizontal_sd_m > 0.0
    for text in (facts.make, facts.model, facts.lens):
        assert text is None or text.isprintable()
    assert all(problem and problem.isprintable() for problem in facts.problems)


def test_damaged_files_give_facts_or_sentences(tmp_path: Path) -> None:
    spoiled = 0
    for data in damaged_files():
        facts = read_exif(data)
        judge(facts)
        spoiled += bool(facts.problems)
    # The damage must be real for this test to mean anything.
    assert spoiled > FILES / 10


def test_damaged_files_decode_or_are_lost_with_a_sentence(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "a.jpg"
    decoded = 0
    for data in damaged_files():
        path.write_bytes(data)
        try:
            photo = photo_of(path)
            pixels = load_picture(photo)
        except PictureError as wrong:
            sentence = str(wrong)
            assert sentence.isprintable(), sentence
            continue
        assert pixels.shape == (photo.size_px[1], photo.size_px[0], 3)
        decoded += 1
    assert FILES / 10 < decoded < FILES


def test_a_round_lives_on_with_damaged_photos(tmp_path: Path) -> None:
    write_round(tmp_path)
    lost = 0
    for data in damaged_files()[:60]:
        (tmp_path / "photos" / "b.jpg").write_bytes(data)
        read = load_round(tmp_path)
        assert "a.jpg" in read.photos
        assert ("b.jpg" in read.photos) != ("b.jpg" in read.lost_photos)
        lost += "b.jpg" in read.lost_photos
    assert 0 < lost < 60


def test_where_the_exif_library_gives_up_the_rest_is_still_used(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    import exifread

    def fails(*_: object, **__: object) -> None:
        raise IndexError("list index out of range")

    file = io.BytesIO()
    picture().save(file, "JPEG", exif=b"Exif\0\0" + exif_block(IMAGE, EXIF, GOOD_GPS))
    whole = read_exif(file.getvalue())
    monkeypatch.setattr(exifread, "process_file", fails)
    salvaged = read_exif(file.getvalue())
    assert salvaged.problems == ("the EXIF is garbled (IndexError); only part of it was used",)
    assert (salvaged.orientation, salvaged.make, salvaged.focal_mm) == (6, "Alder", 5.1)
    assert (salvaged.taken_at, salvaged.fix) == (whole.taken_at, whole.fix)
    assert read_exif(b"garbage").problems == ("the EXIF is garbled (IndexError); it was not used",)


@pytest.mark.parametrize("ending", ["png", "tiff", "heic"])
def test_damaged_files_of_other_formats(tmp_path: Path, ending: str) -> None:
    draw = np.random.default_rng(7)
    path = tmp_path / f"a.{ending}"
    if ending == "heic":
        import pillow_heif

        block = exif_block(IMAGE, EXIF, GOOD_GPS)
        pillow_heif.from_pillow(picture()).save(path, exif=b"Exif\0\0" + block)
    else:
        picture().save(path, exif=b"Exif\0\0" + exif_block(IMAGE, EXIF, GOOD_GPS))
    whole = path.read_bytes()
    for number in range(40):
        data = bytearray(whole)
        if number % 2:
            data = data[: int(draw.integers(0, len(data)))]
        else:
            for place in draw.integers(0, len(data), 10):
                data[place] ^= 1 << int(draw.integers(0, 8))
        judge(read_exif(bytes(data)))
        path.write_bytes(bytes(data))
        try:
            read_photo(path)
        except PictureError as wrong:
            sentence = str(wrong)
            assert sentence.isprintable()
