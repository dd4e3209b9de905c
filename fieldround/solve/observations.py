"""All observations of one pair but its ties, gathered in a fixed order.

In: a `PairProblem`, a `PairState`, card values a view. Out: the `Block`s of the pair.
"""

from __future__ import annotations

import numpy as np

from fieldround.solve.blocks import Block
from fieldround.solve.mark_residuals import end_block, limb_block, outline_block
from fieldround.solve.problem import PairProblem
from fieldround.solve.scalar_residuals import (
    attitude_block,
    expectation_block,
    ground_block,
    pose_prior_block,
    scale_block,
)
from fieldround.solve.state import Layout, PairState


def blocks(
    problem: PairProblem, layout: Layout, state: PairState, values: np.ndarray
) -> list[Block]:
    """All blocks but the ties', in a fixed order; values : (v, 9)."""
    found = []
    if len(problem.limbs):
        found.append(limb_block(problem, layout, state, values))
    if len(problem.outlines):
        found.append(outline_block(problem, layout, state, values))
    if len(problem.ends):
        found.append(end_block(problem, layout, state, values))
    found.append(scale_block(problem, layout, state))
    found.append(attitude_block(problem, layout, state))
    found.append(expectation_block(problem, layout, state))
    found.append(ground_block(problem, layout, state))
    if problem.pose_priors:
        found.append(pose_prior_block(problem, layout, state))
    return [block for block in found if len(block.residuals)]
