from dataclasses import replace
from pathlib import Path

import numpy as np

from fieldround.rounds.model import Camera, Photo
from fieldround.run.tie_cache import keep_ties, kept_ties, tie_key
from fieldround.vision.ties import Ties

PHOTO = Photo("a.jpg", Path("a.jpg"), (400, 300), 0, "card", digest="ab" * 32)
CARD = Camera("card", (400, 300), (300.0, 300.0), 1.0, (199.5, 149.5), 1.0)
TIES = Ties(
    np.array([[[1.25, 2.5], [3.0, np.nan]], [[0.1, 0.2], [0.3, 0.4]]]), np.array([0.1, 0.2]), 9,
    ("a note with a \N{PLUS-MINUS SIGN}",),
)  # fmt: skip


def same(one, other):
    return (
        np.array_equal(one.xy_px, other.xy_px, equal_nan=True)
        and np.array_equal(one.sd_px, other.sd_px)
        and (one.found, one.notes) == (other.found, other.notes)
    )


def test_kept_ties_come_back_bit_by_bit(tmp_path):
    keep_ties(tmp_path / "new" / "folder", "key", TIES)
    assert same(kept_ties(tmp_path / "new" / "folder", "key"), TIES)
    assert [p.name for p in (tmp_path / "new" / "folder").iterdir()] == ["key.npz"]


def test_nothing_kept_is_none(tmp_path):
    assert kept_ties(tmp_path, "key") is None
    assert kept_ties(tmp_path / "nowhere", "key") is None


def test_a_damaged_file_is_none(tmp_path):
    keep_ties(tmp_path, "key", TIES)
    path = tmp_path / "key.npz"
    whole = path.read_bytes()
    for damaged in (b"", b"not an archive", whole[: len(whole) // 2], whole[:-40]):
        path.write_bytes(damaged)
        assert kept_ties(tmp_path, "key") is None


def test_ties_of_another_shape_are_none(tmp_path):
    keep_ties(tmp_path, "key", Ties(np.zeros((3, 2)), np.zeros(3), 3))
    assert kept_ties(tmp_path, "key") is None


def test_a_folder_that_cannot_be_made_does_no_harm(tmp_path):
    (tmp_path / "file").write_text("in the way")
    keep_ties(tmp_path / "file", "key", TIES)
    assert kept_ties(tmp_path / "file", "key") is None


def test_the_key_follows_contents_card_and_settings():
    plain = tie_key([PHOTO, PHOTO], [CARD, CARD], 400)
    assert plain == tie_key([replace(PHOTO, name="b.jpg"), PHOTO], [CARD, CARD], 400)
    others = [
        tie_key([replace(PHOTO, digest="cd" * 32), PHOTO], [CARD, CARD], 400),
        tie_key([PHOTO, PHOTO], [replace(CARD, focal_px=(301.0, 301.0)), CARD], 400),
        tie_key([replace(PHOTO, turn_deg=180), PHOTO], [CARD, CARD], 400),
        tie_key([PHOTO, PHOTO], [CARD, CARD], 300),
    ]
    assert plain not in others
    assert len(set(others)) == 4
