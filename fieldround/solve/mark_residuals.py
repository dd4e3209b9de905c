"""Residuals of limb, outline, base and top marks against the objects, whitened.

In: a `PairProblem`, a `PairState`, card values a view. Out: `Block`s over the reduced unknowns.
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
from fieldround.geometry.rotations import cross_matrix, square_basis
from fieldround.geometry.touching import axis_distance, centre_distance, cross
from fieldround.solve.blocks import Block
from fieldround.solve.problem import Marks, PairProblem
from fieldround.solve.robust import huber
from fieldround.solve.state import ABSENT, Layout, PairState

# Limit of the Huber loss in sds: a stray mark pulls no harder than this.
MARK_LIMIT = 3.0
STEP_MOST_PX = 50.0


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
    first = int(columns[0])
    if (columns == first).all():
        if first != ABSENT:
            jacobian[:, first : first + parts.shape[1]] += parts
        return
    rows = np.flatnonzero(columns != ABSENT)
    spread = columns[rows, None] + np.arange(parts.shape[1])
    jacobian[rows[:, None], spread] += parts[rows]


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
    # From a poor start the limb may lie outside the picture, where the distortion means nothing.
    away_px = np.clip(touch.metres / np.sqrt(slope), -STEP_MOST_PX, STEP_MOST_PX)
    to_limb = -(away_px / np.sqrt(slope))[:, None] * by_pixel
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
    pose = np.concatenate([-cross(sight.camera_ray, in_camera), -touch.by_offset], axis=1)
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
        "limb marks",
        off / marks.sd_px,
        jacobian * weight[:, None],
        partial(huber, limit=MARK_LIMIT),
    )


def limb_block(problem: PairProblem, layout: Layout, state: PairState, values: np.ndarray) -> Block:
    """Limb marks of cylinders: the limb is where side * distance = radius + taper * foot."""
    return _touching_block(problem.limbs, layout, state, values, _limb_touch)


def outline_block(
    problem: PairProblem, layout: Layout, state: PairState, values: np.ndarray
) -> Block:
    """Outline marks of balls: the outline is where the distance to the centre = radius."""
    return _touching_block(problem.outlines, layout, state, values, _outline_touch)


def end_block(problem: PairProblem, layout: Layout, state: PairState, values: np.ndarray) -> Block:
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
