"""A round's whole work, step by step.

In: the round's folder and the folder of results. Out: a `RoundResult`, written under out/.
One photo or pair that fails never stops the others: its reason is in the results.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from pathlib import Path
from time import perf_counter
from typing import Any

from fieldround.checks.comparison import compare
from fieldround.deliver.write import Extras, write_results
from fieldround.place.baselines import GnssBaseline, gnss_baselines
from fieldround.place.frames import Placement
from fieldround.place.placing import place_round
from fieldround.rounds.errors import RoundError
from fieldround.rounds.load import load_round
from fieldround.rounds.model import Mark, Round
from fieldround.run.pictures_held import PicturesHeld
from fieldround.run.progress import Progress
from fieldround.run.solving import solve_what_can
from fieldround.run.tying import tie_round
from fieldround.run.usable import with_lost, with_troubles, with_views_left, with_views_told
from fieldround.run.versions import versions
from fieldround.solve.results import ObjectResult, RoundResult
from fieldround.solve.rounds import RoundSolution

# A lean below this many of its sds has no direction worth a bearing.
LEAN_SEEN_SDS = 2.0


@dataclass(frozen=True)
class RunOptions:
    """What a person may ask of a run.

    draws         : Monte Carlo draws, None for as many as the linear result needs
    fresh         : find the ties again instead of taking those of the run before
    extras        : what is written beyond the usual files
    postgis       : address of a database that gets the layers too, None for none
    postgis_mode  : 'replace' or 'append', see `deliver.postgis.write_postgis`
    """

    draws: int | None = None
    fresh: bool = False
    extras: Extras = field(default_factory=Extras)
    postgis: str | None = None
    postgis_mode: str = "replace"


@dataclass
class _Seconds:
    """Seconds by step; they go into run.json and nowhere else."""

    by_step: dict[str, float] = field(default_factory=dict)

    @contextmanager
    def of(self, step: str) -> Iterator[None]:
        began = perf_counter()
        yield
        self.by_step[step] = round(perf_counter() - began, 3)


def run_round(
    folder: Path, out_dir: Path, progress: Progress, options: RunOptions | None = None
) -> RoundResult:
    """Read, tie, solve, place, check and write a round.

    raises : SheetsError before anything is written when the sheets are wrong; RoundError when
             the results cannot be written
    """
    options = options or RunOptions()
    seconds = _Seconds()
    notes: list[str] = []
    with seconds.of("read"):
        progress.begin("read", 1)
        written = load_round(folder)
        if out_dir.exists() and not out_dir.is_dir():
            raise RoundError(f"{out_dir} is a file; the results need a folder of this name")
        progress.done(_contents(written))
    pictures = PicturesHeld(written)
    with seconds.of("ties"):
        progress.begin("ties", len(written.pairs))
        tied = tie_round(
            with_views_left(written), pictures, out_dir / "cache", options.fresh, progress
        )
    round_ = with_views_left(with_lost(written, tied.lost))
    for sentence in round_.lost_photos.values():
        progress.say(sentence)
    with seconds.of("solve"):
        progress.begin("solve", 1)
        baselines = _baselines(round_, notes)
        solution = solve_what_can(round_, tied.ties, baselines, _found_marks(), options.draws)
        progress.done(f"pairs solved: {len(solution.frames)} of {len(round_.pairs)}")
    with seconds.of("place"):
        progress.begin("place", 1)
        placement = _placement(round_, solution, baselines, notes)
        progress.done("no position known" if placement is None else placement.crs_name)
    result = RoundResult(
        round=replace(round_, notes=(*round_.notes, *notes)),
        objects=with_headings(solution, placement),
        pairs=with_troubles(with_views_told(written, round_, solution.pairs), tied.troubles),
        readings=solution.readings,
        checks=compare(solution.objects, round_.checks),
        cameras_found=solution.cameras_found,
        placement=placement,
        run_facts=_facts(options, seconds),
    )
    progress.begin("write", 1 if options.postgis is None else 2)
    write_results(result, out_dir, pictures, options.extras)
    progress.done(str(out_dir))
    if options.postgis is not None:
        rows = _into_database(result, out_dir, options.postgis, options.postgis_mode)
        progress.done(f"{rows} rows in the database")
    return result


def _into_database(result: RoundResult, out_dir: Path, address: str, mode: str) -> int:
    """Write the layers into a database; returns the number of rows."""
    from fieldround.deliver.layers import layers_of
    from fieldround.deliver.postgis import write_postgis

    round_ = result.round
    name = round_.settings.title or round_.folder.resolve().name
    epsg = None if result.placement is None else result.placement.epsg
    return sum(write_postgis(address, layers_of(result, out_dir), name, epsg, mode=mode).values())


def _contents(round_: Round) -> str:
    return (
        f"pairs {len(round_.pairs)}, objects {len(round_.objects)}, photos {len(round_.photos)}, "
        f"marks {len(round_.marks)}"
    )


def _found_marks() -> tuple[Mark, ...]:
    """Limbs found in the pictures join the hand marks here; so far only hand marks are used."""
    return ()


def _baselines(round_: Round, notes: list[str]) -> Mapping[str, GnssBaseline]:
    try:
        return gnss_baselines(round_)
    except Exception as trouble:
        notes.append(f"GNSS baselines could not be made ({_told(trouble)})")
        return {}


def _placement(
    round_: Round,
    solution: RoundSolution,
    baselines: Mapping[str, GnssBaseline],
    notes: list[str],
) -> Placement | None:
    try:
        return place_round(round_, solution.frames, baselines)
    except Exception as trouble:
        notes.append(f"the round could not be placed on the map ({_told(trouble)})")
        return None


def _told(trouble: Exception) -> str:
    return f"{type(trouble).__name__}: {' '.join(str(trouble).split())}"


def with_headings(
    solution: RoundSolution, placement: Placement | None
) -> tuple[ObjectResult, ...]:
    """The objects with what only the heading of their pair can tell: the bearing of the lean."""
    if placement is None:
        return solution.objects
    return tuple(_headed(thing, solution, placement) for thing in solution.objects)


def _headed(thing: ObjectResult, solution: RoundSolution, placement: Placement) -> ObjectResult:
    pair, lean_frame_deg = solution.leans.get(thing.object, (thing.pair, None))
    placed = placement.pairs.get(pair)
    if placed is None:
        return thing
    lean_to = None
    seen = (
        thing.lean_deg is not None
        and thing.lean_sd_deg is not None
        and thing.lean_deg > LEAN_SEEN_SDS * thing.lean_sd_deg
    )
    if seen and placed.heading_deg is not None and lean_frame_deg is not None:
        lean_to = (placed.heading_deg + lean_frame_deg) % 360.0
    return replace(thing, lean_to_deg=lean_to, heading_from=placed.heading_from)


def _facts(options: RunOptions, seconds: _Seconds) -> dict[str, Any]:
    return {
        "versions": versions(),
        "options": {"draws": options.draws, "fresh": options.fresh},
        "seconds": seconds.by_step,
    }
