"""The whole round solved: every pair assembled, started, adjusted together, judged.

In: a `Round`, its ties, GNSS baselines, marks found in the pictures. Out: `RoundSolution`.
A pair that cannot be solved never stops the others: its objects get `no result` and the reason.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.place.baselines import GnssBaseline
from fieldround.place.frames import PairFrame
from fieldround.rounds.model import Camera, Mark, Pair, Round
from fieldround.solve.adjust import Adjusted, adjust_round
from fieldround.solve.assemble import assemble_pair, winning_marks
from fieldround.solve.cameras import CameraPriors, camera_covariance, camera_priors, found_card
from fieldround.solve.combine import combined_objects
from fieldround.solve.derive import pair_frame
from fieldround.solve.pairwise import PairStart, common_start, solve_alone
from fieldround.solve.results import ObjectResult, PairResult, Reading
from fieldround.solve.rows import SolvedPair, solved_pair
from fieldround.solve.sightings import with_sightings
from fieldround.solve.state import CAMERA_VALUES
from fieldround.vision.ties import Ties

# A found focal length this far from its EXIF is told; makers' own rules differ by 4 %.
FOCAL_CONTRADICTION = 0.06


@dataclass(frozen=True)
class RoundSolution:
    """What the solver knows of a round before it is placed on the map.

    frames : one a solved pair
    leans  : object -> (pair, direction of its lean in that pair's levelled frame, degrees
             clockwise from ahead)
    """

    objects: tuple[ObjectResult, ...]
    pairs: tuple[PairResult, ...]
    readings: tuple[Reading, ...]
    cameras_found: Mapping[str, Camera]
    frames: tuple[PairFrame, ...]
    leans: Mapping[str, tuple[str, float]]


def solve_round(
    round_: Round,
    ties: Mapping[str, Ties],
    gnss_baselines: Mapping[str, GnssBaseline],
    found_marks: Sequence[Mark] = (),
    draws: int | None = None,
) -> RoundSolution:
    """Solve every pair of a round and judge every object.

    ties, gnss_baselines : by pair, missing where there are none
    found_marks : marks found in the pictures; hand marks win over them
    draws       : number of Monte Carlo draws, None for as many as the linear result needs
    """
    cards = [round_.cameras[name] for name in sorted(round_.cameras)]
    priors = camera_priors(cards)
    marks = winning_marks(round_, found_marks)
    starts: list[PairStart] = []
    refused: dict[str, PairResult] = {}
    lost: dict[str, Mapping[str, str]] = {}
    for pair in round_.pairs:
        missing = [name for name in pair.photos if name not in round_.photos]
        if missing:
            why = [round_.lost_photos.get(name, f"photo {name} was not read") for name in missing]
            refused[pair.pair] = _refused(pair, why)
            continue
        baseline = gnss_baselines.get(pair.pair)
        assembled = assemble_pair(round_, pair, cards, ties.get(pair.pair), baseline, marks)
        outcome = solve_alone(assembled, priors, _advice(pair, ties, baseline))
        lost[pair.pair] = assembled.lost
        if isinstance(outcome, PairStart):
            starts.append(outcome)
            lost[pair.pair] = {**assembled.lost, **outcome.lost}
        else:
            refused[pair.pair] = _refused(pair, [outcome], assembled.ties_found)
    # A pair whose pose is assumed, not observed, has nothing to teach the round's cameras.
    observed = [s for s in starts if s.orientation_from == "ties"]
    together, values, strangers = common_start(observed, priors)
    strangers += [s for s in starts if s.orientation_from != "ties"]
    adjusted = adjust_round([start.fit for start in together], values, priors)
    ended = {s.fit.problem.pair: (s, adjusted, i) for i, s in enumerate(together)}
    for s in strangers:
        ended[s.fit.problem.pair] = (s, adjust_round([s.fit], s.values, priors), 0)

    covariance = camera_covariance(adjusted.camera_normal, priors)
    remarks = _camera_remarks(cards, priors, adjusted)
    solved: dict[str, SolvedPair] = {}
    frames: list[PairFrame] = []
    for pair in round_.pairs:
        if pair.pair not in ended:
            continue
        start, end, index = ended[pair.pair]
        told = [remarks[i] for i in start.fit.layout.camera_ids if i in remarks]
        solved[pair.pair] = solved_pair(round_, pair, start, end, index, marks, told, draws)
        frames.append(with_sightings(pair_frame(end, index), end, index, round_, marks))
    objects, chosen = combined_objects(round_, solved, refused, lost, covariance)
    leans = {
        name: (seen.result.pair, seen.finding.lean_frame_deg)
        for name, seen in chosen.items()
        if seen.finding.lean_frame_deg is not None
    }
    return RoundSolution(
        objects=objects,
        pairs=tuple(
            solved[p.pair].row if p.pair in solved else refused[p.pair] for p in round_.pairs
        ),
        readings=_readings(round_, solved),
        cameras_found=_found_cards(cards, adjusted, covariance),
        frames=tuple(frames),
        leans=leans,
    )


def _advice(pair: Pair, ties: Mapping[str, Ties], baseline: GnssBaseline | None) -> list[str]:
    out = list(ties[pair.pair].notes) if pair.pair in ties else []
    if pair.tape_m is None and baseline is not None:
        out += list(baseline.reasons)
    return out


def _refused(pair: Pair, reasons: Sequence[str], ties_found: int = 0) -> PairResult:
    return PairResult(
        pair=pair.pair,
        photos=pair.photos,
        status="no result",
        reasons=tuple(reasons),
        ties_found=ties_found,
        tape_m=pair.tape_m,
        extra=pair.extra,
    )


def _camera_remarks(
    cards: Sequence[Camera], priors: CameraPriors, adjusted: Adjusted
) -> dict[int, str]:
    """Sentences about cameras whose found focal length contradicts their EXIF, by index."""
    out = {}
    for i, card in enumerate(cards):
        ratio = float(adjusted.values[i, 0] / priors.values[i, 0])
        if card.source == "exif" and abs(np.log(ratio)) > FOCAL_CONTRADICTION:
            out[i] = (
                f"the focal length found is {100 * (ratio - 1):+.0f} % off what the EXIF of "
                f"camera {card.name} says"
            )
    return out


def _readings(round_: Round, solved: Mapping[str, SolvedPair]) -> tuple[Reading, ...]:
    out = []
    for pair in round_.pairs:
        for seen in solved[pair.pair].objects if pair.pair in solved else ():
            found = seen.finding
            for view, diameter, sd in zip(
                found.reading_views, found.readings_m, found.reading_sd_m, strict=True
            ):
                out.append(
                    Reading(
                        found.name, pair.pair, pair.photos[view], diameter, sd, found.ranges_m[view]
                    )
                )
    return tuple(out)


def _found_cards(
    cards: Sequence[Camera], adjusted: Adjusted, covariance: np.ndarray
) -> dict[str, Camera]:
    out = {}
    for i, card in enumerate(cards):
        part = slice(CAMERA_VALUES * i, CAMERA_VALUES * (i + 1))
        out[card.name] = found_card(card, adjusted.values[i], covariance[part, part])
    return out
