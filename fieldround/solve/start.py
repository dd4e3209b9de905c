"""Start values of one pair: poses from the ties, scale, the vertical, each object's axis.

In: a `PairProblem` and camera values. Out: the parts of a start state, or a `StartError` that
says in words why there is none.
"""

from __future__ import annotations

import numpy as np

from fieldround.geometry.camera import rays
from fieldround.geometry.essential import relative_pose
from fieldround.rounds.errors import RoundError
from fieldround.solve.cameras import CameraPriors
from fieldround.solve.problem import PairProblem

TIES_FEWEST = 5
TIES_FOR_FOCAL = 20
FOCAL_FACTORS = (1.0, 0.85, 1.18, 0.7, 1.42)
# Found ties are sharper than a wrong focal length lets them agree.
FOCAL_SLACK = 4.0


class StartError(RoundError):
    """A pair has no usable start; the sentence says why."""


def camera_rays(problem: PairProblem, values: np.ndarray, px: np.ndarray, view: int) -> np.ndarray:
    """Unit camera-frame rays of card pixels in one view, (n, 3), NaN for NaN pixels."""
    out = np.full((len(px), 3), np.nan)
    seen = np.isfinite(px[:, 0])
    if seen.any():
        out[seen] = rays(px[seen], values[problem.cameras[view]])
    return out


def triangulated(
    directions: np.ndarray, rotations: np.ndarray, stations: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Ties from their rays in all views: unit direction from A (n, 3) and inverse distance (n,).

    directions : (n, v, 3) camera-frame rays, NaN where unseen
    source     : R. Hartley and A. Zisserman, Multiple View Geometry (2004), 12.2
    """
    scale = float(np.linalg.norm(stations[-1])) or 1.0
    n = len(directions)
    system = np.zeros((n, 4, 4))
    for view in range(len(stations)):
        d = directions[:, view] @ rotations[view]
        seen = np.isfinite(d[:, 0])
        d = np.where(seen[:, None], d, 0.0)
        # |d x (u - rho C)|^2 = q' (I - d d') q for unit d, with q = [I, -C] (u, rho).
        shadow = np.eye(3) * seen[:, None, None] - d[:, :, None] * d[:, None, :]
        lift = np.concatenate([np.eye(3), -(stations[view] / scale)[:, None]], axis=1)
        system += lift.T @ shadow @ lift
    _, vectors = np.linalg.eigh(system)
    tie = vectors[:, :, 0]
    length = np.linalg.norm(tie[:, :3], axis=1)
    tie = tie / np.maximum(length, 1e-12)[:, None]
    # The solution's sign is free: turn it so that the tie lies in front of the views that see it.
    forward = np.zeros(n)
    for view in range(len(stations)):
        d = directions[:, view] @ rotations[view]
        p = tie[:, :3] - tie[:, 3:] * stations[view] / scale
        forward += np.nan_to_num(np.einsum("ni,ni->n", d, p))
    tie *= np.where(forward < 0.0, -1.0, 1.0)[:, None]
    return tie[:, :3], tie[:, 3] / scale


def poses_from_ties(
    problem: PairProblem, values: np.ndarray
) -> tuple[np.ndarray, np.ndarray, list[tuple[np.ndarray, np.ndarray]]]:
    """Rotations (v, 3, 3) and stations (v, 3), A to B of length one, from the ties.

    returns also other poses of B (rotation, direction) that explain the ties about as well
    raises  : StartError when the ties do not give a pose
    """
    views = problem.views
    directions = np.stack(
        [camera_rays(problem, values, problem.ties_px[:, v], v) for v in range(views)], axis=1
    )
    focal = values[problem.cameras, 0]
    rotations, stations = np.stack([np.eye(3)] * views), np.zeros((views, 3))
    others: list[tuple[np.ndarray, np.ndarray]] = []
    for view in range(1, views):
        both = np.isfinite(directions[:, 0, 0]) & np.isfinite(directions[:, view, 0])
        if both.sum() < TIES_FEWEST:
            raise StartError(
                f"photos {problem.photos[0]} and {problem.photos[view]} share {int(both.sum())} "
                f"ties; {TIES_FEWEST} are the fewest that fix how the cameras stood"
            )
        sd = problem.ties_sd_px[both] / focal[0]
        pose = relative_pose(directions[both, 0], directions[both, view], sd, seed=1)
        if pose is None:
            raise StartError(
                f"the ties between {problem.photos[0]} and {problem.photos[view]} "
                "agree on no pose of the cameras"
            )
        if view == 1 and pose.runner_up is not None:
            others.append((pose.runner_up.rotation, pose.runner_up.direction))
        rotations[view], direction = pose.rotation, pose.direction
        length = 1.0
        if view > 1:
            length = _length_from_shared(directions, rotations, stations, direction, view, both)
        stations[view] = direction * length
    return rotations, stations, others


def likely_values(problem: PairProblem, priors: CameraPriors) -> np.ndarray:
    """Start values of the round's cameras, (m, 9): the cards', but for focal lengths from EXIF.

    A focal length that EXIF gives may be a third off. A few are tried, and the one under which
    the ties agree best is the start; the prior stays where it is.
    """
    values = priors.values.copy()
    loose = [c for c in sorted(set(problem.cameras[:2].tolist())) if priors.heavy[c]]
    both = np.isfinite(problem.ties_px[:, :2, 0]).all(axis=1)
    if not loose or both.sum() < TIES_FOR_FOCAL:
        return values
    scored = []
    for factor in FOCAL_FACTORS:
        tried = values.copy()
        tried[loose, :2] *= factor
        first, second = (camera_rays(problem, tried, problem.ties_px[both, v], v) for v in (0, 1))
        sd = problem.ties_sd_px[both] * FOCAL_SLACK / tried[problem.cameras[0], 0]
        pose = relative_pose(first, second, sd, seed=1)
        if pose is not None:
            scored.append((pose.score, factor))
    if scored:
        best, factor = min(scored)
        plain = next((score for score, f in scored if f == 1.0), np.inf)
        # Weak evidence does not move the start away from the EXIF.
        if best < 0.8 * plain:
            values[loose, :2] *= factor
    return values


def _length_from_shared(
    directions: np.ndarray,
    rotations: np.ndarray,
    stations: np.ndarray,
    direction: np.ndarray,
    view: int,
    both: np.ndarray,
) -> float:
    """Length of A to `view` in units of A to B, from ties that A, B and `view` all see."""
    shared = both & np.isfinite(directions[:, 1, 0])
    if not shared.any():
        raise StartError(f"no tie is seen in views 1, 2 and {view + 1} together")
    pick = directions[shared]
    _, rho_ab = triangulated(pick[:, [0, 1]], rotations[[0, 1]], stations[[0, 1]])
    unit = np.stack([np.zeros(3), direction])
    _, rho = triangulated(pick[:, [0, view]], rotations[[0, view]], unit)
    ratio = rho / np.where(np.abs(rho_ab) > 1e-9, rho_ab, np.nan)
    ratio = ratio[np.isfinite(ratio) & (ratio > 0)]
    return float(np.median(ratio)) if len(ratio) else 1.0


def vertical_start(problem: PairProblem, rotations: np.ndarray) -> np.ndarray:
    """Up in the pair's frame: plumb lines when there are any, else level cameras, (3,)."""
    level = np.einsum("vji,vj->i", rotations, problem.up)
    level /= np.linalg.norm(level)
    if not len(problem.plumb_view):
        return level
    # Plumb normals are square to the vertical; the level cameras settle what they leave free.
    normals = (
        np.einsum("pji,pj->pi", rotations[problem.plumb_view], problem.plumb_normal)
        / problem.plumb_sd_rad[:, None]
    )
    system = normals.T @ normals + (np.eye(3) - np.outer(level, level)) / problem.level_sd_rad**2
    up = np.linalg.eigh(system)[1][:, 0]
    return up if up @ level > 0 else -up


def scaled(problem: PairProblem, stations: np.ndarray, radii: dict[int, float]) -> float:
    """Metres per unit of the unscaled pair, from tape, GNSS or a known diameter.

    raises : StartError when the pair has none of them
    """
    if problem.lengths:
        best = min(problem.lengths, key=lambda length: length.sd_m)
        return best.length_m / float(np.linalg.norm(stations[1]))
    for k, radius in radii.items():
        known = problem.objects[k].known_diameter_m
        if known is not None and radius > 0:
            return known / (2.0 * radius)
    raise StartError(
        "nothing gives its scale: read a tape between the stations, or mark an object of known "
        "diameter in both photos"
    )
