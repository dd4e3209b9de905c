"""How the cameras stood when no ties tell it: assumptions, each with its own sd.

In: a `PairProblem` without usable ties. Out: the problem with pose priors, and start poses.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fieldround.geometry.rotations import rotation_between
from fieldround.solve.problem import PairProblem, PosePrior

# Two photos of one object by one hand, "held parallel": good to some 5 degrees (an assumption).
PARALLEL_SD_RAD = float(np.radians(5.0))
SIDEWAYS_SD_RAD = float(np.radians(10.0))


def parallel_poses(
    problem: PairProblem, values: np.ndarray
) -> tuple[PairProblem, np.ndarray, np.ndarray]:
    """Parallel cameras side by side, for a pair of two views.

    values  : (m, 9) camera values
    returns : the problem with its pose prior and no ties, rotations (2, 3, 3), stations (2, 3)
              with A to B of length one
    """
    # Cameras may be turned differently (portrait, landscape): up of B is brought onto up of A.
    turn = rotation_between(problem.up[0], problem.up[1])
    aside = np.cross(problem.up[0], [0.0, 0.0, 1.0]) * -1.0
    # Parallel cameras: what moved left from A to B lies to the right of B's way.
    shift = []
    marks = problem.limbs if len(problem.limbs) else problem.outlines
    for k in range(len(problem.objects)):
        middles = []
        for view in range(2):
            mine = (marks.object == k) & (marks.view == view)
            if not mine.any():
                break
            card = values[problem.cameras[view]]
            ideal = (marks.px[mine].mean(axis=0) - card[2:4]) / card[:2]
            ray = np.array([*ideal, 1.0])
            middles.append(float((turn.T @ ray if view else ray) @ aside))
        if len(middles) == 2:
            shift.append(middles[0] - middles[1])
    sign = 1.0 if not shift or float(np.mean(shift)) >= 0.0 else -1.0
    direction = sign * aside
    prior = PosePrior(1, turn, PARALLEL_SD_RAD, direction, SIDEWAYS_SD_RAD)
    bare = replace(
        problem,
        ties_px=np.zeros((0, problem.views, 2)),
        ties_sd_px=np.zeros(0),
        pose_priors=(prior,),
    )
    return bare, np.stack([np.eye(3), turn]), np.stack([np.zeros(3), direction])
