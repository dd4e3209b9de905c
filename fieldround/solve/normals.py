"""Normal equations of one pair, reduced to its unknowns and its cameras' by a Schur complement.

In: a `PairProblem`, a state, camera values, the weights of the ties. Out: `Reduced` equations,
kept apart by source so that the variance can be split the same way, and the way back to the ties.
Source of the reduction: B. Triggs et al., "Bundle adjustment: a modern synthesis" (2000), 6.1.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldround.solve.observations import blocks
from fieldround.solve.problem import PairProblem
from fieldround.solve.robust import cauchy
from fieldround.solve.state import Layout, PairState, ties_moved
from fieldround.solve.tie_residuals import tie_block

# Keeps the equations of a single tie solvable when no second view fixes its distance.
TIE_DAMPING = 1e-12


@dataclass(frozen=True)
class Reduced:
    """Reduced normal equations of one pair.

    normals    : source -> (size, size), summing to `normal`
    gradient   : (size,) of the cost; a step solves normal @ step = -gradient
    cost       : robust cost of all observations
    tie_back, tie_step : (n, 3, c), (n, 3): step of a tie = tie_step - tie_back @ step[columns]
    columns    : (c,) reduced columns the ties depend on
    tie_squares : (n,) summed squared residuals of each tie, in sds
    """

    normals: dict[str, np.ndarray]
    normal: np.ndarray
    gradient: np.ndarray
    cost: float
    tie_back: np.ndarray
    tie_step: np.ndarray
    columns: np.ndarray
    tie_squares: np.ndarray


def _inverses(matrices: np.ndarray) -> np.ndarray:
    """Inverses of symmetric (n, 3, 3) matrices by cofactors."""
    a, b, c = matrices[:, 0, 0], matrices[:, 0, 1], matrices[:, 0, 2]
    d, e, f = matrices[:, 1, 1], matrices[:, 1, 2], matrices[:, 2, 2]
    out = np.empty_like(matrices)
    out[:, 0, 0] = d * f - e * e
    out[:, 0, 1] = out[:, 1, 0] = c * e - b * f
    out[:, 0, 2] = out[:, 2, 0] = b * e - c * d
    out[:, 1, 1] = a * f - c * c
    out[:, 1, 2] = out[:, 2, 1] = b * c - a * e
    out[:, 2, 2] = a * d - b * b
    determinant = a * out[:, 0, 0] + b * out[:, 0, 1] + c * out[:, 0, 2]
    return out / determinant[:, None, None]


def reduce_pair(
    problem: PairProblem,
    layout: Layout,
    state: PairState,
    values: np.ndarray,
    tie_keep: np.ndarray,
    tie_limit: float | None,
) -> Reduced:
    """Normal equations of a pair at a state.

    values    : (v, 9) card values of each view
    tie_keep  : (n,) 1 for ties in use, 0 for ties set aside
    tie_limit : limit of the robust loss in sds, None for plain least squares
    """
    normals: dict[str, np.ndarray] = {}
    normal = np.zeros((layout.size, layout.size))
    gradient = np.zeros(layout.size)
    cost = 0.0
    for block in blocks(problem, layout, state, values):
        assert block.jacobian is not None
        weights, part = block.loss(block.residuals)
        cost += part
        weighted = block.jacobian * weights[:, None]
        own = weighted.T @ block.jacobian
        normals[block.source] = normals[block.source] + own if block.source in normals else own
        normal += own
        gradient += weighted.T @ block.residuals

    ties = tie_block(problem, layout, state, values)
    assert ties.by_tie is not None
    assert ties.by_rest is not None
    squares = np.einsum("ni,ni->n", ties.residuals, ties.residuals)
    if tie_limit is None:
        weights, part = tie_keep, 0.5 * float(squares @ tie_keep)
    else:
        weights, part = cauchy(squares * tie_keep, tie_limit)
        weights = weights * tie_keep
    cost += part
    n, c = len(squares), len(ties.columns)
    by_tie_t = (ties.by_tie * weights[:, None, None]).transpose(0, 2, 1)
    corner = by_tie_t @ ties.by_tie
    diagonal = np.einsum("nii->ni", corner)
    # A tie set aside (weight 0) gets an identity so that it neither moves nor breaks the inverse.
    diagonal += np.where(
        weights[:, None] > 0.0, TIE_DAMPING * diagonal.sum(axis=1, keepdims=True), 1.0
    )
    inverse = _inverses(corner)
    coupling = by_tie_t @ ties.by_rest
    tie_gradient = (by_tie_t @ ties.residuals[:, :, None])[:, :, 0]
    tie_back = inverse @ coupling
    tie_step = -(inverse @ tie_gradient[:, :, None])[:, :, 0]
    if n:
        flat = ties.by_rest.reshape(-1, c)
        row_weights = np.repeat(weights, ties.by_rest.shape[1])
        weighted = flat * row_weights[:, None]
        block_normal = weighted.T @ flat - coupling.reshape(-1, c).T @ tie_back.reshape(-1, c)
        block_gradient = weighted.T @ ties.residuals.ravel() + np.einsum(
            "nic,ni->c", coupling, tie_step
        )
        own = np.zeros_like(normal)
        grid = np.ix_(ties.columns, ties.columns)
        own[grid] = 0.5 * (block_normal + block_normal.T)
        normals["ties"] = normals["ties"] + own if "ties" in normals else own
        normal += own
        gradient[ties.columns] += block_gradient
    return Reduced(normals, normal, gradient, cost, tie_back, tie_step, ties.columns, squares)


def ties_settled(
    problem: PairProblem,
    layout: Layout,
    state: PairState,
    values: np.ndarray,
    tie_keep: np.ndarray,
) -> PairState:
    """The state after one step of the ties alone, everything else held.

    Without it the second-order error that a step leaves in hundreds of sharp ties looks like a
    step too long, and the damping creeps.
    """
    if not len(state.ties):
        return state
    ties = tie_block(problem, layout, state, values, by_rest=False)
    assert ties.by_tie is not None
    by_tie_t = ties.by_tie.transpose(0, 2, 1)
    corner = by_tie_t @ ties.by_tie
    diagonal = np.einsum("nii->ni", corner)
    diagonal += TIE_DAMPING * diagonal.sum(axis=1, keepdims=True)
    gradient = (by_tie_t @ ties.residuals[:, :, None])[:, :, 0]
    step = -np.einsum("nij,nj->ni", _inverses(corner), gradient)
    return ties_moved(state, np.where(tie_keep[:, None] > 0.0, step, 0.0))


def cost_of(
    problem: PairProblem,
    layout: Layout,
    state: PairState,
    values: np.ndarray,
    tie_keep: np.ndarray,
    tie_limit: float | None,
) -> tuple[float, np.ndarray]:
    """Robust cost of a pair and the squared residuals of its ties, without derivatives."""
    cost = 0.0
    for block in blocks(problem, layout, state, values):
        cost += block.loss(block.residuals)[1]
    ties = tie_block(problem, layout, state, values, derivatives=False)
    squares = np.einsum("ni,ni->n", ties.residuals, ties.residuals)
    if tie_limit is None:
        cost += 0.5 * float(squares @ tie_keep)
    else:
        cost += cauchy(squares * tie_keep, tie_limit)[1]
    return cost, squares
