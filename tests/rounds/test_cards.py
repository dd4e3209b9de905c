"""Camera cards: reading, faults with their line, matching to photos, scaling, writing back."""

from __future__ import annotations

import tomllib
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldround.rounds.cards import (
    Card,
    CardMisfitError,
    CardsAmbiguousError,
    match_card,
    read_cards,
    scale_card,
    write_card,
)
from fieldround.rounds.errors import Fault
from fieldround.rounds.exif import ExifFacts
from fieldround.rounds.model import Camera

CARD = """[[camera]]
name = "crew phone, main lens"
make = "Alder"
model = "A7"
lens = "main"
focal_mm = 5.1
size_px = [4032, 3024]
focal_px = [3021.4, 3022.0]
focal_sd_px = 3.0
centre_px = [2013.2, 1509.8]
centre_sd_px = 3.5
distortion = [0.02, -0.05, 0.0003, -0.0002, 0.001]
distortion_sd = [0.002, 0.004, 0.0002, 0.0001, 0.0]
"""
CAMERA = Camera(
    name="crew phone, main lens",
    size_px=(4032, 3024),
    focal_px=(3021.4, 3022.0),
    focal_sd_px=3.0,
    centre_px=(2013.2, 1509.8),
    centre_sd_px=3.5,
    distortion=(0.02, -0.05, 0.0003, -0.0002, 0.001),
    distortion_sd=(0.002, 0.004, 0.0002, 0.0001, 0.0),
    make="Alder",
    model="A7",
    lens="main",
    focal_mm=5.1,
)
FACTS = ExifFacts(make="Alder", model="A7", lens="main", focal_mm=5.1)
BARE = "[[camera]]\nsize_px = [400, 300]\nfocal_px = 310\n"


def read(folder: Path, content: str) -> tuple[tuple[Card, ...], list[Fault]]:
    folder.joinpath("cameras.toml").write_text(content, encoding="utf-8")
    faults: list[Fault] = []
    return read_cards(folder / "cameras.toml", faults), faults


def test_a_full_card(tmp_path: Path) -> None:
    cards, faults = read(tmp_path, CARD)
    assert faults == []
    assert cards == (Card(CAMERA, 1),)


def test_a_bare_card_gets_wide_sds(tmp_path: Path) -> None:
    cards, faults = read(tmp_path, BARE)
    assert faults == []
    camera = cards[0].camera
    assert camera.name == "card 1"
    assert camera.focal_px == (310.0, 310.0)
    assert camera.focal_sd_px == pytest.approx(3.1)
    assert camera.centre_px == (199.5, 149.5)
    assert camera.centre_sd_px == pytest.approx(4.0)
    assert camera.distortion == (0.0,) * 5
    assert camera.distortion_sd == (0.03, 0.03, 0.001, 0.001, 0.0)
    assert (camera.make, camera.model, camera.lens, camera.focal_mm) == (None,) * 4


def test_a_missing_file_means_no_cards(tmp_path: Path) -> None:
    faults: list[Fault] = []
    assert read_cards(tmp_path / "cameras.toml", faults) == ()
    assert faults == []


@pytest.mark.parametrize(
    ("extra", "row", "key", "word"),
    [
        ("focal = 3\n", 4, "focal", "did you mean 'focal_"),
        ("name = 3\n", 4, "name", "double quotes"),
        ("focal_sd_px = 0\n", 4, "focal_sd_px", "above 0"),
        ("focal_sd_px = -1\n", 4, "focal_sd_px", "above 0"),
        ("focal_sd_px = [1]\n", 4, "focal_sd_px", "one number"),
        ("centre_sd_px = inf\n", 4, "centre_sd_px", "finite"),
        ("centre_px = [1.0]\n", 4, "centre_px", "2 numbers"),
        ("centre_px = [900, 100]\n", 4, "centre_px", "400 x 300"),
        ("distortion = [0.1, 0.2]\n", 4, "distortion", "4 or 5 numbers"),
        ('distortion = [0.1, "a", 0, 0]\n', 4, "distortion", "finite"),
        ("distortion_sd = [0.1, -0.2, 0, 0, 0]\n", 4, "distortion_sd", "0 or more"),
        ("focal_mm = 0\n", 4, "focal_mm", "above 0"),
        ("digital_zoom = true\n", 4, "digital_zoom", "one number"),
        ("ratio_sd = -1\n", 4, "ratio_sd", "0 or more"),
        ("[[lens]]\nx = 1\n", 4, "lens", "[[camera]]"),
        ('[[camera]]\nname = "card 1"\nsize_px = [4, 3]\nfocal_px = 3\n', 5, "name", "two cards"),
        ('[[camera]]\nname = "other"\nfocal_px = 3\n', 4, "size_px", "lacks"),
        ('[[camera]]\nname = "other"\nsize_px = [4, 3]\n', 4, "focal_px", "lacks"),
        ('[[camera]]\nname = "o"\nsize_px = [4.5, 3]\nfocal_px = 3\n', 6, "size_px", "whole"),
        ('[[camera]]\nname = "o"\nsize_px = [0, 3]\nfocal_px = 3\n', 6, "size_px", "above 0"),
        ('[[camera]]\nname = "o"\nsize_px = 4\nfocal_px = 3\n', 6, "size_px", "2 numbers"),
        ('[[camera]]\nname = "o"\nsize_px = [4, 3]\nfocal_px = [0, 3]\n', 7, "focal_px", "above"),
        ("focal_mm = \n", 4, None, "not TOML"),
    ],
)
def test_faults(tmp_path: Path, extra: str, row: int, key: str | None, word: str) -> None:
    _, faults = read(tmp_path, BARE + extra)
    assert [(fault.file, fault.row, fault.column) for fault in faults] == [
        ("cameras.toml", row, key)
    ]
    assert word in faults[0].remedy


@pytest.mark.parametrize("content", ["[camera]\nsize_px = [4, 3]\n", "camera = 3\n"])
def test_single_brackets_are_a_fault(tmp_path: Path, content: str) -> None:
    cards, faults = read(tmp_path, content)
    assert cards == ()
    assert [(fault.row, fault.column) for fault in faults] == [(1, "camera")]
    assert "double brackets" in faults[0].remedy


def card(row: int = 1, **changes: object) -> Card:
    bare = replace(CAMERA, make=None, model=None, lens=None, focal_mm=None)
    return Card(replace(bare, **changes), row)  # type: ignore[arg-type]


def test_any_condition_may_be_left_out_and_case_and_blanks_do_not_matter() -> None:
    for changes in ({}, {"make": "ALDER "}, {"model": "a7"}, {"lens": "Main"}, {"focal_mm": 5.19}):
        matched = match_card([card(**changes)], FACTS, (4032, 3024), False)
        assert matched is not None, changes
        assert matched[1:] == (False, "")


@pytest.mark.parametrize(
    "changes",
    [
        {"make": "Birch"},
        {"model": "A7s"},
        {"lens": "wide"},
        {"focal_mm": 5.21},
        {"digital_zoom": 2.0},
    ],
)
def test_one_unmet_condition_and_the_card_is_not_meant(changes: dict[str, object]) -> None:
    assert match_card([card(**changes)], FACTS, (4032, 3024), False) is None


def test_a_photo_without_the_tag_does_not_meet_a_condition() -> None:
    assert match_card([card(make="Alder")], ExifFacts(), (4032, 3024), False) is None
    assert match_card([card(focal_mm=5.1)], ExifFacts(), (4032, 3024), False) is None


def test_digital_zoom_needs_a_card_of_that_zoom() -> None:
    zoomed = replace(FACTS, digital_zoom=2.0)
    assert match_card([card()], zoomed, (4032, 3024), False) is None
    assert match_card([card(digital_zoom=2.0)], zoomed, (4032, 3024), False) is not None


def test_the_most_specific_card_wins_then_the_one_of_the_very_size() -> None:
    cards = [
        card(1, name="any"),
        card(2, name="make", make="Alder"),
        card(3, name="make and focal", make="Alder", focal_mm=5.1),
        card(4, name="half", make="Alder", focal_mm=5.1, size_px=(2016, 1512)),
    ]
    matched = match_card(cards, FACTS, (4032, 3024), False)
    assert matched is not None
    assert matched[0].name == "make and focal"
    matched = match_card(cards, FACTS, (2016, 1512), False)
    assert matched is not None
    assert matched[0].name == "half"


def test_two_cards_that_fit_equally_are_named() -> None:
    cards = [card(1, name="one", make="Alder"), card(9, name="two", model="A7")]
    with pytest.raises(CardsAmbiguousError, match="'one' fits the same photos") as caught:
        match_card(cards, FACTS, (4032, 3024), False)
    assert caught.value.card.row == 9


def test_a_smaller_copy_scales_the_card_about_pixel_centres() -> None:
    matched = match_card([card()], FACTS, (1008, 756), False)
    assert matched is not None
    camera, portrait, note = matched
    assert not portrait
    assert camera.focal_px == pytest.approx((3021.4 / 4, 3022.0 / 4))
    assert camera.focal_sd_px == pytest.approx(0.75)
    assert camera.centre_px == pytest.approx((2013.7 / 4 - 0.5, 1510.3 / 4 - 0.5))
    assert camera.size_px == (1008, 756)
    assert "4032 x 3024" in note
    assert "1008 x 756" in note


def test_a_copy_whose_shorter_side_was_rounded_still_scales() -> None:
    three_two = card(size_px=(5184, 3456))
    matched = match_card([three_two], FACTS, (1024, 683), False)
    assert matched is not None
    assert matched[0].size_px == (1024, 683)


def test_a_scaled_card_sees_the_same_rays() -> None:
    """A pixel of the large picture and the same place of the small one are one ray."""
    small = scale_card(CAMERA, (2016, 1512))
    for x, y in [(0.0, 0.0), (4031.0, 3023.0), (1000.0, 77.0)]:
        xs, ys = (x + 0.5) / 2 - 0.5, (y + 0.5) / 2 - 0.5
        assert (xs - small.centre_px[0]) / small.focal_px[0] == pytest.approx(
            (x - CAMERA.centre_px[0]) / CAMERA.focal_px[0]
        )
        assert (ys - small.centre_px[1]) / small.focal_px[1] == pytest.approx(
            (y - CAMERA.centre_px[1]) / CAMERA.focal_px[1]
        )


def test_a_card_meant_for_the_photo_but_of_another_shape_is_a_misfit() -> None:
    with pytest.raises(CardMisfitError, match="4032 x 2268"):
        match_card([card(make="Alder")], FACTS, (4032, 2268), False)


def test_a_card_without_conditions_and_of_another_shape_is_simply_not_meant() -> None:
    assert match_card([card()], FACTS, (4032, 2268), False) is None


def test_a_portrait_card_holds_only_for_portraits_stored_as_such() -> None:
    portrait = card(size_px=(3024, 4032), centre_px=(1500.0, 2000.0))
    matched = match_card([portrait], FACTS, (4032, 3024), True)
    assert matched is not None
    assert matched[:2] == (portrait.camera, True)
    assert match_card([portrait], FACTS, (4032, 3024), False) is None


_NUMBER = st.floats(-1e3, 1e3).map(lambda value: value + 0.0)
_SD = st.floats(0.001, 100.0)
_TEXT = st.text(st.characters(codec="utf-8", exclude_categories=["Cs"]), max_size=10).map(str.strip)


@settings(deadline=None, max_examples=100)
@given(
    name=_TEXT.filter(bool),
    make=st.none() | _TEXT.filter(bool),
    focal_mm=st.none() | _SD,
    zoom=st.none() | st.floats(1.01, 20.0),
    focal=st.tuples(_SD, _SD),
    centre=st.tuples(st.floats(0, 639), st.floats(0, 479)),
    distortion=st.tuples(*[_NUMBER] * 5),
    distortion_sd=st.tuples(*[_SD] * 5),
    ratio_sd=st.just(0.0) | _SD,
)
def test_a_written_card_reads_back_the_same(
    tmp_path_factory: pytest.TempPathFactory, name: str, make: str | None, focal_mm: float | None,
    zoom: float | None, focal: tuple[float, float], centre: tuple[float, float],
    distortion: tuple[float, ...], distortion_sd: tuple[float, ...], ratio_sd: float,
) -> None:  # fmt: skip
    camera = Camera(
        name=name, size_px=(640, 480), focal_px=focal, focal_sd_px=1.5, centre_px=centre,
        centre_sd_px=2.5, distortion=distortion, distortion_sd=distortion_sd,  # type: ignore[arg-type]
        make=make, focal_mm=focal_mm, digital_zoom=zoom, ratio_sd=ratio_sd,
    )  # fmt: skip
    text = write_card(camera)
    assert tomllib.loads(text)["camera"][0]["name"] == name
    cards, faults = read(tmp_path_factory.mktemp("card"), text)
    assert faults == []
    assert cards[0].camera == camera


def test_several_written_cards_make_one_file(tmp_path: Path) -> None:
    other = replace(CAMERA, name='second "lens"\\', lens="tele")
    cards, faults = read(tmp_path, write_card(CAMERA) + "\n" + write_card(other))
    assert faults == []
    assert [one.camera for one in cards] == [CAMERA, other]


def test_a_card_that_is_not_finite_is_not_written() -> None:
    with pytest.raises(ValueError, match="focal_sd_px"):
        write_card(replace(CAMERA, focal_sd_px=float("nan")))
