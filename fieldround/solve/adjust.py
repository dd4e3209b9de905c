"""The adjustment: each pair by itself first, then all pairs that share a camera together.

In: `PairProblem`s with start states, camera priors. Out: `Adjusted` states, camera values and the
covariance of every pair's unknowns. Gauss-Newton with Levenberg's step control; ties are
eliminated inside each pair, pairs inside the round.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.stats import chi2

from fieldround.solve.cameras import CameraPriors, free_values, prior_terms, values_moved
from fieldround.solve.equations import inverse_scaled, solve_scaled
from fieldround.solve.mark_residuals import limb_block, outline_block
from fieldround.solve.normals import Reduced, cost_of, reduce_pair
from fieldround.solve.problem import PairProblem
from fieldround.solve.state import (
    CAMERA_VALUES,
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


@dataclass(frozen=True)
class Adjusted:
    """The adjusted round.

    fits    : one a problem, in order
    values  : (m, 9) camera values; camera_normal : (9m, 9m) their normal matrix with priors
    covariances : per pair (size, size) of its unknowns with its cameras', as the round knows them
    reduced : per pair, the reduced normal equations at the end
    outside : per pair (c, c), what the priors and the other pairs say of its cameras
    """

    fits: tuple[PairFit, ...]
    values: np.ndarray
    camera_normal: np.ndarray
    covariances: tuple[np.ndarray, ...]
    reduced: tuple[Reduced, ...]
    outside: tuple[np.ndarray, ...]


def tie_freedom(problem: PairProblem) -> np.ndarray:
    """Redundancy of each tie, (n,): two coordinates a view that sees it, less three."""
    seen = np.isfinite(problem.ties_px[:, :, 0]).sum(axis=1)
    return np.maximum(2 * seen - 3, 0)


def shared_columns(layout: Layout) -> np.ndarray:
    """Columns of the round's camera unknowns for the pair's camera columns, in order."""
    return np.concatenate(
        [np.arange(CAMERA_VALUES * c, CAMERA_VALUES * (c + 1)) for c in layout.camera_ids]
    )


def _damped(normal: np.ndarray, damping: float) -> np.ndarray:
    return normal + np.diag(damping * np.diag(normal))


def adjust_pair(
    fit: PairFit,
    values: np.ndarray,
    priors: CameraPriors,
    robust: bool,
    stop: float = STOP,
) -> tuple[PairFit, np.ndarray, bool]:
    """Adjust one pair with its own copy of its cameras.

    values : (m, 9) camera values of the round at the start
    robust : True for the robust tie loss, False for plain least squares over the kept ties
    stop   : gain of a step, in cost, that ends the iteration
    returns : the fit, the pair's camera values (m, 9), whether it converged
    """
    problem, layout = fit.problem, fit.layout
    limit = ROBUST_LIMIT if robust else None
    ids = list(layout.camera_ids)
    own_priors = CameraPriors(priors.values[ids], priors.sds[ids], priors.heavy[ids])
    free = np.concatenate([np.ones(layout.own, dtype=bool), free_values(own_priors).ravel()])
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
            step[free] = -solve_scaled(_damped(normal[grid], damping), gradient[free])
        except np.linalg.LinAlgError:
            damping = max(damping, 1e-6) * 10.0
            continue
        gain = -0.5 * float(gradient @ step)
        tie_steps = reduced.tie_step - reduced.tie_back @ step[reduced.columns]
        trial = ties_moved(moved(state, layout, step), tie_steps)
        trial_values = values.copy()
        trial_values[ids] = values_moved(values[ids], step[layout.own :].reshape(-1, 9))
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


def final_tie_factor(fit: PairFit, squares: np.ndarray) -> float:
    """Scale of the kept ties' residuals against their sds, shrunk toward one."""
    freedom = tie_freedom(fit.problem) * fit.tie_keep
    total = float(freedom.sum()) - 5.0 * (fit.problem.views - 1)
    if total < 4.0:
        return 1.0
    chi = float(squares @ fit.tie_keep)
    return float(np.sqrt((FACTOR_VOTES + chi) / (FACTOR_VOTES + total)))


def keep_right_ties(fit: PairFit, values: np.ndarray) -> tuple[PairFit, np.ndarray]:
    """Set aside the ties whose residuals are too large; returns the fit and the squares."""
    _, squares = cost_of(
        fit.problem, fit.layout, fit.state, values[fit.problem.cameras], fit.tie_keep, None
    )
    freedom = tie_freedom(fit.problem)
    limit = chi2.ppf(REJECT_QUANTILE, np.maximum(freedom, 1))
    in_front = np.ones(len(squares), dtype=bool)
    for view in range(fit.problem.views):
        p = fit.state.ties - fit.state.ties_rho[:, None] * fit.state.stations[view]
        in_front &= (p @ fit.state.rotations[view][2]) > 1e-6
    keep = (freedom > 0) & (squares < limit) & in_front
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


def settle_pair(
    problem: PairProblem, start: PairState, values: np.ndarray, priors: CameraPriors
) -> tuple[PairFit, np.ndarray, bool]:
    """One pair from its start values to its own minimum, stray ties and marks set aside.

    returns : the fit, the pair's own camera values (m, 9), whether the last adjustment converged
    """
    fit = PairFit(problem, make_layout(problem), start, np.ones(len(start.ties)))
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


def adjust_round(fits: Sequence[PairFit], values: np.ndarray, priors: CameraPriors) -> Adjusted:
    """All pairs together, each already near its minimum.

    values : (m, 9) start values of the shared cameras
    """
    fits = list(fits)
    free = free_values(priors).ravel()
    values = values.copy()
    damping = 1e-6
    for _ in range(ITERATIONS_MOST):
        reduced = [_reduce(fit, values) for fit in fits]
        diagonal, gradient, cost = prior_terms(priors, values)
        normal, right = np.diag(diagonal.ravel()), -gradient.ravel()
        cost += sum(r.cost for r in reduced)
        solved = []
        for fit, r in zip(fits, reduced, strict=True):
            back, forward, shared, shared_right = eliminated(fit.layout, r, damping)
            columns = shared_columns(fit.layout)
            normal[np.ix_(columns, columns)] += shared
            right[columns] += shared_right
            solved.append((back, forward, columns))
        step = np.zeros(len(right))
        if free.any():
            step[free] = solve_scaled(normal[np.ix_(free, free)], right[free])
        gain = 0.5 * float(right @ step)
        trial_values = values_moved(values, step.reshape(-1, CAMERA_VALUES))
        trials = []
        trial_cost = prior_terms(priors, trial_values)[2]
        for fit, r, (back, forward, columns) in zip(fits, reduced, solved, strict=True):
            own = forward - back @ step[columns]
            gain -= 0.5 * float(r.gradient[: fit.layout.own] @ forward)
            full = np.concatenate([own, step[columns]])
            tie_steps = r.tie_step - r.tie_back @ full[r.columns]
            trial = replace(fit, state=ties_moved(moved(fit.state, fit.layout, full), tie_steps))
            trials.append(trial)
            trial_cost += cost_of(
                fit.problem,
                fit.layout,
                trial.state,
                trial_values[fit.problem.cameras],
                fit.tie_keep,
                None,
            )[0]
        if np.isfinite(trial_cost) and trial_cost <= cost * (1.0 + 1e-12):
            fits, values = trials, trial_values
            damping *= 0.1
            if gain < STOP * max(1.0, cost) and cost - trial_cost < 1e-9:
                break
        else:
            if gain < 1e-9:
                break
            damping = max(damping, 1e-9) * 100.0
            if damping > 1e6:
                break
    return _with_covariances(fits, values, priors)


def _reduce(fit: PairFit, values: np.ndarray) -> Reduced:
    return reduce_pair(
        fit.problem, fit.layout, fit.state, values[fit.problem.cameras], fit.tie_keep, None
    )


def eliminated(
    layout: Layout, reduced: Reduced, damping: float
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Eliminate a pair's own unknowns from its reduced equations.

    returns : back (own, c) and forward (own,) with own step = forward - back @ camera step,
              and the remaining normal matrix (c, c) and right side (c,)
    """
    own = layout.own
    corner = _damped(reduced.normal[:own, :own], damping)
    coupling = reduced.normal[:own, own:]
    solved = solve_scaled(corner, np.concatenate([coupling, -reduced.gradient[:own, None]], axis=1))
    back, forward = solved[:, :-1], solved[:, -1]
    shared = reduced.normal[own:, own:] - coupling.T @ back
    right = -reduced.gradient[own:] - coupling.T @ forward
    return back, forward, 0.5 * (shared + shared.T), right


def _with_covariances(
    fits: Sequence[PairFit], values: np.ndarray, priors: CameraPriors
) -> Adjusted:
    """Covariance of every pair's unknowns: its own equations, the priors and the other pairs."""
    reduced = [_reduce(fit, values) for fit in fits]
    diagonal, _, _ = prior_terms(priors, values)
    total = np.diag(diagonal.ravel())
    shares = []
    for fit, r in zip(fits, reduced, strict=True):
        shared = eliminated(fit.layout, r, 0.0)[2]
        columns = shared_columns(fit.layout)
        total[np.ix_(columns, columns)] += shared
        shares.append((columns, shared))
    free = free_values(priors).ravel()
    camera_covariance = np.zeros_like(total)
    if free.any():
        camera_covariance[np.ix_(free, free)] = inverse_scaled(total[np.ix_(free, free)])
    covariances, outside = [], []
    for fit, r, (columns, shared) in zip(fits, reduced, shares, strict=True):
        others = _others(total, columns, free, shared)
        normal = r.normal.copy()
        normal[fit.layout.own :, fit.layout.own :] += others
        used = np.concatenate([np.ones(fit.layout.own, dtype=bool), free[columns]])
        covariance = np.zeros_like(normal)
        covariance[np.ix_(used, used)] = inverse_scaled(normal[np.ix_(used, used)])
        covariances.append(covariance)
        outside.append(others)
    return Adjusted(tuple(fits), values, total, tuple(covariances), tuple(reduced), tuple(outside))


def _others(
    total: np.ndarray, columns: np.ndarray, free: np.ndarray, shared: np.ndarray
) -> np.ndarray:
    """Normal matrix that priors and other pairs put on a pair's cameras, (c, c).

    Cameras the pair does not use are eliminated: they may be tied to its own by other pairs.
    """
    rest = np.setdiff1d(np.flatnonzero(free), columns)
    others = total[np.ix_(columns, columns)] - shared
    if len(rest):
        coupling = total[np.ix_(rest, columns)]
        if np.any(coupling):
            others = others - coupling.T @ solve_scaled(total[np.ix_(rest, rest)], coupling)
    return 0.5 * (others + others.T)
