"""Analytic Jacobians of every block against central differences of its own residuals."""

from dataclasses import replace

import numpy as np
import pytest

from fieldround.geometry.camera import project
from fieldround.geometry.rotations import rotation_from_vector
from fieldround.solve.cameras import values_moved
from fieldround.solve.observations import blocks
from fieldround.solve.problem import LengthObservation, Marks, PosePrior, SolidObject
from fieldround.solve.state import make_layout, moved, ties_moved
from fieldround.solve.tie_residuals import tie_block
from tests.solve.simulated import simulated_pair

STEP = 1e-6


def rich_pair():
    """A pair with a cylinder, a ball, ends, plumb lines, two lengths and a pose prior."""
    truth = simulated_pair(np.random.default_rng(3), ties=15, noise=False)
    problem, state = truth.problem, truth.state
    values = np.array([[3000.0, 3010.0, 2010.0, 1490.0, 0.02, -0.03, 0.0005, -0.0004, 0.01]])
    ball = SolidObject("B1", "ball", True, known_diameter_m=0.3, known_sd_m=0.001)
    centre = state.points[0] + np.array([0.6, 0.2, -0.5])
    outline_px, outline_view = [], []
    for view in range(2):
        away = (centre - state.stations[view]) @ state.rotations[view].T
        for turn in np.linspace(0, 5, 6):
            edge = away + 0.15 * np.array([np.cos(turn), np.sin(turn), 0.0])
            outline_px.append(project(edge[None], values[0])[0])
            outline_view.append(view)
    outlines = Marks(
        np.ones(12, dtype=int),
        np.array(outline_view),
        np.array(outline_px),
        np.full(12, 0.5),
        np.zeros(12),
    )
    problem = replace(
        problem,
        objects=(replace(problem.objects[0], has_top=True, ground_guess=True), ball),
        outlines=outlines,
        ends=replace(problem.ends, side=np.array([0.0, 1.0])),
        plumb_view=np.array([0, 1]),
        plumb_normal=np.array([[1.0, 0.05, 0.1], [0.99, 0.1, -0.1]]),
        plumb_sd_rad=np.array([0.01, 0.02]),
        lengths=(*problem.lengths, LengthObservation(2.1, 0.3, "GNSS")),
        pose_priors=(
            PosePrior(
                1,
                state.rotations[1] @ rotation_from_vector([0.001, 0.0, 0.002]),
                0.1,
                np.array([1.0, 0, 0]),
                0.2,
            ),
        ),
    )
    state = replace(
        state,
        axes=np.vstack([state.axes, [[0.0, 0.0, 1.0]]]),
        points=np.vstack([state.points, centre[None]]),
        radii=np.array([state.radii[0], 0.15]),
        tapers=np.array([state.tapers[0], 0.0]),
        base=np.array([-1.3, 0.0]),
        top=np.array([2.0, 0.0]),
        ties=[0.0, 0.0, 1.0] + 0.1 * np.random.default_rng(1).normal(size=(15, 3)),
        ties_rho=np.linspace(0.0, 0.2, 15),
    )
    state = replace(state, ties=state.ties / np.linalg.norm(state.ties, axis=1, keepdims=True))
    return problem, state, values


PROBLEM, STATE, VALUES = rich_pair()
LAYOUT = make_layout(PROBLEM)


def at(column, amount):
    step = np.zeros(LAYOUT.size)
    step[column] = amount
    values = values_moved(VALUES, step[LAYOUT.own :].reshape(-1, 9))
    return moved(STATE, LAYOUT, step), values[PROBLEM.cameras]


@pytest.mark.parametrize("column", range(LAYOUT.size))
def test_blocks_agree_with_differences(column):
    found = blocks(PROBLEM, LAYOUT, STATE, VALUES[PROBLEM.cameras])
    high, low = (blocks(PROBLEM, LAYOUT, *at(column, amount)) for amount in (STEP, -STEP))
    assert {block.source for block in found} == {
        "limb marks",
        "baseline",
        "uprightness",
        "taper",
        "ground line",
        "ties",
    }
    for block, more, less in zip(found, high, low, strict=True):
        slope = (more.residuals - less.residuals) / (2 * STEP)
        size = max(float(np.abs(block.jacobian).max()), 1.0)
        # Second-order parts (bases that turn with their vector) stay below a part in 500.
        assert np.allclose(block.jacobian[:, column], slope, atol=2e-3 * size), block.source


def test_tie_block_agrees_with_differences():
    found = tie_block(PROBLEM, LAYOUT, STATE, VALUES[PROBLEM.cameras])
    for place, column in enumerate(found.columns):
        high, low = (
            tie_block(PROBLEM, LAYOUT, *at(column, amount), derivatives=False).residuals
            for amount in (STEP, -STEP)
        )
        assert np.allclose(found.by_rest[:, :, place], (high - low) / (2 * STEP), atol=5e-3)
    for axis in range(3):
        step = np.zeros((15, 3))
        step[:, axis] = STEP
        high, low = (
            tie_block(
                PROBLEM, LAYOUT, ties_moved(STATE, s), VALUES[PROBLEM.cameras], derivatives=False
            ).residuals
            for s in (step, -step)
        )
        assert np.allclose(found.by_tie[:, :, axis], (high - low) / (2 * STEP), atol=5e-3)


def test_a_view_that_does_not_see_a_tie_says_nothing_of_it():
    px = PROBLEM.ties_px.copy()
    px[3, 1] = np.nan
    blind = replace(PROBLEM, ties_px=px)
    found = tie_block(blind, LAYOUT, STATE, VALUES[PROBLEM.cameras])
    assert np.all(found.residuals[3, 2:] == 0.0)
    assert np.all(found.by_tie[3, 2:] == 0.0)
    assert np.all(found.by_rest[3, 2:] == 0.0)


def test_exact_marks_leave_no_residuals():
    truth = simulated_pair(np.random.default_rng(8), ties=5, noise=False, taper=-0.008)
    layout = make_layout(truth.problem)
    found = blocks(truth.problem, layout, truth.state, truth.values[None][[0, 0]])
    # A cone's limb is met to second order in its taper: far below any mark.
    for block in found:
        if block.source in ("limb marks", "baseline"):
            assert np.abs(block.residuals).max() < 1e-3
