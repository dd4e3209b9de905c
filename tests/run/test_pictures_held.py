"""Decoded pictures are held while there is room, and each is decoded by one thread only."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from time import sleep

import numpy as np
import pytest

from fieldround.rounds.errors import PictureError
from fieldround.rounds.model import Photo
from fieldround.run.pictures_held import PicturesHeld
from tests.run.invented import a_round

SIZE = 10 * 10 * 3


def loader(calls: list[str], wait_s: float = 0.0):  # type: ignore[no-untyped-def]
    def load(photo: Photo) -> np.ndarray:
        calls.append(photo.name)
        sleep(wait_s)
        if photo.name == "b.jpg":
            raise PictureError("b.jpg: no picture")
        return np.zeros((10, 10, 3), np.uint8)

    return load


def test_the_picture_longest_not_asked_for_is_dropped(tmp_path: Path) -> None:
    calls: list[str] = []
    held = PicturesHeld(a_round(tmp_path, "acd"), room_bytes=2 * SIZE, load=loader(calls))
    for name in ("a.jpg", "c.jpg", "a.jpg", "d.jpg", "a.jpg", "c.jpg"):
        held(name)
    assert calls == ["a.jpg", "c.jpg", "d.jpg", "c.jpg"]


def test_one_picture_is_held_even_where_there_is_no_room(tmp_path: Path) -> None:
    calls: list[str] = []
    held = PicturesHeld(a_round(tmp_path, "ac"), room_bytes=1, load=loader(calls))
    assert held("a.jpg") is held("a.jpg")
    assert calls == ["a.jpg"]


def test_two_threads_that_ask_for_one_photo_decode_it_once(tmp_path: Path) -> None:
    calls: list[str] = []
    held = PicturesHeld(a_round(tmp_path, "ac"), load=loader(calls, 0.05))
    with ThreadPoolExecutor(4) as pool:
        pictures = list(pool.map(held, ["a.jpg", "c.jpg", "a.jpg", "c.jpg"]))
    assert sorted(calls) == ["a.jpg", "c.jpg"]
    assert pictures[0] is pictures[2]


def test_a_picture_cannot_be_changed_by_who_asked_for_it(tmp_path: Path) -> None:
    held = PicturesHeld(a_round(tmp_path, "a"), load=loader([]))
    with pytest.raises(ValueError, match="read-only"):
        held("a.jpg")[0, 0] = 1


def test_unreadable_and_unknown_photos_raise(tmp_path: Path) -> None:
    held = PicturesHeld(a_round(tmp_path, "ab"), load=loader([]))
    for name in ("b.jpg", "b.jpg", "z.jpg"):
        with pytest.raises(PictureError):
            held(name)
