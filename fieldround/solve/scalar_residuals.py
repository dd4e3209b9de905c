"""The few scalar observations of a pair: scale, attitude, expectations, fall-back poses.

In: a `PairProblem` and a `PairState`. Out: `Block`s over the reduced unknowns, whitened.
"""

from __future__ import annotations

from functools import partial

import numpy as np

from fieldround.geometry.rotations import square_basis, vector_from_rotation
from fieldround.solve.blocks import Block, Loss
from fieldround.solve.problem import PairProblem
from fieldround.solve.robust import plain, student
from fieldround.solve.state import ABSENT, Layout, PairState

# Degrees of freedom of the t losses: priors that real rounds break (a tilted camera, a leaning
# pole) must let go smoothly.
PRIOR_FREEDOM = 4.0
# A guess used only where no base mark tells the ground line: the phone is held about 1.55 m
# above it (common practice), give or take the slope of the ground.
CAMERA_HEIGHT_M = 1.55
CAMERA_HEIGHT_SD_M = 0.7

Gradient = dict[int, np.ndarray | float]


def _rows(entries: list[tuple[float, Gradient]], size: int) -> tuple[np.ndarray, np.ndarray]:
    """Residuals and Jacobian of a few scalar observations given as column -> gradient."""
    residuals = np.array([value for value, _ in entries])
    jacobian = np.zeros((len(entries), size))
    for row, (_, gradient) in enumerate(entries):
        for first, part in gradient.items():
            part = np.atleast_1d(part)
            if first != ABSENT:
                jacobian[row, first : first + len(part)] += part
    return residuals, jacobian


def _block(source: str, entries: list[tuple[float, Gradient]], size: int, loss: Loss) -> Block:
    residuals, jacobian = _rows(entries, size)
    return Block(source, residuals, jacobian, loss)


def section_radius(
    problem: PairProblem, layout: Layout, state: PairState, k: int
) -> tuple[float, Gradient]:
    """Radius of object k at its reference height and its gradient by column."""
    thing = problem.objects[k]
    if thing.is_ball or thing.ref_height_m is None or layout.base[k] == ABSENT:
        only: Gradient = {int(layout.radius[k]): 1.0}
        return float(state.radii[k]), only
    height = float(state.base[k]) + thing.ref_height_m
    taper = float(state.tapers[k])
    gradient: Gradient = {
        int(layout.radius[k]): 1.0,
        int(layout.taper[k]): height,
        int(layout.base[k]): taper,
    }
    return float(state.radii[k]) + taper * height, gradient


def scale_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """Tape, GNSS length and known diameters, in sds."""
    entries: list[tuple[float, Gradient]] = []
    baseline = state.stations[1]
    length = float(np.linalg.norm(baseline))
    for seen in problem.lengths:
        gradient: Gradient = {int(layout.pose[1]) + 3: baseline / length / seen.sd_m}
        entries.append(((length - seen.length_m) / seen.sd_m, gradient))
    for k, thing in enumerate(problem.objects):
        if thing.known_diameter_m is None or not thing.known_sd_m:
            continue
        radius, by_column = section_radius(problem, layout, state, k)
        gradient = {
            c: 2.0 * np.asarray(g) / thing.known_sd_m for c, g in by_column.items() if c != ABSENT
        }
        entries.append(((2.0 * radius - thing.known_diameter_m) / thing.known_sd_m, gradient))
    return _block("baseline", entries, layout.size, plain)


def attitude_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """Upright objects, plumb lines and level cameras against the pair's vertical, in sds."""
    entries: list[tuple[float, Gradient]] = []
    up, up_basis = state.up, square_basis(state.up)
    for k, thing in enumerate(problem.objects):
        if thing.upright_sd_rad is None:
            continue
        axis, basis = state.axes[k], square_basis(state.axes[k])
        for column in range(2):
            across = up_basis[:, column]
            by_up = np.zeros(2)
            by_up[column] = -float(up @ axis)
            entries.append(
                (
                    float(across @ axis) / thing.upright_sd_rad,
                    {
                        int(layout.axis[k]): across @ basis / thing.upright_sd_rad,
                        layout.up: by_up / thing.upright_sd_rad,
                    },
                )
            )
    for view, normal, sd in zip(
        problem.plumb_view, problem.plumb_normal, problem.plumb_sd_rad, strict=True
    ):
        in_camera = state.rotations[view] @ up
        gradient: Gradient = {layout.up: normal @ state.rotations[view] @ up_basis / sd}
        if layout.pose[view] != ABSENT:
            gradient[int(layout.pose[view])] = np.cross(in_camera, normal) / sd
        entries.append((float(normal @ in_camera) / sd, gradient))
    # The same hand holds every view: v level cameras say no more than one.
    level_sd = problem.level_sd_rad * np.sqrt(problem.views)
    for view in range(problem.views):
        rotation = state.rotations[view]
        in_camera = rotation @ up
        sideways = np.cross(problem.up[view], [0.0, 0.0, 1.0])
        for across in (sideways, np.array([0.0, 0.0, 1.0])):
            gradient = {layout.up: across @ rotation @ up_basis / level_sd}
            if layout.pose[view] != ABSENT:
                gradient[int(layout.pose[view])] = np.cross(in_camera, across) / level_sd
            entries.append((float(across @ in_camera) / level_sd, gradient))
    return _block("uprightness", entries, layout.size, partial(student, freedom=PRIOR_FREEDOM))


def expectation_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """Expected taper of each kind, in sds."""
    entries: list[tuple[float, Gradient]] = []
    for k, thing in enumerate(problem.objects):
        if thing.taper_sd > 0.0:
            entries.append(
                (
                    (float(state.tapers[k]) - thing.taper) / thing.taper_sd,
                    {int(layout.taper[k]): 1.0 / thing.taper_sd},
                )
            )
    return _block("taper", entries, layout.size, plain)


def ground_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """Where the ground line is supposed to be when no base mark tells it, in sds."""
    entries: list[tuple[float, Gradient]] = []
    for k, thing in enumerate(problem.objects):
        if not thing.ground_guess or layout.base[k] == ABSENT:
            continue
        # A is the origin: the ground line lies CAMERA_HEIGHT_M below it along the vertical.
        ground = state.points[k] + state.base[k] * state.axes[k]
        basis, sd = square_basis(state.axes[k]), CAMERA_HEIGHT_SD_M
        entries.append(
            (
                (float(ground @ state.up) + CAMERA_HEIGHT_M) / sd,
                {
                    int(layout.base[k]): float(state.axes[k] @ state.up) / sd,
                    int(layout.point[k]): state.up @ basis / sd,
                    int(layout.axis[k]): state.base[k] * (state.up @ basis) / sd,
                    layout.up: ground @ square_basis(state.up) / sd,
                },
            )
        )
    return _block("ground line", entries, layout.size, plain)


def pose_prior_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """What a fall-back says of the poses of a pair without ties, in sds."""
    entries: list[tuple[float, Gradient]] = []
    for prior in problem.pose_priors:
        first = int(layout.pose[prior.view])
        turn = vector_from_rotation(state.rotations[prior.view] @ prior.rotation.T)
        for i in range(3):
            unit = np.eye(3)[i] / prior.rotation_sd_rad
            entries.append((float(turn[i]) / prior.rotation_sd_rad, {first: unit}))
        station = state.stations[prior.view]
        length = float(np.linalg.norm(station))
        for across in square_basis(prior.direction).T:
            slope = across - station * float(across @ station) / length**2
            entries.append(
                (
                    float(across @ station) / length / prior.direction_sd_rad,
                    {first + 3: slope / length / prior.direction_sd_rad},
                )
            )
    return _block("ties", entries, layout.size, plain)
