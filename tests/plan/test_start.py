"""A round started from photos alone. The pictures are drawn here."""

from __future__ import annotations

from pathlib import Path

import cv2
import numpy as np
import pytest

from fieldround.plan.overlap import shared, sketch
from fieldround.plan.start import StartError, start_round
from fieldround.rounds.load import load_round
from tests.rounds.exif_writing import exif_block
from tests.rounds.folders import SHARED


def scene(seed: int, size: int = 900) -> np.ndarray:
    """A picture full of corners: squares of all sizes and greys."""
    rng = np.random.default_rng(seed)
    picture = np.full((size, size, 3), 128, dtype=np.uint8)
    for _ in range(500):
        x, y = rng.integers(0, size, 2)
        w, h = rng.integers(8, 60, 2)
        colour = tuple(int(c) for c in rng.integers(0, 255, 3))
        cv2.rectangle(picture, (int(x), int(y)), (int(x + w), int(y + h)), colour, -1)
    return picture


def view(picture: np.ndarray, shift: float) -> np.ndarray:
    """The scene from a step to the side: nearer rows move further."""
    height, width = picture.shape[:2]
    x, y = np.meshgrid(np.arange(width, dtype=np.float32), np.arange(height, dtype=np.float32))
    return cv2.remap(picture, x + np.float32(shift) * (0.5 + y / height), y, cv2.INTER_LINEAR,
                     borderMode=cv2.BORDER_REFLECT)  # fmt: skip


def write(folder: Path, name: str, picture: np.ndarray, clock: str = "") -> None:
    path = folder / "photos" / name
    path.parent.mkdir(parents=True, exist_ok=True)
    block = exif_block(exif={0x9003: (2, clock)}) if clock else exif_block(image={0x112: (3, [1])})
    from PIL import Image

    Image.fromarray(picture).save(path, quality=92, exif=b"Exif\0\0" + block)


@pytest.fixture
def walk(tmp_path: Path) -> Path:
    folder = tmp_path / "canal walk"
    for k in range(2):
        picture = scene(k)
        write(folder, f"{k}a.jpg", picture, f"2026:05:14 09:{10 * k:02d}:00")
        write(folder, f"{k}b.jpg", view(picture, 25.0), f"2026:05:14 09:{10 * k:02d}:20")
    write(folder, "extra.jpg", scene(9), "2026:05:14 12:00:00")
    (folder / "photos" / "broken.jpg").write_bytes(b"\xff\xd8\xff no picture")
    (folder / "photos" / "notes.txt").write_text("not a photo")
    return folder


def test_pairs_are_proposed_and_the_round_can_be_read(walk: Path) -> None:
    calls: list[tuple[int, int]] = []
    found = start_round(walk, lambda done, of: calls.append((done, of)))
    assert found.written == ("round.toml", "pairs.csv")
    assert [group.photos for group in found.groups] == [("0a.jpg", "0b.jpg"), ("1a.jpg", "1b.jpg")]
    assert found.names == ("P01", "P02")
    assert set(found.left_over) == {"extra.jpg", "broken.jpg"}
    assert found.to_fill_in[0] == (
        "pairs.csv, pair P01: tape_m from the station of 0a.jpg to that of 0b.jpg"
    )
    assert calls[-1][0] == calls[-1][1]
    round_ = load_round(walk)
    assert round_.settings.title == "canal walk, 2026-05-14"
    assert [pair.photos for pair in round_.pairs] == [group.photos for group in found.groups]
    assert all(pair.note.startswith("proposed: 20 s apart") for pair in round_.pairs)
    assert all(pair.tape_m is None for pair in round_.pairs)


def test_nothing_that_is_there_is_overwritten(walk: Path) -> None:
    (walk / "pairs.csv").write_text("mine")
    found = start_round(walk)
    assert (found.written, found.kept) == (("round.toml",), ("pairs.csv",))
    assert (walk / "pairs.csv").read_text() == "mine"
    before = (walk / "round.toml").read_bytes()
    assert start_round(walk).written == ()
    assert (walk / "round.toml").read_bytes() == before


def test_the_same_photos_give_the_same_sheets(walk: Path, tmp_path: Path) -> None:
    start_round(walk)
    first = (walk / "pairs.csv").read_bytes()
    (walk / "pairs.csv").unlink()
    start_round(walk)
    assert (walk / "pairs.csv").read_bytes() == first


def test_a_folder_without_photos_is_told_what_to_do(tmp_path: Path) -> None:
    with pytest.raises(StartError, match="there is no folder"):
        start_round(tmp_path / "none")
    with pytest.raises(StartError, match="has no folder photos/"):
        start_round(tmp_path)
    (tmp_path / "a.JPG").write_bytes(b"x")
    with pytest.raises(StartError, match="move the 1 photos"):
        start_round(tmp_path)
    (tmp_path / "photos").mkdir()
    with pytest.raises(StartError, match="has no photo that can be read"):
        start_round(tmp_path)


def test_a_title_never_breaks_the_toml(tmp_path: Path) -> None:
    folder = tmp_path / 'odd "name" \\ here'
    write(folder, "a.jpg", scene(1))
    write(folder, "b.jpg", view(scene(1), 20.0))
    start_round(folder)
    assert load_round(folder).settings.title == "odd name  here"


def test_a_sketch_knows_its_scene_upright_or_turned(tmp_path: Path) -> None:
    picture = scene(3)
    write(tmp_path, "a.jpg", picture)
    write(tmp_path, "b.jpg", np.ascontiguousarray(np.rot90(view(picture, 20.0))))
    write(tmp_path, "c.jpg", scene(4))
    a, b, c = (sketch(tmp_path / "photos" / f"{n}.jpg") for n in "abc")
    same, other = shared(a, b), shared(a, c)
    assert same.points > 60
    assert same.points > 0.6 * same.matches
    assert other.points < 15
    assert shared(a, a).moved < 0.002
    assert len(sketch(tmp_path / "photos" / "none.jpg").xy) == 0


@pytest.mark.skipif(not (SHARED / "practice").is_dir(), reason="the practice rounds are not here")
def test_a_practice_round_is_paired_as_it_was_taken(tmp_path: Path) -> None:
    (tmp_path / "photos").mkdir()
    source = SHARED / "practice" / "p9-round"
    for photo in sorted((source / "photos").iterdir()):
        (tmp_path / "photos" / photo.name).symlink_to(photo)
    start_round(tmp_path)
    found = {frozenset(pair.photos) for pair in load_round(tmp_path).pairs}
    wanted = {frozenset(pair.photos) for pair in load_round(source).pairs}
    assert found == wanted
