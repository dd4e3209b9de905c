"""The round on the map: stations and objects in the round's CRS, each with its error ellipse.

In: a `Round`, the levelled frames of its solved pairs, its GNSS baselines. Out: a `Placement`,
None when no photo has a position.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime

import numpy as np

from fieldround.geometry.earth import enu_from_geodetic, geodetic_from_enu
from fieldround.place.baselines import GnssBaseline
from fieldround.place.crs import Grid, middle, round_grid
from fieldround.place.duplicates import near_duplicates, twin_notes
from fieldround.place.ellipses import error_ellipse, position_sd
from fieldround.place.fitting import FixFit, fit_fixes
from fieldround.place.fixes import position_covariance, worth
from fieldround.place.frames import PairFrame, PlacedPair, PlacedPoint, Placement
from fieldround.place.headings import Heading, Headings, NorthObservations, round_headings
from fieldround.place.merging import merge_spots
from fieldround.place.north import north_observations
from fieldround.place.spots import LocatedPair, Spot, located_spots, unturned_spots
from fieldround.rounds.model import Fix, Pair, Photo, Round

# A camera that looks straight up or down has no level direction for the arm of its antenna.
_LEVEL_ENOUGH = 0.1
_NO_FIX = "no photo of the pair has a GNSS position, so the pair is not on the map"


@dataclass(frozen=True)
class _Ground:
    """Fixes of one pair about their own middle: origin, who has one, where."""

    origin: np.ndarray
    fixed: tuple[int, ...]
    fixes_m: np.ndarray
    cov_m2: np.ndarray


def place_round(
    round_: Round, frames: Sequence[PairFrame], baselines: Mapping[str, GnssBaseline]
) -> Placement | None:
    """Place every station and object of a round.

    frames    : of the solved pairs; the stations of other pairs are placed by their fixes alone
    baselines : kept for the notes of pairs whose fixes are too near each other to turn the pair
    raises    : place.crs.CrsError when the round's CRS cannot be used
    """
    fixes = [p.fix for p in round_.photos.values() if p.fix is not None]
    if not fixes:
        return None
    rows = {pair.pair: pair for pair in round_.pairs}
    photos = {frame.pair: _photos(round_, frame) for frame in frames}
    grounds = {frame.pair: _ground(photos[frame.pair]) for frame in frames}
    day = min((p.taken_at for p in round_.photos.values() if p.taken_at), key=_date, default=None)

    fits = {f.pair: _fit(f, photos[f.pair], grounds[f.pair], None) for f in frames}
    headings, remarks = _headings(rows, photos, frames, fits, _middle(fixes), day)
    # Once more with the headings: they tell which fix stands off.
    known = {pair: heading.heading_deg for pair, heading in headings.by_pair.items()}
    fits = {f.pair: _fit(f, photos[f.pair], grounds[f.pair], known[f.pair]) for f in frames}
    headings, remarks = _headings(rows, photos, frames, fits, _middle(fixes), day)

    located: dict[str, LocatedPair] = {}
    notes: dict[str, list[str]] = {}
    for frame in frames:
        heading = headings.by_pair[frame.pair]
        notes[frame.pair] = [*remarks[frame.pair], *heading.misfits]
        ground, fit = grounds[frame.pair], fits[frame.pair]
        if ground is None or fit is None:
            notes[frame.pair].append(_NO_FIX)
            continue
        located[frame.pair] = _located(frame, photos[frame.pair], ground, fit, heading)
        notes[frame.pair] += _fit_notes(fit, heading, baselines.get(frame.pair))

    lon, lat = _lonlat(fixes)
    grid = round_grid(round_.settings.crs, lon, lat)
    pairs = {}
    for frame in frames:
        pairs[frame.pair] = _placed_pair(
            frame.pair,
            headings.by_pair[frame.pair],
            located.get(frame.pair),
            grid,
            notes[frame.pair],
        )
    for pair in round_.pairs:
        if pair.pair not in pairs:
            unsolved = _unsolved_pair(round_, pair, grid)
            if unsolved is not None:
                pairs[pair.pair] = unsolved
    objects, merged = _objects(round_, located, headings, grid)
    twins = near_duplicates(round_.objects, objects)
    return Placement(
        crs_wkt=grid.wkt,
        crs_name=grid.name,
        epsg=grid.epsg,
        convergence_deg=grid.convergence_deg,
        scale_factor=grid.scale_factor,
        pairs=pairs,
        objects=objects,
        notes=(*grid.notes, *_bias_notes(headings), *_height_notes(fixes), *merged,
               *twin_notes(twins)),
        near_duplicates=twins,
    )  # fmt: skip


def _date(at: datetime) -> datetime:
    return at.replace(tzinfo=None)


def _photos(round_: Round, frame: PairFrame) -> list[Photo]:
    return [round_.photos[name] for name in frame.photos]


def _lonlat(fixes: Sequence[Fix]) -> tuple[np.ndarray, np.ndarray]:
    return (
        np.array([fix.longitude_deg for fix in fixes]),
        np.array([fix.latitude_deg for fix in fixes]),
    )


def _middle(fixes: Sequence[Fix]) -> tuple[float, float, float]:
    heights = [fix.altitude_m for fix in fixes if fix.altitude_m is not None]
    return (*middle(*_lonlat(fixes)), float(np.mean(heights)) if heights else 0.0)


def _ground(photos: Sequence[Photo]) -> _Ground | None:
    fixed = tuple(i for i, photo in enumerate(photos) if photo.fix is not None)
    fixes = [fix for photo in photos if (fix := photo.fix) is not None]
    if not fixes:
        return None
    # Heights are left out: one height for all keeps the plane level.
    origin = np.array(_middle(fixes))
    lon, lat = _lonlat(fixes)
    level = np.full(len(fixes), origin[2])
    flat = enu_from_geodetic(np.stack([lon, lat, level], axis=-1), origin)[:, :2]
    return _Ground(origin, fixed, flat, position_covariance([photos[i] for i in fixed]))


def _fit(
    frame: PairFrame,
    photos: Sequence[Photo],
    ground: _Ground | None,
    heading_deg: float | None,
) -> FixFit | None:
    if ground is None:
        return None
    where = list(ground.fixed)
    antennas = np.array([_antenna(frame, photos[i], i) for i in where])
    own = 0.5 * np.trace(frame.stations_cov_m2[where][:, :2, :2], axis1=1, axis2=2)
    return fit_fixes(
        ground.fixes_m,
        antennas,
        ground.cov_m2 + np.diag(own),
        heading_deg,
    )


def _antenna(frame: PairFrame, photo: Photo, i: int) -> np.ndarray:
    """Where the antenna of a station is in the frame, (2,): the camera less its arm."""
    station = frame.stations_m[i, :2]
    level = frame.looks[i, :2]
    length = float(np.hypot(*level))
    if photo.fix is None or length < _LEVEL_ENOUGH:
        return station
    right, forward = photo.fix.arm_m
    ahead = level / length
    return np.asarray(station - forward * ahead - right * np.array([ahead[1], -ahead[0]]))


def _headings(
    rows: Mapping[str, Pair],
    photos: Mapping[str, Sequence[Photo]],
    frames: Sequence[PairFrame],
    fits: Mapping[str, FixFit | None],
    place: tuple[float, float, float],
    day: datetime | None,
) -> tuple[Headings, dict[str, tuple[str, ...]]]:
    observed: dict[str, NorthObservations] = {}
    remarks = {}
    for frame in frames:
        observed[frame.pair], remarks[frame.pair] = north_observations(
            rows[frame.pair], photos[frame.pair], frame, fits[frame.pair], place, day
        )
    return round_headings(observed), remarks


def _located(
    frame: PairFrame, photos: Sequence[Photo], ground: _Ground, fit: FixFit, heading: Heading
) -> LocatedPair:
    if heading.heading_deg is None:
        stations, objects = unturned_spots(frame, fit)
    else:
        stations, objects = located_spots(frame, fit, heading)
    altitude, above = _altitude(photos, frame)
    return LocatedPair(
        pair=frame.pair,
        origin=ground.origin,
        heading=heading,
        stations=stations,
        objects=objects,
        photos=tuple(photos[i] for i in ground.fixed),
        fix_sd_m=float(np.sqrt(fit.axis_var_m2)),
        altitude_m=altitude,
        altitude_is=above,
    )


def _altitude(photos: Sequence[Photo], frame: PairFrame) -> tuple[float | None, str]:
    """Altitude of station A by the fixes, weighted, and what it is above."""
    told: dict[str, list[tuple[float, float]]] = {}
    for photo, station in zip(photos, frame.stations_m, strict=True):
        fix = photo.fix
        if fix is not None and fix.altitude_m is not None:
            weight = 1.0 / worth(fix).vertical_sd_m ** 2
            told.setdefault(fix.altitude_is, []).append((fix.altitude_m - station[2], weight))
    if not told:
        return None, "not known"
    above = max(told, key=lambda kind: (sum(w for _, w in told[kind]), kind))
    rows = np.array(told[above])
    return float(rows[:, 0] @ rows[:, 1] / rows[:, 1].sum()), _above(above)


def _above(kind: str) -> str:
    if kind == "sea level":
        return "height above sea level, as the fixes state it"
    return "height above the WGS 84 ellipsoid"


def _point(spot: Spot, located: LocatedPair, grid: Grid) -> PlacedPoint:
    lon, lat, _ = geodetic_from_enu(np.array([[*spot.east_north_m, 0.0]]), located.origin)[0]
    height = None if located.altitude_m is None else located.altitude_m + spot.up_m
    return _on_grid(lon, lat, height, located.altitude_is, spot.cov_m2, grid)


def _on_grid(
    lon: float, lat: float, height: float | None, above: str, cov: np.ndarray, grid: Grid
) -> PlacedPoint:
    east, north = grid.project(np.array([lon]), np.array([lat]))[0]
    return PlacedPoint(
        longitude_deg=float(lon),
        latitude_deg=float(lat),
        easting_m=float(east),
        northing_m=float(north),
        elevation_m=height,
        elevation_is=above,
        cov_m2=cov,
        position_sd_m=position_sd(cov),
        ellipse=error_ellipse(cov),
    )


def _placed_pair(
    name: str, heading: Heading, located: LocatedPair | None, grid: Grid, notes: Sequence[str]
) -> PlacedPair:
    stations: dict[str, PlacedPoint] = {}
    objects: dict[str, PlacedPoint] = {}
    if located is not None:
        stations = {photo: _point(s, located, grid) for photo, s in located.stations.items()}
        objects = {thing: _point(s, located, grid) for thing, s in located.objects.items()}
    return PlacedPair(
        pair=name,
        heading_deg=heading.heading_deg,
        heading_sd_deg=heading.sd_deg,
        heading_from=heading.source,
        stations=stations,
        objects=objects,
        notes=tuple(dict.fromkeys(notes)),
    )


def _unsolved_pair(round_: Round, pair: Pair, grid: Grid) -> PlacedPair | None:
    """Stations of a pair that could not be solved, at their fixes."""
    stations = {}
    for name in pair.photos:
        photo = round_.photos.get(name)
        if photo is not None and photo.fix is not None:
            fix = photo.fix
            # Without a frame nobody knows which way the arm of the antenna points.
            arm2 = fix.arm_m[0] ** 2 + fix.arm_m[1] ** 2
            cov = (worth(fix).sd_m ** 2 + arm2) * np.eye(2)
            stations[name] = _on_grid(
                fix.longitude_deg,
                fix.latitude_deg,
                fix.altitude_m,
                _above(fix.altitude_is) if fix.altitude_m is not None else "not known",
                cov,
                grid,
            )
    return PlacedPair(pair.pair, None, None, "none", stations, {}) if stations else None


def _objects(
    round_: Round, located: Mapping[str, LocatedPair], headings: Headings, grid: Grid
) -> tuple[dict[str, PlacedPoint], list[str]]:
    names = [thing.object for thing in round_.objects]
    names += [n for pair in located.values() for n in pair.objects if n not in set(names)]
    placed, notes = {}, []
    for name in dict.fromkeys(names):
        pairs = [pair for pair in located.values() if name in pair.objects]
        # A pair that knows no north adds nothing to one that does.
        turned = [pair for pair in pairs if pair.heading.heading_deg is not None]
        pairs = turned or pairs
        if not pairs:
            continue
        spot, note = merge_spots(name, pairs, headings)
        placed[name] = _point(spot, pairs[0], grid)
        if note:
            notes.append(note)
    return placed, notes


def _fit_notes(
    fit: FixFit, heading: Heading, baseline: GnssBaseline | None
) -> list[str]:
    notes = []
    if fit.enlarged > 1.0:
        notes.append(
            f"the GNSS fixes disagree with the distances between the stations by {fit.misfit:.2g} "
            f"m (rms); their sds were enlarged {fit.enlarged:.2g} times"
        )
    if heading.heading_deg is None:
        near = ", and the fixes are too near each other" if baseline is not None else ""
        notes.append(
            "nothing tells where north is (no bearing_deg, no usable compass direction"
            f"{near}): the objects stand at the stations' mid-point with their range as sd"
        )
    return notes


def _bias_notes(headings: Headings) -> list[str]:
    notes = []
    for i, name in enumerate(headings.devices):
        bias, sd = float(headings.bias_deg[i]), float(np.sqrt(headings.bias_cov_deg2[i, i]))
        if abs(bias) > 3.0 * sd and abs(bias) > 3.0:
            notes.append(
                f"the compass of {name} reads {bias:+.0f} degrees (sd {sd:.0f}) off; that was "
                "taken out"
            )
    return notes


def _height_notes(fixes: Sequence[Fix]) -> list[str]:
    kinds = sorted({_above(fix.altitude_is) for fix in fixes if fix.altitude_m is not None})
    if not kinds:
        return ["no fix has an altitude, so no point has an elevation"]
    return ["elevations are the " + " or the ".join(kinds) + "; no geoid model was applied"]


