"""Made-up rounds with exact truth: objects, stations, photos and sheets (all numbers invented)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from fieldround.geometry.camera import from_card, project
from fieldround.geometry.rotations import rotation_from_vector
from fieldround.geometry.solids import limb_points, outline_rays
from fieldround.rounds.model import Camera, Mark, Pair, Photo, Round, RoundObject, Settings
from fieldround.vision.ties import Ties
from tests.solve.simulated import look_at

CARD = Camera(
    "card", (4000, 3000), (3000.0, 3000.0), 1.5, (2010.0, 1490.0), 1.0,
    distortion=(0.03, -0.02, 0.0, 0.0, 0.0),
)  # fmt: skip
VALUES = np.array([*CARD.focal_px, *CARD.centre_px, *CARD.distortion])


@dataclass(frozen=True)
class Solid:
    """A true object: base (foot of its axis, or a ball's centre), axis, diameter at 1.3 m."""

    name: str
    kind: str
    base: tuple[float, float, float]
    diameter_m: float
    axis: tuple[float, float, float] = (0.0, 0.0, 1.0)
    taper_m_per_m: float = 0.0
    length_m: float = 6.0
    heights: tuple[float, ...] = (0.6, 0.9, 1.2, 1.5, 1.8)
    known: bool = False


@dataclass(frozen=True)
class View:
    """Where a photo is taken from and aimed at; `turn` as `Photo.turn_deg`."""

    photo: str
    station: tuple[float, float, float]
    aim: tuple[float, float, float]
    turn: int = 0
    roll_deg: float = 1.0


@dataclass
class Built:
    """A round and its ties."""

    round: Round
    ties: dict[str, Ties]


@dataclass(frozen=True)
class Outing:
    """What to build: pairs of views with the objects seen in them."""

    pairs: dict[str, Sequence[View]]
    solids: Sequence[Solid]
    mark_sd_px: float = 0.4
    tie_sd_px: float = 0.15
    ties: int = 150
    tape_sd_m: float = 0.003
    tapes: dict[str, float | None] = field(default_factory=dict)
    depth: tuple[float, float] = (3.0, 60.0)
    flat: bool = False
    settings: Settings = field(default_factory=Settings)
    seed: int = 1


def camera_rotation(view: View) -> np.ndarray:
    """Card-from-world rotation: the upright camera turned back into the card's picture."""
    aim = np.array(view.aim) - np.array(view.station)
    upright = look_at(aim, np.radians(view.roll_deg))
    # Upright x right, y down; the card's picture lies turned counter-clockwise by `turn`.
    return rotation_from_vector(np.array([0.0, 0.0, -np.radians(view.turn)])) @ upright


def pixels(points: np.ndarray, view: View) -> np.ndarray:
    """Card pixels of world points, NaN outside the picture."""
    seen = (points - np.array(view.station)) @ camera_rotation(view).T
    with np.errstate(invalid="ignore"):
        px = project(seen, VALUES)
        px[~((px >= 0) & (px <= [3999, 2999])).all(axis=1)] = np.nan
    return px


def upright_size(view: View) -> tuple[int, int]:
    """Size of the upright picture."""
    return (3000, 4000) if view.turn in (90, 270) else (4000, 3000)


def build(outing: Outing) -> Built:
    """Photos, sheets and ties of an outing."""
    rng = np.random.default_rng(outing.seed)
    photos, marks, ties, pairs = {}, [], {}, []
    for name, views in outing.pairs.items():
        for view in views:
            photos[view.photo] = Photo(
                view.photo, Path(view.photo), upright_size(view), view.turn, "card"
            )
            marks += _marks(outing, view, rng)
        ties[name] = _ties(outing, views, rng)
        length = float(np.linalg.norm(np.subtract(views[1].station, views[0].station)))
        tape = outing.tapes.get(name, length + outing.tape_sd_m * rng.normal())
        pairs.append(Pair(name, tuple(v.photo for v in views), tape, outing.tape_sd_m))
    objects = []
    for solid in outing.solids:
        seen = tuple(
            p.pair
            for p in pairs
            if any(m.object == solid.name and m.photo in p.photos for m in marks)
        )
        objects.append(
            RoundObject(
                solid.name,
                solid.kind,
                seen,
                ref_height_m=1.3 if solid.kind != "ball" else None,
                known_diameter_m=solid.diameter_m if solid.known else None,
                known_sd_m=0.0005 if solid.known else None,
            )
        )
    built = Round(
        Path("made-up"),
        outing.settings,
        {"card": CARD},
        photos,
        tuple(pairs),
        tuple(objects),
        tuple(marks),
    )
    return Built(built, ties)


def _marks(outing: Outing, view: View, rng: np.random.Generator) -> list[Mark]:
    out = []
    station = np.array(view.station)

    def add(solid: Solid, name: str, points: np.ndarray, sd: float) -> None:
        for px in pixels(points, view):
            if np.isfinite(px).all():
                x, y = from_card(px[None], view.turn, upright_size(view))[0]
                out.append(
                    Mark(
                        solid.name,
                        view.photo,
                        name,
                        x + sd * rng.normal(),
                        y + sd * rng.normal(),
                        max(sd, 0.05),
                    )
                )

    for solid in outing.solids:
        base, axis = np.array(solid.base), np.array(solid.axis)
        if solid.kind == "ball":
            rays = outline_rays(station, base, 0.5 * solid.diameter_m, 13)[:-1]
            add(solid, "outline", station + 5.0 * rays, outing.mark_sd_px)
            continue
        taper = 0.5 * solid.taper_m_per_m
        radius = 0.5 * solid.diameter_m - 1.3 * taper
        for name, side in (("left", 1.0), ("right", -1.0)):
            limb = limb_points(station, base, axis, radius, taper, np.array(solid.heights), side)
            add(solid, name, limb, outing.mark_sd_px)
        if solid.kind != "pipe":
            add(solid, "base", base[None], 1.5 * min(1.0, outing.mark_sd_px / 0.4))
            add(solid, "top", (base + solid.length_m * axis)[None], 1.5)
    return _left_is_left(out)


def _left_is_left(marks: list[Mark]) -> list[Mark]:
    """Names of the limbs by the upright picture, as a person would give them."""
    out = []
    for mark in marks:
        if mark.mark in ("left", "right"):
            mine = [m for m in marks if m.object == mark.object and m.mark in ("left", "right")]
            means = {
                side: np.mean([m.x_px for m in mine if m.mark == side])
                for side in ("left", "right")
            }
            if means["left"] > means["right"]:
                other = "right" if mark.mark == "left" else "left"
                mark = Mark(mark.object, mark.photo, other, mark.x_px, mark.y_px, mark.sd_px)
        out.append(mark)
    return out


def _ties(outing: Outing, views: Sequence[View], rng: np.random.Generator) -> Ties:
    kept: list[np.ndarray] = []
    first = views[0]
    while sum(len(k) for k in kept) < outing.ties:
        n = 4 * max(outing.ties, 1)
        px = rng.uniform([20, 20], [3980, 2980], (n, 2))
        depth = np.exp(rng.uniform(*np.log(outing.depth), (n, 1)))
        if outing.flat:
            depth = np.full((n, 1), outing.depth[1])
        rays = np.concatenate([(px - VALUES[2:4]) / VALUES[:2], np.ones((n, 1))], axis=1)
        points = np.array(first.station) + (rays * depth) @ camera_rotation(first)
        seen = np.stack([pixels(points, view) for view in views], axis=1)
        enough = np.isfinite(seen[:, 0, 0]) & np.isfinite(seen[:, 1, 0])
        kept.append(seen[enough])
    card = np.concatenate(kept)[: outing.ties]
    card = card + outing.tie_sd_px * rng.normal(size=card.shape)
    upright = np.full(card.shape, np.nan)
    for i, view in enumerate(views):
        upright[:, i] = from_card(card[:, i], view.turn, upright_size(view))
    return Ties(upright, np.full(len(card), max(outing.tie_sd_px, 0.05)), len(card))
