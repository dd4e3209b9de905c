"""Photo files: found by name, measured from their headers, lost with a sentence."""

from __future__ import annotations

import contextlib
import hashlib
import re
from pathlib import Path

import pytest
from PIL import Image

from fieldround.rounds.errors import PictureError
from fieldround.rounds.photos import PhotoFolder, read_photo
from tests.rounds.exif_writing import SHORT, exif_block
from tests.rounds.folders import picture, shared, write_photo


@pytest.fixture
def folder(tmp_path: Path) -> PhotoFolder:
    for name in ("IMG_1.JPG", "north/a.jpg", "twin.jpg", "Twin.JPG", "Ärmel.jpg"):
        path = tmp_path / "photos" / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(b"")
    return PhotoFolder(tmp_path / "photos")


@pytest.mark.parametrize(
    ("written", "found"),
    [
        ("IMG_1.JPG", "IMG_1.JPG"),
        ("img_1.jpg", "IMG_1.JPG"),
        ("./IMG_1.JPG", "IMG_1.JPG"),
        ("north/a.jpg", "north/a.jpg"),
        ("north\\A.jpg", "north/a.jpg"),
        ("twin.jpg", "twin.jpg"),
        ("A\u0308rmel.jpg", "Ärmel.jpg"),
    ],
)
def test_a_name_is_found_exactly_first_then_whatever_its_case(
    folder: PhotoFolder, written: str, found: str
) -> None:
    assert folder.find(written) == found


@pytest.mark.parametrize(
    ("written", "word"),
    [
        ("IMG_2.JPG", "did you mean 'IMG_1.JPG'"),
        ("TWIN.jpg", "twin.jpg"),
        ("../photos/IMG_1.JPG", "without '..'"),
        ("north/../IMG_1.JPG", "without '..'"),
        ("..\\IMG_1.JPG", "without '..'"),
        ("/etc/IMG_1.JPG", "without '..'"),
        ("C:\\photos\\IMG_1.JPG", "drive"),
        ("c:IMG_1.JPG", "drive"),
        ("\\\\server\\IMG_1.JPG", "without '..'"),
        ("photos/IMG_1.JPG", "leave 'photos/' off"),
        ("north", "no such file"),
    ],
)
def test_names_that_are_refused(folder: PhotoFolder, written: str, word: str) -> None:
    with pytest.raises(ValueError, match=re.escape(word)):
        folder.find(written)


@pytest.mark.parametrize(
    ("stored", "orientation", "upright", "turn_deg"),
    [
        ((64, 48), 1, (64, 48), 0),
        ((64, 48), 2, (64, 48), 0),
        ((64, 48), 3, (64, 48), 180),
        ((64, 48), 4, (64, 48), 180),
        ((64, 48), 5, (48, 64), 270),
        ((64, 48), 6, (48, 64), 90),
        ((64, 48), 7, (48, 64), 90),
        ((64, 48), 8, (48, 64), 270),
        ((48, 64), 1, (48, 64), 90),
        ((48, 64), 3, (48, 64), 270),
        ((48, 64), 6, (64, 48), 180),
        ((48, 64), 8, (64, 48), 0),
        ((64, 64), 1, (64, 64), 0),
        ((64, 64), 6, (64, 64), 90),
    ],
)
def test_size_and_turn(
    tmp_path: Path, stored: tuple[int, int], orientation: int, upright: tuple[int, int],
    turn_deg: int,
) -> None:  # fmt: skip
    block = exif_block({0x112: (SHORT, [orientation])})
    path = write_photo(tmp_path / "a.jpg", stored, block)
    file = read_photo(path)
    assert (file.size_px, file.turn_deg, file.orientation) == (upright, turn_deg, orientation)
    assert file.digest == hashlib.sha256(path.read_bytes()).hexdigest()


@pytest.mark.parametrize("orientation", range(1, 9))
def test_tiff_sizes_are_turned_once(tmp_path: Path, orientation: int) -> None:
    exif = Image.Exif()
    exif[0x112] = orientation
    picture((64, 48)).save(tmp_path / "a.tiff", exif=exif)
    file = read_photo(tmp_path / "a.tiff")
    assert file.size_px == ((48, 64) if orientation >= 5 else (64, 48))
    assert file.orientation == orientation


@pytest.mark.parametrize(("size", "turn_deg"), [((64, 48), 0), ((48, 64), 90)])
def test_heif_needs_no_further_turn(tmp_path: Path, size: tuple[int, int], turn_deg: int) -> None:
    import pillow_heif

    pillow_heif.from_pillow(picture(size)).save(tmp_path / "a.heic")
    file = read_photo(tmp_path / "a.heic")
    assert (file.size_px, file.orientation, file.turn_deg) == (size, 1, turn_deg)


def whole(tmp_path: Path) -> bytes:
    return write_photo(tmp_path / "whole.jpg", exif=exif_block({0x112: (SHORT, [1])})).read_bytes()


@pytest.mark.parametrize(
    ("name", "word"),
    [
        ("missing.jpg", "cannot be read"),
        ("empty.jpg", "empty"),
        ("text.jpg", "not a JPEG, HEIC, TIFF or PNG"),
        ("head.jpg", "cannot be read"),
        ("cut.jpg", "ends before its picture does"),
        ("tiny.png", "10 x 10 pixels cannot be a photo"),
        ("gif.jpg", "not a JPEG, HEIC, TIFF or PNG"),
        ("folder.jpg", "cannot be read"),
    ],
)
def test_lost_photos(tmp_path: Path, name: str, word: str) -> None:
    data = whole(tmp_path)
    (tmp_path / "empty.jpg").write_bytes(b"")
    (tmp_path / "text.jpg").write_text("this is no picture at all")
    (tmp_path / "head.jpg").write_bytes(data[:30])
    (tmp_path / "cut.jpg").write_bytes(data[: len(data) - 40])
    picture((10, 10)).save(tmp_path / "tiny.png")
    picture().save(tmp_path / "gif.jpg", "GIF")
    (tmp_path / "folder.jpg").mkdir()
    with pytest.raises(PictureError, match=word):
        read_photo(tmp_path / name)


def test_a_preview_inside_the_header_is_not_taken_for_the_end_of_the_picture(
    tmp_path: Path,
) -> None:
    """The end mark of an embedded JPEG must not make a truncated photo look whole."""
    preview = write_photo(tmp_path / "preview.jpg", (32, 24)).read_bytes()
    data = whole(tmp_path)
    segment = b"\xff\xe2" + (len(preview) + 2).to_bytes(2, "big") + preview
    data = data[:2] + segment + data[2:]
    (tmp_path / "with.jpg").write_bytes(data)
    assert read_photo(tmp_path / "with.jpg").size_px == (64, 48)
    (tmp_path / "cut.jpg").write_bytes(data[:-10])
    with pytest.raises(PictureError, match="ends before"):
        read_photo(tmp_path / "cut.jpg")


def test_bytes_after_the_picture_do_not_matter(tmp_path: Path) -> None:
    (tmp_path / "more.jpg").write_bytes(whole(tmp_path) + b"\0" * 5000)
    assert read_photo(tmp_path / "more.jpg").size_px == (64, 48)


def test_real_samples_are_read_or_lost() -> None:
    paths = sorted(shared("real", "exif").rglob("*.*"))
    sizes = []
    for path in paths:
        with contextlib.suppress(PictureError):
            sizes.append(read_photo(path).size_px)
    assert len(paths) > 60
    assert len(sizes) > 60
