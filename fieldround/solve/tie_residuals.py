"""Residuals of the ties in all views, with derivatives by the tie and by everything else.

In: a `PairProblem`, a `PairState`, card values a view. Out: a `TieBlock` whose ties the normal
equations eliminate (Schur complement).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldround.geometry.camera import distort, pixel_by_ideal, pixel_by_values
from fieldround.geometry.rotations import cross_matrix, square_basis
from fieldround.solve.problem import PairProblem
from fieldround.solve.state import ABSENT, CAMERA_VALUES, Layout, PairState


@dataclass(frozen=True)
class TieBlock:
    """Tie residuals (n, 2v) and their derivatives by the tie (n, 2v, 3) and by the `columns`.

    by_rest : (n, 2v, len(columns)); unseen views have zero rows
    """

    residuals: np.ndarray
    by_tie: np.ndarray | None
    by_rest: np.ndarray | None
    columns: np.ndarray


def tie_columns(layout: Layout) -> np.ndarray:
    """The reduced columns ties depend on: poses, then the cameras' values."""
    poses = [np.arange(first, first + 6) for first in layout.pose if first != ABSENT]
    return np.concatenate([*poses, np.arange(layout.own, layout.size)])


def tie_block(
    problem: PairProblem,
    layout: Layout,
    state: PairState,
    values: np.ndarray,
    by_rest: bool = True,
    derivatives: bool = True,
) -> TieBlock:
    """Residuals of the ties in all views, in sds.

    values : (v, 9) card values of each view
    by_rest, derivatives : False to leave out the derivatives by the columns, or all of them
    returns : `TieBlock`
    """
    n, views = len(state.ties), problem.views
    columns = tie_columns(layout)
    seen = np.isfinite(problem.ties_px[:, :, 0])
    weight = seen / problem.ties_sd_px[:, None]
    residuals = np.zeros((n, 2 * views))
    by_tie = np.zeros((n, 2 * views, 3)) if derivatives else None
    rest = np.zeros((n, 2 * views, len(columns))) if derivatives and by_rest else None
    basis = square_basis(state.ties) if derivatives else None
    slot = 0
    for view in range(views):
        rotation, station = state.rotations[view], state.stations[view]
        moved = state.ties - state.ties_rho[:, None] * station
        p = moved @ rotation.T
        z = np.where(p[:, 2] > 1e-9, p[:, 2], 1e-9)
        ideal = p[:, :2] / z[:, None]
        pixel = distort(ideal, values[view]) * values[view, :2] + values[view, 2:4]
        w = weight[:, view]
        rows = slice(2 * view, 2 * view + 2)
        observed = np.where(seen[:, view, None], problem.ties_px[:, view], pixel)
        residuals[:, rows] = (pixel - observed) * w[:, None]
        first = layout.pose[view]
        if by_tie is None or basis is None:
            continue
        plane = pixel_by_ideal(ideal, values[view])
        by_p = np.empty((n, 2, 3))
        by_p[:, :, :2] = plane
        by_p[:, :, 2] = -(plane @ ideal[:, :, None])[:, :, 0]
        by_p *= (w / z)[:, None, None]
        turned = by_p @ rotation
        by_tie[:, rows, :2] = turned @ basis
        by_tie[:, rows, 2] = -(turned @ station)
        if rest is None:
            continue
        if first != ABSENT:
            # d(p) = omega x p for a rotation step, -rho R dC for a station step.
            rest[:, rows, slot : slot + 3] = -by_p @ cross_matrix(p)
            rest[:, rows, slot + 3 : slot + 6] = -turned * state.ties_rho[:, None, None]
            slot += 6
        at = len(columns) - (layout.size - layout.camera[view])
        rest[:, rows, at : at + CAMERA_VALUES] += (
            pixel_by_values(ideal, values[view]) * w[:, None, None]
        )
    return TieBlock(residuals, by_tie, rest, columns)
