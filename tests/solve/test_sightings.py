"""Directions to landmarks that photos show, in the pair's levelled frame."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldround.geometry.camera import from_card
from fieldround.rounds.model import Landmark, Mark
from fieldround.solve.rounds import solve_round
from tests.solve.simulated_round import Outing, View, build, pixels, upright_size
from tests.solve.test_rounds import POLE, A, B

SPIRE = np.array([30.0, 200.0, 25.0])
# The frame's y axis is the level direction of camera A's view, which aims at (1, 12).
AHEAD_DEG = float(np.degrees(np.arctan2(1.0, 12.0)))


def mark(view: View, name: str = "spire") -> Mark:
    px = from_card(pixels(SPIRE[None], view), view.turn, upright_size(view))[0]
    assert np.isfinite(px).all()
    return Mark(name, view.photo, "landmark", px[0], px[1], 1.0)


@pytest.mark.parametrize("turn", [0, 90, 180, 270])
def test_the_direction_of_a_landmark_in_the_levelled_frame(turn: int) -> None:
    other = replace(B, turn=turn)
    built = build(Outing({"one": [A, other]}, [POLE]))
    round_ = replace(
        built.round,
        marks=(*built.round.marks, mark(A), mark(other)),
        landmarks=(Landmark("spire", 13.0, 52.0),),
    )
    solution = solve_round(round_, built.ties, {})
    (frame,) = solution.frames
    assert [s.photo for s in frame.sightings] == [A.photo, B.photo]
    for one, view in zip(frame.sightings, (A, other), strict=True):
        assert one.landmark == "spire"
        assert np.linalg.norm(one.direction) == pytest.approx(1.0)
        way = SPIRE - np.array(view.station)
        wanted = np.degrees(np.arctan2(way[0], way[1])) - AHEAD_DEG
        found = np.degrees(np.arctan2(one.direction[0], one.direction[1]))
        assert found == pytest.approx(wanted, abs=0.4)
        assert 0.01 < one.sd_deg < 0.5
    assert [thing.object for thing in solution.objects] == ["P1"]


def test_a_landmark_mark_changes_no_diameter_and_a_pair_without_has_no_sighting() -> None:
    built = build(Outing({"one": [A, B]}, [POLE]))
    plain = solve_round(built.round, built.ties, {})
    marked = replace(built.round, marks=(*built.round.marks, mark(A, "P1")))
    with_mark = solve_round(marked, built.ties, {})
    assert plain.frames[0].sightings == ()
    assert len(with_mark.frames[0].sightings) == 1
    assert with_mark.objects[0].diameter_m == plain.objects[0].diameter_m
