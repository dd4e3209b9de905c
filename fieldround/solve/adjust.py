"""All pairs that share cameras adjusted together, and the covariance of every pair's unknowns.

In: `PairFit`s near their minimum, camera values, camera priors. Out: `Adjusted`. Each pair is
reduced to the shared unknowns, the reduced equations are summed, solved, substituted back.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from fieldround.solve.cameras import CameraPriors, free_values, prior_terms, values_moved
from fieldround.solve.equations import inverse_scaled, solve_scaled
from fieldround.solve.normals import Reduced, cost_of, reduce_pair, ties_settled
from fieldround.solve.settling import ITERATIONS_MOST, STOP, PairFit, damped
from fieldround.solve.state import (
    CAMERA_VALUES,
    Layout,
    moved,
    ties_moved,
)

# A pair is at rest when nothing is left to gain but a hundredth of an sd.
AT_REST = 1e-4


@dataclass(frozen=True)
class Adjusted:
    """The adjusted round.

    fits    : one a problem, in order
    values  : (m, 9) camera values; camera_normal : (9m, 9m) their normal matrix with priors
    covariances : per pair (size, size) of its unknowns with its cameras', as the round knows them
    reduced : per pair, the reduced normal equations at the end
    outside : per pair (c, c), what the priors and the other pairs say of its cameras
    converged : per pair, did it come to rest?
    """

    fits: tuple[PairFit, ...]
    values: np.ndarray
    camera_normal: np.ndarray
    covariances: tuple[np.ndarray, ...]
    reduced: tuple[Reduced, ...]
    outside: tuple[np.ndarray, ...]
    converged: tuple[bool, ...]


def shared_columns(layout: Layout) -> np.ndarray:
    """Columns of the round's camera unknowns for the pair's camera columns, in order."""
    return np.concatenate(
        [np.arange(CAMERA_VALUES * c, CAMERA_VALUES * (c + 1)) for c in layout.camera_ids]
    )


def adjust_round(fits: Sequence[PairFit], values: np.ndarray, priors: CameraPriors) -> Adjusted:
    """All pairs together, each already near its minimum.

    values : (m, 9) start values of the shared cameras
    """
    fits = list(fits)
    free = free_values(priors).ravel()
    values = values.copy()
    damping, converged = 1e-6, False
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
            step[free] = solve_scaled(damped(normal[np.ix_(free, free)], damping), right[free])
        gain = 0.5 * float(right @ step)
        trial_values = values_moved(values, step.reshape(-1, CAMERA_VALUES))
        trials = []
        trial_cost = prior_terms(priors, trial_values)[2]
        for fit, r, (back, forward, columns) in zip(fits, reduced, solved, strict=True):
            own = forward - back @ step[columns]
            gain -= 0.5 * float(r.gradient[: fit.layout.own] @ forward)
            full = np.concatenate([own, step[columns]])
            tie_steps = r.tie_step - r.tie_back @ full[r.columns]
            state = ties_moved(moved(fit.state, fit.layout, full), tie_steps)
            cards = trial_values[fit.problem.cameras]
            state = ties_settled(fit.problem, fit.layout, state, cards, fit.tie_keep)
            trials.append(replace(fit, state=state))
            trial_cost += cost_of(fit.problem, fit.layout, state, cards, fit.tie_keep, None)[0]
        if np.isfinite(trial_cost) and trial_cost <= cost * (1.0 + 1e-12):
            fits, values = trials, trial_values
            damping *= 0.1
            converged = gain < STOP * max(1.0, cost) and cost - trial_cost < 1e-9
        else:
            converged = gain < 1e-9
            damping = max(damping, 1e-9) * 100.0
        if converged or damping > 1e6:
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
    corner = damped(reduced.normal[:own, :own], damping)
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
    shares, converged = [], []
    for fit, r in zip(fits, reduced, strict=True):
        _, forward, shared, _ = eliminated(fit.layout, r, 0.0)
        # What a last step of its own would still gain: one pair that creeps stops no other.
        left = 0.5 * float(r.gradient[: fit.layout.own] @ forward)
        converged.append(abs(left) < AT_REST)
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
    return Adjusted(
        tuple(fits),
        values,
        total,
        tuple(covariances),
        tuple(reduced),
        tuple(outside),
        tuple(converged),
    )


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
