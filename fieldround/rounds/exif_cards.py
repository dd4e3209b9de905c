"""A camera card made from EXIF, for photos that no card of the round fits.

In: a photo's EXIF facts and size. Out: a `Camera` whose focal length is only a wide start value;
the adjustment must improve it.
"""

from __future__ import annotations

import math

from fieldround.rounds.exif import ExifFacts
from fieldround.rounds.model import Camera

# 35 mm film: 36 x 24 mm.
_FILM_WIDTH_MM = 36.0
_FILM_DIAGONAL_MM = math.hypot(36.0, 24.0)

FOCAL_SD = 0.05
GUESS_ANGLE_DEG = 65.0
GUESS_SD = 0.20
CENTRE_SD = 0.01
DISTORTION_SD = (0.03, 0.03, 0.001, 0.001, 0.0)

# Angles of view across the diagonal from 150 down to 1 degree; beyond, the tag is wrong.
_LEAST_FOCAL, _MOST_FOCAL = 0.13, 57.0


def camera_from_exif(facts: ExifFacts, landscape_px: tuple[int, int]) -> tuple[Camera, str]:
    """A start card for a landscape picture, and a sentence on where its focal length comes from.

    The 35 mm equivalent is read between two rules that makers follow (picture diagonal to
    43.27 mm, picture width to 36 mm; 4 % apart at 4:3) with a core sd of 5 % and heavy tails;
    else focal length and focal-plane resolution; else an angle of view of 65 degrees, sd 20 %.
    Values by our own judgement: on real photo sets the tag was 1 to 16 % off and more.
    """
    width, height = landscape_px
    diagonal = math.hypot(width, height)
    focal_px, focal_sd, said = 0.0, FOCAL_SD, ""
    if facts.focal_35mm:
        by_diagonal = facts.focal_35mm * diagonal / _FILM_DIAGONAL_MM
        by_width = facts.focal_35mm * width / _FILM_WIDTH_MM
        focal_px = math.sqrt(by_diagonal * by_width)
        said = f"the 35 mm equivalent of {facts.focal_35mm:g} mm"
    if not _possible(focal_px, diagonal) and facts.focal_mm and facts.plane_px_per_mm:
        # The resolution holds for the picture as recorded; this one may have been made smaller.
        smaller = width / facts.plane_width_px if facts.plane_width_px else 1.0
        focal_px = facts.focal_mm * facts.plane_px_per_mm * smaller
        said = f"the focal length of {facts.focal_mm:g} mm and the focal-plane resolution"
    if not _possible(focal_px, diagonal):
        focal_px = diagonal / 2.0 / math.tan(math.radians(GUESS_ANGLE_DEG / 2.0))
        focal_sd = GUESS_SD
        said = f"a plain guess, an angle of view of {GUESS_ANGLE_DEG:g} degrees"
    camera = Camera(
        name=_name(facts, landscape_px),
        size_px=(width, height),
        focal_px=(focal_px, focal_px),
        focal_sd_px=focal_px * focal_sd,
        centre_px=((width - 1) / 2.0, (height - 1) / 2.0),
        centre_sd_px=width * CENTRE_SD,
        distortion_sd=DISTORTION_SD,
        make=facts.make,
        model=facts.model,
        lens=facts.lens,
        focal_mm=facts.focal_mm,
        digital_zoom=facts.digital_zoom,
        focal_heavy_tailed=True,
        source="exif",
    )
    note = f"no camera card fits {camera.name}; its focal length starts from {said}"
    return camera, f"{note}, sd {focal_sd:.0%}"


def _possible(focal_px: float, diagonal: float) -> bool:
    return _LEAST_FOCAL * diagonal <= focal_px <= _MOST_FOCAL * diagonal


def _name(facts: ExifFacts, landscape_px: tuple[int, int]) -> str:
    """One name for all photos of one camera, lens, zoom and size."""
    parts = [part for part in (facts.make, facts.model, facts.lens) if part]
    if facts.focal_mm:
        parts.append(f"{facts.focal_mm:g} mm")
    if facts.focal_35mm:
        parts.append(f"({facts.focal_35mm:g} mm at 35 mm)")
    if facts.digital_zoom:
        parts.append(f"digital zoom {facts.digital_zoom:g}")
    parts.append(f"{landscape_px[0]} x {landscape_px[1]}")
    return "EXIF: " + " ".join(parts)
