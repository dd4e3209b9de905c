"""Pixels: every format and depth upright exactly once, crops, damaged files."""

from __future__ import annotations

import contextlib
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from fieldround.geometry.camera import to_card
from fieldround.rounds.errors import PictureError
from fieldround.rounds.model import Photo
from fieldround.rounds.photos import read_photo
from fieldround.rounds.pictures import crop_bounds, load_crop, load_picture, upright
from tests.rounds.exif_writing import SHORT, exif_block
from tests.rounds.folders import picture, shared

BASE = np.asarray(picture((64, 48)))

# How a picture must be stored for a viewer to see it upright (EXIF 2.32, Orientation): the row
# and column of the stored picture that are its top and left.
STORED = {
    1: lambda a: a,
    2: lambda a: a[:, ::-1],
    3: lambda a: a[::-1, ::-1],
    4: lambda a: a[::-1],
    5: lambda a: a.transpose(1, 0, 2),
    6: lambda a: np.rot90(a, 1),
    7: lambda a: a[::-1, ::-1].transpose(1, 0, 2),
    8: lambda a: np.rot90(a, -1),
}


def photo_of(path: Path) -> Photo:
    file = read_photo(path)
    return Photo(path.name, path, file.size_px, file.turn_deg, "card", orientation=file.orientation)


def save(path: Path, pixels: np.ndarray, orientation: int) -> Photo:
    exif = Image.Exif()
    exif[0x112] = orientation
    options = {"quality": 98, "subsampling": 0} if path.suffix == ".jpg" else {}
    Image.fromarray(np.ascontiguousarray(pixels)).save(path, exif=exif, **options)  # type: ignore[arg-type]
    return photo_of(path)


@pytest.mark.parametrize("orientation", range(1, 9))
@pytest.mark.parametrize("ending", ["jpg", "png", "tiff"])
def test_pictures_are_upright_exactly_once(tmp_path: Path, ending: str, orientation: int) -> None:
    photo = save(tmp_path / f"a.{ending}", STORED[orientation](BASE), orientation)
    pixels = load_picture(photo)
    assert (pixels.shape, pixels.dtype) == ((48, 64, 3), np.uint8)
    assert pixels.flags.c_contiguous
    error = np.abs(pixels.astype(int) - BASE.astype(int))
    assert error.max() <= (8 if ending == "jpg" else 0)


@pytest.mark.parametrize("orientation", range(1, 9))
def test_upright_agrees_with_another_reader(orientation: int) -> None:
    """Against PIL's exif_transpose."""
    from PIL import ImageOps

    stored = Image.fromarray(np.ascontiguousarray(STORED[orientation](BASE)))
    stored.getexif()[0x112] = orientation
    expected = np.asarray(ImageOps.exif_transpose(stored))
    assert np.array_equal(upright(np.asarray(stored), orientation), expected)


@pytest.mark.parametrize("orientation", [1, 3, 6, 8])
def test_a_mark_on_the_upright_picture_is_the_same_pixel_of_the_sensor(
    tmp_path: Path, orientation: int
) -> None:
    """The sensor's landscape picture is stored as it is; only the tag says how it was held."""
    sensor = np.zeros((48, 64, 3), np.uint8)
    sensor[7, 50] = 255
    photo = save(tmp_path / "a.png", sensor, orientation)
    y_px, x_px = np.argwhere(load_picture(photo)[:, :, 0] == 255)[0]
    found = to_card(np.array([[x_px, y_px]], float), photo.turn_deg, photo.size_px)
    assert found.tolist() == [[50.0, 7.0]]


def test_heif_pictures(tmp_path: Path) -> None:
    import pillow_heif

    pillow_heif.from_pillow(picture()).save(tmp_path / "a.heic", quality=95)
    pixels = load_picture(photo_of(tmp_path / "a.heic"))
    assert (pixels.shape, pixels.dtype) == ((48, 64, 3), np.uint8)
    assert np.abs(pixels.astype(int) - BASE.astype(int)).mean() < 4.0


@pytest.mark.parametrize("ending", ["png", "tiff"])
@pytest.mark.parametrize("bits", [8, 10, 12, 14, 16])
def test_deep_grey_is_scaled_to_eight_bits(tmp_path: Path, ending: str, bits: int) -> None:
    ramp = np.tile(np.linspace(0, 2**bits - 1, 64), (48, 1)).round().astype(np.uint16)
    Image.fromarray(ramp).save(tmp_path / f"a.{ending}")
    pixels = load_picture(photo_of(tmp_path / f"a.{ending}"))
    expected = np.tile(np.linspace(0, 255, 64), (48, 1))
    assert np.abs(pixels - expected[:, :, None]).max() <= 0.51


def test_sixteen_bit_colour(tmp_path: Path) -> None:
    """Written by OpenCV, which keeps 16 bits a channel."""
    import cv2

    deep = BASE[:, :, ::-1].astype(np.uint16) * 257
    for ending in ("png", "tiff"):
        cv2.imwrite(str(tmp_path / f"a.{ending}"), deep)
        pixels = load_picture(photo_of(tmp_path / f"a.{ending}"))
        assert np.abs(pixels.astype(int) - BASE.astype(int)).max() <= 1


@pytest.mark.parametrize("mode", ["L", "LA", "RGBA", "P", "1", "CMYK", "F"])
def test_other_colour_modes(tmp_path: Path, mode: str) -> None:
    converted = picture().convert(mode)
    converted.save(tmp_path / "a.tiff")
    pixels = load_picture(photo_of(tmp_path / "a.tiff"))
    assert (pixels.shape, pixels.dtype) == ((48, 64, 3), np.uint8)
    if mode in ("L", "LA"):
        grey = np.asarray(picture().convert("L"))
        assert np.array_equal(pixels, np.repeat(grey[:, :, None], 3, axis=2))
    if mode == "RGBA":
        assert np.array_equal(pixels, BASE)


@pytest.mark.parametrize("mode", ["L", "CMYK"])
def test_grey_and_four_colour_jpegs(tmp_path: Path, mode: str) -> None:
    picture().convert(mode).save(tmp_path / "a.jpg", quality=95)
    pixels = load_picture(photo_of(tmp_path / "a.jpg"))
    assert pixels.shape == (48, 64, 3)
    expected = np.asarray(picture().convert(mode).convert("RGB"), int)
    assert np.abs(pixels - expected).mean() < 4.0


def test_crops(tmp_path: Path) -> None:
    photo = save(tmp_path / "a.png", STORED[6](BASE), 6)
    assert crop_bounds(photo, (9.6, 20.4, 19.4, 30.0)) == (10, 20, 20, 31)
    assert np.array_equal(load_crop(photo, (9.6, 20.4, 19.4, 30.0)), BASE[20:31, 10:20])
    assert np.array_equal(load_crop(photo, (-50.0, -3.0, 500.0, 500.0)), BASE)
    with pytest.raises(PictureError, match="outside the picture"):
        load_crop(photo, (64.0, 0.0, 80.0, 10.0))


@pytest.mark.parametrize("ending", ["jpg", "png", "tiff", "heic"])
def test_a_damaged_picture_is_a_sentence_with_its_name(tmp_path: Path, ending: str) -> None:
    path = tmp_path / f"damaged.{ending}"
    noise = np.random.default_rng(3).integers(0, 256, (240, 320, 3), np.uint8)
    if ending == "heic":
        import pillow_heif

        pillow_heif.from_pillow(Image.fromarray(noise)).save(path)
    elif ending == "tiff":
        # Strips first, directory last: a cut file still has a header that reads.
        Image.fromarray(noise).save(path, compression="tiff_lzw")
    else:
        Image.fromarray(noise).save(path)
    photo = photo_of(path)
    data = path.read_bytes()
    path.write_bytes(data[: len(data) // 2])
    with pytest.raises(PictureError, match=f"damaged.{ending}: "):
        load_picture(photo)


def test_a_vanished_or_exchanged_file(tmp_path: Path) -> None:
    photo = save(tmp_path / "a.png", BASE, 1)
    picture((32, 32)).save(photo.path)
    with pytest.raises(PictureError, match="32 x 32 pixels but its header said 64 x 48"):
        load_picture(photo)
    photo.path.unlink()
    with pytest.raises(PictureError, match=r"a\.png: the file cannot be read"):
        load_picture(photo)


def test_jpegs_decode_as_pil_decodes_them(tmp_path: Path) -> None:
    exif = exif_block({0x112: (SHORT, [1])})
    picture((160, 120)).save(tmp_path / "a.jpg", quality=85, exif=b"Exif\0\0" + exif)
    expected = np.asarray(Image.open(tmp_path / "a.jpg").convert("RGB"), int)
    pixels = load_picture(photo_of(tmp_path / "a.jpg"))
    assert np.abs(pixels - expected).max() <= 2


def test_real_samples_decode_to_the_size_of_their_header() -> None:
    decoded = 0
    for path in sorted(shared("real", "exif").rglob("*.*")):
        with contextlib.suppress(PictureError):
            photo = photo_of(path)
            assert load_picture(photo).shape == (photo.size_px[1], photo.size_px[0], 3)
            decoded += 1
    assert decoded > 60


def test_the_same_scene_in_eight_orientations_looks_the_same() -> None:
    """Real pictures of one scene, stored in the eight ways (copies 2 to 8 are alike)."""
    folder = shared("real", "exif", "jpg", "orientation")
    for shape in ("landscape", "portrait"):
        reference = load_picture(photo_of(folder / f"{shape}_2.jpg")).astype(float)
        for orientation in range(3, 9):
            other = load_picture(photo_of(folder / f"{shape}_{orientation}.jpg")).astype(float)
            assert np.abs(other - reference).mean() < 6.0
