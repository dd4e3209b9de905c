from __future__ import annotations

import io
from dataclasses import replace

import numpy as np
import pytest
from PIL import Image

from fieldround.deliver import crops as cutting
from fieldround.deliver.crops import cut_crop, cut_crops
from fieldround.rounds.errors import PictureError
from fieldround.solve.results import Drawing
from tests.deliver import invented


def opened(crop):
    return Image.open(io.BytesIO(crop.jpeg))


def test_a_crop_is_a_jpeg_without_any_metadata():
    held = cut_crops(invented.large_round(1), invented.picture)
    crop = held["P001", "P01a.jpg"].whole
    image = opened(crop)
    assert image.format == "JPEG"
    assert image.size == (crop.width, crop.height)
    assert dict(image.getexif()) == {}
    assert b"Exif" not in crop.jpeg
    assert b"http" not in crop.jpeg


def test_a_crop_is_never_the_whole_photo():
    for views in cut_crops(invented.small_round(), invented.picture).values():
        for crop in (views.whole, views.section, views.small):
            assert crop is None or crop.width * crop.height < 0.7 * np.prod(invented.PICTURE)


@pytest.mark.parametrize("long_side", [40, 200, 1000])
def test_marks_stay_on_their_pixels(long_side):
    """A bright pixel at a mark is the brightest of the crop, and the mark lies on it."""
    picture = np.full((300, 400, 3), 40, np.uint8)
    picture[148:153, 208:213] = 255  # a square about pixel (210, 150)
    drawing = Drawing("a", (("left", 210.0, 150.0),), (), (), (180.0, 120.0, 240.0, 190.0))
    crop = cut_crop(picture, drawing, (180, 120, 240, 190), long_side)
    shown = np.asarray(opened(crop).convert("L"), float)
    y, x = np.mgrid[0 : crop.height, 0 : crop.width]
    light = np.clip(shown - 60, 0, None)
    # SVG counts from the corner, so pixel (0, 0) has its middle at (0.5, 0.5).
    middle = ((x + 0.5) * light).sum() / light.sum(), ((y + 0.5) * light).sum() / light.sum()
    name, mark_x, mark_y = crop.marks[0]
    assert name == "left"
    assert (mark_x, mark_y) == pytest.approx(middle, abs=0.3)


def test_crops_are_made_smaller_but_never_larger():
    picture = np.zeros((300, 400, 3), np.uint8)
    drawing = Drawing("a", (), (), (), (0.0, 0.0, 50.0, 50.0))
    assert cut_crop(picture, drawing, (0, 0, 50, 40), 500).width == 50
    assert cut_crop(picture, drawing, (0, 0, 400, 300), 100).width == 100


def test_boxes_beyond_the_picture_are_cut_or_left_out():
    result = invented.large_round(3)
    boxes = [
        (-500.0, -500.0, 2000.0, 2000.0),
        (5000.0, 10.0, 5100.0, 50.0),
        (float("nan"), 0.0, 1.0, 1.0),
    ]
    objects = tuple(
        replace(found, drawings=(replace(found.drawings[0], box_px=box),))
        for found, box in zip(result.objects, boxes, strict=True)
    )
    held = cut_crops(replace(result, objects=objects), invented.picture)
    assert list(held) == [("P001", "P01a.jpg")]


def test_marks_that_are_no_numbers_are_left_out():
    drawing = Drawing(
        "a",
        (("left", float("nan"), 3.0), ("right", 5.0, 5.0)),
        (((1.0, 1.0), (float("inf"), 2.0)),),
        (),
        (0.0, 0.0, 50.0, 50.0),
    )
    crop = cut_crop(np.zeros((60, 60, 3), np.uint8), drawing, (0, 0, 50, 50), 50)
    assert [m[0] for m in crop.marks] == ["right"]
    assert crop.outline == (((1.5, 1.5),),)


def test_photos_are_looked_at_once_and_bad_ones_passed_over():
    seen = []

    def pictures(name):
        seen.append(name)
        if name == "P02a.jpg":
            raise PictureError("cut short")
        return invented.picture(name)

    result = invented.large_round(8)
    held = cut_crops(result, pictures)
    assert sorted(seen) == sorted({d.photo for o in result.objects for d in o.drawings})
    assert len(held) == 14
    assert cut_crops(result, None) == {}


def test_what_is_to_be_measured_again_keeps_its_crops_when_room_is_short(monkeypatch):
    result = invented.large_round(20)
    again = {o.object for o in result.objects if o.verdict != "accept"}
    all_of_them = cut_crops(result, invented.picture)
    size = sum(map(weight, all_of_them.values()))
    monkeypatch.setattr(cutting, "REPORT_BYTES", size // 3)
    held = cut_crops(result, invented.picture)
    kept = [key for key, views in held.items() if views.whole is not None]
    assert 0 < len(kept) < len(held)
    assert again <= {name for name, _ in kept}
    assert sum(map(weight, held.values())) <= size // 3


def weight(views):
    return sum(len(crop.jpeg) for crop in (views.whole, views.section) if crop is not None)
