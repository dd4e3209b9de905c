"""What the photos and sheets of one pair say of north.

In: the pair's row, its photos, its levelled frame. Out: `NorthObservations` and sentences on
what could not be used.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from datetime import datetime

import numpy as np

from fieldround.place.declination import declination
from fieldround.place.fitting import FixFit
from fieldround.place.fixes import device
from fieldround.place.frames import PairFrame
from fieldround.place.headings import (
    COMPASS_OWN_SD_DEG,
    COMPASS_SITE_SD_DEG,
    CompassReadings,
    DirectionReading,
    NorthObservations,
)
from fieldround.rounds.model import Pair, Photo

# A bearing whose sd is not given: a sighting compass read by hand (common practice 1 to 2
# degrees), its declination and the aim at the other station.
BEARING_SD_DEG = 3.0
# A photo aimed higher or lower than this has no direction on the ground worth a compass.
STEEPEST_DEG = 70.0
# Stations nearer to each other than this on the ground have no bearing.
SHORTEST_M = 0.05


def north_observations(
    pair: Pair,
    photos: Sequence[Photo],
    frame: PairFrame,
    fit: FixFit | None,
    place: tuple[float, float, float] | None,
    day: datetime | None,
) -> tuple[NorthObservations, tuple[str, ...]]:
    """Compass readings, the bearing and the fixes of one pair as observations of its heading.

    photos : in the order of the frame's stations
    place  : longitude, latitude (deg) and altitude (m) for the declination, None if unknown
    day    : date of the round, for photos that have none
    """
    compasses, notes = _compasses(photos, frame, place, day)
    directions = _bearing(pair, frame)
    observed = NorthObservations(compasses, directions)
    if fit is not None and fit.turn_weight > 0.0:
        observed = replace(observed, fixes_deg=fit.turn_deg, fixes_weight=fit.turn_weight)
    return observed, notes


def _compasses(
    photos: Sequence[Photo],
    frame: PairFrame,
    place: tuple[float, float, float] | None,
    day: datetime | None,
) -> tuple[tuple[CompassReadings, ...], tuple[str, ...]]:
    by_device: dict[str, list[tuple[float, float, float]]] = {}
    notes: list[str] = []
    for photo, look in zip(photos, frame.looks, strict=True):
        if photo.direction_deg is None or photo.direction_from not in ("true", "magnetic"):
            continue
        level = float(np.hypot(look[0], look[1]))
        if level < np.cos(np.radians(STEEPEST_DEG)):
            notes.append(f"photo {photo.name} looks too steeply up or down for a compass direction")
            continue
        to_true, to_true_sd = 0.0, 0.0
        if photo.direction_from == "magnetic":
            at = photo.taken_at or day
            if place is None or at is None:
                lacking = "position" if place is None else "date"
                notes.append(
                    f"the magnetic direction of photo {photo.name} was not used: there is no "
                    f"{lacking} to turn it to true north with"
                )
                continue
            found = declination(*place, at)
            notes += found.notes
            if found.degrees is None:
                continue
            to_true, to_true_sd = found.degrees, found.sd_deg
        in_frame = float(np.degrees(np.arctan2(look[0], look[1])))
        by_device.setdefault(device(photo), []).append(
            (photo.direction_deg + to_true - in_frame, COMPASS_OWN_SD_DEG / level, to_true_sd)
        )
    compasses = tuple(
        CompassReadings(
            name,
            np.array([row[0] for row in rows]) % 360.0,
            np.array([row[1] for row in rows]),
            float(np.hypot(COMPASS_SITE_SD_DEG, max(row[2] for row in rows))),
        )
        for name, rows in sorted(by_device.items())
    )
    return compasses, tuple(dict.fromkeys(notes))


def _bearing(pair: Pair, frame: PairFrame) -> tuple[DirectionReading, ...]:
    if pair.bearing_deg is None or len(frame.stations_m) < 2:
        return ()
    x, y = frame.stations_m[1, :2]
    level = float(np.hypot(x, y))
    if level < SHORTEST_M:
        return ()
    across = np.array([y, -x]) / level
    frame_sd = np.degrees(np.sqrt(across @ frame.stations_cov_m2[1][:2, :2] @ across) / level)
    sd = BEARING_SD_DEG if pair.bearing_sd_deg is None else pair.bearing_sd_deg
    heading = (pair.bearing_deg - float(np.degrees(np.arctan2(x, y)))) % 360.0
    return (DirectionReading("bearing", heading, float(np.hypot(sd, frame_sd))),)
