"""The rows of every layer and table, made once and written by every writer.

In: a `RoundResult` and the folder the files will lie in. Out: a `Layer` for each of
`fields.TABLES`, its values rounded and ordered as they will be written, no NaN among them.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from fieldround import __version__
from fieldround.deliver import shapes
from fieldround.deliver.fields import BY_NAME, COORDINATE_FIELDS, Field, Table, passed_through
from fieldround.deliver.places import photo_path, place_of, station_of
from fieldround.deliver.times import in_utc, local_time, time_span
from fieldround.place.frames import PlacedPoint, Placement
from fieldround.solve.results import ObjectResult, RoundResult

VIEWS = "ABCDEFGHIJKLMNOPQRSTUVWXYZ"
Value = str | int | float | None
_PART = 2000


@dataclass(frozen=True)
class Layer:
    """One table ready to be written: its fields (with the passed-through ones), rows, geometry.

    rows     : one tuple a row, in the order of `fields`
    geometry : (n,) shapely geometries or None in the round's CRS; None for a plain table
    """

    table: Table
    fields: tuple[Field, ...]
    rows: list[tuple[Value, ...]]
    geometry: np.ndarray | None = None


def layers_of(result: RoundResult, out_dir: Path) -> Iterator[Layer]:
    """Every layer and table in the order of `fields.TABLES`, made one after the other.

    A large round's polygons and rows need much room, so that a writer should not keep them all.
    """
    frame = _Frame(result, out_dir)
    for make in (
        _objects,
        _sections,
        _stations,
        _sightlines,
        _ellipses,
        _readings,
        _budget,
        _pairs,
        _checks,
        _round,
    ):
        yield make(frame)


def coordinates(result: RoundResult) -> list[tuple[Value, ...]]:
    """Easting, northing, longitude, latitude of every object, None where it has no place."""
    names = ("easting_m", "northing_m", "longitude_deg", "latitude_deg")
    places = [place_of(result, found.object) for found in result.objects]
    columns = [
        settled(field, [getattr(at, name, None) for at in places])
        for field, name in zip(COORDINATE_FIELDS, names, strict=True)
    ]
    return list(zip(*columns, strict=True))


def settled(field: Field, values: Sequence[Any]) -> list[Value]:
    """A field's values as they are written: rounded to its digits; NaN and infinity are None."""
    if field.type == "INTEGER":
        return [None if v is None else int(v) for v in values]
    if field.type == "REAL":
        # + 0.0 makes 0.0 of -0.0
        return [
            None if v is None or not math.isfinite(v) else round(float(v), field.digits) + 0.0
            for v in values
        ]
    if field.type == "TEXT":
        return [None if v is None else str(v) for v in values]
    return [str(v) if v else None for v in values]


class _Frame:
    """The result with the look-ups that more than one layer needs."""

    def __init__(self, result: RoundResult, out_dir: Path) -> None:
        self.result = result
        self.out_dir = out_dir
        self.placement: Placement | None = result.placement
        self.objects = {found.object: found for found in result.objects}
        self.places = {found.object: place_of(result, found.object) for found in result.objects}
        self._axes: dict[str, np.ndarray] = {}
        placed = [(name, at) for name, at in self.places.items() if at is not None]
        if self.placement is not None and placed:
            axes = shapes.grid_axes(
                self.placement.crs_wkt,
                np.array([at.longitude_deg for _, at in placed]),
                np.array([at.latitude_deg for _, at in placed]),
            )
            self._axes = {name: axes[i] for i, (name, _) in enumerate(placed)}

    def ellipses(
        self, names: Sequence[str], size: Callable[[str], tuple[float, float, float] | None]
    ) -> np.ndarray:
        """(n,) polygons around objects; None where an object has no place or no size."""
        found = np.full(len(names), None, object)
        sized = [(i, name, size(name)) for i, name in enumerate(names)]
        drawn = [(i, name, s) for i, name, s in sized if s is not None and self._drawable(name)]
        if drawn:
            centre = np.array([_grid(self.places[name]) for _, name, _ in drawn])
            axes = np.stack([self._axes[name] for _, name, _ in drawn])
            sizes = np.array([s for _, _, s in drawn])
            found[[i for i, _, _ in drawn]] = shapes.ellipses(centre, axes, sizes)
        return found

    def _drawable(self, name: str) -> bool:
        axes = self._axes.get(name)
        at = self.places.get(name)
        return (
            axes is not None
            and bool(np.isfinite(axes).all())
            and bool(np.isfinite(_grid(at)).all())
        )


def _grid(at: PlacedPoint | None) -> tuple[float, float]:
    return (math.nan, math.nan) if at is None else (at.easting_m, at.northing_m)


def _grids(places: Iterable[PlacedPoint | None]) -> np.ndarray:
    return np.array([_grid(at) for at in places], float).reshape(-1, 2)


def _layer(
    name: str,
    records: Iterable[Mapping[str, Any]],
    geometry: np.ndarray | None = None,
    extras: Sequence[Mapping[str, str]] = (),
    reserved: Iterable[str] = (),
) -> Layer:
    """Rows of one table from records keyed by field name, passed-through columns after them."""
    table = BY_NAME[name]
    taken = [f.name for f in table.fields] + list(reserved)
    passed = passed_through((key for extra in extras for key in extra), taken)
    rows: list[tuple[Value, ...]] = []
    waiting = iter(records)
    while part := list(itertools.islice(waiting, _PART)):
        columns = [settled(f, [record.get(f.name) for record in part]) for f in table.fields]
        rows += zip(*columns, strict=True)
    if passed:
        rows = [
            row + tuple(extra.get(typed) for typed in passed)
            for row, extra in zip(rows, extras, strict=True)
        ]
    return Layer(table, table.fields + tuple(passed.values()), rows, geometry)


def _objects(frame: _Frame) -> Layer:
    results = frame.result.objects
    geometry = shapes.points(_grids(frame.places[o.object] for o in results))
    return _layer(
        "objects",
        (_object_record(frame, found) for found in results),
        geometry,
        [found.extra for found in results],
        [f.name for f in COORDINATE_FIELDS],
    )


def _object_record(frame: _Frame, found: ObjectResult) -> dict[str, Any]:
    record = dict(vars(found))
    at = frame.places[found.object]
    round_ = frame.result.round
    if record["heading_from"] is None and frame.placement is not None:
        placed = frame.placement.pairs.get(found.pair)
        record["heading_from"] = None if placed is None else placed.heading_from
    record["reasons"] = "; ".join(found.reasons)
    record["taken_local"] = local_time(found.taken_at)
    record["taken_at"] = in_utc(found.taken_at)
    record["photo_a_path"] = photo_path(round_, found.photo_a, frame.out_dir)
    record["photo_b_path"] = photo_path(round_, found.photo_b, frame.out_dir)
    if at is not None:
        record["position_sd_m"] = at.position_sd_m
        record["elevation_m"] = at.elevation_m
        record["elevation_is"] = at.elevation_is if at.elevation_m is not None else None
    return record


def _sections(frame: _Frame) -> Layer:
    measured = [found for found in frame.result.objects if _size(found.diameter_m)]

    def size(name: str) -> tuple[float, float, float]:
        radius = (frame.objects[name].diameter_m or 0.0) / 2.0
        return radius, radius, 0.0

    return _layer(
        "sections",
        (vars(found) for found in measured),
        frame.ellipses([found.object for found in measured], size),
    )


def _size(length_m: float | None) -> bool:
    return length_m is not None and math.isfinite(length_m) and length_m > 0.0


def _stations(frame: _Frame) -> Layer:
    records: list[dict[str, Any]] = []
    places: list[PlacedPoint | None] = []
    for pair in frame.result.pairs:
        for view, name in zip(VIEWS, pair.photos, strict=False):
            photo = frame.result.round.photos.get(name)
            at = station_of(frame.result, pair.pair, name)
            taken = None if photo is None else photo.taken_at
            records.append(
                {
                    "pair": pair.pair,
                    "view": view,
                    "photo": name,
                    "photo_path": photo_path(frame.result.round, name, frame.out_dir),
                    "camera": None if photo is None else photo.camera,
                    "taken_at": in_utc(taken),
                    "taken_local": local_time(taken),
                    "position_sd_m": None if at is None else at.position_sd_m,
                    "elevation_m": None if at is None else at.elevation_m,
                    "elevation_is": (
                        None if at is None or at.elevation_m is None else at.elevation_is
                    ),
                }
            )
            places.append(at)
    return _layer("stations", records, shapes.points(_grids(places)))


def _sightlines(frame: _Frame) -> Layer:
    readings = {(r.object, r.pair, r.photo): r for r in frame.result.readings}
    marked: dict[str, set[str]] = {}
    for mark in frame.result.round.marks:
        marked.setdefault(mark.photo, set()).add(mark.object)
    seen_by_photo: dict[tuple[str, str], list[str]] = {}
    order = {name: i for i, name in enumerate(frame.objects)}
    for pair in frame.result.pairs:
        for photo in pair.photos:
            names = {name for name in marked.get(photo, ()) if name in order}
            seen_by_photo[pair.pair, photo] = list(names)
    for name, pair_name, photo in readings:
        names_there = seen_by_photo.setdefault((pair_name, photo), [])
        if name in order and name not in names_there:
            names_there.append(name)

    records: list[dict[str, Any]] = []
    starts: list[PlacedPoint | None] = []
    ends: list[PlacedPoint | None] = []
    for pair in frame.result.pairs:
        for view, photo in zip(VIEWS, pair.photos, strict=False):
            for name in sorted(seen_by_photo[pair.pair, photo], key=order.__getitem__):
                reading = readings.get((name, pair.pair, photo))
                records.append(
                    {
                        "object": name,
                        "pair": pair.pair,
                        "view": view,
                        "photo": photo,
                        "range_m": None if reading is None else reading.range_m,
                        "diameter_m": None if reading is None else reading.diameter_m,
                        "verdict": frame.objects[name].verdict,
                    }
                )
                starts.append(station_of(frame.result, pair.pair, photo))
                ends.append(frame.places[name])
    return _layer("sightlines", records, shapes.lines(_grids(starts), _grids(ends)))


def _ellipses(frame: _Frame) -> Layer:
    placed = {name: at for name, at in frame.places.items() if at is not None}

    def size(name: str) -> tuple[float, float, float] | None:
        ellipse = placed[name].ellipse
        values = (ellipse.semi_major_m, ellipse.semi_minor_m, ellipse.azimuth_deg)
        return values if np.isfinite(values).all() and ellipse.semi_minor_m > 0.0 else None

    records = (
        {"object": name, "position_sd_m": at.position_sd_m, **vars(at.ellipse)}
        for name, at in placed.items()
    )
    return _layer("ellipses", records, frame.ellipses(list(placed), size))


def _readings(frame: _Frame) -> Layer:
    return _layer("readings", (vars(reading) for reading in frame.result.readings))


def _budget(frame: _Frame) -> Layer:
    records = []
    for found in frame.result.objects:
        whole = sum(found.budget.values())
        for source, variance in found.budget.items():
            records.append(
                {
                    "object": found.object,
                    "source": source,
                    "variance_m2": variance,
                    "sd_m": math.sqrt(max(variance, 0.0)),
                    "share_pct": 100.0 * variance / whole if whole > 0.0 else None,
                }
            )
    return _layer("budget", records)


def _pairs(frame: _Frame) -> Layer:
    records = []
    for pair in frame.result.pairs:
        placed = None if frame.placement is None else frame.placement.pairs.get(pair.pair)
        notes = () if placed is None else placed.notes
        records.append(
            {
                **vars(pair),
                "photos": "; ".join(pair.photos),
                "reasons": "; ".join((*pair.reasons, *notes)),
                "heading_from": None if placed is None else placed.heading_from,
                "heading_deg": None if placed is None else placed.heading_deg,
                "heading_sd_deg": None if placed is None else placed.heading_sd_deg,
            }
        )
    return _layer("pairs", records, extras=[pair.extra for pair in frame.result.pairs])


def _checks(frame: _Frame) -> Layer:
    return _layer("checks", (vars(check) for check in frame.result.checks))


def _round(frame: _Frame) -> Layer:
    result, placement = frame.result, frame.placement
    settings = result.round.settings
    verdicts = [found.verdict for found in result.objects]
    first, last = time_span(result)
    notes = (*result.round.notes, *(() if placement is None else placement.notes))
    record = {
        "title": settings.title,
        "crew": settings.crew,
        "place": settings.place,
        "first_taken_at": first,
        "last_taken_at": last,
        "crs": None if placement is None else placement.crs_name,
        "epsg": None if placement is None else placement.epsg,
        "convergence_deg": None if placement is None else placement.convergence_deg,
        "scale_factor": None if placement is None else placement.scale_factor,
        "objects": len(verdicts),
        "accepted": verdicts.count("accept"),
        "to_remeasure": verdicts.count("remeasure"),
        "without_result": verdicts.count("no result"),
        "pairs": len(result.pairs),
        "photos": len(result.round.photos),
        "tolerance_pct": settings.tolerance_pct,
        "agreement_limit": settings.agreement_limit,
        "notes": "; ".join(notes),
        "program": f"fieldround {__version__}",
    }
    return _layer("round", [record])
