"""Ties of every pair: taken from an earlier run where they are kept, else found in the pictures.

In: a `Round` and its pictures. Out: `Ties` by pair, and the photos that could not be decoded.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from fieldround.geometry.camera import rays, to_card
from fieldround.rounds.errors import PictureError
from fieldround.rounds.model import Camera, Pair, Photo, Round
from fieldround.run.progress import Progress
from fieldround.run.tie_cache import keep_ties, kept_ties, tie_key
from fieldround.vision.ties import Ties, find_ties

# OpenCV and the larger array operations let go of the interpreter: two pairs at a time.
WORKERS = 2
Pictures = Callable[[str], np.ndarray]


@dataclass(frozen=True)
class Tied:
    """Ties by pair and what went wrong on the way to them.

    lost     : photo -> sentence, for photos whose picture cannot be decoded
    troubles : pair -> sentence, where looking for ties failed; hand ties may still do
    """

    ties: dict[str, Ties] = field(default_factory=dict)
    lost: dict[str, str] = field(default_factory=dict)
    troubles: dict[str, str] = field(default_factory=dict)


def tie_round(
    round_: Round, pictures: Pictures, kept: Path, fresh: bool, progress: Progress
) -> Tied:
    """Find or fetch the ties of every pair whose photos A and B can be read.

    pictures : upright picture by photo name
    kept     : folder in which ties are kept from run to run; fresh : do not take them from there
    """
    tied = Tied()
    if round_.settings.found_ties_max == 0:
        for pair in round_.pairs:
            progress.done(f"{pair.pair}, not searched: [ties] most is 0")
        return tied
    import cv2

    threads = cv2.getNumThreads()
    # The workers share the cores; OpenCV's own threads on top of them would only be in the way.
    cv2.setNumThreads(1)
    pool = ThreadPoolExecutor(WORKERS)
    try:
        waiting = [
            (pair, pool.submit(_tie_pair, round_, pair, pictures, kept, fresh))
            for pair in round_.pairs
        ]
        for pair, future in waiting:
            outcome = future.result()
            tied.ties.update(outcome.ties)
            tied.lost.update(outcome.lost)
            tied.troubles.update(outcome.troubles)
            progress.done(f"{pair.pair}, {_told(pair, outcome)}")
    finally:
        pool.shutdown(wait=True, cancel_futures=True)
        cv2.setNumThreads(threads)
    return tied


def _told(pair: Pair, outcome: Tied) -> str:
    if pair.pair in outcome.ties:
        return f"{len(outcome.ties[pair.pair].xy_px)} ties"
    return outcome.troubles.get(pair.pair, "a photo cannot be read")


def _tie_pair(round_: Round, pair: Pair, pictures: Pictures, kept: Path, fresh: bool) -> Tied:
    """Ties of one pair; none where photo A or B cannot be read."""
    tied = Tied()
    if any(name not in round_.photos for name in pair.photos[:2]):
        return tied
    most = round_.settings.found_ties_max
    photos, cards = _cards_of(round_, pair.photos)
    held = None if fresh else kept_ties(kept, tie_key(photos, cards, most))
    if held is not None:
        tied.ties[pair.pair] = held
        return tied
    decoded = {}
    for photo in photos:
        try:
            decoded[photo.name] = pictures(photo.name)
        except PictureError as trouble:
            tied.lost[photo.name] = f"photo {trouble}"
    if any(name not in decoded for name in pair.photos[:2]):
        return tied
    photos, cards = _cards_of(round_, decoded)
    if tied.lost and not fresh:
        # Without the lost view it is another search, which an earlier run may have made.
        held = kept_ties(kept, tie_key(photos, cards, most))
    if held is not None:
        tied.ties[pair.pair] = held
        return tied
    try:
        ties = find_ties(
            list(decoded.values()),
            [_rays_of(photo, card) for photo, card in zip(photos, cards, strict=True)],
            [card.focal_px[0] for card in cards],
            most,
            _seed(photos),
        )
    except Exception as trouble:
        said = f"{type(trouble).__name__}: {' '.join(str(trouble).split())}"
        tied.troubles[pair.pair] = f"looking for ties in the pictures failed ({said})"
        return tied
    tied.ties[pair.pair] = ties
    keep_ties(kept, tie_key(photos, cards, most), ties)
    return tied


def _cards_of(round_: Round, names: Iterable[str]) -> tuple[list[Photo], list[Camera]]:
    """The photos of some names and their camera cards, without those that were lost."""
    photos = [round_.photos[name] for name in names if name in round_.photos]
    return photos, [round_.cameras[photo.camera] for photo in photos]


def _rays_of(photo: Photo, camera: Camera) -> Callable[[np.ndarray], np.ndarray]:
    """Upright pixels (n, 2) of a photo -> unit rays (n, 3) in its camera card's frame."""
    values = np.array([*camera.focal_px, *camera.centre_px, *camera.distortion], dtype=float)

    def turned(xy_px: np.ndarray) -> np.ndarray:
        return rays(to_card(xy_px, photo.turn_deg, photo.size_px), values)

    return turned


def _seed(photos: list[Photo]) -> int:
    """The same photos give the same random draws, whatever else the round holds."""
    digests = "".join(photo.digest for photo in photos)
    return int(hashlib.sha256(digests.encode("ascii")).hexdigest()[:8], 16)
