"""From a round's sheets, ties and camera cards to the numbers of one pair's adjustment.

In: a `Round`, one `Pair`, its ties, GNSS lengths, marks found in the pictures. Out: a
`PairProblem` and, for objects that cannot enter it, the reason in words.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.geometry.camera import rays, to_card, up_in_card
from fieldround.place.baselines import GnssBaseline
from fieldround.rounds.model import OTHERS_NAMES, Camera, Mark, Pair, Round, RoundObject
from fieldround.solve.kinds import KIND_EXPECTATIONS
from fieldround.solve.problem import LengthObservation, Marks, PairProblem, SolidObject
from fieldround.vision.ties import Ties

LIMB_NAMES = ("left", "right", "outline")
# House corners and posts taken as plumb are so within about 0.2 degrees (an assumption).
PLUMB_FLOOR_RAD = float(np.radians(0.2))


@dataclass(frozen=True)
class Assembled:
    """One pair ready for the adjustment.

    lost : object -> sentence, for objects marked in this pair that cannot be solved in it
    ties_found : ties found in the pictures plus ties marked by hand
    """

    problem: PairProblem
    lost: dict[str, str]
    ties_found: int


def card_values(card: Camera) -> np.ndarray:
    """The nine card values fx fy cx cy k1 k2 p1 p2 k3, (9,)."""
    return np.array([*card.focal_px, *card.centre_px, *card.distortion], dtype=float)


def winning_marks(round_: Round, found: Sequence[Mark]) -> tuple[Mark, ...]:
    """Hand marks, and found marks where no hand mark of that sort stands in the photo."""

    def sort_of(mark: Mark) -> tuple[str, str, str]:
        name = "limbs" if mark.mark in LIMB_NAMES else mark.mark
        return mark.object, mark.photo, name

    by_hand = {sort_of(mark) for mark in round_.marks}
    return (*round_.marks, *(mark for mark in found if sort_of(mark) not in by_hand))


def assemble_pair(
    round_: Round,
    pair: Pair,
    cameras: Sequence[Camera],
    ties: Ties | None,
    baseline: GnssBaseline | None,
    marks: Sequence[Mark],
) -> Assembled:
    """Gather everything observed in one pair.

    cameras : the round's cameras in the adjustment's order
    marks   : `winning_marks` of the round
    """
    photos = [round_.photos[name] for name in pair.photos]
    names = [camera.name for camera in cameras]
    view_of = {photo.name: view for view, photo in enumerate(photos)}
    mine = [mark for mark in marks if mark.photo in view_of]
    pixels = _card_pixels(round_, mine)
    listed = {thing.object: thing for thing in round_.objects}

    lost: dict[str, str] = {}
    things: list[SolidObject] = []
    index: dict[str, int] = {}
    named = {mark.object for mark in mine if mark.mark not in OTHERS_NAMES}
    in_pair = [name for name in listed if name in named]
    in_pair += [
        name for name in listed if name not in in_pair and listed[name].pairs == (pair.pair,)
    ]
    for name in in_pair:
        own = [mark for mark in mine if mark.object == name and mark.mark not in OTHERS_NAMES]
        reason = _why_not(listed[name], own, pair)
        if reason:
            lost[name] = reason
            continue
        index[name] = len(things)
        things.append(_solid(listed[name], own))

    def gather(wanted: tuple[str, ...], balls: bool, side: Mapping[str, float]) -> Marks:
        rows = [
            (index[m.object], view_of[m.photo], px, m.sd_px, side.get(m.mark, 0.0))
            for m, px in zip(mine, pixels, strict=True)
            if m.mark in wanted and m.object in index and things[index[m.object]].is_ball == balls
        ]
        if not rows:
            return Marks()
        return Marks(
            np.array([row[0] for row in rows]),
            np.array([row[1] for row in rows]),
            np.array([row[2] for row in rows]).reshape(-1, 2),
            np.array([row[3] for row in rows], dtype=float),
            np.array([row[4] for row in rows], dtype=float),
        )

    ties_px, ties_sd = _all_ties(round_, pair, ties, mine, pixels, view_of)
    plumb_view, plumb_normal, plumb_sd = _plumb_lines(round_, mine, pixels, view_of)
    lengths = []
    if pair.tape_m is not None:
        lengths.append(LengthObservation(pair.tape_m, pair.tape_sd_m, "tape"))
    if baseline is not None and baseline.usable:
        lengths.append(LengthObservation(baseline.length_m, baseline.length_sd_m, "GNSS"))
    problem = PairProblem(
        pair=pair.pair,
        photos=pair.photos,
        cameras=np.array([names.index(photo.camera) for photo in photos]),
        up=np.array([up_in_card(photo.turn_deg) for photo in photos]),
        objects=tuple(things),
        ties_px=ties_px,
        ties_sd_px=ties_sd,
        limbs=gather(("left", "right"), False, {"left": 1.0, "right": -1.0}),
        outlines=gather(LIMB_NAMES, True, {}),
        ends=gather(("base", "top"), False, {"base": 0.0, "top": 1.0}),
        plumb_view=plumb_view,
        plumb_normal=plumb_normal,
        plumb_sd_rad=plumb_sd,
        lengths=tuple(lengths),
    )
    return Assembled(problem, lost, len(ties_px))


def _card_pixels(round_: Round, marks: Sequence[Mark]) -> list[np.ndarray]:
    out = []
    for mark in marks:
        photo = round_.photos[mark.photo]
        out.append(to_card(np.array([[mark.x_px, mark.y_px]]), photo.turn_deg, photo.size_px)[0])
    return out


def _why_not(thing: RoundObject, own: Sequence[Mark], pair: Pair) -> str | None:
    """Why an object cannot be solved in this pair, None when it can."""
    ball = thing.kind == "ball"
    wanted = LIMB_NAMES if ball else ("left", "right")
    by_photo = {
        photo: [m for m in own if m.photo == photo and m.mark in wanted] for photo in pair.photos
    }
    fewest = 3 if ball else 2
    enough = [photo for photo, marks in by_photo.items() if len(marks) >= fewest]
    what = "outline marks" if ball else "limb marks"
    if not any(by_photo.values()):
        if any(m.mark == "middle" for m in own):
            return "no limbs were found around its middle mark, and none are marked by hand"
        return f"it has no {what} in pair {pair.pair}"
    if len(enough) < 2:
        lacking = next(photo for photo in pair.photos if photo not in enough)
        return (
            f"photo {lacking} has {len(by_photo[lacking])} {what} of it; "
            f"{'three' if ball else 'a left and a right one'} are needed in two photos of the pair"
        )
    return None


def _solid(thing: RoundObject, own: Sequence[Mark]) -> SolidObject:
    expected = KIND_EXPECTATIONS[thing.kind]
    ball = thing.kind == "ball"
    height = thing.ref_height_m
    if thing.kind == "pipe":
        # A pipe's diameter is wanted along its length, not at a height above the ground.
        height = None
    elif height is None:
        height = expected.ref_height_m
    has_base = not ball and any(m.mark == "base" for m in own)
    guess = not ball and not has_base and height is not None
    return SolidObject(
        name=thing.object,
        kind=thing.kind,
        is_ball=ball,
        upright_sd_rad=(
            None if expected.upright_sd_deg is None else float(np.radians(expected.upright_sd_deg))
        ),
        taper=0.5 * expected.taper_m_per_m,
        taper_sd=0.5 * expected.taper_sd_m_per_m,
        ref_height_m=height,
        known_diameter_m=thing.known_diameter_m,
        known_sd_m=thing.known_sd_m,
        has_base=has_base,
        has_top=not ball and any(m.mark == "top" for m in own),
        ground_guess=guess,
    )


def _all_ties(
    round_: Round,
    pair: Pair,
    ties: Ties | None,
    mine: Sequence[Mark],
    pixels: Sequence[np.ndarray],
    view_of: Mapping[str, int],
) -> tuple[np.ndarray, np.ndarray]:
    """Found ties and hand ties in card pixels, (n, v, 2), and their sds, (n,)."""
    views = len(pair.photos)
    blocks: list[np.ndarray] = []
    sds: list[np.ndarray] = []
    if ties is not None and len(ties.xy_px):
        turned = np.full(ties.xy_px.shape, np.nan)
        for view, name in enumerate(pair.photos):
            photo = round_.photos[name]
            turned[:, view] = to_card(ties.xy_px[:, view], photo.turn_deg, photo.size_px)
        blocks.append(turned)
        sds.append(np.asarray(ties.sd_px, dtype=float))
    by_hand: dict[str, dict[int, tuple[np.ndarray, float]]] = {}
    for mark, px in zip(mine, pixels, strict=True):
        if mark.mark == "tie":
            by_hand.setdefault(mark.object, {})[view_of[mark.photo]] = (px, mark.sd_px)
    for seen in by_hand.values():
        if len(seen) < 2:
            continue
        row = np.full((1, views, 2), np.nan)
        for view, (px, _) in seen.items():
            row[0, view] = px
        blocks.append(row)
        sds.append(np.array([max(sd for _, sd in seen.values())]))
    if not blocks:
        return np.zeros((0, views, 2)), np.zeros(0)
    return np.concatenate(blocks), np.concatenate(sds)


def _plumb_lines(
    round_: Round,
    mine: Sequence[Mark],
    pixels: Sequence[np.ndarray],
    view_of: Mapping[str, int],
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Views (p,), plane normals (p, 3) and sds in radians (p,) of the plumb lines."""
    groups: dict[tuple[str, str], list[tuple[np.ndarray, float]]] = {}
    for mark, px in zip(mine, pixels, strict=True):
        if mark.mark == "plumb":
            groups.setdefault((mark.object, mark.photo), []).append((px, mark.sd_px))
    views, normals, sds = [], [], []
    for (_, name), points in groups.items():
        if len(points) < 2:
            continue
        card = round_.cameras[round_.photos[name].camera]
        lines = rays(np.array([px for px, _ in points]), card_values(card))
        centre = lines.mean(axis=0)
        _, sizes, rows = np.linalg.svd(lines - centre, full_matrices=False)
        normal = np.cross(rows[0], centre)
        # sd of a line's direction: pixel sd over the root of the summed squared lengths.
        turn = max(sd for _, sd in points) / card.focal_px[0] / max(float(sizes[0]), 1e-6)
        views.append(view_of[name])
        normals.append(normal / np.linalg.norm(normal))
        sds.append(float(np.hypot(turn, PLUMB_FLOOR_RAD)))
    return (
        np.array(views, dtype=int),
        np.array(normals).reshape(-1, 3),
        np.array(sds, dtype=float),
    )
