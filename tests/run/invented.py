"""Invented rounds and results for the tests of the run; no figure in them is a measurement."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from pathlib import Path

from fieldround.rounds.model import Camera, Pair, Photo, Round, RoundObject, Settings
from fieldround.solve.results import ObjectResult, PairResult, RoundResult

CAMERA = Camera("crew phone", (400, 300), (310.0, 310.0), 1.0, (199.5, 149.5), 1.0)


def a_photo(name: str) -> Photo:
    return Photo(name, Path("photos") / name, (400, 300), 0, CAMERA.name, digest=name * 8)


def a_round(folder: Path, letters: str = "abcd", pairs: Iterable[Pair] = ()) -> Round:
    """A round with one photo a letter; without pairs given, they are taken two by two."""
    names = [f"{letter}.jpg" for letter in letters]
    two_by_two = [
        Pair(f"P{i // 2 + 1}", (names[i], names[i + 1]), 1.5) for i in range(0, len(names) - 1, 2)
    ]
    chosen = tuple(pairs) or tuple(two_by_two)
    objects = tuple(
        RoundObject(f"T{i + 1}", "pole", (pair.pair,)) for i, pair in enumerate(chosen)
    )
    return Round(
        folder=folder,
        settings=Settings(),
        cameras={CAMERA.name: CAMERA},
        photos={name: a_photo(name) for name in names},
        pairs=chosen,
        objects=objects,
        marks=(),
    )


def an_object(name: str, pair: str = "P1", **given: object) -> ObjectResult:
    whole = ObjectResult(
        object=name, kind="pole", label="", pair=pair, views=2, verdict="accept", reasons=(),
        diameter_m=0.3043, diameter_sd_m=0.0021, diameter_lo_m=0.3002, diameter_hi_m=0.3084,
    )  # fmt: skip
    return replace(whole, **given)  # type: ignore[arg-type]


def a_pair_row(pair: Pair, status: str = "solved", reasons: tuple[str, ...] = ()) -> PairResult:
    return PairResult(pair.pair, pair.photos, status, reasons)


def a_result(
    round_: Round, objects: Iterable[ObjectResult], pairs: Mapping[str, PairResult] | None = None
) -> RoundResult:
    rows = pairs or {}
    return RoundResult(
        round=round_,
        objects=tuple(objects),
        pairs=tuple(rows.get(pair.pair) or a_pair_row(pair) for pair in round_.pairs),
        readings=(),
        checks=(),
        cameras_found={},
        placement=None,
    )
