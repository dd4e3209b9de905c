"""The round on the map: stations and objects in the round's CRS, each with its error ellipse.

In: a `Round`, the levelled frames of its solved pairs, its GNSS baselines. Out: a `Placement`,
None when neither a photo nor a landmark has a position.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import datetime

import numpy as np

from fieldround.geometry.earth import geodetic_from_enu
from fieldround.place.baselines import GnssBaseline
from fieldround.place.crs import Grid, middle, round_grid
from fieldround.place.duplicates import near_duplicates, twin_notes
from fieldround.place.ellipses import error_ellipse, position_sd
from fieldround.place.fitting import FixFit
from fieldround.place.fixes import worth
from fieldround.place.frames import PairFrame, PlacedPair, PlacedPoint, Placement
from fieldround.place.grounds import (
    Ground,
    altitude_of,
    fit_ground,
    ground_of,
    height_is,
    shared_sd,
)
from fieldround.place.headings import Heading, Headings, round_headings
from fieldround.place.merging import merge_spots
from fieldround.place.north import Laid, north_observations
from fieldround.place.spots import LocatedPair, Spot, located_spots, unturned_spots
from fieldround.rounds.model import Fix, Pair, Photo, Round

_NO_FIX = (
    "no photo of the pair has a GNSS position and no object of it is a landmark, so the pair is "
    "not on the map"
)


def place_round(
    round_: Round, frames: Sequence[PairFrame], baselines: Mapping[str, GnssBaseline]
) -> Placement | None:
    """Place every station and object of a round.

    frames    : of the solved pairs; the stations of other pairs are placed by their fixes alone
    baselines : kept for the notes of pairs whose fixes are too near each other to turn the pair
    raises    : place.crs.CrsError when the round's CRS cannot be used
    """
    fixes = [p.fix for p in round_.photos.values() if p.fix is not None]
    landmarks = {point.landmark: point for point in round_.landmarks}
    rows = {pair.pair: pair for pair in round_.pairs}
    photos = {frame.pair: _photos(round_, frame) for frame in frames}
    grounds = {f.pair: ground_of(photos[f.pair], f, landmarks) for f in frames}
    if not fixes and not any(grounds.values()):
        return None
    lon, lat = _lonlat(fixes, grounds)
    heights = [fix.altitude_m for fix in fixes if fix.altitude_m is not None]
    place = (*middle(lon, lat), float(np.mean(heights)) if heights else 0.0)
    day = min((p.taken_at for p in round_.photos.values() if p.taken_at), key=_date, default=None)

    known: dict[str, float | None] = dict.fromkeys(photos)
    # Twice: only with a heading is it clear which fix stands off, and whence a landmark is seen.
    for _ in range(2):
        fits = {f.pair: fit_ground(f, photos[f.pair], grounds[f.pair], known[f.pair])
                for f in frames}  # fmt: skip
        observed, remarks = {}, {}
        for f in frames:
            laid = Laid(f, grounds[f.pair], fits[f.pair], known[f.pair])
            observed[f.pair], remarks[f.pair] = north_observations(
                rows[f.pair], photos[f.pair], laid, landmarks, place, day
            )
        headings = round_headings(observed)
        known = {pair: heading.heading_deg for pair, heading in headings.by_pair.items()}

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


def _lonlat(
    fixes: Sequence[Fix], grounds: Mapping[str, Ground | None]
) -> tuple[np.ndarray, np.ndarray]:
    """Longitudes and latitudes of the round: its fixes, and pairs known by landmarks alone."""
    lon = [fix.longitude_deg for fix in fixes]
    lat = [fix.latitude_deg for fix in fixes]
    bare = [ground for ground in grounds.values() if ground is not None and not ground.fixed]
    return (
        np.array(lon + [float(ground.origin[0]) for ground in bare]),
        np.array(lat + [float(ground.origin[1]) for ground in bare]),
    )


def _located(
    frame: PairFrame, photos: Sequence[Photo], ground: Ground, fit: FixFit, heading: Heading
) -> LocatedPair:
    if heading.heading_deg is None:
        stations, objects = unturned_spots(frame, fit)
    else:
        stations, objects = located_spots(frame, fit, heading)
    altitude, above = altitude_of(photos, frame)
    return LocatedPair(
        pair=frame.pair,
        origin=ground.origin,
        heading=heading,
        stations=stations,
        objects=objects,
        photos=tuple(photos[i] for i in ground.fixed),
        fix_sd_m=shared_sd(ground, fit),
        altitude_m=altitude,
        altitude_is=above,
    )


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
                height_is(fix.altitude_is) if fix.altitude_m is not None else "not known",
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
    kinds = sorted({height_is(fix.altitude_is) for fix in fixes if fix.altitude_m is not None})
    if not kinds:
        return ["no fix has an altitude, so no point has an elevation"]
    return ["elevations are the " + " or the ".join(kinds) + "; no geoid model was applied"]


