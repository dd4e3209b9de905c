"""Ties of a round: found once, kept, found again when anything they depend on changes.

The search itself is replaced by one that counts; its ties are invented.
"""

from __future__ import annotations

import threading
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from fieldround.rounds.errors import PictureError
from fieldround.rounds.model import Pair, Round, Settings
from fieldround.run import tying
from fieldround.run.tying import Tied, tie_round
from fieldround.vision.ties import Ties
from tests.run.invented import a_photo, a_round


class Told:
    """Progress that keeps what it is told."""

    def __init__(self) -> None:
        self.items: list[str] = []

    def begin(self, step: str, total: int) -> None: ...

    def done(self, what: str) -> None:
        self.items.append(what)

    def say(self, sentence: str) -> None: ...


class Search:
    """A search that counts the pairs it is asked for; its ties are numbered by the seed."""

    def __init__(self, monkeypatch: pytest.MonkeyPatch) -> None:
        self.views: list[int] = []
        self.seeds: list[int] = []
        self.lock = threading.Lock()
        monkeypatch.setattr(tying, "find_ties", self)

    def __call__(self, pictures, rays, focal_px, most, seed):  # type: ignore[no-untyped-def]
        centre = rays[0](np.array([[199.5, 149.5]]))
        assert centre == pytest.approx(np.array([[0.0, 0.0, 1.0]]))
        assert focal_px == [310.0] * len(pictures)
        with self.lock:
            self.views.append(len(pictures))
            self.seeds.append(seed)
        xy = np.full((3, len(pictures), 2), float(seed % 1000))
        return Ties(xy, np.full(3, 0.3), 3, ("a note",))


def pictures(*broken: str):  # type: ignore[no-untyped-def]
    def load(name: str) -> np.ndarray:
        if name in broken:
            raise PictureError(f"{name}: cannot be decoded")
        return np.zeros((300, 400, 3), np.uint8)

    return load


def tied(round_: Round, folder: Path, *broken: str, fresh: bool = False) -> Tied:
    return tie_round(round_, pictures(*broken), folder / "cache", fresh, Told())


def test_a_second_run_finds_nothing_anew(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    search = Search(monkeypatch)
    round_ = a_round(tmp_path, "abcd")
    first = tied(round_, tmp_path)
    assert search.views == [2, 2]
    second = tied(round_, tmp_path)
    assert search.views == [2, 2]
    assert list(first.ties) == list(second.ties) == ["P1", "P2"]
    for name in first.ties:
        assert np.array_equal(first.ties[name].xy_px, second.ties[name].xy_px)
        assert first.ties[name].notes == second.ties[name].notes == ("a note",)
    tied(round_, tmp_path, fresh=True)
    assert search.views == [2] * 4


def test_kept_ties_need_no_picture(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    Search(monkeypatch)
    round_ = a_round(tmp_path, "ab")
    tied(round_, tmp_path)
    assert tied(round_, tmp_path, "a.jpg", "b.jpg").lost == {}
    assert set(tied(round_, tmp_path, "a.jpg", fresh=True).lost) == {"a.jpg"}


def test_ties_are_found_again_when_what_they_depend_on_changes(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    search = Search(monkeypatch)
    round_ = a_round(tmp_path, "ab")
    tied(round_, tmp_path)
    changed = replace(a_photo("a.jpg"), digest="other")
    tied(replace(round_, photos={**round_.photos, "a.jpg": changed}), tmp_path)
    tied(replace(round_, settings=Settings(found_ties_max=50)), tmp_path)
    assert len(search.views) == 3
    tied(replace(round_, settings=Settings(title="another title")), tmp_path)
    assert len(search.views) == 3


def test_the_seed_comes_from_the_photos_alone(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    search = Search(monkeypatch)
    tied(a_round(tmp_path, "abcd"), tmp_path / "x")
    tied(a_round(tmp_path, "cd"), tmp_path / "y")
    assert len(set(search.seeds)) == 2
    assert search.seeds[2] in search.seeds[:2]


def test_a_lost_later_view_leaves_the_others_and_their_ties_are_kept(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    search = Search(monkeypatch)
    round_ = a_round(tmp_path, "abc", (Pair("P1", ("a.jpg", "b.jpg", "c.jpg"), 1.5),))
    for _ in range(2):
        found = tied(round_, tmp_path, "c.jpg")
        assert found.lost == {"c.jpg": "photo c.jpg: cannot be decoded"}
        assert found.ties["P1"].xy_px.shape == (3, 2, 2)
    assert search.views == [2]


def test_a_pair_without_photo_a_or_b_has_no_ties(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    search = Search(monkeypatch)
    told = Told()
    round_ = a_round(tmp_path, "abcd")
    found = tie_round(round_, pictures("b.jpg"), tmp_path / "cache", False, told)
    assert (list(found.ties), list(found.lost), search.views) == (["P2"], ["b.jpg"], [2])
    assert told.items == ["P1, a photo cannot be read", "P2, 3 ties"]


def test_a_search_that_raises_is_told_and_not_kept(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: object) -> None:
        raise ValueError("invented")

    monkeypatch.setattr(tying, "find_ties", broken)
    found = tied(a_round(tmp_path, "ab"), tmp_path)
    assert found.ties == {}
    assert found.troubles == {
        "P1": "looking for ties in the pictures failed (ValueError: invented)"
    }
    assert not list(tmp_path.rglob("*.npz"))


def test_nothing_is_searched_when_no_tie_is_wanted(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    search = Search(monkeypatch)
    round_ = replace(a_round(tmp_path, "ab"), settings=Settings(found_ties_max=0))
    assert tied(round_, tmp_path, "a.jpg") == Tied()
    assert search.views == []


def test_opencv_gets_its_threads_back(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import cv2

    Search(monkeypatch)
    before = cv2.getNumThreads()
    tied(a_round(tmp_path, "ab"), tmp_path)
    assert cv2.getNumThreads() == before
