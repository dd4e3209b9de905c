"""What the photos and sheets of one pair say of north.

In: the pair's row, its photos, its levelled frame. Out: `NorthObservations` and sentences on
what could not be used.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime

import numpy as np

from fieldround.geometry.earth import enu_from_geodetic
from fieldround.place.declination import declination
from fieldround.place.fitting import FixFit, turn
from fieldround.place.fixes import device
from fieldround.place.frames import PairFrame
from fieldround.place.grounds import Ground
from fieldround.place.headings import (
    COMPASS_OWN_SD_DEG,
    COMPASS_SITE_SD_DEG,
    CompassReadings,
    DirectionReading,
    NorthObservations,
    wrap,
)
from fieldround.rounds.model import Landmark, Pair, Photo

# A bearing whose sd is not given: a sighting compass read by hand (common practice 1 to 2
# degrees), its declination and the aim at the other station.
BEARING_SD_DEG = 3.0
# A photo aimed higher or lower than this has no direction on the ground worth a compass.
STEEPEST_DEG = 70.0
# Stations nearer to each other than this on the ground have no bearing.
SHORTEST_M = 0.05
# A landmark nearer than this many sds of the station's position gives no direction.
NEAREST_SDS = 3.0


@dataclass(frozen=True)
class Laid:
    """A pair's frame with its ground, as far as it is laid onto it by now."""

    frame: PairFrame
    ground: Ground | None
    fit: FixFit | None
    heading_deg: float | None


def north_observations(
    pair: Pair,
    photos: Sequence[Photo],
    laid: Laid,
    landmarks: Mapping[str, Landmark],
    place: tuple[float, float, float],
    day: datetime | None,
) -> tuple[NorthObservations, tuple[str, ...]]:
    """All that one pair knows of north, as observations of its heading.

    photos : in the order of the frame's stations
    place  : longitude, latitude (deg) and altitude (m) for the declination
    day    : date of the round, for photos that have none
    """
    frame, fit, ground = laid.frame, laid.fit, laid.ground
    compasses, notes = _compasses(photos, frame, place, day)
    seen, more = _landmarks(laid, landmarks)
    observed = NorthObservations(compasses, (*_bearing(pair, frame), *seen))
    if ground is not None and fit is not None and fit.turn_weight > 0.0:
        observed = replace(
            observed,
            fixes_deg=fit.turn_deg,
            fixes_weight=fit.turn_weight,
            fixes_source="landmark" if ground.known else "GNSS baseline",
        )
    return observed, (*notes, *more)


def _landmarks(
    laid: Laid, landmarks: Mapping[str, Landmark]
) -> tuple[tuple[DirectionReading, ...], tuple[str, ...]]:
    """Headings from landmarks that the photos show, one a landmark."""
    frame, ground, fit = laid.frame, laid.ground, laid.fit
    names = [n for n in dict.fromkeys(s.landmark for s in frame.sightings) if n in landmarks]
    if not names:
        return (), ()
    if ground is None or fit is None:
        return (), ("no photo has a position to see a landmark from",)
    readings, notes = [], []
    for name in names:
        point = landmarks[name]
        there = enu_from_geodetic(
            np.array([[point.longitude_deg, point.latitude_deg, ground.origin[2]]]), ground.origin
        )[0, :2]
        offs, sds = [], []
        for sighting in frame.sightings:
            if sighting.landmark != name:
                continue
            station = frame.stations_m[frame.photos.index(sighting.photo), :2]
            if laid.heading_deg is None:
                here, loose = fit.weights @ fit.fixes_m, float(np.hypot(*station))
            else:
                here, loose = fit.origin(laid.heading_deg) + turn(laid.heading_deg) @ station, 0.0
            way = there - here
            away = float(np.hypot(*way))
            unsure = float(np.sqrt(fit.axis_var_m2 + point.sd_m**2 + loose**2))
            if away < NEAREST_SDS * unsure:
                continue
            azimuth = float(np.degrees(np.arctan2(way[0], way[1])))
            in_frame = float(np.degrees(np.arctan2(sighting.direction[0], sighting.direction[1])))
            offs.append(azimuth - in_frame)
            sds.append(float(np.hypot(sighting.sd_deg, np.degrees(unsure / away))))
        if not offs:
            notes.append(
                f"landmark {name} is too near for the sd of the photos' positions to give a "
                "direction"
            )
            continue
        # All photos of the pair share the error of its position: no better than the best.
        middle = offs[0] + float(np.mean(wrap(np.array(offs) - offs[0])))
        readings.append(DirectionReading("landmark", middle % 360.0, min(sds)))
    return tuple(readings), tuple(notes)


def _compasses(
    photos: Sequence[Photo],
    frame: PairFrame,
    place: tuple[float, float, float],
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
            if at is None:
                notes.append(
                    f"the magnetic direction of photo {photo.name} was not used: there is no "
                    "date to turn it to true north with"
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
