"""What to draw on a photo of an object: its marks, the fitted limbs, the section.

In: one pair's adjusted state and camera values. Out: `Drawing`s in upright pixels.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fieldround.geometry.camera import from_card, project
from fieldround.geometry.solids import limb_points, near_half_section, outline_rays
from fieldround.geometry.touching import axis_distance
from fieldround.rounds.model import Mark, Photo
from fieldround.solve.derive import section_centre
from fieldround.solve.results import Drawing
from fieldround.solve.scalar_residuals import section_radius
from fieldround.solve.settling import PairFit
from fieldround.solve.start import camera_rays
from fieldround.solve.state import ABSENT

LIMB_POINTS = 24
OUTLINE_POINTS = 73
SECTION_POINTS = 19
MARGIN_PX = 30.0

Line = tuple[tuple[float, float], ...]
Lines = tuple[Line, ...]


def _line(xy: np.ndarray, size: tuple[int, int]) -> tuple[tuple[float, float], ...]:
    """The part of a polyline that lies in or near the picture."""
    width, height = size
    inside = (
        np.isfinite(xy).all(axis=1)
        & (np.abs(xy[:, 0] - width / 2) < width)
        & (np.abs(xy[:, 1] - height / 2) < height)
    )
    return tuple((round(float(x), 2), round(float(y), 2)) for x, y in xy[inside])


def _heights(fit: PairFit, values: np.ndarray, k: int) -> np.ndarray:
    """Heights along the axis over which the limbs are drawn."""
    problem, state = fit.problem, fit.state
    feet = []
    for view in range(problem.views):
        mine = (problem.limbs.object == k) & (problem.limbs.view == view)
        if not mine.any():
            continue
        d = camera_rays(problem, values, problem.limbs.px[mine], view) @ state.rotations[view]
        feet.append(
            axis_distance(
                d,
                np.broadcast_to(state.axes[k], d.shape),
                np.broadcast_to(state.points[k] - state.stations[view], d.shape),
            ).foot
        )
    reach = np.concatenate(feet)
    low, high = float(reach.min()), float(reach.max())
    if fit.layout.base[k] != ABSENT and problem.objects[k].has_base:
        low = float(state.base[k])
    if fit.layout.top[k] != ABSENT:
        high = float(state.top[k])
    return np.linspace(low, high, LIMB_POINTS)


def drawings_of(
    fit: PairFit, values: np.ndarray, k: int, photos: Sequence[Photo], marks: Sequence[Mark]
) -> tuple[Drawing, ...]:
    """Drawings of object k in every photo of the pair that shows its marks.

    values : (m, 9) adjusted camera values; marks : the round's winning marks
    """
    problem, state = fit.problem, fit.state
    thing = problem.objects[k]
    out = []
    for view, photo in enumerate(photos):
        own = [m for m in marks if m.object == thing.name and m.photo == photo.name]
        if not own:
            continue
        card, station = values[problem.cameras[view]], state.stations[view]

        def pixels(
            points: np.ndarray, view: int = view, card: np.ndarray = card, photo: Photo = photo
        ) -> np.ndarray:
            seen = project((points - state.stations[view]) @ state.rotations[view].T, card)
            return from_card(seen, photo.turn_deg, photo.size_px)

        radius, _ = section_radius(problem, fit.layout, state, k)
        centre = section_centre(problem, fit.layout, state, k)
        if thing.is_ball:
            rays = outline_rays(station, state.points[k], float(state.radii[k]), OUTLINE_POINTS)
            outline: Lines = (_line(pixels(station + rays), photo.size_px),)
            section: Line = ()
        else:
            heights = _heights(fit, values, k)
            outline = tuple(
                _line(
                    pixels(
                        limb_points(
                            station,
                            state.points[k],
                            state.axes[k],
                            float(state.radii[k]),
                            float(state.tapers[k]),
                            heights,
                            side,
                        )
                    ),
                    photo.size_px,
                )
                for side in (1.0, -1.0)
            )
            section = _line(
                pixels(near_half_section(station, centre, state.axes[k], radius, SECTION_POINTS)),
                photo.size_px,
            )
        out.append(
            Drawing(
                photo=photo.name,
                marks=tuple((m.mark, m.x_px, m.y_px) for m in own),
                outline=outline,
                section=section,
                box_px=_box(own, section, photo.size_px),
            )
        )
    return tuple(out)


def _box(
    marks: Sequence[Mark], section: Sequence[tuple[float, float]], size: tuple[int, int]
) -> tuple[float, float, float, float]:
    """A crop around the marks and the section, with a margin, inside the picture."""
    xs = [m.x_px for m in marks] + [x for x, _ in section]
    ys = [m.y_px for m in marks] + [y for _, y in section]
    margin = max(MARGIN_PX, 0.6 * (max(xs) - min(xs)))
    width, height = size
    return (
        max(0.0, min(xs) - margin),
        max(0.0, min(ys) - margin),
        min(width - 1.0, max(xs) + margin),
        min(height - 1.0, max(ys) + margin),
    )
