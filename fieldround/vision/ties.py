"""Ties of a pair: the same scene points found in its pictures to a small part of a pixel.

In: upright pictures of two views or more, functions that turn their pixels into rays. Out: `Ties`.
The robust test here is generous, because an EXIF focal length may be a tenth off; the adjustment
sorts the rest out.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from fieldround.geometry.essential import FEWEST, relative_pose
from fieldround.vision.features import Features, find_features, grey, spread_out
from fieldround.vision.matching import match
from fieldround.vision.tie_refining import refine

Rays = Callable[[np.ndarray], np.ndarray]

# sd of an unrefined feature for the robust test, in pixels: its own error and a wrong card's.
ROUGH_SD_PX = 1.2
# Ties nearer than this share their windows, and so their errors.
APART_PX = 12.0
SPARE = 1.5
FEW = 20


@dataclass(frozen=True)
class Ties:
    """Ties of a pair in upright pixels.

    xy_px : (n, v, 2), NaN where a view does not see the tie
    sd_px : (n,) sd of either coordinate in one picture
    found : matches before the robust test
    notes : sentences for the report
    """

    xy_px: np.ndarray
    sd_px: np.ndarray
    found: int
    notes: tuple[str, ...] = ()


def find_ties(
    pictures: Sequence[np.ndarray],
    rays: Sequence[Rays],
    focal_px: Sequence[float],
    most: int = 400,
    seed: int = 1,
) -> Ties:
    """Find ties between the first picture and each of the others.

    pictures : (h, w, 3) or (h, w) uint8, upright
    rays     : upright pixels (n, 2) -> unit rays (n, 3) in a frame fixed to each camera
    focal_px : focal lengths
    most     : ties kept
    """
    greys = [grey(picture) for picture in pictures]
    features = [find_features(picture) for picture in greys]
    views = len(pictures)
    anchors = features[0].xy_px
    place = np.full((len(anchors), views, 2), np.nan)
    place[:, 0] = anchors
    sd = np.full((len(anchors), views), np.nan)
    found, notes = 0, []
    for view in range(1, views):
        pairs = match(features[0], features[view])
        found += len(pairs)
        kept, note = _agreeing(pairs, features[0], features[view], rays, focal_px, view, seed)
        if note:
            notes.append(note)
        pairs = _chosen(kept, features[0], greys[0].shape, int(SPARE * most))
        refined = refine(
            greys[0], greys[view], anchors[pairs[:, 0]], features[view].xy_px[pairs[:, 1]]
        )
        good = pairs[refined.good, 0]
        place[good, view] = refined.xy_px[refined.good]
        sd[good, view] = refined.sd_px[refined.good]
    seen = np.isfinite(place[:, 1:, 0]).any(axis=1)
    place, sd = place[seen], sd[seen]
    single = np.nanmax(sd, axis=1) if len(sd) else np.zeros(0)
    # Ties that more views see come first, then the sharper ones.
    strength = np.isfinite(place[:, :, 0]).sum(axis=1) - single
    order = np.sort(spread_out(place[:, 0], strength, greys[0].shape, most))
    if len(order) < FEW:
        notes.append(
            f"only {len(order)} ties were found between the photos: they share too little of a "
            "textured scene, or are blurred"
        )
    return Ties(place[order], single[order], found, tuple(dict.fromkeys(notes)))


def _agreeing(
    pairs: np.ndarray,
    first: Features,
    second: Features,
    rays: Sequence[Rays],
    focal_px: Sequence[float],
    view: int,
    seed: int,
) -> tuple[np.ndarray, str | None]:
    """Matches that agree on one relative orientation, and a note where that says something."""
    if len(pairs) < FEWEST:
        return pairs, None
    rays_a = rays[0](first.xy_px[pairs[:, 0]])
    rays_b = rays[view](second.xy_px[pairs[:, 1]])
    usable = np.isfinite(rays_a).all(axis=1) & np.isfinite(rays_b).all(axis=1)
    pairs, rays_a, rays_b = pairs[usable], rays_a[usable], rays_b[usable]
    sd = np.full(len(pairs), ROUGH_SD_PX / min(focal_px[0], focal_px[view]))
    pose = relative_pose(rays_a, rays_b, sd, seed)
    if pose is None:
        return pairs[:0], "the matches between the photos agree on no pose of the cameras"
    note = None
    if pose.rotation_only:
        note = "the camera seems to have turned on the spot: there is hardly any baseline"
    return pairs[pose.inliers], note


def _chosen(pairs: np.ndarray, first: Features, shape: tuple[int, int], most: int) -> np.ndarray:
    """Matches whose anchors keep their distance, spread over the first picture."""
    if not len(pairs):
        return pairs
    xy = first.xy_px[pairs[:, 0]]
    # One anchor a small cell, the first in a fixed order: near neighbours share their windows.
    cell = np.floor(xy / APART_PX).astype(np.int64)
    _, unique = np.unique(cell[:, 1] * 100_000 + cell[:, 0], return_index=True)
    pairs, xy = pairs[unique], xy[unique]
    return pairs[spread_out(xy, np.zeros(len(xy)), shape, most)]
