"""The adjustment against an independent optimiser.

Source: scipy.optimize.least_squares (trust region reflective) on the same residuals, all unknowns
in one vector (ties included), Jacobian by differences. The pair is invented.
"""

import numpy as np
import pytest
from scipy.optimize import least_squares

from fieldround.rounds.model import Camera
from fieldround.solve.adjust import adjust_round
from fieldround.solve.assemble import Assembled
from fieldround.solve.cameras import camera_priors, departures, values_moved
from fieldround.solve.observations import blocks
from fieldround.solve.pairwise import solve_alone
from fieldround.solve.state import moved, ties_moved
from fieldround.solve.tie_residuals import tie_block
from tests.solve.simulated import HEIGHT, WIDTH, simulated_pair


def test_same_minimum_and_same_covariance():
    truth = simulated_pair(np.random.default_rng(11), ties=25, mark_sd_px=0.3)
    card = Camera("card", (WIDTH, HEIGHT), (3000.0, 3000.0), 3.0, (2010.0, 1490.0), 1.0)
    priors = camera_priors([card])
    start = solve_alone(Assembled(truth.problem, {}, 25), priors)
    adjusted = adjust_round([start.fit], start.values, priors)
    fit = adjusted.fits[0]
    problem, layout, n = fit.problem, fit.layout, len(fit.state.ties)
    free = priors.sds.ravel() > 0
    own, cameras = layout.own, int(free.sum())

    def residuals(x):
        step = np.zeros(layout.size)
        step[:own] = x[:own]
        step[own:][free] = x[own : own + cameras]
        state = ties_moved(moved(fit.state, layout, step), x[own + cameras :].reshape(n, 3))
        values = values_moved(adjusted.values, step[own:].reshape(1, 9))
        parts = []
        for block in blocks(problem, layout, state, values[problem.cameras]):
            # The losses are held at their weights: scipy minimises plain squares here.
            weights, _ = losses[len(parts)]
            parts.append(block.residuals * np.sqrt(weights))
        ties = tie_block(problem, layout, state, values[problem.cameras], derivatives=False)
        parts.append((ties.residuals * np.sqrt(fit.tie_keep)[:, None]).ravel())
        prior = (departures(priors, values) / np.where(free, priors.sds.ravel(), 1.0)).ravel()
        parts.append(prior[free])
        return np.concatenate(parts)

    losses = [
        block.loss(block.residuals)
        for block in blocks(problem, layout, fit.state, adjusted.values[problem.cameras])
    ]
    size = own + cameras + 3 * n
    found = least_squares(
        residuals, np.zeros(size), x_scale="jac", method="trf", xtol=1e-14, ftol=1e-14, gtol=1e-12
    )
    covariance = np.linalg.pinv(found.jac.T @ found.jac)[: own + cameras, : own + cameras]
    sds = np.sqrt(np.diag(covariance))
    # Both stand at the same minimum: nothing is left to move by more than a thousandth of an sd.
    assert np.all(np.abs(found.x[: own + cameras]) < 2e-3 * sds)
    used = np.concatenate([np.ones(own, dtype=bool), free])
    ours = adjusted.covariances[0][np.ix_(used, used)]
    assert np.allclose(np.sqrt(np.diag(ours)), sds, rtol=5e-3)
    assert found.cost == pytest.approx(
        0.5 * float(residuals(np.zeros(size)) @ residuals(np.zeros(size))), rel=1e-6
    )
