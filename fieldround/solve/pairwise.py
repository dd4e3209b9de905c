"""Each pair solved by itself, and the common start of the pairs that share cameras.

In: an assembled pair and the camera priors. Out: a `PairStart` (the pair at its own minimum with
its own copy of the cameras), or the sentence that says why there is none.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from fieldround.solve.adjust import eliminated, shared_columns
from fieldround.solve.assemble import Assembled
from fieldround.solve.cameras import (
    CameraPriors,
    departures,
    free_values,
    prior_terms,
    values_moved,
)
from fieldround.solve.equations import solve_scaled
from fieldround.solve.fallbacks import parallel_poses
from fieldround.solve.normals import cost_of, reduce_pair
from fieldround.solve.problem import Marks, PairProblem
from fieldround.solve.settling import PairFit, settle_pair, tie_misfit_px
from fieldround.solve.start import (
    StartError,
    camera_rays,
    likely_values,
    poses_from_ties,
    scaled,
    triangulated,
    vertical_start,
)
from fieldround.solve.start_objects import ball_start, cylinder_start, settled_sides
from fieldround.solve.state import CAMERA_VALUES, PairState

# Another pose that fits the ties within this cost of the best one leaves the answer open.
COST_APART = 8.0
# Squared departure of one pair's cameras from the round's, in sds, beyond which it stays alone.
STRANGER_LIMIT = 60.0
ROBUST_COMPARE = 2.0
# Further than any photo shows a round thing that could be sized.
RANGE_MOST_M = 10_000.0
# Ties that fit no better than this are not ties.
TIE_SD_MOST_PX = 15.0
RAN_AWAY = (
    "the adjustment ran away: the marks contradict each other, or the baseline is far too short "
    "for the distance"
)


@dataclass(frozen=True)
class PairStart:
    """One pair at its own minimum.

    values   : (m, 9) camera values as this pair alone finds them
    lost     : object -> sentence, for objects that had to be left out
    remarks, spoilers : sentences for all objects of the pair; object_remarks : by object
    """

    fit: PairFit
    values: np.ndarray
    converged: bool
    orientation_from: str
    ties_found: int
    lost: dict[str, str]
    remarks: tuple[str, ...] = ()
    spoilers: tuple[str, ...] = ()
    object_remarks: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True)
class _Attempt:
    fit: PairFit
    values: np.ndarray
    converged: bool
    cost: float
    lost: dict[str, str]
    object_remarks: tuple[tuple[str, str], ...]


def solve_alone(
    assembled: Assembled, priors: CameraPriors, advice: Sequence[str] = ()
) -> PairStart | str:
    """Solve one pair with its own copy of its cameras.

    advice  : sentences about ties and baseline, told when there is no result
    returns : `PairStart`, or a sentence that says why the pair has no result
    """
    problem = assembled.problem
    if not problem.objects:
        return "none of its objects has limbs marked in two photos"
    orientation = "ties"
    values = likely_values(problem, priors)
    try:
        rotations, stations, others = poses_from_ties(problem, values)
    except StartError as trouble:
        if len(problem.photos) > 2:
            return _with_advice(str(trouble), advice)
        orientation = "parallel cameras"
        problem, rotations, stations = parallel_poses(problem, values)
        others = []
    poses = [(rotations, stations)]
    for rotation, direction in others:
        turned, moved = rotations.copy(), stations.copy()
        turned[1], moved[1] = rotation, direction
        poses.append((turned, moved))
    attempts, troubles = [], []
    for turned, placed in poses:
        try:
            # A start that runs away overflows before it is refused.
            with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
                attempts.append(_attempt(problem, priors, values, turned, placed))
        except (StartError, np.linalg.LinAlgError) as trouble:
            troubles.append(str(trouble))
    if not attempts:
        return _with_advice(troubles[0] if troubles else "the adjustment failed", advice)
    attempts.sort(key=lambda attempt: attempt.cost)
    best = attempts[0]
    spoilers = []
    if len(attempts) > 1 and attempts[1].cost - best.cost < COST_APART:
        first, second = (a.fit.state.radii[0] for a in (best, attempts[1]))
        if abs(first - second) > 0.01 * first:
            spoilers.append(
                "the ties lie in one plane or too far away: two positions of the second camera "
                "explain them equally well; add ties nearer and at other depths"
            )
    remarks: tuple[str, ...] = ()
    if orientation != "ties":
        remarks = (
            f"only {assembled.ties_found} ties: the cameras were taken as parallel, which is "
            "seldom good enough; mark at least 12 ties by hand",
        )
    return PairStart(
        best.fit,
        best.values,
        best.converged,
        orientation,
        assembled.ties_found,
        best.lost,
        remarks,
        tuple(spoilers),
        best.object_remarks,
    )


def _with_advice(sentence: str, advice: Sequence[str]) -> str:
    return "; ".join([sentence, *advice])


def _attempt(
    problem: PairProblem,
    priors: CameraPriors,
    values: np.ndarray,
    rotations: np.ndarray,
    stations: np.ndarray,
) -> _Attempt:
    """Start from given poses (A to B of any length) and camera values, and adjust."""
    up = vertical_start(problem, rotations)
    starts, lost = {}, {}
    for k, thing in enumerate(problem.objects):
        try:
            if thing.is_ball:
                starts[k] = ball_start(problem, values, rotations, stations, k)
            else:
                starts[k] = cylinder_start(problem, values, rotations, stations, up, k)
        except StartError as trouble:
            lost[thing.name] = str(trouble)
    if not starts:
        raise StartError("; ".join(f"{name}: {why}" for name, why in lost.items()))
    metres = scaled(problem, stations, {k: s.radius for k, s in starts.items()})
    problem = without_objects(problem, [k for k in range(len(problem.objects)) if k not in starts])
    kept = [starts[k] for k in sorted(starts)]
    stations = stations * metres
    directions = np.stack(
        [camera_rays(problem, values, problem.ties_px[:, v], v) for v in range(problem.views)],
        axis=1,
    )
    ties, rho = triangulated(directions, rotations, stations)
    k = len(kept)
    state = PairState(
        rotations=rotations,
        stations=stations,
        up=up,
        ties=ties,
        ties_rho=rho,
        axes=np.array([s.axis for s in kept]).reshape(k, 3),
        points=np.array([s.point for s in kept]).reshape(k, 3) * metres,
        radii=np.array([s.radius for s in kept]) * metres,
        tapers=np.array([thing.taper for thing in problem.objects]),
        base=np.zeros(k),
        top=np.zeros(k),
    )
    problem, notes = settled_sides(problem, values, state)
    state = _with_ends(problem, values, state)
    fit, own, converged = settle_pair(problem, state, values, priors)
    everything = np.ones(len(ties))
    stated = replace(
        fit.problem, ties_sd_px=problem.ties_sd_px, limbs=problem.limbs, outlines=problem.outlines
    )
    cost, _ = cost_of(
        stated, fit.layout, fit.state, own[problem.cameras], everything, ROBUST_COMPARE
    )
    settled = np.concatenate(
        [np.ravel(part) for part in vars(fit.state).values()] + [np.ravel(own)]
    )
    if not np.isfinite(settled).all():
        raise StartError(RAN_AWAY)
    if len(ties) and tie_misfit_px(fit, own) > TIE_SD_MOST_PX:
        raise StartError(
            "its ties agree on no pose of the cameras: too many are wrong; mark some by hand"
        )
    ranges = np.linalg.norm(fit.state.points, axis=1)
    sound = (fit.state.radii > 0) & (fit.state.radii < ranges) & (ranges < RANGE_MOST_M)
    if not np.isfinite(cost) or not sound.all():
        raise StartError(RAN_AWAY)
    return _Attempt(fit, own, converged, cost, lost, notes)


def _with_ends(problem: PairProblem, values: np.ndarray, state: PairState) -> PairState:
    """Start heights of base and top: the foot of each mark's ray on the axis."""
    from fieldround.geometry.touching import axis_distance

    base, top = state.base.copy(), state.top.copy()
    for k, thing in enumerate(problem.objects):
        for which, heights in ((0.0, base), (1.0, top)):
            feet = []
            for view in range(problem.views):
                ends = problem.ends
                mine = (ends.object == k) & (ends.view == view) & (ends.side == which)
                if not mine.any():
                    continue
                d = camera_rays(problem, values, ends.px[mine], view) @ state.rotations[view]
                offset = np.broadcast_to(state.points[k] - state.stations[view], d.shape)
                axis = np.broadcast_to(state.axes[k], d.shape)
                feet.append(float(axis_distance(d, axis, offset).foot.mean()))
            if feet:
                heights[k] = float(np.mean(feet))
        if thing.ground_guess:
            base[k] = -1.3
    return replace(state, base=base, top=top)


def without_objects(problem: PairProblem, drop: Sequence[int]) -> PairProblem:
    """The problem without some objects and their marks."""
    if not drop:
        return problem
    keep = [k for k in range(len(problem.objects)) if k not in set(drop)]
    renumber = np.full(len(problem.objects), -1)
    renumber[keep] = np.arange(len(keep))

    def thinned(marks: Marks) -> Marks:
        kept = marks.only(renumber[marks.object] >= 0) if len(marks) else marks
        return replace(kept, object=renumber[kept.object]) if len(kept) else kept

    return replace(
        problem,
        objects=tuple(problem.objects[k] for k in keep),
        limbs=thinned(problem.limbs),
        outlines=thinned(problem.outlines),
        ends=thinned(problem.ends),
    )


def common_start(
    starts: Sequence[PairStart], priors: CameraPriors
) -> tuple[list[PairStart], np.ndarray, list[PairStart]]:
    """Camera values on which the pairs agree, and the pairs that agree on none.

    The weighted mean of the pairs' own values is the round's minimum to first order. A pair whose
    own values lie far from it, in sds, is a stranger: it would spoil the others' cameras.
    returns : pairs to adjust together, their start values (m, 9), pairs to adjust alone
    """
    together = list(starts)
    strangers: list[PairStart] = []
    information = {id(s): _camera_information(s) for s in starts}
    while True:
        values, _ = _weighted_values(together, information, priors)
        if len(together) < 3:
            return together, values, strangers
        worst, worst_size = None, STRANGER_LIMIT
        for s in together:
            rest = [other for other in together if other is not s]
            ids = list(s.fit.layout.camera_ids)
            if not any(set(ids) & set(o.fit.layout.camera_ids) for o in rest):
                continue
            without, known = _weighted_values(rest, information, priors)
            own = CameraPriors(without[ids], priors.sds[ids], priors.heavy[ids])
            columns, free = shared_columns(s.fit.layout), free_values(own).ravel()
            departure = departures(own, s.values[ids]).ravel()[free]
            size = _squared_sds(
                departure,
                information[id(s)][np.ix_(free, free)],
                known[np.ix_(columns[free], columns[free])],
            )
            if size > worst_size:
                worst, worst_size = s, size
        if worst is None:
            return together, values, strangers
        together = [s for s in together if s is not worst]
        strangers.append(
            replace(
                worst,
                spoilers=(
                    *worst.spoilers,
                    "its ties ask for another camera than the other pairs do: a zoomed or "
                    "edited photo, or wrong ties",
                ),
            )
        )


def _camera_information(start: PairStart) -> np.ndarray:
    """What a pair's own observations say of its cameras, as a normal matrix (c, c)."""
    fit = start.fit
    reduced = reduce_pair(
        fit.problem, fit.layout, fit.state, start.values[fit.problem.cameras], fit.tie_keep, None
    )
    return eliminated(fit.layout, reduced, 0.0)[2]


def _weighted_values(
    starts: Sequence[PairStart], information: dict[int, np.ndarray], priors: CameraPriors
) -> tuple[np.ndarray, np.ndarray]:
    """Camera values (m, 9) on which the pairs and the priors agree, and their normal matrix."""
    m = len(priors.values)
    diagonal, _, _ = prior_terms(priors, priors.values)
    normal, right = np.diag(diagonal.ravel()), np.zeros(CAMERA_VALUES * m)
    for s in starts:
        columns = shared_columns(s.fit.layout)
        own = departures(priors, s.values).ravel()[columns]
        normal[np.ix_(columns, columns)] += information[id(s)]
        right[columns] += information[id(s)] @ own
    free = free_values(priors).ravel()
    step = np.zeros(CAMERA_VALUES * m)
    if free.any():
        step[free] = solve_scaled(normal[np.ix_(free, free)], right[free])
    return values_moved(priors.values, step.reshape(m, CAMERA_VALUES)), normal


def _squared_sds(departure: np.ndarray, own: np.ndarray, rest: np.ndarray) -> float:
    """Squared departure in sds of a difference of two estimates, from their normal matrices.

    The covariance of the difference is own^-1 + rest^-1; its inverse is own (own + rest)^-1 rest,
    which needs neither of them to be invertible by itself.
    """
    return float(departure @ own @ solve_scaled(own + rest, rest @ departure))
