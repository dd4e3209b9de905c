"""Start values of one pair's objects: axes, centres, radii, the sides of their limb marks.

In: a `PairProblem`, camera values, start poses. Out: `AxisStart`s, settled sides, closed-form
readings; `StartError` says in words why an object has none.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fieldround.geometry.rotations import square_basis
from fieldround.geometry.spreads import readings
from fieldround.geometry.touching import axis_distance
from fieldround.solve.problem import Marks, PairProblem
from fieldround.solve.start import StartError, camera_rays
from fieldround.solve.state import PairState

# Half a pixel of an ordinary phone: below it two sight lines are one.
PARALLAX_LEAST_RAD = 2e-4
# Sines of the angle between bisecting planes below which they do not give the axis.
PLANES_APART = 0.02
PLANES_APART_LEAST = 1e-4


@dataclass(frozen=True)
class AxisStart:
    """Axis direction (3,), a point on it (3,) and the radius, in units of the start poses."""

    axis: np.ndarray
    point: np.ndarray
    radius: float


def _marks_of(marks: Marks, thing: int, view: int) -> np.ndarray:
    return (marks.object == thing) & (marks.view == view)


def ball_start(
    problem: PairProblem, values: np.ndarray, rotations: np.ndarray, stations: np.ndarray, k: int
) -> AxisStart:
    """Centre and radius of a ball: cone of its outline rays in each view, centres triangulated."""
    centres, halves, seen = [], [], []
    for view in range(problem.views):
        mine = _marks_of(problem.outlines, k, view)
        if mine.sum() < 2:
            continue
        d = camera_rays(problem, values, problem.outlines.px[mine], view) @ rotations[view]
        middle = d.mean(axis=0)
        if len(d) >= 3:
            # Rays of a cone about c satisfy d . c = cos(half angle): least squares for c / cos.
            # The mean ray carries the part that few or one-sided marks leave open.
            solved = np.linalg.lstsq(d, np.ones(len(d)), rcond=1e-12)[0]
            if np.linalg.norm(solved) > 0:
                middle = solved
        c = middle / np.linalg.norm(middle)
        centres.append(c)
        halves.append(float(np.mean(np.linalg.norm(np.cross(d, c), axis=1))))
        seen.append(view)
    if len(seen) < 2:
        raise StartError("its outline is marked in fewer than two photos of the pair")
    _need_parallax(np.array(centres), None)
    point = _meeting(np.array(centres), stations[seen])
    if point is None:
        raise StartError("its sight lines run parallel: the baseline points at it")
    distances = np.linalg.norm(point - stations[seen], axis=1)
    return AxisStart(np.array([0.0, 0.0, 1.0]), point, float(np.mean(np.array(halves) * distances)))


def _need_parallax(directions: np.ndarray, axis: np.ndarray | None) -> None:
    """Refuse sight lines (v, 3) that run parallel, for a cylinder in the plane square to its axis.

    raises : StartError
    """
    if axis is not None:
        directions = directions - (directions @ axis)[:, None] * axis
        directions = directions / np.linalg.norm(directions, axis=1)[:, None]
    widest = float(np.linalg.norm(directions[1:] - directions[0], axis=1).max())
    if widest < PARALLAX_LEAST_RAD:
        raise StartError(
            f"its sight lines from the stations differ by {np.degrees(widest):.3f} degrees only: "
            "the baseline points at it or is too short; stand apart, square to the line of sight"
        )


def _meeting(directions: np.ndarray, stations: np.ndarray) -> np.ndarray | None:
    """Point nearest to all lines (stations, unit directions); None when they run parallel."""
    shadow = np.eye(3) - directions[:, :, None] * directions[:, None, :]
    system = shadow.sum(axis=0)
    if np.linalg.eigvalsh(system)[0] < 1e-12:
        return None
    return np.linalg.solve(system, np.einsum("nij,nj->i", shadow, stations))


def cylinder_start(
    problem: PairProblem,
    values: np.ndarray,
    rotations: np.ndarray,
    stations: np.ndarray,
    up: np.ndarray,
    k: int,
) -> AxisStart:
    """Axis and radius of a cylinder: the intersection of the views' bisecting planes.

    Each view's two limb planes are symmetric about the plane through the station and the axis.
    """
    thing = problem.objects[k]
    middles, normals, spans, seen, sides = [], [], [], [], []
    for view in range(problem.views):
        mine = _marks_of(problem.limbs, k, view)
        if not mine.any():
            continue
        d = camera_rays(problem, values, problem.limbs.px[mine], view) @ rotations[view]
        side = problem.limbs.side[mine]
        left, right = d[side > 0], d[side < 0]
        both = [part for part in (left, right) if len(part)]
        middle = np.sum([part.mean(axis=0) for part in both], axis=0)
        spread_along, normal = [], np.zeros(3)
        for part in both:
            centred = part - part.mean(axis=0)
            _, sizes, rows = np.linalg.svd(centred, full_matrices=False)
            spread_along.append(sizes[0] / np.sqrt(len(part)))
            plane = np.cross(rows[0], part.mean(axis=0))
            plane /= np.linalg.norm(plane)
            normal += plane if not normal.any() or plane @ normal > 0 else -plane
        middles.append(middle / np.linalg.norm(middle))
        normals.append(normal)
        spans.append(min(spread_along))
        sides.append(len(both))
        seen.append(view)
    if len(seen) < 2:
        raise StartError("its limbs are marked in fewer than two photos of the pair")
    middles_, at = np.array(middles), stations[seen]
    # A span below a thousandth of a radian tells no direction: one height, axis by the vertical.
    flat = np.array(spans) > 1.5e-3
    units = np.array(normals)[flat]
    units /= np.linalg.norm(units, axis=1)[:, None]
    sizes, rows = np.linalg.svd(units)[1:] if flat.sum() >= 2 else (np.zeros(2), np.eye(3))
    upright = thing.upright_sd_rad is not None
    if sizes[1] > (PLANES_APART if upright else PLANES_APART_LEAST):
        axis = rows[-1]
    elif upright:
        # Planes that nearly coincide, or marks at one height, leave the axis to the vertical.
        axis = up
        units = np.cross(middles_, axis)
        units /= np.linalg.norm(units, axis=1)[:, None]
        flat = np.ones(len(seen), dtype=bool)
    elif flat.sum() >= 2:
        raise StartError("the baseline lies in one plane with its axis")
    else:
        raise StartError("its limbs are marked at one place only: mark each limb at both ends")
    reference = up if abs(axis @ up) > 0.3 else np.array([1.0, 0.0, 0.0])
    axis = axis if axis @ reference > 0 else -axis
    offsets = np.einsum("vi,vi->v", units, at[flat])
    point = np.linalg.lstsq(units, offsets, rcond=1e-10)[0]
    _need_parallax(middles_, axis)
    # Slide to the height of the marks, as seen from the first view.
    middle, station = middles_[0], at[0]
    foot = axis_distance(middle[None], axis[None], (point - station)[None]).foot[0]
    point = point + foot * axis
    distances, radii = [], []
    for view, limbs in zip(seen, sides, strict=True):
        if limbs < 2:
            continue
        mine = _marks_of(problem.limbs, k, view)
        d = camera_rays(problem, values, problem.limbs.px[mine], view) @ rotations[view]
        many = np.broadcast_to(axis, d.shape)
        s = axis_distance(d, many, np.broadcast_to(point - stations[view], d.shape)).distance
        side = problem.limbs.side[mine]
        radii.append(0.5 * abs(s[side > 0].mean() - s[side < 0].mean()))
        distances.append(np.linalg.norm(point - stations[view]))
    if not radii:
        raise StartError("no photo shows both its limbs marked")
    if not np.all(np.einsum("vi,vi->v", point - at, middles_) > 0):
        raise StartError(
            "its sight lines meet behind the camera: marks on two different objects, "
            "photos A and B swapped, or a baseline too short"
        )
    return AxisStart(axis, point, float(np.mean(radii)))


def settled_sides(
    problem: PairProblem, values: np.ndarray, state: PairState
) -> tuple[PairProblem, tuple[tuple[str, str], ...]]:
    """Sides of the limb marks by the geometry instead of by name, and notes where they differ.

    `left` in the sheet starts as +1. A mark set is turned over when the fitted axis lies on its
    other side: marks named left and right the wrong way round are still limbs.
    """
    marks = problem.limbs
    if not len(marks):
        return problem, ()
    side, notes = marks.side.copy(), []
    for k, thing in enumerate(problem.objects):
        turned = []
        for view in range(problem.views):
            mine = _marks_of(marks, k, view)
            if not mine.any():
                continue
            d = camera_rays(problem, values, marks.px[mine], view) @ state.rotations[view]
            s = axis_distance(
                d,
                np.broadcast_to(state.axes[k], d.shape),
                np.broadcast_to(state.points[k] - state.stations[view], d.shape),
            ).distance
            # Left of an axis that points up in the picture is the positive side.
            upward = float(problem.up[view] @ state.rotations[view] @ state.axes[k])
            expected = 1.0 if upward >= 0.0 else -1.0
            named = side[mine]
            if (named > 0).any() and (named < 0).any():
                found = 1.0 if s[named > 0].mean() >= s[named < 0].mean() else -1.0
            else:
                found = expected
            side[mine] = named * found
            if abs(upward) > 0.5 and found != expected:
                turned.append(problem.photos[view])
        if turned:
            notes.append(
                (
                    thing.name,
                    "left and right were named the wrong way round in "
                    + " and ".join(turned)
                    + "; the limbs were taken as they lie",
                )
            )
    return replace(problem, limbs=replace(marks, side=side)), tuple(notes)


def closed_form_readings(
    problem: PairProblem,
    values: np.ndarray,
    state: PairState,
    k: int,
    views: tuple[int, int] = (0, 1),
) -> np.ndarray:
    """The two readings of object k by spreads, metres, (2,), NaN where a view has one limb only."""
    pairs = []
    for view in views:
        if problem.objects[k].is_ball:
            mine = _marks_of(problem.outlines, k, view)
            if mine.sum() < 2:
                return np.full(2, np.nan)
            d = camera_rays(problem, values, problem.outlines.px[mine], view)
            d = d @ state.rotations[view]
            centre = state.points[k] - state.stations[view]
            centre /= np.linalg.norm(centre)
            half = float(np.mean(np.arcsin(np.linalg.norm(np.cross(d, centre), axis=1))))
            across = square_basis(centre)[:, 0]
            pairs.append([np.cos(half) * centre + s * np.sin(half) * across for s in (1.0, -1.0)])
            continue
        mine = _marks_of(problem.limbs, k, view)
        d = camera_rays(problem, values, problem.limbs.px[mine], view) @ state.rotations[view]
        side, axis = problem.limbs.side[mine], state.axes[k]
        if not ((side > 0).any() and (side < 0).any()):
            return np.full(2, np.nan)
        touch = axis_distance(
            d,
            np.broadcast_to(axis, d.shape),
            np.broadcast_to(state.points[k] - state.stations[view], d.shape),
        )
        flat = d - (d @ axis)[:, None] * axis
        flat /= np.linalg.norm(flat, axis=1)[:, None]
        # Bring every limb ray to one height along the taper, as an angle about the axis.
        away = state.points[k] - state.stations[view]
        away = float(np.linalg.norm(away - (away @ axis) * axis))
        turn = side * state.tapers[k] * touch.foot / away
        flat = flat + turn[:, None] * np.cross(axis, flat)
        limbs = [flat[side > 0].mean(axis=0), flat[side < 0].mean(axis=0)]
        pairs.append([limb / np.linalg.norm(limb) for limb in limbs])
    baseline = state.stations[views[1]] - state.stations[views[0]]
    if not problem.objects[k].is_ball:
        baseline = baseline - (baseline @ state.axes[k]) * state.axes[k]
    return readings(np.array(pairs[0])[None], np.array(pairs[1])[None], baseline[None])[0]
