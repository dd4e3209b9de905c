"""The adjustment of the round, kept going when one pair breaks it.

In: what `solve_round` takes. Out: its `RoundSolution`, where a pair that raised has status
'failed' and its objects `no result`, each with the reason.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from fieldround.place.baselines import GnssBaseline
from fieldround.rounds.model import Mark, Pair, Round
from fieldround.solve.results import ObjectResult, PairResult
from fieldround.solve.rounds import RoundSolution, solve_round
from fieldround.vision.ties import Ties

# When every pair ends with one of these, it is the program that is broken and not the round.
PROGRAM_ERRORS = (NameError, ImportError, AttributeError, TypeError, NotImplementedError)


def solve_what_can(
    round_: Round,
    ties: Mapping[str, Ties],
    baselines: Mapping[str, GnssBaseline],
    found_marks: Sequence[Mark],
    draws: int | None,
) -> RoundSolution:
    """Solve the round together; when that raises, without the pairs that raise by themselves.

    raises : the pairs' own exception when all of them end with one of `PROGRAM_ERRORS`
    """

    def solved(pairs: Sequence[Pair]) -> RoundSolution:
        part = replace(round_, pairs=tuple(pairs))
        return solve_round(part, ties, baselines, tuple(found_marks), draws)

    try:
        return solved(round_.pairs)
    except Exception as trouble:
        together = _sentence(trouble)
    alone: dict[str, RoundSolution] = {}
    broken: dict[str, str] = {}
    wrong: list[Exception] = []
    for pair in round_.pairs:
        try:
            alone[pair.pair] = solved([pair])
        except Exception as trouble:
            broken[pair.pair] = _sentence(trouble)
            wrong.append(trouble)
    if wrong and not alone and all(isinstance(one, PROGRAM_ERRORS) for one in wrong):
        raise wrong[0]
    rest = [pair for pair in round_.pairs if pair.pair in alone]
    if not rest:
        solution = RoundSolution((), (), (), dict(round_.cameras), (), {})
    else:
        try:
            solution = solved(rest)
        except Exception as trouble:
            together = _sentence(trouble)
            solution = _side_by_side(round_, rest, alone, together)
    return _with_broken(round_, solution, broken)


def _sentence(trouble: Exception) -> str:
    text = " ".join(str(trouble).split())
    return f"the adjustment failed ({type(trouble).__name__}{': ' if text else ''}{text})"


def _side_by_side(
    round_: Round, pairs: Sequence[Pair], alone: Mapping[str, RoundSolution], why: str
) -> RoundSolution:
    """Pairs that solve one by one but not together: each keeps its own cameras and result."""
    remark = f"each pair was adjusted by itself: together {why}"
    objects: dict[str, ObjectResult] = {}
    for pair in pairs:
        for thing in alone[pair.pair].objects:
            if _better(thing, objects.get(thing.object)):
                objects[thing.object] = replace(thing, reasons=(*thing.reasons, remark))
    parts = [alone[pair.pair] for pair in pairs]
    cameras = dict(round_.cameras)
    for part in reversed(parts):
        cameras.update(part.cameras_found)
    return RoundSolution(
        objects=tuple(objects[t.object] for t in round_.objects if t.object in objects),
        pairs=tuple(
            replace(row, reasons=(*row.reasons, remark)) for part in parts for row in part.pairs
        ),
        readings=tuple(reading for part in parts for reading in part.readings),
        cameras_found=cameras,
        frames=tuple(frame for part in parts for frame in part.frames),
        leans={
            name: lean
            for part in reversed(parts)
            for name, lean in part.leans.items()
            if name in objects and objects[name].pair == lean[0]
        },
    )


def _better(thing: ObjectResult, than: ObjectResult | None) -> bool:
    def rank(one: ObjectResult) -> tuple[int, float]:
        order = {"accept": 0, "remeasure": 1}.get(one.verdict, 2)
        return order, one.diameter_sd_m if one.diameter_sd_m is not None else float("inf")

    return than is None or rank(thing) < rank(than)


def _with_broken(
    round_: Round, solution: RoundSolution, broken: Mapping[str, str]
) -> RoundSolution:
    """The solution with rows for the broken pairs and reasons for the objects they alone see."""
    rows = {row.pair: row for row in solution.pairs}
    found = {thing.object: thing for thing in solution.objects}
    objects = []
    for thing in round_.objects:
        result = found.get(thing.object)
        if result is not None and result.verdict != "no result":
            objects.append(result)
            continue
        mine = [p for p in round_.pairs if p.pair in thing.pairs]
        reasons = [f"pair {p.pair}: {broken[p.pair]}" for p in mine if p.pair in broken]
        # With a broken pair left out, the solver may think that the object is in no pair at all.
        said = () if result is None else result.reasons
        kept = [reason for reason in said if not reasons or reason.startswith("pair ")]
        objects.append(
            ObjectResult(
                object=thing.object,
                kind=thing.kind,
                label=thing.label,
                pair=" ".join(p.pair for p in mine),
                views=0,
                verdict="no result",
                reasons=(*reasons, *kept) or ("it is marked in no pair",),
                photo_a=mine[0].photos[0] if mine else None,
                photo_b=mine[0].photos[1] if mine else None,
                extra=thing.extra,
            )
        )
    return replace(
        solution,
        objects=tuple(objects),
        pairs=tuple(rows.get(p.pair) or _failed(p, broken[p.pair]) for p in round_.pairs),
    )


def _failed(pair: Pair, reason: str) -> PairResult:
    return PairResult(
        pair=pair.pair,
        photos=pair.photos,
        status="failed",
        reasons=(reason,),
        tape_m=pair.tape_m,
        extra=pair.extra,
    )
