"""One pair solved again while its marks move, with the round's cameras held as the round found them.

In: where the round's adjustment left the pair (`HeldPair`), its marks of this moment. Out: a
`LiveAnswer`. Ties and their weights stay as they were found; what the other pairs and the cards say
of the cameras enters as one quadratic term, so that unchanged marks give the round's own figures.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from fieldround.place.baselines import GnssBaseline
from fieldround.rounds.model import Camera, Mark, Pair, Round
from fieldround.solve.adjust import Adjusted, adjust_round, shared_columns
from fieldround.solve.assemble import assemble_pair
from fieldround.solve.cameras import (
    CameraPriors,
    camera_priors,
    departures,
    free_values,
    values_moved,
)
from fieldround.solve.equations import inverse_scaled, solve_scaled
from fieldround.solve.normals import Reduced, cost_of, reduce_pair, ties_settled
from fieldround.solve.pairwise import PairStart, solve_alone, with_ends, without_objects
from fieldround.solve.problem import PairProblem
from fieldround.solve.rows import SolvedPair, solved_pair
from fieldround.solve.settling import PairFit, damped, drop_stray_limbs
from fieldround.solve.start import StartError
from fieldround.solve.start_objects import AxisStart, ball_start, cylinder_start, settled_sides
from fieldround.solve.state import PairState, make_layout, moved, ties_moved
from fieldround.vision.ties import Ties

ITERATIONS_MOST = 12
# A step that gains less than this (a hundredth of an sd) leaves an error of second order only.
SMALL_GAIN = 1e-4
# Marks moved so far that the adjustment no longer finds its way are started from nothing.
LOST_COST = 1e7


@dataclass(frozen=True)
class HeldPair:
    """Where an adjustment left one pair: all that a change of its marks needs.

    start   : the pair's start, its `fit` at the end of the adjustment
    values  : (m, 9) camera values of the round
    outside : (c, c) normal matrix that cards and other pairs put on the pair's cameras
    pull    : (c,) gradient of the same at `values`
    remarks : sentences about its cameras
    """

    start: PairStart
    values: np.ndarray
    outside: np.ndarray
    pull: np.ndarray
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True)
class LiveAnswer:
    """The pair's rows as of this moment, or why there are none.

    solved : None when the pair has no result; `reasons` then say why
    lost   : object -> sentence, for objects that are not solved in this pair
    held   : where this answer left the pair, for the next one
    """

    solved: SolvedPair | None
    lost: Mapping[str, str]
    reasons: tuple[str, ...] = ()
    held: HeldPair | None = None


def held_pair(
    start: PairStart, adjusted: Adjusted, index: int, remarks: Sequence[str] = ()
) -> HeldPair:
    """What stays of pair `index` of an adjustment."""
    fit = adjusted.fits[index]
    return HeldPair(
        start=replace(start, fit=fit),
        values=adjusted.values,
        outside=adjusted.outside[index],
        pull=-adjusted.reduced[index].gradient[fit.layout.own :],
        remarks=tuple(remarks),
    )


def live_answer(
    round_: Round,
    pair: Pair,
    ties: Ties | None,
    baseline: GnssBaseline | None,
    marks: Sequence[Mark],
    held: HeldPair | None,
    only: str | None = None,
) -> LiveAnswer:
    """Solve one pair with the marks of this moment.

    marks : winning marks in the pair's photos; others do no harm
    held  : of the last adjustment of the round or of the last answer, None when there was none
    only  : object whose figures are wanted, None for all
    """
    cards = [round_.cameras[name] for name in sorted(round_.cameras)]
    priors = camera_priors(cards)
    here = [mark for mark in marks if mark.photo in pair.photos]
    assembled = assemble_pair(round_, pair, cards, ties, baseline, here)
    problem, lost = assembled.problem, dict(assembled.lost)
    if not problem.objects:
        return LiveAnswer(None, lost, ("none of its objects has limbs marked in two photos",), held)
    if held is not None and _same_ties(held, problem):
        ended = _carried_on(problem, held, priors)
        if ended is not None:
            start, adjusted, newly_lost = ended
            lost.update(newly_lost)
            return _answered(
                round_, pair, cards, start, adjusted, here, held.remarks, lost, only, held
            )
    outcome = solve_alone(assembled, priors, () if ties is None else ties.notes)
    if not isinstance(outcome, PairStart):
        return LiveAnswer(None, lost, (outcome,), held)
    lost.update(outcome.lost)
    remarks: tuple[str, ...] = ()
    if held is None:
        adjusted = adjust_round([outcome.fit], outcome.values, priors)
    else:
        settled = _settled(outcome.fit, held, priors)
        remarks = held.remarks
        if settled is None:
            adjusted = adjust_round([outcome.fit], outcome.values, priors)
        else:
            adjusted = _adjusted(*settled, held, priors)
    return _answered(round_, pair, cards, outcome, adjusted, here, remarks, lost, only, held)


def _answered(
    round_: Round,
    pair: Pair,
    cards: Sequence[Camera],
    start: PairStart,
    adjusted: Adjusted,
    marks: Sequence[Mark],
    remarks: Sequence[str],
    lost: Mapping[str, str],
    only: str | None,
    before: HeldPair | None,
) -> LiveAnswer:
    solved = solved_pair(
        round_, pair, start, adjusted, 0, marks, remarks, only=None if only is None else {only}
    )
    after = held_pair(start, adjusted, 0, remarks)
    if before is not None:
        # The quadratic term stays the round's: it must not be taken anew at every step.
        after = replace(after, values=before.values, outside=before.outside, pull=before.pull)
    return LiveAnswer(solved, lost, (), after)


def _same_ties(held: HeldPair, problem: PairProblem) -> bool:
    was = held.start.fit.problem
    return (
        was.photos == problem.photos
        and was.lengths == problem.lengths
        and was.ties_px.shape == problem.ties_px.shape
        and np.array_equal(was.ties_px, problem.ties_px, equal_nan=True)
    )


def _carried_on(
    problem: PairProblem, held: HeldPair, priors: CameraPriors
) -> tuple[PairStart, Adjusted, dict[str, str]] | None:
    """The pair adjusted from where it was; None when it does not get there."""
    was = held.start.fit
    places = {thing.name: k for k, thing in enumerate(was.problem.objects)}
    starts: dict[int, AxisStart | int] = {}
    lost: dict[str, str] = {}
    for k, thing in enumerate(problem.objects):
        old = places.get(thing.name)
        if old is not None and was.problem.objects[old].is_ball == thing.is_ball:
            starts[k] = old
            continue
        try:
            begin = ball_start if thing.is_ball else cylinder_start
            arguments = (problem, held.values, was.state.rotations, was.state.stations)
            starts[k] = (
                begin(*arguments, k) if thing.is_ball else begin(*arguments, was.state.up, k)
            )
        except StartError as trouble:
            lost[thing.name] = str(trouble)
        except np.linalg.LinAlgError:
            return None
    if not starts:
        return None
    problem = without_objects(problem, [k for k in range(len(problem.objects)) if k not in starts])
    problem = replace(problem, ties_sd_px=was.problem.ties_sd_px, pose_priors=was.problem.pose_priors)
    state = _state_of(problem, [starts[k] for k in sorted(starts)], was.state)
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        problem, notes = settled_sides(problem, held.values, state)
        fresh = with_ends(problem, held.values, state)
        known = was.problem.objects
        base, top = fresh.base.copy(), fresh.top.copy()
        for i, k in enumerate(sorted(starts)):
            old = starts[k]
            if isinstance(old, int):
                thing = problem.objects[i]
                if known[old].has_base == thing.has_base:
                    base[i] = was.state.base[old]
                if known[old].has_top == thing.has_top:
                    top[i] = was.state.top[old]
        state = replace(state, base=base, top=top)
        settled = _settled(
            PairFit(problem, make_layout(problem), state, was.tie_keep), held, priors
        )
    if settled is None:
        return None
    start = replace(held.start, fit=settled[0], object_remarks=notes, lost=lost)
    return start, _adjusted(*settled, held, priors), lost


def _state_of(
    problem: PairProblem, starts: Sequence[AxisStart | int], was: PairState
) -> PairState:
    """The state before, with the objects of this problem; new ones at their start."""
    axes, points, radii, tapers = [], [], [], []
    for thing, start in zip(problem.objects, starts, strict=True):
        if isinstance(start, int):
            axes.append(was.axes[start])
            points.append(was.points[start])
            radii.append(float(was.radii[start]))
            tapers.append(float(was.tapers[start]))
        else:
            axes.append(start.axis)
            points.append(start.point)
            radii.append(float(start.radius))
            tapers.append(thing.taper)
    k = len(axes)
    return replace(
        was,
        axes=np.array(axes).reshape(k, 3),
        points=np.array(points).reshape(k, 3),
        radii=np.array(radii),
        tapers=np.array(tapers),
        base=np.zeros(k),
        top=np.zeros(k),
    )


def _settled(
    fit: PairFit, held: HeldPair, priors: CameraPriors
) -> tuple[PairFit, np.ndarray, bool] | None:
    """Adjusted, stray limb marks set aside, adjusted again; None when it ran away."""
    found = _adjust(fit, held.values, held, priors)
    if found is None:
        return None
    fit, values, converged = found
    dropped = fit.limbs_dropped
    fit = drop_stray_limbs(fit, values)
    if fit.limbs_dropped != dropped:
        found = _adjust(fit, values, held, priors)
        if found is None:
            return None
        fit, values, converged = found
    ranges = np.linalg.norm(fit.state.points, axis=1)
    if not ((fit.state.radii > 0) & (fit.state.radii < ranges)).all():
        return None
    return fit, values, converged


def _adjust(
    fit: PairFit, values: np.ndarray, held: HeldPair, priors: CameraPriors
) -> tuple[PairFit, np.ndarray, bool] | None:
    """Gauss-Newton with the quadratic camera term; None when no step lowers the cost."""
    problem, layout = fit.problem, fit.layout
    ids = list(layout.camera_ids)
    used = _used(fit, priors)
    grid = np.ix_(used, used)
    state, values = fit.state, values.copy()
    damping = 0.0
    for _ in range(ITERATIONS_MOST):
        cards = values[problem.cameras]
        reduced = reduce_pair(problem, layout, state, cards, fit.tie_keep, None)
        part, slope = _outside(held, values, ids)
        normal, gradient = reduced.normal.copy(), reduced.gradient.copy()
        normal[layout.own :, layout.own :] += held.outside
        gradient[layout.own :] += slope
        cost = reduced.cost + part
        if not np.isfinite(cost) or cost > LOST_COST:
            return None
        while True:
            step = np.zeros(layout.size)
            try:
                step[used] = -solve_scaled(damped(normal[grid], damping), gradient[used])
            except np.linalg.LinAlgError:
                return None
            gain = -0.5 * float(gradient @ step)
            tie_steps = reduced.tie_step - reduced.tie_back @ step[reduced.columns]
            trial = ties_moved(moved(state, layout, step), tie_steps)
            trial_values = values.copy()
            trial_values[ids] = values_moved(values[ids], step[layout.own :].reshape(-1, 9))
            cards = trial_values[problem.cameras]
            trial = ties_settled(problem, layout, trial, cards, fit.tie_keep)
            if abs(gain) < SMALL_GAIN:
                return replace(fit, state=trial), trial_values, True
            trial_cost = cost_of(problem, layout, trial, cards, fit.tie_keep, None)[0]
            trial_cost += _outside(held, trial_values, ids)[0]
            if np.isfinite(trial_cost) and trial_cost <= cost * (1.0 + 1e-9):
                state, values = trial, trial_values
                damping *= 0.1
                break
            damping = max(damping, 1e-6) * 100.0
            if damping > 1e3:
                return None
    return replace(fit, state=state), values, False


def _used(fit: PairFit, priors: CameraPriors) -> np.ndarray:
    """Columns of the pair that are adjusted, (size,) bool."""
    free = free_values(priors).ravel()[shared_columns(fit.layout)]
    return np.concatenate([np.ones(fit.layout.own, dtype=bool), free])


def _outside(held: HeldPair, values: np.ndarray, ids: list[int]) -> tuple[float, np.ndarray]:
    """Cost and gradient (c,) of what cards and other pairs say of the cameras."""
    there = CameraPriors(held.values[ids], np.ones((len(ids), 9)), np.zeros(len(ids), dtype=bool))
    off = departures(there, values[ids]).ravel()
    slope = held.outside @ off
    return float(held.pull @ off + 0.5 * off @ slope), held.pull + slope


def _adjusted(
    fit: PairFit, values: np.ndarray, converged: bool, held: HeldPair, priors: CameraPriors
) -> Adjusted:
    """The pair as an adjustment of one, with the round's knowledge of its cameras."""
    layout = fit.layout
    reduced: Reduced = reduce_pair(
        fit.problem, layout, fit.state, values[fit.problem.cameras], fit.tie_keep, None
    )
    normal = reduced.normal.copy()
    normal[layout.own :, layout.own :] += held.outside
    used = _used(fit, priors)
    covariance = np.zeros_like(normal)
    covariance[np.ix_(used, used)] = inverse_scaled(normal[np.ix_(used, used)])
    return Adjusted(
        (fit,), values, held.outside, (covariance,), (reduced,), (held.outside,), (converged,)
    )
