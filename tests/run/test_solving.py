"""A pair on which the adjustment raises never takes the others along. Invented solutions."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from fieldround.rounds.model import Pair, Round
from fieldround.run import solving
from fieldround.run.solving import solve_what_can
from fieldround.solve.rounds import RoundSolution
from tests.run.invented import CAMERA, a_pair_row, a_round, an_object


def solution(round_: Round, bad: tuple[str, ...] = ()) -> RoundSolution:
    """What a solver might say of a round; objects seen in none of its pairs have no result."""
    names = [pair.pair for pair in round_.pairs]
    objects = []
    for thing in round_.objects:
        mine = [name for name in names if name in thing.pairs]
        if not mine:
            objects.append(
                an_object(
                    thing.object,
                    "",
                    verdict="no result",
                    diameter_m=None,
                    reasons=("it is marked in no pair",),
                )
            )
        else:
            sd = 0.001 * (1 + names.index(mine[0]))
            objects.append(an_object(thing.object, mine[0], diameter_sd_m=sd))
    return RoundSolution(
        objects=tuple(objects),
        pairs=tuple(a_pair_row(pair) for pair in round_.pairs),
        readings=(),
        cameras_found={CAMERA.name: CAMERA},
        frames=(),
        leans={thing.object: (thing.pair, 10.0) for thing in objects if thing.pair},
    )


@pytest.fixture
def solver(monkeypatch: pytest.MonkeyPatch) -> Callable[[Callable[[Round], None]], list[int]]:
    """Put a solver in place that asks a judge first; gives its calls as numbers of pairs."""

    def put(judge: Callable[[Round], None]) -> list[int]:
        calls: list[int] = []

        def solve_round(round_, *_):  # type: ignore[no-untyped-def]
            calls.append(len(round_.pairs))
            judge(round_)
            return solution(round_)

        monkeypatch.setattr(solving, "solve_round", solve_round)
        return calls

    return put


def breaks_on(*names: str) -> Callable[[Round], None]:
    def judge(round_: Round) -> None:
        for pair in round_.pairs:
            if pair.pair in names:
                raise ValueError(f"singular\nin {pair.pair}")

    return judge


def test_a_round_that_solves_is_solved_once(tmp_path: Path, solver) -> None:  # type: ignore[no-untyped-def]
    calls = solver(breaks_on())
    round_ = a_round(tmp_path, "abcdef")
    assert solve_what_can(round_, {}, {}, (), None) == solution(round_)
    assert calls == [3]


def test_a_broken_pair_fails_alone_with_its_reason(tmp_path: Path, solver) -> None:  # type: ignore[no-untyped-def]
    calls = solver(breaks_on("P2"))
    got = solve_what_can(a_round(tmp_path, "abcdef"), {}, {}, (), None)
    assert calls == [3, 1, 1, 1, 2]
    assert [(row.pair, row.status) for row in got.pairs] == [
        ("P1", "solved"),
        ("P2", "failed"),
        ("P3", "solved"),
    ]
    why = "the adjustment failed (ValueError: singular in P2)"
    assert got.pairs[1].reasons == (why,)
    assert [(o.object, o.verdict) for o in got.objects] == [
        ("T1", "accept"),
        ("T2", "no result"),
        ("T3", "accept"),
    ]
    assert got.objects[1].reasons == (f"pair P2: {why}",)
    assert got.objects[1].diameter_m is None
    assert (got.objects[1].photo_a, got.objects[1].photo_b) == ("c.jpg", "d.jpg")


def test_an_object_of_a_broken_and_a_sound_pair_keeps_the_sound_result(tmp_path, solver) -> None:  # type: ignore[no-untyped-def]
    solver(breaks_on("P1"))
    round_ = a_round(tmp_path, "abcd")
    both = replace(round_.objects[0], pairs=("P1", "P2"))
    got = solve_what_can(replace(round_, objects=(both,)), {}, {}, (), None)
    assert [(o.object, o.verdict, o.pair) for o in got.objects] == [("T1", "accept", "P2")]


def test_when_every_pair_breaks_every_object_says_why(tmp_path: Path, solver) -> None:  # type: ignore[no-untyped-def]
    solver(breaks_on("P1", "P2"))
    got = solve_what_can(a_round(tmp_path, "abcd"), {}, {}, (), None)
    assert [row.status for row in got.pairs] == ["failed", "failed"]
    assert all("ValueError: singular" in thing.reasons[0] for thing in got.objects)
    assert len(got.objects) == 2
    assert got.cameras_found == {CAMERA.name: CAMERA}


def test_a_program_that_is_broken_for_every_pair_says_so(tmp_path: Path, solver) -> None:  # type: ignore[no-untyped-def]
    def judge(round_: Round) -> None:
        raise NameError("invented")

    solver(judge)
    with pytest.raises(NameError, match="invented"):
        solve_what_can(a_round(tmp_path, "abcd"), {}, {}, (), None)

    def only_first(round_: Round) -> None:
        if round_.pairs[0].pair == "P1":
            raise NameError("invented")

    solver(only_first)
    got = solve_what_can(a_round(tmp_path, "abcd"), {}, {}, (), None)
    assert [row.status for row in got.pairs] == ["failed", "solved"]


def test_pairs_that_only_break_together_are_taken_one_by_one(tmp_path: Path, solver) -> None:  # type: ignore[no-untyped-def]
    def judge(round_: Round) -> None:
        if len(round_.pairs) > 1:
            raise ArithmeticError("no minimum")

    solver(judge)
    round_ = a_round(tmp_path, "abcd")
    both = replace(round_.objects[0], pairs=("P1", "P2"))
    round_ = replace(round_, objects=(both, round_.objects[1]))
    got = solve_what_can(round_, {}, {}, (), None)
    assert [row.status for row in got.pairs] == ["solved", "solved"]
    assert [(o.object, o.verdict) for o in got.objects] == [("T1", "accept"), ("T2", "accept")]
    assert "ArithmeticError: no minimum" in got.objects[0].reasons[-1]
    assert got.leans["T1"] == (got.objects[0].pair, 10.0)


def test_an_object_marked_nowhere_says_so_even_when_a_pair_broke(tmp_path: Path, solver) -> None:  # type: ignore[no-untyped-def]
    solver(breaks_on("P2"))
    round_ = a_round(tmp_path, "abcd")
    stray = replace(round_.objects[1], object="T9", pairs=())
    got = solve_what_can(replace(round_, objects=(*round_.objects, stray)), {}, {}, (), None)
    assert got.objects[2].reasons == ("it is marked in no pair",)


def test_only_a_lost_later_view_is_left_out_of_its_pair(tmp_path: Path) -> None:
    from fieldround.run.usable import with_lost, with_views_left, with_views_told

    pairs = (Pair("P1", ("a.jpg", "b.jpg", "c.jpg"), 1.5), Pair("P2", ("d.jpg", "e.jpg"), 1.5))
    before = a_round(tmp_path, "abcde", pairs)
    after = with_views_left(with_lost(before, {"c.jpg": "c is broken", "e.jpg": "e is broken"}))
    assert [pair.photos for pair in after.pairs] == [("a.jpg", "b.jpg"), ("d.jpg", "e.jpg")]
    assert dict(after.lost_photos) == {"c.jpg": "c is broken", "e.jpg": "e is broken"}
    assert sorted(after.photos) == ["a.jpg", "b.jpg", "d.jpg"]
    rows = with_views_told(before, after, tuple(a_pair_row(pair) for pair in after.pairs))
    assert rows[0].reasons == ("c is broken; the pair goes on without it",)
    assert rows[1].reasons == ()
