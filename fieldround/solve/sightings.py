"""Directions in a pair's levelled frame to landmarks that its photos show.

In: a pair's frame, its adjusted state, `landmark` marks. Out: the frame with its `Sighting`s.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from fieldround.geometry.camera import rays, to_card
from fieldround.place.frames import PairFrame, Sighting
from fieldround.rounds.model import Mark, Round
from fieldround.solve.adjust import Adjusted
from fieldround.solve.derive import levelled

# The round's ties improve a focal length that only EXIF gave; it is not believed beyond this.
_FOCAL_LEARNT = 0.02


def with_sightings(
    frame: PairFrame, adjusted: Adjusted, index: int, round_: Round, marks: Sequence[Mark]
) -> PairFrame:
    """The frame of pair `index`, with a direction for every `landmark` mark in its photos.

    The sd of a direction is that of the mark and of the focal length; what the photos' relative
    orientation adds is a few hundredths of a degree and left out.
    """
    seen = [m for m in marks if m.mark == "landmark" and m.photo in frame.photos]
    if not seen:
        return frame
    fit = adjusted.fits[index]
    turn = levelled(fit.state)
    sightings = []
    for mark in seen:
        view = frame.photos.index(mark.photo)
        photo = round_.photos[mark.photo]
        camera = int(fit.problem.cameras[view])
        values = adjusted.values[camera]
        pixel = to_card(np.array([[mark.x_px, mark.y_px]]), photo.turn_deg, photo.size_px)
        ray = rays(pixel, values)[0]
        if not np.isfinite(ray).all():
            continue
        card = round_.cameras[photo.camera]
        off_axis = float(np.hypot(ray[0], ray[1]) / ray[2])
        relative = min(card.focal_sd_px, _FOCAL_LEARNT * float(values[0])) / float(values[0])
        sd = float(np.hypot(mark.sd_px / values[0], off_axis * relative))
        direction = turn @ fit.state.rotations[view].T @ ray
        sightings.append(Sighting(mark.object, mark.photo, direction, float(np.degrees(sd))))
    return replace(frame, sightings=tuple(sightings))
