"""Edges of rendered pictures lie where the geometry puts them; the demo's photos can be tied."""

from __future__ import annotations

import numpy as np
import pytest
from PIL import Image, ImageOps

from demo_site.camera import seen_at, sight_lines
from demo_site.inventory import Thing
from demo_site.outing import quillwater_round
from demo_site.picture import render_view
from demo_site.scene import Ball, Cone, Lens, Panel, Scene, View
from demo_site.truth import limb_pixels, outline_pixels, visible_heights
from fieldround.geometry.camera import from_card, to_card
from tests.demo.test_site import DEMO
from tests.demo.test_truth import sight

BENT = Lens("bent", (360, 270), (300.0, 303.0, 183.0, 131.0, -0.11, 0.06, 0.001, -0.0008, 0.01),
            noise=0.4)  # fmt: skip
GROUND = Panel((-60, -60, 0), (1, 0, 0), (0, 1, 0), 120, 120, "grass")


def views(portrait: bool) -> View:
    return View("a.jpg", BENT, (0.3, -0.2, 1.6), (0.6, 8.0, 2.2), 3.0, portrait)


def crossings(picture: np.ndarray, spots: np.ndarray, outward: np.ndarray) -> np.ndarray:
    """Where the colour is half way between inside and outside, pixels outward of each spot."""
    steps = np.arange(-4.0, 4.01, 0.1)
    places = spots[:, None] + steps[:, None] * outward[:, None]
    x, y = places[..., 0], places[..., 1]
    i, j = np.floor(x).astype(int), np.floor(y).astype(int)
    fx, fy = (x - i)[..., None], (y - j)[..., None]
    low = picture[j, i] * (1 - fx) + picture[j, i + 1] * fx
    high = picture[j + 1, i] * (1 - fx) + picture[j + 1, i + 1] * fx
    line = low * (1 - fy) + high * fy
    inner = line[:, steps < -2.0].mean(axis=1)
    step = line[:, steps > 2.0].mean(axis=1) - inner
    contrast = np.linalg.norm(step, axis=1)
    share = (
        np.einsum("nsk,nk->ns", line - inner[:, None], step)
        / np.maximum(contrast, 1.0)[:, None] ** 2
    )
    found = []
    for row in share[contrast > 35.0]:
        up = np.flatnonzero((row[:-1] < 0.5) & (row[1:] >= 0.5))
        if len(up):
            k = up[np.argmin(np.abs(steps[up]))]
            found.append(steps[k] + 0.1 * (0.5 - row[k]) / (row[k + 1] - row[k]))
    return np.array(found)


def limb_offsets(picture: np.ndarray, view: View, thing: Thing, heights: np.ndarray) -> np.ndarray:
    left, right = limb_pixels(view, thing, heights)
    found = []
    for spots, other in ((left, right), (right, left)):
        outward = spots - other
        found.append(
            crossings(picture, spots, outward / np.linalg.norm(outward, axis=1, keepdims=True))
        )
    return np.concatenate(found)


@pytest.mark.parametrize("portrait", [False, True])
def test_rendered_limbs_lie_on_the_exact_ones(portrait: bool) -> None:
    dark = {"paint": (0.02, 0.02, 0.02), "sound": 9.0}
    pole = Cone((0.1, 6.0, 0.0), (0.06, 0.02, 0.998), 0.22, 9.0, "painted", -0.004, dark)
    length = np.linalg.norm(pole.axis)
    pole = Cone(pole.base, tuple(np.array(pole.axis) / length), 0.22, 9.0, "painted", -0.004, dark)
    ball = Ball((1.4, 6.5, 2.9), 0.5, "painted", look=dark)
    view = views(portrait)
    picture = render_view(Scene((GROUND, pole, ball)), view).astype(float)
    picture = np.rot90(picture, -1) if portrait else picture
    thing = Thing("K", "pole", "", pole, 1.3)
    offsets = limb_offsets(picture, view, thing, np.linspace(2.2, 3.4, 60))
    assert len(offsets) > 80
    # The shoulder of the tone curve moves a bright edge by a few hundredths.
    assert abs(offsets.mean()) < 0.05
    assert offsets.std() < 0.12
    rim = outline_pixels(view, ball, 90)
    centre = rim.mean(axis=0)
    outward = (rim - centre) / np.linalg.norm(rim - centre, axis=1, keepdims=True)
    offsets = crossings(picture, rim, outward)
    assert len(offsets) > 60
    assert abs(np.median(offsets)) < 0.05
    assert offsets.std() < 0.15


def test_a_picture_is_the_same_again() -> None:
    view = views(False)
    scene = Scene((GROUND, Ball((0.5, 7.0, 0.8), 0.8, "stone")))
    np.testing.assert_array_equal(render_view(scene, view), render_view(scene, view))


@pytest.mark.parametrize("portrait", [False, True])
def test_pixels_and_sight_lines_are_inverse(portrait: bool) -> None:
    view = views(portrait)
    width, height = view.upright_px
    upright = np.random.default_rng(3).uniform((0, 0), (width - 1, height - 1), (50, 2))
    stored = to_card(upright, view.turn_deg, view.upright_px)
    np.testing.assert_allclose(from_card(stored, view.turn_deg, view.upright_px), upright)
    points = np.array(view.station) + 7.0 * sight_lines(view, stored)
    np.testing.assert_allclose(seen_at(view, points), upright, atol=1e-8)
    above = seen_at(view, np.array([view.aim, np.add(view.aim, (0.0, 0.0, 0.5))]))
    assert above[1, 1] < above[0, 1] - 10.0


def upright_photo(name: str) -> np.ndarray:
    with Image.open(DEMO / "photos" / name) as picture:
        return np.array(ImageOps.exif_transpose(picture))


@pytest.mark.parametrize(
    ("pair", "name"),
    [("01-towpath", "K1"), ("02-bollards", "B1"), ("03-far-bank", "T3"), ("04-lamps", "M1"),
     ("05-gauge", "G1"), ("08-gate", "O1")],
)  # fmt: skip
def test_limbs_of_the_demo_photos_are_where_the_truth_says(pair: str, name: str) -> None:
    outing = quillwater_round()
    thing = outing.thing(name)
    for view in next(p for p in outing.pairs if p.pair == pair).views:
        picture = upright_photo(view.photo).astype(float)
        if isinstance(thing.solid, Ball):
            rim = outline_pixels(view, thing.solid, 120)
            outward = rim - rim.mean(axis=0)
            offsets = crossings(
                picture, rim, outward / np.linalg.norm(outward, axis=1, keepdims=True)
            )
        else:
            seen = visible_heights(outing.scene, view, thing)
            heights = np.intersect1d(seen["left"], seen["right"])
            offsets = limb_offsets(picture, view, thing, heights)
        assert len(offsets) > 20, view.photo
        assert abs(np.median(offsets)) < 0.3, view.photo


@pytest.mark.parametrize("pair", ["01-towpath", "03-far-bank", "08-gate", "11-east-light"])
def test_the_photos_can_be_tied(pair: str) -> None:
    cv2 = pytest.importorskip("cv2")
    from fieldround.vision.features import find_features, grey
    from fieldround.vision.matching import match

    cv2.setNumThreads(1)
    views_ = next(p for p in quillwater_round().pairs if p.pair == pair).views
    first, second = (find_features(grey(upright_photo(v.photo)), 4000) for v in views_[:2])
    found = match(first, second)
    station_a, a, focal = sight(views_[0].photo, first.xy_px[found[:, 0]])
    station_b, b, _ = sight(views_[1].photo, second.xy_px[found[:, 1]])
    normal = np.cross(a, station_b - station_a)
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    right = np.abs(np.einsum("ij,ij->i", normal, b)) * focal < 1.5
    assert right.sum() > 150
    # In every quarter of the picture that is not sky.
    width, height = views_[0].upright_px
    x, y = first.xy_px[found[right, 0]].T
    for side in (x < width / 2, x >= width / 2):
        assert (side & (y > 0.3 * height)).sum() > 20
