"""From adjusted unknowns to the figures of an object, each with its sd and its sources.

In: one pair's fit, camera values, covariance. Out: `Finding` an object and the pair's levelled
frame. Linear propagation (JCGM 100:2008, 5.2) through analytic or central-difference gradients.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from fieldround.place.frames import PairFrame
from fieldround.solve.adjust import Adjusted
from fieldround.solve.mark_residuals import limb_block, outline_block
from fieldround.solve.problem import PairProblem
from fieldround.solve.scalar_residuals import section_radius
from fieldround.solve.settling import PairFit, tie_votes
from fieldround.solve.state import ABSENT, Layout, PairState, moved

DIFFERENCE_STEP = 1e-6
# Marks of one object speak with their own residuals only beyond this many stated-sd votes.
LIMB_VOTES = 10.0


@dataclass(frozen=True)
class Finding:
    """Figures of one object in one pair; variances in `budget` sum to diameter_sd_m ** 2.

    gradient, by_camera : of the diameter by the pair's columns (size,) and its total derivative by
                          the cameras' values (c,), for combining pairs
    lean_frame_deg : direction of the lean in the levelled frame, clockwise from its y axis
    readings_m, reading_sd_m : by view, in the order of `reading_views`
    agreement      : first view's reading minus the others', in sds of that difference
    limb_factor    : residuals of the limb marks against their sds (1 = as stated)
    observables, observables_cov : (4,), (4, 4) log of the baseline, angle at A, parallax, log of
                     sin(half the visible angle at A), all in the plane of the section
    freedom        : degrees of freedom behind the sd of a source, for those whose size was found
                     from residuals
    parallax_deg, parallax_sd_deg : angle between the sight lines A and B to the section
    """

    name: str
    diameter_m: float
    diameter_sd_m: float
    budget: dict[str, float]
    gradient: np.ndarray
    by_camera: np.ndarray
    reading_views: tuple[int, ...]
    readings_m: tuple[float, ...]
    reading_sd_m: tuple[float, ...]
    agreement: float | None
    ground_diameter_m: float | None
    taper_mm_per_m: float | None
    height_m: float | None
    height_sd_m: float | None
    ref_height_m: float | None
    lean_deg: float | None
    lean_sd_deg: float | None
    lean_frame_deg: float | None
    ranges_m: tuple[float, ...]
    parallax_deg: float
    parallax_sd_deg: float
    limb_factor: float
    limb_marks: int
    observables: np.ndarray
    observables_cov: np.ndarray
    freedom: Mapping[str, float]


def gradient_of(
    figure: Callable[[PairState], np.ndarray], state: PairState, layout: Layout
) -> np.ndarray:
    """Central-difference gradient of figures (f,) by the pair's own columns, (f, size)."""
    size = len(np.atleast_1d(figure(state)))
    out = np.zeros((size, layout.size))
    step = np.zeros(layout.size)
    for column in range(layout.own):
        step[column] = DIFFERENCE_STEP
        high = np.atleast_1d(figure(moved(state, layout, step)))
        low = np.atleast_1d(figure(moved(state, layout, -step)))
        out[:, column] = (high - low) / (2.0 * DIFFERENCE_STEP)
        step[column] = 0.0
    return out


def levelled(state: PairState) -> np.ndarray:
    """Rotation from camera A's frame to the levelled frame (x right, y ahead, z up), (3, 3)."""
    up = state.up
    look = np.array([0.0, 0.0, 1.0])
    ahead = look - (look @ up) * up
    if np.linalg.norm(ahead) < 1e-3:
        # A camera that looks straight up has no heading; take its right-hand side instead.
        look = np.array([1.0, 0.0, 0.0])
        ahead = look - (look @ up) * up
    ahead = ahead / np.linalg.norm(ahead)
    return np.array([np.cross(ahead, up), ahead, up])


def section_centre(problem: PairProblem, layout: Layout, state: PairState, k: int) -> np.ndarray:
    """Centre of the section in camera A's frame, (3,)."""
    thing = problem.objects[k]
    if thing.is_ball or thing.ref_height_m is None or layout.base[k] == ABSENT:
        return state.points[k]
    return state.points[k] + (state.base[k] + thing.ref_height_m) * state.axes[k]


def ground_point(problem: PairProblem, layout: Layout, state: PairState, k: int) -> np.ndarray:
    """Where the axis meets the ground line (a ball's centre, a pipe's middle), (3,)."""
    if problem.objects[k].is_ball or layout.base[k] == ABSENT:
        return state.points[k]
    return state.points[k] + state.base[k] * state.axes[k]


def _dense(columns: dict, size: int) -> np.ndarray:
    gradient = np.zeros(size)
    for column, value in columns.items():
        if column != ABSENT:
            gradient[column] = value
    return gradient


def _views_of(problem: PairProblem, k: int) -> list[int]:
    marks = problem.outlines if problem.objects[k].is_ball else problem.limbs
    return sorted(set(marks.view[marks.object == k].tolist()))


def limb_misfit(fit: PairFit, values: np.ndarray, k: int) -> tuple[float, int]:
    """Variance factor of an object's limb marks (shrunk toward 1) and their number."""
    problem = fit.problem
    ball = problem.objects[k].is_ball
    marks = problem.outlines if ball else problem.limbs
    block = (outline_block if ball else limb_block)(
        problem, fit.layout, fit.state, values[problem.cameras]
    )
    mine = block.residuals[marks.object == k]
    # Axis, radius (and taper) take up to six of the residuals' freedom, a ball four.
    freedom = max(len(mine) - (4 if ball else 6), 0)
    return (LIMB_VOTES + float(mine @ mine)) / (LIMB_VOTES + freedom), len(mine)


@dataclass(frozen=True)
class _Readings:
    views: tuple[int, ...]
    diameters_m: tuple[float, ...]
    sds_m: tuple[float, ...]
    agreement: float | None


def view_readings(
    fit: PairFit,
    values: np.ndarray,
    covariance: np.ndarray,
    k: int,
    diameter_m: float,
    gradient: np.ndarray,
) -> _Readings:
    """Diameter that each view alone gives, in the adjusted geometry, with their agreement.

    One column is added to the adjusted equations: a radius of that view's own. Its estimate and
    sd (a score test) are the difference of the view's reading from the others', with everything
    that is uncertain about poses and cameras in the sd.
    """
    problem, layout = fit.problem, fit.layout
    ball = problem.objects[k].is_ball
    marks = problem.outlines if ball else problem.limbs
    block = (outline_block if ball else limb_block)(
        problem, layout, fit.state, values[problem.cameras]
    )
    assert block.jacobian is not None
    weights, _ = block.loss(block.residuals)
    views = _views_of(problem, k)
    diameters, sds, agreement = [], [], None
    for view in views:
        mine = (marks.object == k) & (marks.view == view)
        column = np.where(mine, block.jacobian[:, layout.radius[k]], 0.0) * weights
        coupling = column @ block.jacobian
        pull = covariance @ coupling
        left = float(column @ np.where(mine, block.jacobian[:, layout.radius[k]], 0.0)) - float(
            coupling @ pull
        )
        if not left > 1e-9:
            return _Readings((), (), (), None)
        own = -float(column @ block.residuals) / left
        shift = -float(gradient @ pull)
        diameters.append(diameter_m + (shift + 2.0) * own)
        variance = float(gradient @ covariance @ gradient)
        sds.append(float(np.sqrt(max(variance + (shift + 2.0) ** 2 / left, 0.0))))
        if view == views[0]:
            agreement = own * float(np.sqrt(left))
    return _Readings(tuple(views), tuple(diameters), tuple(sds), agreement)


def budget_of(
    gradient: np.ndarray,
    covariance: np.ndarray,
    normals: dict[str, np.ndarray],
    outside: np.ndarray,
    own: int,
) -> dict[str, float]:
    """Variance of a figure split by source; the parts sum to gradient' C gradient.

    C N_source C is what the noise of one source contributes, because the normal matrices of all
    sources sum to the inverse of C.
    """
    pull = covariance @ gradient
    parts = {source: float(pull @ normal @ pull) for source, normal in normals.items()}
    parts["camera"] = float(pull[own:] @ outside @ pull[own:])
    return parts


def find_objects(adjusted: Adjusted, index: int) -> list[Finding]:
    """Figures of every object of one pair."""
    fit, covariance = adjusted.fits[index], adjusted.covariances[index]
    return [_find(adjusted, index, fit, covariance, k) for k in range(len(fit.problem.objects))]


def _find(adjusted: Adjusted, index: int, fit: PairFit, covariance: np.ndarray, k: int) -> Finding:
    problem, layout, state = fit.problem, fit.layout, fit.state
    thing = problem.objects[k]
    radius, columns = section_radius(problem, layout, state, k)
    diameter = 2.0 * radius
    gradient = 2.0 * _dense(columns, layout.size)
    factor, count = limb_misfit(fit, adjusted.values, k)
    budget = budget_of(
        gradient, covariance, adjusted.reduced[index].normals, adjusted.outside[index], layout.own
    )
    # Marks that scatter more than their stated sd widen their own share; less is not believed.
    budget["limb marks"] = budget.get("limb marks", 0.0) * max(1.0, factor)
    sd = float(np.sqrt(max(sum(budget.values()), 0.0)))
    seen = view_readings(fit, adjusted.values, covariance, k, diameter, gradient)
    has_base = layout.base[k] != ABSENT

    views = _views_of(problem, k)
    stations = [0, 1] if len(views) < 2 else views[:2]

    def observables(s: PairState) -> np.ndarray:
        return triangle_observables(problem, layout, s, k, stations)

    def lean(s: PairState) -> np.ndarray:
        return (levelled(s) @ s.axes[k])[:2]

    triangle = observables(state)
    triangle_gradient = gradient_of(observables, state, layout)
    triangle_cov = triangle_gradient @ covariance @ triangle_gradient.T
    # What widened the linear sd (marks that scatter, fewer votes) widens the triangle alike.
    stretch = sd**2 / max(float(gradient @ covariance @ gradient), 1e-300)
    triangle_cov = triangle_cov * max(1.0, stretch)
    centre = section_centre(problem, layout, state, k)
    lean_deg = lean_sd = lean_to = None
    if not thing.is_ball:
        across = lean(state)
        lean_gradient = gradient_of(lean, state, layout)
        lean_cov = lean_gradient @ covariance @ lean_gradient.T
        size = float(np.hypot(*across))
        lean_deg = float(np.degrees(np.arctan2(size, float(state.axes[k] @ state.up))))
        direction = across / size if size > 0 else np.array([1.0, 0.0])
        # Near zero the direction is noise: the mean of both axes' variances stands in.
        along = float(direction @ lean_cov @ direction)
        spread = along if size**2 > np.trace(lean_cov) else 0.5 * float(np.trace(lean_cov))
        lean_sd = float(np.degrees(np.sqrt(spread)))
        lean_to = float(np.degrees(np.arctan2(across[0], across[1])) % 360.0)
    height = height_sd = None
    if layout.top[k] != ABSENT and has_base:
        g = _dense({int(layout.top[k]): 1.0, int(layout.base[k]): -1.0}, layout.size)
        height = float(state.top[k] - state.base[k])
        height_sd = float(np.sqrt(g @ covariance @ g))
    return Finding(
        name=thing.name,
        diameter_m=diameter,
        diameter_sd_m=sd,
        budget=budget,
        gradient=gradient,
        by_camera=_total_by_camera(adjusted, index, gradient),
        reading_views=seen.views,
        readings_m=seen.diameters_m,
        reading_sd_m=seen.sds_m,
        agreement=seen.agreement,
        ground_diameter_m=(
            2.0 * float(state.radii[k] + state.tapers[k] * state.base[k])
            if has_base and not thing.ground_guess
            else None
        ),
        taper_mm_per_m=None if thing.is_ball else 2000.0 * float(state.tapers[k]),
        height_m=height,
        height_sd_m=height_sd,
        ref_height_m=thing.ref_height_m if has_base else None,
        lean_deg=lean_deg,
        lean_sd_deg=lean_sd,
        lean_frame_deg=lean_to,
        ranges_m=tuple(float(np.linalg.norm(centre - s)) for s in state.stations),
        parallax_deg=float(np.degrees(triangle[2])),
        parallax_sd_deg=float(np.degrees(np.sqrt(max(triangle_cov[2, 2], 0.0)))),
        limb_factor=factor,
        limb_marks=count,
        observables=triangle,
        observables_cov=triangle_cov,
        freedom={"ties": tie_votes(fit), "limb marks": LIMB_VOTES + count},
    )


def triangle_observables(
    problem: PairProblem, layout: Layout, state: PairState, k: int, stations: list[int]
) -> np.ndarray:
    """Log baseline, angle at A, parallax, log sin(half visible angle at A) of object k, (4,).

    For a cylinder all of them lie in the plane square to its axis.
    """
    thing = problem.objects[k]
    lines = section_centre(problem, layout, state, k) - state.stations[stations]
    base = state.stations[stations[1]] - state.stations[stations[0]]
    if not thing.is_ball:
        axis = state.axes[k]
        lines = lines - (lines @ axis)[:, None] * axis
        base = base - (base @ axis) * axis
    radius, _ = section_radius(problem, layout, state, k)
    to_a, to_b = lines

    def angle(first: np.ndarray, second: np.ndarray) -> float:
        return float(np.arctan2(np.linalg.norm(np.cross(first, second)), first @ second))

    # The parallax keeps its sign when a step carries the meeting point behind the stations.
    turn = float(np.sign(np.cross(base, to_a) @ np.cross(to_a, to_b))) or 1.0
    return np.array(
        [
            np.log(np.linalg.norm(base)),
            angle(base, to_a),
            turn * angle(to_a, to_b),
            np.log(radius / np.linalg.norm(to_a)),
        ]
    )


def _total_by_camera(adjusted: Adjusted, index: int, gradient: np.ndarray) -> np.ndarray:
    """How a figure follows the cameras' values when the pair re-adjusts to them, (c,)."""
    own = adjusted.fits[index].layout.own
    normal = adjusted.reduced[index].normal
    back = np.linalg.lstsq(normal[:own, :own], normal[:own, own:], rcond=1e-14)[0]
    return gradient[own:] - gradient[:own] @ back


def pair_frame(adjusted: Adjusted, index: int) -> PairFrame:
    """The pair's levelled frame with stations, sight directions and objects."""
    fit, covariance = adjusted.fits[index], adjusted.covariances[index]
    problem, layout, state = fit.problem, fit.layout, fit.state
    k = len(problem.objects)

    def points(s: PairState) -> np.ndarray:
        turn = levelled(s)
        things = [ground_point(problem, layout, s, i) for i in range(k)]
        return (np.array([*s.stations, *things]) @ turn.T).ravel()

    gradient = gradient_of(points, state, layout)
    cov = gradient @ covariance @ gradient.T
    flat = points(state).reshape(-1, 3)
    parts = [cov[3 * i : 3 * i + 3, 3 * i : 3 * i + 3] for i in range(len(flat))]
    up = slice(layout.up, layout.up + 2)
    names = [thing.name for thing in problem.objects]
    v = problem.views
    return PairFrame(
        pair=problem.pair,
        photos=problem.photos,
        stations_m=flat[:v],
        stations_cov_m2=np.array(parts[:v]),
        looks=np.einsum("vij->vj", state.rotations[:, 2:3, :]) @ levelled(state).T,
        objects_m=dict(zip(names, flat[v:], strict=True)),
        objects_cov_m2=dict(zip(names, parts[v:], strict=True)),
        vertical_sd_deg=float(np.degrees(np.sqrt(0.5 * np.trace(covariance[up, up])))),
        vertical_from=vertical_from(problem),
    )


def vertical_from(problem: PairProblem) -> str:
    """What told the pair's vertical, in words."""
    if len(problem.plumb_view):
        return "plumb lines"
    if any(thing.upright_sd_rad is not None for thing in problem.objects):
        return "upright objects"
    return "level camera"
