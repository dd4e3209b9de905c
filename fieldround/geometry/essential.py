"""Relative orientation of two views from their ties, with wrong ones among them.

In: unit ray pairs and their angular sds. Out: `RelativePose`: rotation, direction of station B,
which ties agree, a second pose that explains them about as well, and whether the cameras only
turned. Deterministic for a seed.
Sources: M. Fischler and R. Bolles (1981), random samples; P. Torr and A. Zisserman, MLESAC
(2000), truncated cost; R. Hartley and A. Zisserman, Multiple View Geometry (2004), 9.6.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldround.geometry.five_point import five_point
from fieldround.geometry.rotations import rotation_from_vector, square_basis

FEWEST = 5
# A tie agrees when its distance from the epipolar line is below this many sds. An EXIF focal
# length may be a tenth off, so the samples are judged generously; the adjustment is strict.
AGREE_SDS = 4.0
SAMPLES_A_BATCH = 60
BATCHES_MOST = 8
REFINED_MOST = 5
# Two poses are distinct when they differ by more than this.
APART_RAD = np.radians(1.5)


@dataclass(frozen=True)
class Pose:
    """B from A: rotation (3, 3) of frame A into frame B, unit direction of station B in frame A."""

    rotation: np.ndarray
    direction: np.ndarray
    score: float


@dataclass(frozen=True)
class RelativePose:
    """The best pose, its ties, and what else is possible.

    inliers  : (n,) True for ties that agree with the best pose and lie in front of both views
    score    : truncated cost, squared sds summed over all ties; smaller is better
    runner_up : the best distinct pose with nearly as good a score, None when there is none
    rotation_only : True when a rotation alone explains the agreeing ties within their noise
    """

    rotation: np.ndarray
    direction: np.ndarray
    inliers: np.ndarray
    score: float
    runner_up: Pose | None
    rotation_only: bool


def sampson(essential: np.ndarray, rays_a: np.ndarray, rays_b: np.ndarray) -> np.ndarray:
    """Angular distance of ray pairs from their epipolar planes, to first order, radians.

    essential : (m, 3, 3); rays_a, rays_b : (n, 3) unit; returns : (m, n)
    source    : P. Sampson (1982) as in Hartley and Zisserman, 11.4.3
    """
    on_b = rays_a @ essential.transpose(0, 2, 1)
    on_a = rays_b @ essential
    miss = (on_b * rays_b).sum(axis=2)
    # A ray moves on the unit sphere: the part of each gradient along its own ray does not count.
    slope = np.einsum("mni,mni->mn", on_a, on_a) + np.einsum("mni,mni->mn", on_b, on_b)
    slope -= 2.0 * miss**2
    return miss / np.sqrt(np.maximum(slope, 1e-30))


def essential_of(rotation: np.ndarray, direction: np.ndarray) -> np.ndarray:
    """E with b' E a = 0 from the rotation of A into B and the direction of B in A, (3, 3)."""
    x, y, z = direction
    return rotation @ np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])


def poses_of(essential: np.ndarray) -> list[tuple[np.ndarray, np.ndarray]]:
    """The four (rotation, direction) of an essential matrix."""
    u, _, vt = np.linalg.svd(essential)
    u, vt = u * np.sign(np.linalg.det(u)), vt * np.sign(np.linalg.det(vt))
    turn = np.array([[0.0, -1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
    direction = vt[2]
    return [(u @ w @ vt, s * direction) for w in (turn, turn.T) for s in (1.0, -1.0)]


def in_front(
    rotation: np.ndarray,
    direction: np.ndarray,
    rays_a: np.ndarray,
    rays_b: np.ndarray,
    sd_rad: np.ndarray,
) -> np.ndarray:
    """Do the ray pairs meet in front of both views, or too far away to tell? (n,)"""
    back = rays_b @ rotation
    cosine = np.einsum("ni,ni->n", rays_a, back)
    on_a, on_b = rays_a @ direction, back @ direction
    # Depths along both rays of the nearest points, up to the positive factor 1 - cosine^2. A tie
    # at infinity has zero there, give or take its noise.
    slack = -AGREE_SDS * sd_rad
    return (on_a - cosine * on_b > slack) & (cosine * on_a - on_b > slack)


def relative_pose(
    rays_a: np.ndarray, rays_b: np.ndarray, sd_rad: np.ndarray, seed: int = 0
) -> RelativePose | None:
    """Relative orientation from five ties or more.

    rays_a, rays_b : (n, 3) unit rays in each camera's frame; sd_rad : (n,) sd of a ray's direction
    returns        : None for fewer than five ties or when no pose puts ties in front of both views
    """
    n = len(rays_a)
    if n < FEWEST:
        return None
    rng = np.random.default_rng(seed)
    candidates = _sampled(rays_a, rays_b, sd_rad, rng)
    if not len(candidates):
        return None
    scores = _scores(candidates, rays_a, rays_b, sd_rad)
    refined: list[Pose] = []
    for index in np.argsort(scores, kind="stable")[: 4 * REFINED_MOST]:
        if len(refined) >= REFINED_MOST:
            break
        pose = _best_of_four(candidates[index], rays_a, rays_b, sd_rad)
        if any(_alike(pose, other, 0.3 * APART_RAD) for other in refined):
            continue
        refined.append(pose)
    refined = [_refined(pose, rays_a, rays_b, sd_rad) for pose in refined]
    if not refined:
        return None
    refined.sort(key=lambda pose: pose.score)
    best = refined[0]
    agree = _agreeing(best, rays_a, rays_b, sd_rad)
    runner_up = next((pose for pose in refined[1:] if not _alike(pose, best, APART_RAD)), None)
    if runner_up is not None and runner_up.score > best.score + 0.15 * AGREE_SDS**2 * agree.sum():
        runner_up = None
    return RelativePose(
        best.rotation,
        best.direction,
        agree,
        best.score,
        runner_up,
        _turned_only(rays_a[agree], rays_b[agree], sd_rad[agree]),
    )


def _sampled(
    rays_a: np.ndarray, rays_b: np.ndarray, sd_rad: np.ndarray, rng: np.random.Generator
) -> np.ndarray:
    """Essential matrices of random samples, until a good one was drawn with near certainty."""
    n = len(rays_a)
    kept: list[np.ndarray] = []
    for batch in range(BATCHES_MOST):
        count = 1 if n == FEWEST else SAMPLES_A_BATCH
        picks = np.argsort(rng.random((count, n)), axis=1)[:, :FEWEST]
        found = five_point(rays_a[picks], rays_b[picks])
        if not len(found):
            continue
        distance = np.abs(sampson(found, rays_a, rays_b)) / sd_rad
        cost = np.minimum(distance**2, AGREE_SDS**2).sum(axis=1)
        top = np.argsort(cost, kind="stable")[:40]
        kept.append(found[top])
        share = float((distance[top[0]] < AGREE_SDS).mean())
        missed = (1.0 - share**FEWEST) ** (SAMPLES_A_BATCH * (batch + 1))
        if n == FEWEST or missed < 1e-6:
            break
    return np.concatenate(kept) if kept else np.zeros((0, 3, 3))


def _scores(
    essentials: np.ndarray, rays_a: np.ndarray, rays_b: np.ndarray, sd_rad: np.ndarray
) -> np.ndarray:
    distance = sampson(essentials, rays_a, rays_b) / sd_rad
    return np.minimum(distance**2, AGREE_SDS**2).sum(axis=1)


def _best_of_four(
    essential: np.ndarray, rays_a: np.ndarray, rays_b: np.ndarray, sd_rad: np.ndarray
) -> Pose:
    poses = [
        Pose(*pose, _pose_score(*pose, rays_a, rays_b, sd_rad)) for pose in poses_of(essential)
    ]
    return min(poses, key=lambda pose: pose.score)


def _pose_score(
    rotation: np.ndarray,
    direction: np.ndarray,
    rays_a: np.ndarray,
    rays_b: np.ndarray,
    sd_rad: np.ndarray,
) -> float:
    """Truncated cost of a pose; a tie that meets behind a view costs as much as a wrong one."""
    essential = essential_of(rotation, direction)[None]
    squares = np.minimum((sampson(essential, rays_a, rays_b)[0] / sd_rad) ** 2, AGREE_SDS**2)
    ahead = in_front(rotation, direction, rays_a, rays_b, sd_rad)
    return float(np.where(ahead, squares, AGREE_SDS**2).sum())


def _alike(first: Pose, second: Pose, limit: float) -> bool:
    turn = 0.5 * (np.trace(first.rotation @ second.rotation.T) - 1.0)
    aim = float(first.direction @ second.direction)
    return bool(np.arccos(np.clip(turn, -1, 1)) < limit and np.arccos(np.clip(aim, -1, 1)) < limit)


def _agreeing(pose: Pose, rays_a: np.ndarray, rays_b: np.ndarray, sd_rad: np.ndarray) -> np.ndarray:
    essential = essential_of(pose.rotation, pose.direction)
    distance = np.abs(sampson(essential[None], rays_a, rays_b)[0]) / sd_rad
    ahead = in_front(pose.rotation, pose.direction, rays_a, rays_b, sd_rad)
    return (distance < AGREE_SDS) & ahead


def _refined(
    pose: Pose, rays_a: np.ndarray, rays_b: np.ndarray, sd_rad: np.ndarray, rounds: int = 4
) -> Pose:
    """Gauss-Newton on the agreeing ties' distances; the better of before and after."""
    rotation, direction = pose.rotation, pose.direction
    best = pose
    steps = 1e-6 * np.eye(5)
    for _ in range(rounds):
        basis = square_basis(direction)

        def moved(
            step: np.ndarray, rotation=rotation, direction=direction, basis=basis
        ) -> tuple[np.ndarray, np.ndarray]:
            aim = direction + basis @ step[3:]
            return rotation_from_vector(step[:3]) @ rotation, aim / np.linalg.norm(aim)

        many = np.array([essential_of(*moved(s)) for s in (np.zeros(5), *steps, *(-steps))])
        distance = sampson(many, rays_a, rays_b) / sd_rad
        weights = 1.0 / (1.0 + (distance[0] / (0.5 * AGREE_SDS)) ** 2) ** 2
        slope = ((distance[1:6] - distance[6:]) / 2e-6).T
        normal = (slope * weights[:, None]).T @ slope
        try:
            step = -np.linalg.solve(
                normal + 1e-12 * np.trace(normal) * np.eye(5),
                (slope * weights[:, None]).T @ distance[0],
            )
        except np.linalg.LinAlgError:
            break
        size = float(np.linalg.norm(step))
        rotation, direction = moved(step * min(1.0, 0.3 / max(size, 1e-12)))
        score = _pose_score(rotation, direction, rays_a, rays_b, sd_rad)
        if score < best.score:
            best = Pose(rotation, direction, score)
        if size < 1e-9:
            break
    return best


def _turned_only(rays_a: np.ndarray, rays_b: np.ndarray, sd_rad: np.ndarray) -> bool:
    """Does one rotation explain the ray pairs within twice their noise?"""
    if len(rays_a) < 3:
        return False
    u, _, vt = np.linalg.svd((rays_b / sd_rad[:, None] ** 2).T @ rays_a)
    rotation = u @ np.diag([1.0, 1.0, np.linalg.det(u @ vt)]) @ vt
    off = np.linalg.norm(rays_b - rays_a @ rotation.T, axis=1) / (np.sqrt(2.0) * sd_rad)
    return bool(np.median(off) < 2.0)
