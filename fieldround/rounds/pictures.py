"""The pixels of a photo, turned upright once, as every later step sees them.

In: a `Photo`. Out: an (h, w, 3) uint8 RGB array, or a crop of it; `PictureError` with a sentence.
"""

from __future__ import annotations

import math

import numpy as np

from fieldround.rounds.errors import PictureError
from fieldround.rounds.model import Photo
from fieldround.rounds.picture_files import check_whole, is_heif, is_jpeg, open_picture

# Full scales of sensor data kept in 16 bits; the smallest that holds the picture is taken.
_FULL_SCALES = (255, 1023, 4095, 16383, 65535)


def load_picture(photo: Photo) -> np.ndarray:
    """Decode one photo upright.

    returns : (h, w, 3) uint8 RGB, C-contiguous, h and w those of photo.size_px
    raises  : PictureError
    """
    try:
        data = photo.path.read_bytes()
    except OSError as wrong:
        reason = wrong.strerror or str(wrong)
        raise PictureError(f"{photo.name}: the file cannot be read ({reason})") from None
    try:
        pixels = upright(_decode(data), photo.orientation)
    except PictureError as wrong:
        raise PictureError(f"{photo.name}: {wrong}") from None
    if (pixels.shape[1], pixels.shape[0]) != photo.size_px:
        raise PictureError(
            f"{photo.name}: the picture is {pixels.shape[1]} x {pixels.shape[0]} pixels but its "
            f"header said {photo.size_px[0]} x {photo.size_px[1]}; the file changed or is damaged"
        )
    return pixels


def crop_bounds(photo: Photo, box_px: tuple[float, float, float, float]) -> tuple[int, ...]:
    """First column, first row, last column + 1, last row + 1 of the crop that covers a box.

    box_px : left, top, right, bottom in upright pixels; parts outside the picture are cut off
    raises : PictureError when nothing of the box lies inside the picture
    """
    width, height = photo.size_px
    left, top = max(0, math.floor(box_px[0] + 0.5)), max(0, math.floor(box_px[1] + 0.5))
    right = min(width, math.floor(box_px[2] + 0.5) + 1)
    bottom = min(height, math.floor(box_px[3] + 0.5) + 1)
    if left >= right or top >= bottom:
        raise PictureError(f"{photo.name}: the box asked for lies outside the picture")
    return left, top, right, bottom


def load_crop(photo: Photo, box_px: tuple[float, float, float, float]) -> np.ndarray:
    """Decode one photo upright and cut a box out of it.

    box_px  : left, top, right, bottom in upright pixels; see `crop_bounds`
    returns : (h, w, 3) uint8 RGB; its top-left pixel is `crop_bounds(photo, box_px)[:2]`
    raises  : PictureError
    """
    left, top, right, bottom = crop_bounds(photo, box_px)
    return load_picture(photo)[top:bottom, left:right].copy()


def upright(pixels: np.ndarray, orientation: int) -> np.ndarray:
    """Turn decoded pixels as EXIF Orientation (1 to 8) says; a contiguous array."""
    if orientation in (2, 5, 7, 4):
        pixels = pixels[:, ::-1]
    turns = {3: 2, 4: 2, 5: 1, 6: 3, 7: 3, 8: 1}.get(orientation, 0)
    return np.ascontiguousarray(np.rot90(pixels, turns))


def _decode(data: bytes) -> np.ndarray:
    """(h, w, 3) uint8 RGB as stored, no Orientation applied."""
    if is_jpeg(data):
        check_whole(data)
        open_picture(data)
        pixels = _decode_jpeg(data)
        if pixels is not None:
            return pixels
    picture = open_picture(data)
    try:
        if is_heif(data):
            return _eight_bits(np.asarray(picture))
        return _from_pil(picture)
    except Exception as wrong:
        # Decoders raise whatever the damaged file trips them over.
        said = " ".join(str(wrong).split())[:120] or type(wrong).__name__
        raise PictureError(f"the picture cannot be decoded ({said})") from None


def _decode_jpeg(data: bytes) -> np.ndarray | None:
    """OpenCV decodes a JPEG in half the time PIL takes; None where it gives up."""
    import cv2

    flags = cv2.IMREAD_COLOR | cv2.IMREAD_IGNORE_ORIENTATION
    try:
        pixels = cv2.imdecode(np.frombuffer(data, np.uint8), flags)
    except cv2.error:
        return None
    return None if pixels is None else cv2.cvtColor(pixels, cv2.COLOR_BGR2RGB)


def _from_pil(picture: object) -> np.ndarray:
    from PIL import Image

    assert isinstance(picture, Image.Image)
    stored = None
    if picture.format == "TIFF":
        stored = picture.tag_v2.get(0x0112, 1)  # type: ignore[attr-defined]
    if picture.mode in ("I", "F") or picture.mode.startswith("I;16"):
        pixels = _eight_bits(np.asarray(picture))
    else:
        pixels = np.asarray(picture.convert("RGB"))
    if stored in (2, 3, 4, 5, 6, 7, 8):
        # PIL turns a TIFF upright while it decodes; undo that, so that all formats turn once.
        pixels = _stored(pixels, int(stored))
    return pixels


def _stored(pixels: np.ndarray, orientation: int) -> np.ndarray:
    """The inverse of `upright`."""
    return upright(pixels, {6: 8, 8: 6}.get(orientation, orientation))


def _eight_bits(pixels: np.ndarray) -> np.ndarray:
    """Any depth and number of channels as (h, w, 3) uint8; alpha is dropped."""
    if pixels.dtype != np.uint8:
        values = np.nan_to_num(pixels.astype(np.float64), nan=0.0, posinf=0.0, neginf=0.0)
        peak = float(values.max(initial=0.0))
        scale = next((full for full in _FULL_SCALES if peak <= full), peak)
        if pixels.dtype.kind == "f" and peak <= 1.0:
            scale = 1.0
        pixels = np.clip(values * (255.0 / scale) + 0.5, 0.0, 255.0).astype(np.uint8)
    if pixels.ndim == 2:
        pixels = pixels[:, :, None]
    if pixels.shape[2] < 3:
        pixels = np.repeat(pixels[:, :, :1], 3, axis=2)
    return np.ascontiguousarray(pixels[:, :, :3])
