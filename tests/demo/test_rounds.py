"""Rounds made from a number: whole, loadable, with marks that belong to their truth."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import numpy as np

from demo_site.rounds import make_outing, make_round
from demo_site.sheets import all_sheets
from fieldround.rounds.load import load_round
from fieldround.rounds.model import KINDS

SIZE = (160, 120)


def test_the_same_number_gives_the_same_round() -> None:
    first = all_sheets(make_outing(3, 2))
    assert first == all_sheets(make_outing(3, 2))
    assert first != all_sheets(make_outing(4, 2))


def test_a_made_round_loads_and_its_marks_scatter_by_half_a_pixel(tmp_path: Path) -> None:
    make_round(11, tmp_path, pairs=1, card=False, size_px=SIZE)
    loaded = load_round(tmp_path)
    assert loaded.lost_photos == {}
    assert {thing.kind for thing in loaded.objects} <= set(KINDS)
    assert all(camera.source == "exif" for camera in loaded.cameras.values())
    truth = json.loads((tmp_path / "truth.json").read_text(encoding="utf-8"))
    exact = {
        view["photo"]: [mark for mark in view["marks"] if mark[1] in ("left", "right", "outline")]
        for pair in truth["pairs"].values()
        for view in pair["views"]
    }
    misses = []
    with (tmp_path / "marks.csv").open(encoding="utf-8", newline="") as sheet:
        for row in csv.DictReader(sheet):
            if row["mark"] in ("left", "right", "outline"):
                name, mark, x, y = exact[row["photo"]].pop(0)
                assert (name, mark) == (row["object"], row["mark"])
                misses += [float(row["x_px"]) - x, float(row["y_px"]) - y]
    assert exact
    assert not any(exact.values())
    assert abs(np.sqrt(np.mean(np.square(misses))) / 0.5 - 1.0) < 4.0 / np.sqrt(2.0 * len(misses))
    assert np.abs(misses).max() < 2.25


def test_a_card_is_written_only_when_asked_for() -> None:
    assert "[[camera]]" in all_sheets(make_outing(5, 1, card=True))["cameras.toml"]
    assert "[[camera]]" not in all_sheets(make_outing(5, 1, card=False))["cameras.toml"]
