"""Made-up pairs with exact truth for the tests of the adjustment (all numbers invented)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldround.geometry.camera import project
from fieldround.geometry.rotations import rotation_from_vector
from fieldround.geometry.solids import limb_points
from fieldround.solve.problem import LengthObservation, Marks, PairProblem, SolidObject
from fieldround.solve.state import PairState

WIDTH, HEIGHT = 4000, 3000


@dataclass(frozen=True)
class Truth:
    """A simulated pair: what was observed and what is true (frame of camera A).

    tie_px : (n, 2, 2) true pixels of the ties; tie_right : (n,) False for the wrong ones
    """

    problem: PairProblem
    state: PairState
    values: np.ndarray
    diameters_m: tuple[float, ...]
    tie_px: np.ndarray
    tie_right: np.ndarray


def look_at(direction: np.ndarray, roll: float = 0.0) -> np.ndarray:
    """Camera-from-world rotation of a camera that looks along a direction, world z up."""
    z = direction / np.linalg.norm(direction)
    x = np.cross(z, [0.0, 0.0, 1.0])
    x /= np.linalg.norm(x)
    rows = np.array([x, np.cross(z, x), z])
    return rotation_from_vector(np.array([0.0, 0.0, roll])) @ rows


def simulated_pair(
    rng: np.random.Generator,
    *,
    distance_m: float = 12.0,
    diameter_m: float = 0.3,
    baseline_m: float = 2.0,
    converge: float = 1.0,
    ties: int = 200,
    wrong: float = 0.0,
    tie_sd_px: float = 0.4,
    mark_sd_px: float = 0.5,
    marks_a_side: int = 7,
    tape_sd_m: float = 0.003,
    focal_px: float = 3000.0,
    distortion: tuple[float, ...] = (0.0, 0.0, 0.0, 0.0, 0.0),
    taper: float = -0.005,
    kind: str = "pole",
    noise: bool = True,
) -> Truth:
    """One pair and one upright object; `converge` 0 = parallel cameras, 1 = both aim at it.

    taper : change of the radius per metre
    """
    n = 1.0 if noise else 0.0
    values = np.array([focal_px, focal_px, 2010.0, 1490.0, *distortion])
    stations = np.array(
        [[0.0, 0.0, 1.6], [baseline_m, 0.15 * baseline_m * rng.normal(), 1.6 + 0.05 * rng.normal()]]
    )
    stations[1, :2] = stations[0, :2] + (stations[1, :2] - stations[0, :2])
    true_length = float(np.linalg.norm(stations[1] - stations[0]))
    base = np.array([0.5 * baseline_m + 0.03 * distance_m * rng.normal(), distance_m, 0.0])
    aim_a = base + np.array([0.0, 0.0, 1.6]) - stations[0]
    aim_b = base + np.array([0.0, 0.0, 1.6]) - stations[1]
    aim_b = converge * aim_b + (1.0 - converge) * aim_a
    tilt = rotation_from_vector(np.radians(rng.normal(0, 2.0, 3)))
    rotations = np.array(
        [
            look_at(aim_a, np.radians(rng.normal(0, 1.5))) @ tilt,
            look_at(aim_b, np.radians(rng.normal(0, 1.5)))
            @ rotation_from_vector(np.radians(rng.normal(0, 1.0, 3))),
        ]
    )
    axis = np.array([0.0, 0.0, 1.0])
    radius = 0.5 * diameter_m - taper * 1.3

    def seen(points: np.ndarray, view: int) -> np.ndarray:
        return project((points - stations[view]) @ rotations[view].T, values)

    # Ties fill the field of view from half the object's distance to six times it.
    kept: list[np.ndarray] = []
    while sum(len(part) for part in kept) < ties:
        depth = distance_m * np.exp(rng.uniform(np.log(0.5), np.log(6.0), 4 * ties))
        pixel = rng.uniform([50, 50], [WIDTH - 50, HEIGHT - 50], (4 * ties, 2))
        ray = np.concatenate([(pixel - values[2:4]) / values[:2], np.ones((4 * ties, 1))], axis=1)
        point = stations[0] + (ray * depth[:, None]) @ rotations[0]
        pixels = np.stack([seen(point, 0), seen(point, 1)], axis=1)
        with np.errstate(invalid="ignore"):
            inside = np.all((pixels > 0) & (pixels < [WIDTH, HEIGHT]), axis=(1, 2))
        kept.append(pixels[inside & (point[:, 2] > -3.0)])
    true_px = np.concatenate(kept)[:ties]
    ties_px = true_px + n * rng.normal(0, tie_sd_px, true_px.shape)
    bad = rng.random(ties) < wrong
    ties_px[bad, 1] = rng.uniform([0, 0], [WIDTH, HEIGHT], (int(bad.sum()), 2))

    rows = []
    for view in range(2):
        # Limbs are marked where the picture shows them: about the height of the camera.
        half = min(1.0, 0.3 * distance_m * HEIGHT / focal_px)
        heights = np.linspace(1.3 - half, 1.3 + half, marks_a_side)
        for side in (1.0, -1.0):
            pixels = seen(
                limb_points(stations[view], base, axis, radius, taper, heights, side), view
            )
            rows += [(view, px, side) for px in pixels]
    limb_px = np.array([px for _, px, _ in rows])
    limb_px = limb_px + n * rng.normal(0, mark_sd_px, limb_px.shape)
    view_of = np.array([view for view, _, _ in rows])
    # Left in the picture is +1, as the sheets would say it.
    side_of = np.array([side for _, _, side in rows])
    for view in range(2):
        mine = view_of == view
        if limb_px[mine & (side_of > 0), 0].mean() > limb_px[mine & (side_of < 0), 0].mean():
            side_of[mine] *= -1
    limbs = Marks(
        np.zeros(len(rows), dtype=int), view_of, limb_px, np.full(len(rows), mark_sd_px), side_of
    )
    base_px = np.array([seen(base[None], v)[0] for v in range(2)])
    ends = Marks(
        np.zeros(2, dtype=int),
        np.arange(2),
        base_px + n * rng.normal(0, 1.5, (2, 2)),
        np.full(2, 1.5),
        np.zeros(2),
    )
    thing = SolidObject("P1", kind, False, np.radians(2.0), -0.004, 0.006, 1.3, has_base=True)
    tape = true_length + n * rng.normal(0, tape_sd_m)
    problem = PairProblem(
        "pair",
        ("a.jpg", "b.jpg"),
        np.zeros(2, dtype=int),
        np.tile([0.0, -1.0, 0.0], (2, 1)),
        (thing,),
        ties_px,
        np.full(ties, tie_sd_px),
        limbs=limbs,
        ends=ends,
        lengths=(LengthObservation(tape, tape_sd_m, "tape"),),
    )
    r0 = rotations[0]
    points = (base + 1.3 * axis - stations[0]) @ r0.T
    state = PairState(
        rotations=np.stack([np.eye(3), rotations[1] @ r0.T]),
        stations=(stations - stations[0]) @ r0.T,
        up=r0 @ axis,
        ties=np.zeros((ties, 3)),
        ties_rho=np.zeros(ties),
        axes=(r0 @ axis)[None],
        points=points[None],
        radii=np.array([radius + taper * 1.3]),
        tapers=np.array([taper]),
        base=np.array([-1.3]),
        top=np.array([0.0]),
    )
    return Truth(problem, state, values, (diameter_m,), true_px, ~bad)
