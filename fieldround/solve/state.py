"""The unknowns of one pair, their columns in the normal equations, and how a step moves them.

In: a `PairProblem`. Out: `PairState` (values) and `Layout` (columns). The pair frame is camera
A's; lengths are metres. A tie is a unit direction u from A and an inverse distance rho, so that a
tie at infinity is an ordinary one (inverse depth: J. Montiel et al., RSS 2006).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fieldround.geometry.rotations import rotation_from_vector, square_basis
from fieldround.solve.problem import PairProblem

CAMERA_VALUES = 9
ABSENT = -1


@dataclass(frozen=True)
class PairState:
    """Values of one pair's unknowns.

    rotations (v, 3, 3) camera-from-frame, stations (v, 3), up (3,) unit
    ties (n, 3) unit, ties_rho (n,) 1 / metres
    axes (k, 3) unit, points (k, 3), radii (k,), tapers (k,) of the radius,
    base (k,), top (k,) metres along the axis from `points`
    """

    rotations: np.ndarray
    stations: np.ndarray
    up: np.ndarray
    ties: np.ndarray
    ties_rho: np.ndarray
    axes: np.ndarray
    points: np.ndarray
    radii: np.ndarray
    tapers: np.ndarray
    base: np.ndarray
    top: np.ndarray


@dataclass(frozen=True)
class Layout:
    """Columns of one pair's reduced normal equations (ties are eliminated before).

    pose     : (v,) first of six columns (rotation, station), ABSENT for A
    up       : first of two columns
    axis     : (k,) first of two columns, ABSENT for balls; point : (k,) first of two (balls: 3)
    radius, taper, base, top : (k,) column or ABSENT
    camera   : (v,) first of the nine columns of each view's camera
    own      : number of columns that belong to the pair; size : with the cameras'
    camera_ids : the round's index of each camera, in column order
    """

    pose: np.ndarray
    up: int
    axis: np.ndarray
    point: np.ndarray
    radius: np.ndarray
    taper: np.ndarray
    base: np.ndarray
    top: np.ndarray
    camera: np.ndarray
    own: int
    size: int
    camera_ids: tuple[int, ...]


def make_layout(problem: PairProblem) -> Layout:
    """Give every unknown of a pair its columns."""
    count = 0

    def take(n: int) -> int:
        nonlocal count
        count += n
        return count - n

    pose = np.array([ABSENT] + [take(6) for _ in range(problem.views - 1)])
    up = take(2)
    rows = []
    for thing in problem.objects:
        if thing.is_ball:
            rows.append([ABSENT, take(3), take(1), ABSENT, ABSENT, ABSENT])
            continue
        rows.append(
            [
                take(2),
                take(2),
                take(1),
                take(1) if thing.taper_sd > 0.0 else ABSENT,
                take(1) if thing.has_base or thing.ground_guess else ABSENT,
                take(1) if thing.has_top else ABSENT,
            ]
        )
    columns = np.array(rows, dtype=int).reshape(-1, 6)
    own = count
    camera_ids = tuple(sorted(set(problem.cameras.tolist())))
    first = {camera: own + CAMERA_VALUES * i for i, camera in enumerate(camera_ids)}
    return Layout(
        pose=pose,
        up=up,
        axis=columns[:, 0],
        point=columns[:, 1],
        radius=columns[:, 2],
        taper=columns[:, 3],
        base=columns[:, 4],
        top=columns[:, 5],
        camera=np.array([first[c] for c in problem.cameras.tolist()]),
        own=own,
        size=own + CAMERA_VALUES * len(camera_ids),
        camera_ids=camera_ids,
    )


def _turned(directions: np.ndarray, step: np.ndarray) -> np.ndarray:
    """Move unit directions (n, 3) by tangent steps (n, 2)."""
    moved = directions + np.einsum("nij,nj->ni", square_basis(directions), step)
    return moved / np.linalg.norm(moved, axis=1)[:, None]


def _pick(step: np.ndarray, columns: np.ndarray) -> np.ndarray:
    return np.where(columns == ABSENT, 0.0, step[np.maximum(columns, 0)])


def moved(state: PairState, layout: Layout, step: np.ndarray) -> PairState:
    """The state after a step in the reduced unknowns (size,) or (own,); ties stay."""
    rotations, stations = state.rotations.copy(), state.stations.copy()
    for view, first in enumerate(layout.pose):
        if first == ABSENT:
            continue
        rotations[view] = rotation_from_vector(step[first : first + 3]) @ rotations[view]
        stations[view] = stations[view] + step[first + 3 : first + 6]
    up = _turned(state.up[None], step[layout.up : layout.up + 2][None])[0]
    axes, points = state.axes, state.points.copy()
    if len(axes):
        bases = square_basis(axes)
        turn = np.stack([_pick(step, layout.axis), _pick(step, layout.axis + 1)], axis=1)
        turn[layout.axis == ABSENT] = 0.0
        for k, first in enumerate(layout.point):
            if layout.axis[k] == ABSENT:
                points[k] += step[first : first + 3]
            else:
                points[k] += bases[k] @ step[first : first + 2]
        axes = _turned(axes, turn)
    return replace(
        state,
        rotations=rotations,
        stations=stations,
        up=up,
        axes=axes,
        points=points,
        radii=state.radii + _pick(step, layout.radius),
        tapers=state.tapers + _pick(step, layout.taper),
        base=state.base + _pick(step, layout.base),
        top=state.top + _pick(step, layout.top),
    )


def ties_moved(state: PairState, step: np.ndarray) -> PairState:
    """The state after steps (n, 3) of the ties: two across the direction, one in rho."""
    return replace(
        state, ties=_turned(state.ties, step[:, :2]), ties_rho=state.ties_rho + step[:, 2]
    )
