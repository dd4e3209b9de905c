"""One pair brought from its start to its own minimum, stray ties and marks set aside.

In: a `PairProblem`, a start state, camera values and priors. Out: a `PairFit`. Gauss-Newton with
Marquardt's step control; the ties are eliminated and settled anew after every step.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.stats import chi2

from fieldround.solve.cameras import CameraPriors, free_values, prior_terms, values_moved
from fieldround.solve.equations import solve_scaled
from fieldround.solve.mark_residuals import limb_block, outline_block
from fieldround.solve.normals import Reduced, cost_of, reduce_pair, ties_settled
from fieldround.solve.problem import PairProblem
from fieldround.solve.state import (
    Layout,
    PairState,
    make_layout,
    moved,
    ties_moved,
)

ITERATIONS_MOST = 60
# Stop when the next step would lower the cost by less than this: a millionth of an sd. On the way
# there, while ties are still being sorted, a hundredth of an sd will do.
STOP = 1e-13
STOP_ROUGH = 1e-4
ROBUST_LIMIT = 2.0
# A tie further out than this belongs to 1 in 2,000 right ones.
REJECT_QUANTILE = 0.9995
# Residuals speak with this many votes against the stated sds (inverse-gamma shrinkage).
FACTOR_VOTES = 10.0
LIMB_REJECT = 4.0
FAR_OFF_SDS = 30.0
# Sine of the angle from the baseline inside which ties are left out.
BESIDE_BASELINE = 0.03
# No tie is found better than this, however well its neighbours fit.
TIE_SD_FLOOR_PX = 0.03


@dataclass(frozen=True)
class PairFit:
    """One pair in the course of the adjustment: its problem, columns, state, ties in use."""

    problem: PairProblem
    layout: Layout
    state: PairState
    tie_keep: np.ndarray
    limbs_dropped: int = 0


def tie_freedom(problem: PairProblem) -> np.ndarray:
    """Redundancy of each tie, (n,): two coordinates a view that sees it, less three."""
    seen = np.isfinite(problem.ties_px[:, :, 0]).sum(axis=1)
    return np.maximum(2 * seen - 3, 0)


def damped(normal: np.ndarray, damping: float) -> np.ndarray:
    """Normal matrix with its diagonal raised by a share of itself."""
    return normal + np.diag(damping * np.diag(normal))


def adjust_pair(
    fit: PairFit,
    values: np.ndarray,
    priors: CameraPriors,
    robust: bool,
    stop: float = STOP,
    hold_poses: bool = False,
) -> tuple[PairFit, np.ndarray, bool]:
    """Adjust one pair with its own copy of its cameras.

    values : (m, 9) camera values of the round at the start
    robust : True for the robust tie loss, False for plain least squares over the kept ties
    stop   : gain of a step, in cost, that ends the iteration
    hold_poses : True to move the objects and the vertical only
    returns : the fit, the pair's camera values (m, 9), whether it converged
    """
    problem, layout = fit.problem, fit.layout
    limit = ROBUST_LIMIT if robust else None
    ids = list(layout.camera_ids)
    own_priors = CameraPriors(priors.values[ids], priors.sds[ids], priors.heavy[ids])
    free = np.concatenate([np.ones(layout.own, dtype=bool), free_values(own_priors).ravel()])
    if hold_poses:
        free[: layout.up] = False
        free[layout.own :] = False
    grid = np.ix_(free, free)
    state, values = fit.state, values.copy()
    damping, converged = 1e-4, False
    reduced: Reduced | None = None
    cost = np.inf
    for _ in range(ITERATIONS_MOST):
        if reduced is None:
            diagonal, prior_gradient, prior_cost = prior_terms(own_priors, values[ids])
            reduced = reduce_pair(
                problem, layout, state, values[problem.cameras], fit.tie_keep, limit
            )
            normal = reduced.normal.copy()
            normal[range(layout.own, layout.size), range(layout.own, layout.size)] += (
                diagonal.ravel()
            )
            gradient = reduced.gradient.copy()
            gradient[layout.own :] += prior_gradient.ravel()
            cost = reduced.cost + prior_cost
        step = np.zeros(layout.size)
        try:
            step[free] = -solve_scaled(damped(normal[grid], damping), gradient[free])
        except np.linalg.LinAlgError:
            damping = max(damping, 1e-6) * 10.0
            continue
        gain = -0.5 * float(gradient @ step)
        tie_steps = reduced.tie_step - reduced.tie_back @ step[reduced.columns]
        trial = ties_moved(moved(state, layout, step), tie_steps)
        trial_values = values.copy()
        trial_values[ids] = values_moved(values[ids], step[layout.own :].reshape(-1, 9))
        trial = ties_settled(problem, layout, trial, trial_values[problem.cameras], fit.tie_keep)
        trial_cost = (
            cost_of(problem, layout, trial, trial_values[problem.cameras], fit.tie_keep, limit)[0]
            + prior_terms(own_priors, trial_values[ids])[2]
        )
        if trial_cost <= cost + 1e-12 * abs(cost) and np.isfinite(trial_cost):
            state, values = trial, trial_values
            reduced = None
            damping = damping * 0.1 if damping > 1e-12 else 0.0
            if abs(gain) < stop * max(1.0, cost) and cost - trial_cost < 1e-9 + stop * cost:
                converged = True
                break
        else:
            if abs(gain) < 1e-9:
                converged = True
                break
            damping = max(damping, 1e-9) * 10.0
            if damping > 1e8:
                break
    return replace(fit, state=state), values, converged


def rescaled(fit: PairFit, factor: float) -> PairFit:
    """The fit with the sds of its ties multiplied by a factor, down to a floor."""
    sds = np.maximum(fit.problem.ties_sd_px * factor, TIE_SD_FLOOR_PX)
    return replace(fit, problem=replace(fit.problem, ties_sd_px=sds))


def robust_tie_factor(fit: PairFit, squares: np.ndarray) -> float:
    """Scale of the tie residuals against their sds, from the median of each redundancy."""
    freedom = tie_freedom(fit.problem)
    used = (freedom > 0) & (fit.tie_keep > 0)
    if used.sum() < 12:
        return 1.0
    ratio = squares[used] / chi2.median(freedom[used])
    return float(np.sqrt(max(np.median(ratio), 1e-4)))


def tie_votes(fit: PairFit) -> float:
    """Degrees of freedom behind the scale of the ties' sds: residuals and stated sds together."""
    total = float((tie_freedom(fit.problem) * fit.tie_keep).sum()) - 5.0 * (fit.problem.views - 1)
    return FACTOR_VOTES + max(total, 0.0)


def final_tie_factor(fit: PairFit, squares: np.ndarray) -> float:
    """Scale of the kept ties' residuals against their sds, shrunk toward one."""
    votes = tie_votes(fit)
    if votes < FACTOR_VOTES + 4.0:
        return 1.0
    chi = float(squares @ fit.tie_keep)
    return float(np.sqrt((FACTOR_VOTES + chi) / votes))


def sound_ties(state: PairState) -> np.ndarray:
    """Ties in front of every view and not close to the baseline's own direction, (n,).

    Along the baseline a tie's distance is anybody's guess: one step may carry it behind a camera.
    """
    sound = np.ones(len(state.ties), dtype=bool)
    for rotation, station in zip(state.rotations, state.stations, strict=True):
        p = state.ties - state.ties_rho[:, None] * station
        length = np.linalg.norm(p, axis=1)
        sound &= p @ rotation[2] > 0.02 * length
        reach = float(np.linalg.norm(station))
        if reach > 0.0:
            sound &= np.linalg.norm(np.cross(state.ties, station / reach), axis=1) > BESIDE_BASELINE
            sound &= length > BESIDE_BASELINE
    return sound


def keep_right_ties(fit: PairFit, values: np.ndarray) -> tuple[PairFit, np.ndarray]:
    """Set aside the ties whose residuals are too large; returns the fit and the squares."""
    _, squares = cost_of(
        fit.problem, fit.layout, fit.state, values[fit.problem.cameras], fit.tie_keep, None
    )
    freedom = tie_freedom(fit.problem)
    limit = chi2.ppf(REJECT_QUANTILE, np.maximum(freedom, 1))
    keep = (freedom > 0) & (squares < limit) & sound_ties(fit.state)
    return replace(fit, tie_keep=keep.astype(float)), squares


def drop_stray_limbs(fit: PairFit, values: np.ndarray) -> PairFit:
    """Set aside limb and outline marks further than LIMB_REJECT sds from the fitted limbs."""
    problem, dropped = fit.problem, 0
    view_values = values[problem.cameras]
    for name, block in (("limbs", limb_block), ("outlines", outline_block)):
        marks = getattr(problem, name)
        if not len(marks):
            continue
        residuals = block(problem, fit.layout, fit.state, view_values).residuals
        keep = np.abs(residuals) < LIMB_REJECT
        # Two marks a side must stay, or there is no line left to speak of.
        for key in {
            (o, v, s) for o, v, s in zip(marks.object, marks.view, marks.side, strict=True)
        }:
            same = (marks.object == key[0]) & (marks.view == key[1]) & (marks.side == key[2])
            if (keep & same).sum() < min(3, same.sum()):
                keep[same] = True
        dropped += int((~keep).sum())
        problem = replace(problem, **{name: marks.only(keep)})
    return replace(fit, problem=problem, limbs_dropped=fit.limbs_dropped + dropped)


def tie_misfit_px(fit: PairFit, values: np.ndarray) -> float:
    """Root mean square of the kept ties' redundant residuals in pixels, 0 without kept ties."""
    kept = fit.tie_keep > 0
    if not kept.any():
        return 0.0
    _, squares = cost_of(
        fit.problem, fit.layout, fit.state, values[fit.problem.cameras], fit.tie_keep, None
    )
    px = (squares * fit.problem.ties_sd_px**2)[kept]
    return float(np.sqrt(px.sum() / np.maximum(tie_freedom(fit.problem)[kept], 1).sum()))


def far_off(fit: PairFit, values: np.ndarray) -> bool:
    """Do the limb marks lie further from the start than marks ever scatter?"""
    problem, cards = fit.problem, values[fit.problem.cameras]
    found = [
        block(problem, fit.layout, fit.state, cards).residuals
        for marks, block in ((problem.limbs, limb_block), (problem.outlines, outline_block))
        if len(marks)
    ]
    return bool(np.abs(np.concatenate(found)).max() > FAR_OFF_SDS) if found else False


def settle_pair(
    problem: PairProblem, start: PairState, values: np.ndarray, priors: CameraPriors
) -> tuple[PairFit, np.ndarray, bool]:
    """One pair from its start values to its own minimum, stray ties and marks set aside.

    returns : the fit, the pair's own camera values (m, 9), whether the last adjustment converged
    """
    fit = PairFit(problem, make_layout(problem), start, sound_ties(start).astype(float))
    if far_off(fit, values):
        # Marks far from a poor start must not drag good poses after them.
        fit, _, _ = adjust_pair(fit, values, priors, True, STOP_ROUGH, hold_poses=True)
    fit, own, converged = adjust_pair(fit, values, priors, True, STOP_ROUGH)
    if len(start.ties):
        for _ in range(2):
            _, squares = cost_of(
                fit.problem, fit.layout, fit.state, own[problem.cameras], fit.tie_keep, None
            )
            fit = rescaled(fit, robust_tie_factor(fit, squares))
            fit, _ = keep_right_ties(fit, own)
            fit, own, converged = adjust_pair(fit, own, priors, False, STOP_ROUGH)
        fit, squares = keep_right_ties(fit, own)
        fit = rescaled(fit, final_tie_factor(fit, squares))
    before = fit.limbs_dropped
    fit = drop_stray_limbs(fit, own)
    if len(start.ties) or fit.limbs_dropped != before:
        fit, own, converged = adjust_pair(fit, own, priors, robust=False)
    return fit, own, converged
