"""Crops of the photos: the object alone, with what the solver drew on it, and nothing else.

In: the drawings of a `RoundResult` and a way to see the photos. Out: small JPEGs without any
metadata, with the marks and lines in their own pixels. Whole photos never leave by this way.
"""

from __future__ import annotations

import io
import itertools
import os
from collections.abc import Callable, Iterable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace

import numpy as np
from PIL import Image

from fieldround.rounds.errors import RoundError
from fieldround.solve.results import Drawing, ObjectResult, RoundResult

Line = tuple[tuple[float, float], ...]

# Longest side of the crop of a whole object and of its section, by how many crops a page holds.
_SIZES = ((120, 560, 420), (400, 420, 340), (1200, 330, 260), (10**9, 260, 220))
_MAP_SIZE = 220
_CROPS_MAX = 2400
_QUALITY = 82
# Bytes of JPEG that the pages may carry (a data address is a third longer than its bytes).
REPORT_BYTES = 36_000_000
MAP_BYTES = 12_000_000
# The crop shows the object's surroundings: at least this share of its height is its width.
_NARROWEST = 0.5
_SECTION_WIDTHS = 2.6
_SMALLEST_PX = 24.0
_THREADS = 4


@dataclass(frozen=True)
class Crop:
    """One piece of a photo as JPEG, with the drawing moved and scaled into its pixels.

    marks   : (name, x, y); outline, section : polylines; all in crop pixels from the crop's
              top-left corner, as SVG counts them
    """

    jpeg: bytes
    width: int
    height: int
    marks: tuple[tuple[str, float, float], ...]
    outline: tuple[Line, ...]
    section: Line


@dataclass(frozen=True)
class ViewCrops:
    """What the pages show of one object in one photo; None where there is no room for it."""

    whole: Crop | None
    section: Crop | None
    small: Crop | None


CropsByView = Mapping[tuple[str, str], ViewCrops]


def cut_crops(
    result: RoundResult, pictures: Callable[[str], np.ndarray] | None
) -> dict[tuple[str, str], ViewCrops]:
    """Crops by (object, photo); each photo is looked at once. Empty without pictures.

    pictures : safe to call from several threads

    When a round has more crops than the pages may hold, objects that are not accepted come
    first, then the others in their order. A photo that cannot be read has no crops.
    """
    if pictures is None:
        return {}
    wanted = [(o, d) for o in _by_need(result.objects) for d in o.drawings][:_CROPS_MAX]
    whole_px, section_px = next(sizes for most, *sizes in _SIZES if len(wanted) <= most)
    by_photo: dict[str, list[tuple[ObjectResult, Drawing]]] = {}
    for found, drawing in wanted:
        by_photo.setdefault(drawing.photo, []).append((found, drawing))

    def of_photo(photo: str) -> list[tuple[tuple[str, str], ViewCrops]]:
        try:
            picture = pictures(photo)
        except (RoundError, OSError, KeyError):
            return []  # the run has said so already; the other photos go on
        views = (
            (found.object, _of_view(picture, drawing, whole_px, section_px))
            for found, drawing in by_photo[photo]
        )
        return [((name, photo), crops) for name, crops in views if crops is not None]

    # Decoding a photo takes most of the time and leaves Python's lock alone.
    with ThreadPoolExecutor(max_workers=min(_THREADS, os.cpu_count() or 1)) as pool:
        cut = dict(itertools.chain.from_iterable(pool.map(of_photo, sorted(by_photo))))
    order = [(found.object, drawing.photo) for found, drawing in wanted]
    return _within_budget({key: cut[key] for key in order if key in cut})


def _by_need(objects: Sequence[ObjectResult]) -> list[ObjectResult]:
    return sorted(objects, key=lambda found: found.verdict == "accept")


def _of_view(
    picture: np.ndarray, drawing: Drawing, whole_px: int, section_px: int
) -> ViewCrops | None:
    whole_box = _widened(drawing.box_px, picture.shape)
    if whole_box is None:
        return None
    section = None
    section_box = _section_box(drawing, picture.shape)
    # A second look at the section is worth its bytes only where the first cannot show it.
    if section_box is not None and _long_side(section_box) < 0.55 * _long_side(whole_box):
        section = cut_crop(picture, drawing, section_box, section_px)
    image = _shrunk(_piece(picture, whole_box), whole_px)
    whole = _crop(image, drawing, whole_box)
    small = _crop(_shrunk(image, _MAP_SIZE), drawing, whole_box)
    return ViewCrops(whole, section, small)


def cut_crop(
    picture: np.ndarray, drawing: Drawing, box: tuple[int, int, int, int], long_side: int
) -> Crop:
    """The part of a picture inside a box (whole pixels: left, top, right, bottom, end exclusive).

    It is made smaller so that its longer side is at most `long_side`, never larger.
    """
    return _crop(_shrunk(_piece(picture, box), long_side), drawing, box)


def _piece(picture: np.ndarray, box: tuple[int, int, int, int]) -> Image.Image:
    left, top, right, bottom = box
    return Image.fromarray(np.ascontiguousarray(picture[top:bottom, left:right]))


def _shrunk(image: Image.Image, long_side: int) -> Image.Image:
    shrink = long_side / max(image.size)
    if shrink >= 1.0:
        return image
    width, height = (max(1, round(side * shrink)) for side in image.size)
    return image.resize((width, height), Image.Resampling.HAMMING, reducing_gap=1.5)


def _crop(image: Image.Image, drawing: Drawing, box: tuple[int, int, int, int]) -> Crop:
    """The image as JPEG and the drawing in its pixels."""
    left, top, right, bottom = box
    width, height = image.size
    held = io.BytesIO()
    image.save(held, "JPEG", quality=_QUALITY, optimize=True)
    scale = np.array([width / (right - left), height / (bottom - top)])
    # (0, 0) is the centre of the top-left pixel, so the crop's corner lies at left - 0.5.
    corner = np.array([left - 0.5, top - 0.5])

    def moved(line: Iterable[tuple[float, float]]) -> Line:
        points = (np.array(list(line), float).reshape(-1, 2) - corner) * scale
        kept = points[np.isfinite(points).all(axis=1)]
        return tuple((round(float(x), 1), round(float(y), 1)) for x, y in kept)

    marks = tuple(
        (name, *point)
        for name, x, y in drawing.marks
        for point in moved([(x, y)])
        if 0.0 <= point[0] <= width and 0.0 <= point[1] <= height
    )
    return Crop(
        held.getvalue(),
        width,
        height,
        marks,
        tuple(moved(line) for line in drawing.outline),
        moved(drawing.section),
    )


def _widened(
    box: tuple[float, float, float, float], shape: tuple[int, ...]
) -> tuple[int, int, int, int] | None:
    """The box with room around a narrow object, in whole pixels inside the picture."""
    if not np.isfinite(box).all():
        return None
    left, top, right, bottom = box
    wide, high = max(right - left, _SMALLEST_PX), max(bottom - top, _SMALLEST_PX)
    wide, high = max(wide, _NARROWEST * high), max(high, _NARROWEST * wide)
    x, y = (left + right) / 2.0, (top + bottom) / 2.0
    return _inside((x - wide / 2.0, y - high / 2.0, x + wide / 2.0, y + high / 2.0), shape)


def _section_box(drawing: Drawing, shape: tuple[int, ...]) -> tuple[int, int, int, int] | None:
    points = np.array(drawing.section, float).reshape(-1, 2)
    points = points[np.isfinite(points).all(axis=1)]
    if len(points) < 2:
        return None
    low, high = points.min(axis=0), points.max(axis=0)
    half = max(_SECTION_WIDTHS * float(np.hypot(*(high - low))), _SMALLEST_PX) / 2.0
    x, y = (low + high) / 2.0
    return _inside((x - half, y - 0.75 * half, x + half, y + 0.75 * half), shape)


def _inside(
    box: tuple[float, float, float, float], shape: tuple[int, ...]
) -> tuple[int, int, int, int] | None:
    left, top = (max(0, int(np.floor(v + 0.5))) for v in box[:2])
    right = min(shape[1], int(np.ceil(box[2] + 0.5)))
    bottom = min(shape[0], int(np.ceil(box[3] + 0.5)))
    return (left, top, right, bottom) if right - left >= 2 and bottom - top >= 2 else None


def _long_side(box: tuple[int, int, int, int]) -> int:
    return max(box[2] - box[0], box[3] - box[1])


def _within_budget(
    cut: Mapping[tuple[str, str], ViewCrops],
) -> dict[tuple[str, str], ViewCrops]:
    """The same crops in order of need, without those for which a page has no room left."""
    kept: dict[tuple[str, str], ViewCrops] = {}
    report, page = 0, 0
    for key, crops in cut.items():
        report += len(crops.whole.jpeg) if crops.whole else 0
        report += len(crops.section.jpeg) if crops.section else 0
        page += len(crops.small.jpeg) if crops.small else 0
        if report > REPORT_BYTES:
            crops = replace(crops, whole=None, section=None)
        if page > MAP_BYTES:
            crops = replace(crops, small=None)
        kept[key] = crops
    return kept
