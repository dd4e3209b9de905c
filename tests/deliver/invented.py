"""Invented rounds for the writers: no place, person or thing in them exists.

`small_round` has 20 objects, odd ones among them; `large_round(n)` has many plain ones. Pictures
are drawn, not photographed.
"""

from __future__ import annotations

import functools
import zlib
from collections.abc import Callable
from dataclasses import replace
from datetime import datetime, timedelta, timezone
from pathlib import Path

import numpy as np
from pyproj import CRS, Transformer

from fieldround.place.frames import Ellipse, PlacedPair, PlacedPoint, Placement
from fieldround.rounds.model import Camera, Fix, Mark, Pair, Photo, Round, RoundObject, Settings
from fieldround.solve.results import (
    BUDGET_SOURCES,
    CheckResult,
    Drawing,
    ObjectResult,
    PairResult,
    Reading,
    RoundResult,
)

KINDS = ("pole", "trunk", "mast", "bollard", "tank", "pipe", "ball")
SIZES = {
    "pole": (0.24, 9.2),
    "trunk": (0.46, 17.0),
    "mast": (0.168, 11.5),
    "bollard": (0.22, 0.95),
    "tank": (4.2, 5.5),
    "pipe": (0.6, 0.8),
    "ball": (0.9, 0.9),
}
NASTY = "<script>window.hurt=1</script>\"'&amp;</td>"
START = datetime(2031, 5, 4, 9, 12, 5, tzinfo=timezone(timedelta(hours=2)))
PICTURE = (1200, 900)  # width, height of every drawn picture


def camera() -> Camera:
    return Camera("crew phone", PICTURE, (950.0, 950.0), 3.0, (599.5, 449.5), 3.0)


def placed(
    lon: float, lat: float, crs: CRS, sd: float = 0.8, elevation: float | None = 12.25
) -> PlacedPoint:
    east, north = Transformer.from_crs("EPSG:4326", crs, always_xy=True).transform(lon, lat)
    return PlacedPoint(
        lon,
        lat,
        east,
        north,
        elevation,
        "above sea level" if elevation is not None else "",
        np.diag([sd**2, (0.6 * sd) ** 2]),
        sd,
        Ellipse(2.4477 * sd, 2.4477 * 0.6 * sd, 72.0),
    )


def _drawings(i: int, photos: tuple[str, ...], kind: str) -> tuple[Drawing, ...]:
    drawn = []
    for v, photo in enumerate(photos):
        middle, half = 420.0 + 60 * (i % 4) + 25 * v, 30.0 + 5 * (i % 3)
        if kind == "ball":
            turn = np.linspace(0.0, 2 * np.pi, 40)
            ring = tuple((middle + half * np.cos(t), 450 + half * np.sin(t)) for t in turn)
            marks = tuple(("outline", x, y) for x, y in ring[::8])
            box = (middle - 2 * half, 450 - 2 * half, middle + 2 * half, 450 + 2 * half)
            drawn.append(Drawing(photo, marks, (ring,), (), box))
            continue
        left = ((middle - half, 120.0), (middle - half - 2, 780.0))
        right = ((middle + half, 120.0), (middle + half + 2, 780.0))
        turn = np.linspace(0.0, np.pi, 16)
        cut = tuple((middle + half * np.cos(t), 600 + 6 * np.sin(t)) for t in turn)
        marks = (
            ("left", middle - half, 400.0),
            ("left", middle - half - 1, 610.0),
            ("right", middle + half, 400.0),
            ("right", middle + half + 1, 610.0),
            ("base", middle, 780.0),
        )
        box = (middle - half - 30, 100.0, middle + half + 30, 800.0)
        drawn.append(Drawing(photo, marks, (left, right), cut, box))
    return tuple(drawn)


@functools.cache
def _scene() -> tuple[np.ndarray, np.ndarray]:
    """Sky, ground and a few upright bands, and noise for them."""
    width, height = PICTURE
    y, x = np.mgrid[0:height, 0:width].astype(np.float32)
    shown = np.stack([150 + 60 * y / height, 170 + 40 * y / height, 205 - 70 * y / height], -1)
    shown[y > 560] = (118, 122, 92)
    for middle in (420, 445, 480, 505, 540, 565, 600, 625):
        band = np.abs(x - middle) < 33
        band &= (y > 110) & (y < 790)
        shade = 96 + 60 * np.cos((x - middle) / 33 * 1.4)
        shown[band] = np.stack([shade, 0.86 * shade, 0.7 * shade], -1)[band]
    noise = np.random.default_rng(5).normal(0.0, 6.0, (height, width)).astype(np.int16)
    return np.clip(shown, 20, 235).astype(np.int16), noise


def picture(name: str) -> np.ndarray:
    """A drawn scene; the same for the same name, with other noise for another."""
    shown, noise = _scene()
    moved = np.roll(noise, zlib.crc32(name.encode()) % noise.size)
    return np.clip(shown + moved[..., None], 0, 255).astype(np.uint8)


def large_round(
    n: int,
    *,
    folder: Path = Path("round"),
    centre: tuple[float, float] = (11.4021, 48.0307),
    epsg: int | None = 32632,
    crs: str | None = None,
    drawn: bool = True,
    spread_m: float = 9.0,
) -> RoundResult:
    """n plain objects on a staggered lattice, two to a pair; every ninth is to be remeasured."""
    system = CRS.from_user_input(crs if crs is not None else epsg)
    objects, pairs, readings, places, rows = [], [], [], {}, []
    placed_pairs: dict[str, PlacedPair] = {}
    photos: dict[str, Photo] = {}
    marks: list[Mark] = []
    side = max(1, int(np.ceil(np.sqrt(n))))
    per_lat = 1 / 111_200.0
    per_lon = per_lat / np.cos(np.radians(centre[1]))
    draw = np.random.default_rng(7)
    for i in range(n):
        kind = KINDS[i % len(KINDS)]
        name = f"{kind[0].upper()}{i + 1:03d}"
        pair = f"P{i // 2 + 1:02d}"
        photo_names = (f"{pair}a.jpg", f"{pair}b.jpg")
        base, high = SIZES[kind]
        diameter = base * (1 + 0.25 * draw.standard_normal() * 0.5)
        sd = diameter * draw.uniform(0.004, 0.012)
        again = i % 9 == 4
        east = (i % side) * spread_m + 3 * draw.standard_normal()
        north = (i // side) * spread_m + 3 * draw.standard_normal()
        at = (centre[0] + east * per_lon, centre[1] + north * per_lat)
        places[name] = at
        taken = START + timedelta(minutes=4 * (i // 2))
        agreement = float(draw.standard_normal())
        weights = np.random.default_rng(i).uniform(0.1, 1.0, len(BUDGET_SOURCES))
        parts = weights / weights.sum() * sd**2
        readings_m = (diameter + 0.8 * sd, diameter - 0.6 * sd)
        for v, photo in enumerate(photo_names):
            photos.setdefault(
                photo,
                Photo(
                    photo,
                    folder / "photos" / photo,
                    PICTURE,
                    0,
                    "crew phone",
                    taken + timedelta(seconds=40 * v),
                    Fix(*at, 12.0, 3.2),
                    make="Invented",
                    model="Field One",
                ),
            )
            readings.append(Reading(name, pair, photo, readings_m[v], 1.3 * sd, 14.0 + v))
            marks.append(Mark(name, photo, "left", 400.0, 500.0, 0.7))
        objects.append(
            ObjectResult(
                name,
                kind,
                f"Quay {i // 10 + 1}",
                pair,
                2,
                "remeasure" if again else "accept",
                ("the two readings differ by 4.1 sd",) if again else (),
                diameter,
                sd,
                diameter - 1.9 * sd,
                diameter + 2.05 * sd,
                *readings_m,
                4.1 if again else agreement,
                np.pi * diameter,
                None if kind == "ball" else min(1.3, high / 2),
                diameter * 1.04,
                -6.5,
                high,
                0.03 * high,
                1.4,
                0.4,
                212.0,
                14.0,
                3.412,
                0.005,
                "tape",
                "found ties",
                "photo compass",
                *photo_names,
                taken.isoformat(),
                budget=dict(zip(BUDGET_SOURCES, parts.tolist(), strict=True)),
                drawings=_drawings(i, photo_names, kind) if drawn else (),
            )
        )
        rows.append(RoundObject(name, kind, (pair,), f"Quay {i // 10 + 1}"))
        if i % 2 == 0:
            stations = {
                photo: placed(at[0] - (6 + 3 * v) * per_lon, at[1] - 11 * per_lat, system, 1.9)
                for v, photo in enumerate(photo_names)
            }
            placed_pairs[pair] = PlacedPair(pair, 31.0, 4.0, "photo compass", stations, {})
            pairs.append(
                PairResult(
                    pair,
                    photo_names,
                    "solved",
                    (),
                    350,
                    312,
                    0.31 + 0.05 * (i % 5),
                    3.412,
                    0.005,
                    "tape",
                    3.41,
                    "found ties",
                    11.8,
                    "upright objects",
                    0.6,
                )
            )
    lons = np.array([at[0] for at in places.values()])
    lats = np.array([at[1] for at in places.values()])
    easts, norths = Transformer.from_crs("EPSG:4326", system, always_xy=True).transform(lons, lats)
    points = {
        name: replace(
            placed_point(lon, lat, float(e), float(n_)),
        )
        for name, lon, lat, e, n_ in zip(places, lons, lats, easts, norths, strict=True)
    }
    placement = Placement(
        system.to_wkt(), system.name, epsg, 0.8431, 0.999812, placed_pairs, points
    )
    found = replace(camera(), focal_px=(956.4, 956.4), focal_sd_px=1.2)
    return RoundResult(
        Round(
            folder,
            Settings("Harbour round, invented", "Crew 2", "Alder Basin"),
            {"crew phone": camera()},
            photos,
            tuple(Pair(p.pair, p.photos, 3.41) for p in pairs),
            tuple(rows),
            tuple(marks),
        ),
        tuple(objects),
        tuple(pairs),
        tuple(readings),
        (),
        {"crew phone": found},
        placement,
        {"seconds": {"tie": 1.5, "solve": 0.5}},
    )


def placed_point(lon: float, lat: float, east: float, north: float, sd: float = 0.8) -> PlacedPoint:
    lon = (lon + 180.0) % 360.0 - 180.0
    return PlacedPoint(
        lon,
        lat,
        east,
        north,
        12.25,
        "above sea level",
        np.diag([sd**2, (0.6 * sd) ** 2]),
        sd,
        Ellipse(2.4477 * sd, 2.4477 * 0.6 * sd, 72.0),
    )


def small_round(folder: Path = Path("round"), **where: object) -> RoundResult:
    """20 objects: no result, no position, nasty names, passed-through columns that collide."""
    plain = large_round(20, folder=folder, **where)  # type: ignore[arg-type]
    objects = list(plain.objects)
    placement = plain.placement
    assert placement is not None

    objects[2] = replace(objects[2], object=NASTY, label=NASTY, reasons=(NASTY, "second reason"))
    objects[5] = replace(
        objects[5], object='Größe "ø" 5, nörd;lich', label="Straße\nzwei", taken_at="not a time"
    )
    objects[7] = _without_result(objects[7])
    objects[8] = replace(objects[8], diameter_sd_m=float("nan"), agreement=float("inf"))
    objects[9] = replace(objects[9], taken_at="2031-05-04T10:00:00")
    extras = (
        {"verdict": "good", "Diameter_M": "12", "note": "by the gate", 'bad "name"\nhere': "x"},
        {"note": "=1+1", "fid": "7", "geom": "POINT(0 0)", "easting": "5", "": "empty"},
    )
    for i, extra in enumerate(extras):
        objects[i] = replace(objects[i], extra=extra)

    renamed = {plain.objects[i].object: objects[i].object for i in (2, 5)}
    points = {renamed.get(name, name): at for name, at in placement.objects.items()}
    del points[objects[11].object]
    checks = (
        CheckResult(
            objects[0].object,
            objects[0].diameter_m,
            objects[0].diameter_sd_m,
            objects[0].diameter_m + 0.0011,
            0.001,
            -0.0011,
            -0.31,
            "pi tape",
            "2031-05-04",
            "Crew 2",
        ),
        CheckResult(
            objects[1].object,
            objects[1].diameter_m,
            objects[1].diameter_sd_m,
            objects[1].diameter_m - 0.02,
            0.001,
            0.02,
            1.84,
            "caliper",
            "",
            "",
        ),
        CheckResult(objects[7].object, None, None, 0.31, None, None, None, NASTY, "", ""),
    )
    return replace(
        plain,
        round=replace(
            plain.round,
            settings=replace(plain.round.settings, place="Alder Basin & <Quay>"),
            marks=tuple(
                replace(m, object=renamed.get(m.object, m.object)) for m in plain.round.marks
            ),
            lost_photos={"gone.jpg": "the file is cut short"},
            notes=("one photo could not be read",),
        ),
        objects=tuple(objects),
        readings=tuple(
            replace(r, object=renamed.get(r.object, r.object))
            for r in plain.readings
            if r.object != objects[7].object
        ),
        checks=checks,
        placement=replace(placement, objects=points),
    )


def _without_result(found: ObjectResult) -> ObjectResult:
    return ObjectResult(
        found.object,
        found.kind,
        found.label,
        found.pair,
        2,
        "no result",
        ("only one limb is marked in photo B",),
        photo_a=found.photo_a,
        photo_b=found.photo_b,
        drawings=found.drawings,
    )


def without_places(result: RoundResult) -> RoundResult:
    """The same round without any GNSS."""
    return replace(result, placement=None)


Pictures = Callable[[str], np.ndarray]
