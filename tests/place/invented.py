"""Invented rounds with exact truth for the tests of placing; no figure is a measurement.

`simulated_round` draws a round whose fixes, compasses and frames err as the defaults of
`place.fixes` and `place.headings` assume in kind, not in degree: see `Grade`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

from fieldround.geometry.earth import geodetic_from_enu
from fieldround.place.fitting import turn
from fieldround.place.frames import PairFrame
from fieldround.rounds.model import Camera, Fix, Pair, Photo, Round, RoundObject, Settings

CAMERA = Camera("crew phone", (400, 300), (310.0, 310.0), 1.0, (199.5, 149.5), 1.0)
START = datetime(2026, 5, 14, 9, 0, tzinfo=UTC)
LEVEL = np.array([[0.0, 1.0, 0.0], [0.0, 1.0, 0.0]])


@dataclass(frozen=True)
class Grade:
    """How the fixes of a simulated round err.

    stated_m  : what the EXIF states, one drawn a round; the sd of each axis is that figure
    own_share : part of the variance that is each fix's own; the rest is common and fades slowly
    fade_s    : time in which the common part fades to 1 / e
    wild      : share of fixes that are off by three times as much
    """

    stated_m: tuple[float, ...]
    own_share: float
    fade_s: float
    wild: float


GRADES = {
    "phone": Grade((3.0, 4.0, 5.0, 6.5, 8.0), 0.2, 600.0, 0.02),
    "RTK": Grade((0.014, 0.02, 0.03), 0.75, 600.0, 0.0),
}
PLACES = {
    "52 N": (13.0, 52.0),
    "34 S": (18.6, -34.0),
    "69 N": (18.4, 69.0),
    "equator": (36.8, 0.0),
    "longitude 180": (180.0, -17.8),
}


@dataclass(frozen=True)
class Simulated:
    """A round, what the adjustment would hand over of it, and where the objects truly stand.

    truth : object -> (2,) longitude, latitude
    """

    round: Round
    frames: tuple[PairFrame, ...]
    truth: Mapping[str, np.ndarray]


def a_photo(
    name: str,
    lon: float | None = None,
    lat: float | None = None,
    altitude_m: float | None = 30.0,
    stated_m: float | None = 5.0,
    seconds: float | None = 0.0,
    direction: float | None = None,
    direction_from: str = "true",
    model: str = "K2",
    source: str = "exif",
) -> Photo:
    """A photo with a fix as its EXIF reader makes it (stated error over 1.51), or without."""
    fix = None
    if lon is not None and lat is not None:
        sd = None if stated_m is None else stated_m / (1.51 if source == "exif" else 1.0)
        fix = Fix(lon, lat, altitude_m, sd, source=source)
    return Photo(
        name, Path("photos") / name, (400, 300), 0, CAMERA.name,
        taken_at=None if seconds is None else START + timedelta(seconds=seconds),
        fix=fix, direction_deg=direction,
        direction_from=None if direction is None else direction_from,
        make="Tern", model=model,
    )  # fmt: skip


def a_frame(
    pair: str,
    photos: tuple[str, ...] = ("a.jpg", "b.jpg"),
    stations: np.ndarray | None = None,
    looks: np.ndarray | None = None,
    objects: Mapping[str, tuple[float, float, float]] | None = None,
) -> PairFrame:
    """A levelled frame; by default B is 2 m to the right of A and both look along y."""
    default = np.array([[0.0, 0.0, 0.0], [2.0, 0.0, 0.0]])
    at = default if stations is None else np.asarray(stations, dtype=float)
    things = {"T1": (1.0, 10.0, -1.6)} if objects is None else objects
    cov = np.zeros((len(at), 3, 3))
    cov[1:] = np.eye(3) * 1e-6
    return PairFrame(
        pair=pair,
        photos=photos,
        stations_m=at,
        stations_cov_m2=cov,
        looks=np.tile([0.0, 1.0, 0.0], (len(at), 1)) if looks is None else looks,
        objects_m={name: np.array(point) for name, point in things.items()},
        objects_cov_m2={name: np.diag([1e-4, 1e-3, 1e-4]) for name in things},
        vertical_sd_deg=0.3,
        vertical_from="plumb lines",
    )


def a_round(
    photos: list[Photo], pairs: list[Pair], objects: list[RoundObject] | None = None,
    crs: str | None = None,
) -> Round:  # fmt: skip
    things = objects or [RoundObject("T1", "pole", tuple(p.pair for p in pairs))]
    return Round(
        folder=Path("round"),
        settings=Settings(crs=crs),
        cameras={CAMERA.name: CAMERA},
        photos={photo.name: photo for photo in photos},
        pairs=tuple(pairs),
        objects=tuple(things),
        marks=(),
    )


def simulated_round(
    rng: np.random.Generator,
    place: tuple[float, float],
    grade: Grade,
    pairs: int = 1,
    compass: bool = True,
) -> Simulated:
    """A round of pairs within some 300 m, five minutes apart, one object a pair.

    Compass errors: device bias sd 5, place sd 4, own sd 5 degrees, one reading in thirty anywhere.
    """
    origin = np.array([*place, 40.0])
    stated = float(rng.choice(grade.stated_m))
    bias = rng.normal(0.0, 5.0)
    common = rng.normal(0.0, 1.0, 2)
    photos, rows, frames, things, truth = [], [], [], [], {}
    for k in range(pairs):
        fade = np.exp(-300.0 / grade.fade_s) if k else 1.0
        common = fade * common + np.sqrt(1.0 - fade**2) * rng.normal(0.0, 1.0, 2)
        heading = rng.uniform(0.0, 360.0)
        rotation = turn(heading)
        views = 3 if rng.random() < 0.2 else 2
        base, reach = rng.uniform(1.5, 6.0), rng.uniform(5.0, 40.0)
        stations = np.zeros((views, 3))
        for i in range(1, views):
            stations[i] = [i * base, rng.normal(0.0, 0.3), rng.normal(0.0, 0.1)]
        aims = np.radians(np.concatenate([[0.0], rng.normal(0.0, 8.0, views - 1)]))
        looks = np.stack([np.sin(aims), np.cos(aims), np.zeros(views)], axis=-1)
        at = rng.uniform(-150.0, 150.0, 2)
        thing = np.array([base / 2.0 + rng.normal(0.0, 1.0), reach, -1.6])
        site = rng.normal(0.0, 4.0)
        names = tuple(f"{k}{'abc'[i]}.jpg" for i in range(views))
        for i, name in enumerate(names):
            own = rng.normal(0.0, 1.0, 2)
            error = np.sqrt(1.0 - grade.own_share) * common + np.sqrt(grade.own_share) * own
            if rng.random() < grade.wild:
                error = 3.0 * error
            east, north = at + rotation @ stations[i, :2] + stated * error
            lon, lat, _ = geodetic_from_enu(np.array([[east, north, 0.0]]), origin)[0]
            azimuth = heading + np.degrees(aims[i]) + bias + site + rng.normal(0.0, 5.0)
            if rng.random() < 1.0 / 30.0:
                azimuth = rng.uniform(0.0, 360.0)
            photos.append(
                a_photo(name, lon, lat, stated_m=stated, seconds=300.0 * k + 30.0 * i,
                        direction=azimuth % 360.0 if compass else None)
            )  # fmt: skip
        cov = np.diag([(0.002 * reach) ** 2, (0.004 * reach) ** 2, 1e-4])
        seen = thing + rng.normal(0.0, 1.0, 3) * np.sqrt(np.diag(cov))
        pair, name = f"P{k + 1}", f"T{k + 1}"
        rows.append(Pair(pair, names, base))
        frame = a_frame(pair, names, stations, looks, {name: tuple(seen)})
        frames.append(
            PairFrame(**{**vars(frame), "objects_cov_m2": {name: cov}})
        )
        things.append(RoundObject(name, "pole", (pair,)))
        east, north = at + rotation @ thing[:2]
        truth[name] = geodetic_from_enu(np.array([[east, north, 0.0]]), origin)[0, :2]
    return Simulated(a_round(photos, rows, things), tuple(frames), truth)
