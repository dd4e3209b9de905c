"""Residuals of one pair against its observations, whitened, with analytic Jacobians.

In: a `PairProblem`, a `PairState`, the nine values of each camera. Out: one `Block` a source
(residuals, Jacobian over the reduced unknowns, robust loss) and a `TieBlock` that still carries
the derivatives by the ties, which the adjustment eliminates (Schur complement).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial

import numpy as np

from fieldround.geometry.camera import (
    distort,
    pixel_by_ideal,
    pixel_by_values,
    pixels_to_ideal,
)
from fieldround.geometry.rotations import cross_matrix, square_basis, vector_from_rotation
from fieldround.geometry.touching import axis_distance, centre_distance
from fieldround.solve.problem import Marks, PairProblem
from fieldround.solve.robust import huber, plain, student
from fieldround.solve.state import ABSENT, CAMERA_VALUES, Layout, PairState

Loss = Callable[[np.ndarray], tuple[np.ndarray, float]]

# Degrees of freedom of the t losses: priors that real rounds break (a tilted camera, a leaning
# pole) must let go smoothly. Limits of the Huber losses are in sds.
PRIOR_FREEDOM = 4.0
MARK_LIMIT = 3.0
# A guess used only where no base mark tells the ground line: the phone is held about 1.55 m
# above it (common practice), give or take the slope of the ground.
CAMERA_HEIGHT_M = 1.55
CAMERA_HEIGHT_SD_M = 0.7


@dataclass(frozen=True)
class Block:
    """Observations of one source: residuals (m,), Jacobian (m, size) or None, loss."""

    source: str
    residuals: np.ndarray
    jacobian: np.ndarray | None
    loss: Loss


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
    derivatives: bool = True,
) -> TieBlock:
    """Residuals of the ties in all views, in sds.

    values : (v, 9) card values of each view; returns : `TieBlock`
    """
    n, views = len(state.ties), problem.views
    columns = tie_columns(layout)
    seen = np.isfinite(problem.ties_px[:, :, 0])
    weight = seen / problem.ties_sd_px[:, None]
    residuals = np.zeros((n, 2 * views))
    by_tie = np.zeros((n, 2 * views, 3)) if derivatives else None
    by_rest = np.zeros((n, 2 * views, len(columns))) if derivatives else None
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
        if by_tie is None or by_rest is None or basis is None:
            continue
        plane = pixel_by_ideal(ideal, values[view])
        by_p = np.empty((n, 2, 3))
        by_p[:, :, :2] = plane
        by_p[:, :, 2] = -(plane @ ideal[:, :, None])[:, :, 0]
        by_p *= (w / z)[:, None, None]
        turned = by_p @ rotation
        by_tie[:, rows, :2] = turned @ basis
        by_tie[:, rows, 2] = -(turned @ station)
        if first != ABSENT:
            # d(p) = omega x p for a rotation step, -rho R dC for a station step.
            by_rest[:, rows, slot : slot + 3] = -by_p @ cross_matrix(p)
            by_rest[:, rows, slot + 3 : slot + 6] = -turned * state.ties_rho[:, None, None]
            slot += 6
        at = len(columns) - (layout.size - layout.camera[view])
        by_rest[:, rows, at : at + CAMERA_VALUES] += (
            pixel_by_values(ideal, values[view]) * w[:, None, None]
        )
    return TieBlock(residuals, by_tie, by_rest, columns)


@dataclass(frozen=True)
class _Sight:
    """Rays of marks and what their derivatives need: all (m, ...)."""

    ideal: np.ndarray
    camera_ray: np.ndarray
    ray: np.ndarray
    rotation: np.ndarray
    station: np.ndarray
    values: np.ndarray


@dataclass(frozen=True)
class _Touch:
    """A touching residual in metres with its gradients; `by_axis`, `foot` for cylinders only."""

    metres: np.ndarray
    by_ray: np.ndarray
    by_offset: np.ndarray
    by_axis: np.ndarray | None = None
    foot: np.ndarray | None = None


def _sight(marks: Marks, ideal: np.ndarray, state: PairState, values: np.ndarray) -> _Sight:
    camera_ray = np.concatenate([ideal, np.ones((len(ideal), 1))], axis=1)
    rotation = state.rotations[marks.view]
    ray = np.einsum("mji,mj->mi", rotation, camera_ray)
    return _Sight(ideal, camera_ray, ray, rotation, state.stations[marks.view], values)


def _limb_touch(marks: Marks, state: PairState, sight: _Sight) -> _Touch:
    k = marks.object
    touch = axis_distance(sight.ray, state.axes[k], state.points[k] - sight.station)
    side, taper = marks.side[:, None], state.tapers[k][:, None]
    return _Touch(
        marks.side * touch.distance - state.radii[k] - state.tapers[k] * touch.foot,
        side * touch.by_ray - taper * touch.foot_by_ray,
        side * touch.by_offset - taper * touch.foot_by_offset,
        side * touch.by_axis - taper * touch.foot_by_axis,
        touch.foot,
    )


def _outline_touch(marks: Marks, state: PairState, sight: _Sight) -> _Touch:
    k = marks.object
    touch = centre_distance(sight.ray, state.points[k] - sight.station)
    return _Touch(touch.distance - state.radii[k], touch.by_ray, touch.by_offset)


def _scatter(jacobian: np.ndarray, columns: np.ndarray, parts: np.ndarray) -> None:
    """Add parts (m, c) into the Jacobian at the columns (m,) .. + c, skipping ABSENT."""
    rows = np.flatnonzero(columns != ABSENT)
    for offset in range(parts.shape[1]):
        jacobian[rows, columns[rows] + offset] += parts[rows, offset]


def _by_pixel(sight: _Sight, by_ray: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Gradient of a touching residual by the pixel (m, 2), by the camera ray (m, 3), and the
    inverse Jacobian of the pixel by the ideal point (m, 2, 2)."""
    in_camera = np.einsum("mij,mj->mi", sight.rotation, by_ray)
    plane = pixel_by_ideal(sight.ideal, sight.values)
    inverse = np.empty_like(plane)
    inverse[:, 0, 0], inverse[:, 1, 1] = plane[:, 1, 1], plane[:, 0, 0]
    inverse[:, 0, 1], inverse[:, 1, 0] = -plane[:, 0, 1], -plane[:, 1, 0]
    inverse /= (plane[:, 0, 0] * plane[:, 1, 1] - plane[:, 0, 1] * plane[:, 1, 0])[:, None, None]
    return np.einsum("mi,mij->mj", in_camera[:, :2], inverse), in_camera, inverse


def _touching_block(
    marks: Marks,
    layout: Layout,
    state: PairState,
    values: np.ndarray,
    touching: Callable[[Marks, PairState, _Sight], _Touch],
) -> Block:
    """Distance of each mark from the limb in the picture, in sds of the mark.

    The residual is the pixel distance to the nearest point of the fitted limb, and the Jacobian
    is taken AT that point: a gradient taken at the mark itself carries the mark's own noise and
    pulls ranges long (the squared residuals do not cancel).
    """
    mark_values = values[marks.view]
    sight = _sight(marks, pixels_to_ideal(marks.px, mark_values), state, mark_values)
    touch = touching(marks, state, sight)
    by_pixel, _, inverse = _by_pixel(sight, touch.by_ray)
    slope = np.einsum("mi,mi->m", by_pixel, by_pixel)
    to_limb = -(touch.metres / slope)[:, None] * by_pixel
    ideal = sight.ideal + np.einsum("mij,mj->mi", inverse, to_limb)
    at_limb = distort(ideal, mark_values) * mark_values[:, :2] + mark_values[:, 2:4]

    sight = _sight(marks, ideal, state, mark_values)
    touch = touching(marks, state, sight)
    by_pixel, in_camera, _ = _by_pixel(sight, touch.by_ray)
    scale = 1.0 / np.sqrt(np.einsum("mi,mi->m", by_pixel, by_pixel))
    off = np.einsum("mi,mi->m", marks.px - at_limb, by_pixel) * scale + touch.metres * scale
    weight = scale / marks.sd_px

    jacobian = np.zeros((len(marks), layout.size))
    # The ray turns against the camera: d(residual) = -omega . (d x R g).
    pose = np.concatenate([-np.cross(sight.camera_ray, in_camera), -touch.by_offset], axis=1)
    _scatter(jacobian, layout.pose[marks.view], pose)
    by_values = -np.einsum("mi,mij->mj", by_pixel, pixel_by_values(ideal, mark_values))
    _scatter(jacobian, layout.camera[marks.view], by_values)
    k = marks.object
    _scatter(jacobian, layout.radius[k], -np.ones((len(marks), 1)))
    if touch.by_axis is None or touch.foot is None:
        _scatter(jacobian, layout.point[k], touch.by_offset)
    else:
        basis = square_basis(state.axes[k])
        _scatter(jacobian, layout.axis[k], np.einsum("mi,mij->mj", touch.by_axis, basis))
        _scatter(jacobian, layout.point[k], np.einsum("mi,mij->mj", touch.by_offset, basis))
        _scatter(jacobian, layout.taper[k], -touch.foot[:, None])
    return Block(
        "limb marks", off / marks.sd_px, jacobian * weight[:, None], partial(huber, limit=MARK_LIMIT)
    )


def limb_block(problem: PairProblem, layout: Layout, state: PairState, values: np.ndarray) -> Block:
    """Limb marks of cylinders: the limb is where side * distance = radius + taper * foot."""
    return _touching_block(problem.limbs, layout, state, values, _limb_touch)


def outline_block(
    problem: PairProblem, layout: Layout, state: PairState, values: np.ndarray
) -> Block:
    """Outline marks of balls: the outline is where the distance to the centre = radius."""
    return _touching_block(problem.outlines, layout, state, values, _outline_touch)


def end_block(
    problem: PairProblem, layout: Layout, state: PairState, values: np.ndarray
) -> Block:
    """Base and top marks: the end of the axis projected, minus the mark, in sds."""
    marks = problem.ends
    k, m = marks.object, len(marks)
    is_top = marks.side > 0.5
    height = np.where(is_top, state.top[k], state.base[k])
    axes = state.axes[k]
    point = state.points[k] + height[:, None] * axes
    rotation = state.rotations[marks.view]
    p = np.einsum("mij,mj->mi", rotation, point - state.stations[marks.view])
    z = np.where(p[:, 2] > 1e-6, p[:, 2], 1e-6)
    ideal = p[:, :2] / z[:, None]
    mark_values = values[marks.view]
    pixel = distort(ideal, mark_values) * mark_values[:, :2] + mark_values[:, 2:4]
    plane = pixel_by_ideal(ideal, mark_values)
    by_p = np.empty((m, 2, 3))
    by_p[:, :, :2] = plane
    by_p[:, :, 2] = -(plane @ ideal[:, :, None])[:, :, 0]
    by_p /= z[:, None, None]
    by_point = by_p @ rotation
    basis = square_basis(axes)
    parts = (
        (layout.pose[marks.view], np.concatenate([-by_p @ cross_matrix(p), -by_point], axis=2)),
        (layout.point[k], by_point @ basis),
        (layout.axis[k], (by_point * height[:, None, None]) @ basis),
        (np.where(is_top, layout.top[k], layout.base[k]), by_point @ axes[:, :, None]),
        (layout.camera[marks.view], pixel_by_values(ideal, mark_values)),
    )
    jacobian = np.zeros((m, 2, layout.size))
    for columns, part in parts:
        _scatter(jacobian[:, 0], columns, part[:, 0])
        _scatter(jacobian[:, 1], columns, part[:, 1])
    weight = 1.0 / marks.sd_px
    return Block(
        "limb marks",
        ((pixel - marks.px) * weight[:, None]).ravel(),
        (jacobian * weight[:, None, None]).reshape(2 * m, layout.size),
        partial(huber, limit=MARK_LIMIT),
    )


def _rows(entries: list[tuple[float, dict[int, np.ndarray | float]]], size: int) -> tuple:
    """Residuals and Jacobian of a few scalar observations given as column -> gradient."""
    residuals = np.array([value for value, _ in entries])
    jacobian = np.zeros((len(entries), size))
    for row, (_, gradient) in enumerate(entries):
        for first, part in gradient.items():
            part = np.atleast_1d(part)
            if first != ABSENT:
                jacobian[row, first : first + len(part)] += part
    return residuals, jacobian


def section_radius(
    problem: PairProblem, layout: Layout, state: PairState, k: int
) -> tuple[float, dict[int, np.ndarray | float]]:
    """Radius of object k at its reference height and its gradient by column."""
    thing = problem.objects[k]
    if thing.is_ball or thing.ref_height_m is None or layout.base[k] == ABSENT:
        return float(state.radii[k]), {int(layout.radius[k]): 1.0}
    height = float(state.base[k]) + thing.ref_height_m
    taper = float(state.tapers[k])
    gradient = {
        int(layout.radius[k]): 1.0,
        int(layout.taper[k]): height,
        int(layout.base[k]): taper,
    }
    return float(state.radii[k]) + taper * height, gradient


def scale_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """Tape, GNSS length and known diameters, in sds."""
    entries: list[tuple[float, dict[int, np.ndarray | float]]] = []
    baseline = state.stations[1]
    length = float(np.linalg.norm(baseline))
    for seen in problem.lengths:
        gradient: dict[int, np.ndarray | float] = {
            int(layout.pose[1]) + 3: baseline / length / seen.sd_m
        }
        entries.append(((length - seen.length_m) / seen.sd_m, gradient))
    for k, thing in enumerate(problem.objects):
        if thing.known_diameter_m is None or not thing.known_sd_m:
            continue
        radius, by_column = section_radius(problem, layout, state, k)
        gradient = {
            c: 2.0 * np.asarray(g) / thing.known_sd_m for c, g in by_column.items() if c != ABSENT
        }
        entries.append(((2.0 * radius - thing.known_diameter_m) / thing.known_sd_m, gradient))
    return Block("baseline", *_rows(entries, layout.size), plain)


def attitude_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """Upright objects, plumb lines and level cameras against the pair's vertical, in sds."""
    entries: list[tuple[float, dict[int, np.ndarray | float]]] = []
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
        gradient: dict[int, np.ndarray | float] = {
            layout.up: normal @ state.rotations[view] @ up_basis / sd
        }
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
    return Block(
        "uprightness", *_rows(entries, layout.size), partial(student, freedom=PRIOR_FREEDOM)
    )


def expectation_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """Expected taper of each kind, and the ground line where no base mark tells it, in sds."""
    entries: list[tuple[float, dict[int, np.ndarray | float]]] = []
    for k, thing in enumerate(problem.objects):
        if thing.taper_sd > 0.0:
            entries.append(
                (
                    (float(state.tapers[k]) - thing.taper) / thing.taper_sd,
                    {int(layout.taper[k]): 1.0 / thing.taper_sd},
                )
            )
        if thing.ground_guess and layout.base[k] != ABSENT:
            # A is the origin: the ground line lies CAMERA_HEIGHT_M below it along the vertical.
            ground = state.points[k] + state.base[k] * state.axes[k]
            sd = CAMERA_HEIGHT_SD_M
            entries.append(
                (
                    (float(ground @ state.up) + CAMERA_HEIGHT_M) / sd,
                    {int(layout.base[k]): float(state.axes[k] @ state.up) / sd},
                )
            )
    return Block("taper", *_rows(entries, layout.size), plain)


def pose_prior_block(problem: PairProblem, layout: Layout, state: PairState) -> Block:
    """What a fall-back says of the poses of a pair without ties, in sds."""
    entries: list[tuple[float, dict[int, np.ndarray | float]]] = []
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
    return Block("ties", *_rows(entries, layout.size), plain)


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
    if problem.pose_priors:
        found.append(pose_prior_block(problem, layout, state))
    return [block for block in found if len(block.residuals)]
