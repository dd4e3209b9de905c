"""The sheets a crew would have filled in, and the true figures beside them.

In: an `Outing`. Out: the text of every sheet by file name. Marks scatter by half a pixel about
the exact limbs, the tape by 3 mm, checks by their sd; every draw is seeded from the outing.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence

import numpy as np

from demo_site.camera import seen_at
from demo_site.inventory import Thing
from demo_site.outing import Body, Outing, Walked
from demo_site.scene import Ball, Cone, Scene, View
from demo_site.truth import (
    chosen,
    geodetic,
    inside,
    limb_pixels,
    limb_space,
    outline_pixels,
    range_m,
    unhidden,
    visible_heights,
)  # fmt: skip

LIMB_SD_PX, END_SD_PX, OUTLINE_POINTS = 0.5, 1.5, 12
FOCAL_SD, CENTRE_SD_PX = 0.0006, 1.0
DISTORTION_SD = (0.0010, 0.0015, 0.0001, 0.0001, 0.0)


def all_sheets(outing: Outing) -> dict[str, str]:
    """Text of every sheet and truth file, by file name."""
    return {
        "round.toml": round_toml(outing),
        "pairs.csv": pairs_csv(outing),
        "objects.csv": objects_csv(outing),
        "marks.csv": marks_csv(outing),
        "checks.csv": checks_csv(outing),
        "cameras.toml": cameras_toml(outing),
        "truth.csv": truth_csv(outing),
        "truth_views.csv": truth_views_csv(outing),
    }


def _csv(header: str, rows: Iterable[Sequence[object]]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(header.split())
    writer.writerows(rows)
    return out.getvalue()


def _draw(outing: Outing, *names: object) -> np.random.Generator:
    return np.random.default_rng([outing.seed, *(b for n in names for b in str(n).encode())])


def round_toml(outing: Outing) -> str:
    return (
        "# An invented round in an invented place; see docs/demo.md.\n[round]\n"
        f'title = "{outing.title}"\ncrew = "{outing.crew}"\nplace = "{outing.place}"\n\n'
        f"[tape]\nsd_m = {outing.tape_sd_m}\n\n[marks]\nsd_px = {LIMB_SD_PX}\n"
    )


def baseline_m(pair: Walked) -> float:
    """True slope distance from station A to station B."""
    a, b = (np.array(view.station) for view in pair.views[:2])
    return float(np.linalg.norm(b - a))


def pairs_csv(outing: Outing) -> str:
    most = max(len(pair.views) for pair in outing.pairs)
    rows = []
    for pair in outing.pairs:
        read = baseline_m(pair) + _draw(outing, "tape", pair.pair).normal(0, outing.tape_sd_m)
        photos = [view.photo for view in pair.views] + [""] * (most - len(pair.views))
        tape = [f"{read:.3f}", outing.tape_sd_m] if pair.tape else ["", ""]
        rows.append([pair.pair, *photos, *tape, pair.note])
    letters = " ".join(f"photo_{letter}" for letter in "abcd"[:most])
    return _csv(f"pair {letters} tape_m tape_sd_m note", rows)


def objects_csv(outing: Outing) -> str:
    rows = []
    for thing in outing.things:
        pairs = " ".join(p.pair for p in outing.pairs if thing.object in p.objects)
        known = [f"{thing.known_diameter_m:.3f}", 0.0005] if thing.known_diameter_m else ["", ""]
        height = "" if thing.ref_height_m is None else thing.ref_height_m
        rows.append([thing.object, thing.kind, pairs, thing.label, height, *known, thing.note])
    return _csv("object kind pair label ref_height_m known_diameter_m known_sd_m note", rows)


def exact_marks(
    outing: Outing, pair: Walked, view: View
) -> list[tuple[str, str, np.ndarray, float]]:
    """(object, mark, exact upright pixel, sd) of everything a hand would mark in a photo."""
    found: list[tuple[str, str, np.ndarray, float]] = []
    for name in pair.objects:
        thing = outing.thing(name)
        if isinstance(thing.solid, Ball):
            found += _ball_marks(outing.scene_of(pair), view, thing)
        else:
            found += _bar_marks(outing.scene_of(pair), pair.limbs, view, thing)
    for name, low, high in pair.plumb:
        spots = seen_at(view, np.linspace(low, high, 3))
        if inside(view, spots).all():
            found += [(name, "plumb", spot, 2 * LIMB_SD_PX) for spot in spots]
    return found


def _ball_marks(scene: Scene, view: View, thing: Thing) -> list[tuple[str, str, np.ndarray, float]]:
    ball = thing.solid
    assert isinstance(ball, Ball)
    many = outline_pixels(view, ball, 60)
    rays = np.array([np.array(view.station) + r for r in _outline_space(view, ball, 60)])
    good = inside(view, many) & unhidden(scene, view, thing, rays)
    places = many[good]
    if len(places) < OUTLINE_POINTS:
        return []
    at = np.linspace(0, len(places) - 1, OUTLINE_POINTS + 1)[:-1].astype(int)
    return [(thing.object, "outline", spot, LIMB_SD_PX) for spot in places[at]]


def _outline_space(view: View, ball: Ball, count: int) -> np.ndarray:
    """From the station to the touching points of a ball's outline."""
    from fieldround.geometry.solids import outline_rays

    station, centre = np.array(view.station), np.array(ball.centre)
    distance = np.linalg.norm(centre - station)
    rays = outline_rays(station, centre, ball.radius_m, count + 1)[:-1]
    return rays * np.sqrt(distance**2 - ball.radius_m**2)


def _bar_marks(
    scene: Scene, limbs: int, view: View, thing: Thing
) -> list[tuple[str, str, np.ndarray, float]]:
    solid = thing.solid
    assert isinstance(solid, Cone)
    found: list[tuple[str, str, np.ndarray, float]] = []
    for side, heights in sorted(visible_heights(scene, view, thing).items()):
        at = chosen(heights, limbs)
        if len(at) < 2:
            continue
        spots = limb_pixels(view, thing, at)[0 if side == "left" else 1]
        found += [(thing.object, side, spot, LIMB_SD_PX) for spot in spots]
    ends = [("base", 0.0)] if thing.kind != "pipe" else []
    if not thing.hides_top:
        ends.append(("top", solid.length_m))
    for mark, height in ends:
        spot = seen_at(view, np.array([np.array(solid.base) + height * np.array(solid.axis)]))
        # A little off the end: the rim of a leaning foot dips into the ground.
        level = np.array([0.07 if mark == "base" else height - 0.01])
        rims = np.concatenate([limb_space(view, solid, level, side) for side in (1.0, -1.0)])
        if inside(view, spot)[0] and unhidden(scene, view, thing, rims).all():
            found.append((thing.object, mark, spot[0], END_SD_PX))
    return found


def marks_csv(outing: Outing) -> str:
    rows = []
    for pair in outing.pairs:
        for view in pair.views:
            draw = _draw(outing, "marks", view.photo)
            for name, mark, spot, sd in exact_marks(outing, pair, view):
                x, y = spot + draw.normal(0.0, sd, 2)
                rows.append([name, view.photo, mark, f"{x:.2f}", f"{y:.2f}", sd])
    return _csv("object photo mark x_px y_px sd_px", rows)


def checks_csv(outing: Outing) -> str:
    rows = []
    for name, sd, method in outing.checks:
        thing = outing.thing(name)
        read = thing.diameter_m + _draw(outing, "check", name).normal(0, sd)
        height = "" if thing.ref_height_m is None else thing.ref_height_m
        rows.append([name, f"{read:.4f}", sd, method, height, "2026-06-19", outing.crew])
    return _csv("object diameter_m sd_m method height_m measured_on by", rows)


def cameras_toml(outing: Outing) -> str:
    bodies: dict[str, Body] = {}
    for pair in outing.pairs:
        if pair.body.card:
            bodies[pair.body.card] = pair.body
    text = "# Cards of the crew's camera; the pocket camera has none on purpose.\n"
    for name, body in sorted(bodies.items()):
        draw = _draw(outing, "card", name)
        values = np.array(body.lens.values)
        focal = values[0] * (1 + draw.normal(0, FOCAL_SD))
        centre = values[2:4] + draw.normal(0, CENTRE_SD_PX, 2)
        lens = values[4:] + draw.normal(0, 1.0, 5) * DISTORTION_SD
        text += (
            f'\n[[camera]]\nname = "{name}"\nmake = "{body.make}"\nmodel = "{body.model}"\n'
            f"focal_mm = {body.focal_mm}\nsize_px = {list(body.lens.size_px)}\n"
            f"focal_px = [{focal:.2f}, {focal:.2f}]\nfocal_sd_px = {values[0] * FOCAL_SD:.2f}\n"
            f"centre_px = [{centre[0]:.2f}, {centre[1]:.2f}]\ncentre_sd_px = {CENTRE_SD_PX}\n"
            f"distortion = [{', '.join(f'{v:.6f}' for v in lens)}]\n"
            f"distortion_sd = {list(DISTORTION_SD)}\n"
        )
    return text


def truth_csv(outing: Outing) -> str:
    rows = []
    for thing in outing.things:
        solid, pairs = thing.solid, [p for p in outing.pairs if thing.object in p.objects]
        longitude, latitude, _ = geodetic(outing.site, thing.place)[0]
        away = range_m(pairs[0].views[0], [thing])[0] if pairs else 0.0
        ref = "" if thing.ref_height_m is None else thing.ref_height_m
        shape: list[object] = ["", "", "", "", ""]
        if isinstance(solid, Cone):
            x, y, z = solid.axis
            lean = float(np.degrees(np.arctan2(np.hypot(x, y), z)))
            to = float(np.degrees(np.arctan2(x, y)) % 360.0)
            upright = thing.kind != "pipe"
            shape = [
                f"{solid.length_m * z:.4f}" if upright else "",
                f"{lean:.4f}" if upright else "", f"{to:.2f}" if upright and lean > 0 else "",
                f"{2000.0 * thing.taper_m_per_m:.3f}",
                f"{2.0 * solid.radius_m:.5f}" if upright else "",
            ]  # fmt: skip
        rows.append([
            thing.object, thing.kind, " ".join(p.pair for p in pairs), f"{thing.diameter_m:.5f}",
            ref, *shape, f"{longitude:.10f}", f"{latitude:.10f}", f"{away:.2f}",
        ])  # fmt: skip
    return _csv(
        "object kind pair diameter_m ref_height_m height_m lean_deg lean_to_deg taper_mm_per_m "
        "ground_diameter_m longitude latitude range_m",
        rows,
    )


def truth_views_csv(outing: Outing) -> str:
    names = ["fx", "fy", "cx", "cy", "k1", "k2", "p1", "p2", "k3"]
    header = (
        "pair photo width_px height_px turn_deg east_m north_m up_m longitude latitude heading_deg "
        + " ".join(f"r{i}{j}" for i in range(3) for j in range(3)) + " " + " ".join(names)
    )  # fmt: skip
    rows = []
    for pair in outing.pairs:
        for view in pair.views:
            longitude, latitude, _ = geodetic(outing.site, np.array(view.station))[0]
            rows.append([
                pair.pair, view.photo, *view.upright_px, view.turn_deg, *view.station,
                f"{longitude:.10f}", f"{latitude:.10f}", f"{view.heading_deg:.4f}",
                *(f"{v:.12f}" for v in view.rotation.ravel()), *view.lens.values,
            ])  # fmt: skip
    return _csv(header, rows)
