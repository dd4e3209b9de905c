"""The round's coordinate system: which one, and how WGS 84 positions get into it.

In: the `crs` text of round.toml (or nothing) and the round's positions. Out: a `Grid` that turns
positions into eastings and northings and says what the result is worth.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from pyproj import CRS, Proj, Transformer
from pyproj.exceptions import CRSError, ProjError
from pyproj.transformer import TransformerGroup

from fieldround.rounds.errors import RoundError

_WGS84 = "EPSG:4326"
# Universal polar stereographic grids with the axes east, north (EPSG), beyond the UTM zones.
_POLAR_NORTH, _POLAR_SOUTH = 5041, 5042
# UTM itself is off by up to 0.1 % at the edge of a zone; a grid worse than that is said to be.
_SCALE_SAID = 0.002
_UTM_NORTH_LAT, _UTM_SOUTH_LAT = 84.0, -80.0


class CrsError(RoundError):
    """The coordinate system that round.toml asks for cannot be used."""


@dataclass(frozen=True)
class Grid:
    """A projected coordinate system at the place of the round.

    crs             : the pyproj CRS; horizontal part of a compound one
    convergence_deg : azimuth of grid north at the round's middle: grid bearing = true bearing
                      minus convergence
    scale_factor    : grid length over ellipsoidal length at the round's middle, grid lengths in
                      metres
    metres_a_unit   : 1 unless the grid is in feet or another unit; eastings and northings are in
                      the grid's own unit, as its users expect
    notes           : which transformation, its accuracy, missing grids, units
    """

    crs: CRS
    convergence_deg: float
    scale_factor: float
    metres_a_unit: float
    notes: tuple[str, ...]

    @property
    def wkt(self) -> str:
        """The CRS as WKT 2."""
        return str(self.crs.to_wkt())

    @property
    def name(self) -> str:
        """The name the CRS gives itself."""
        return str(self.crs.name)

    @cached_property
    def epsg(self) -> int | None:
        """The EPSG code, None for a CRS that is not in the EPSG dataset."""
        code = self.crs.to_epsg(min_confidence=100)
        return None if code is None else int(code)

    @cached_property
    def _transformer(self) -> Transformer:
        return Transformer.from_crs(_WGS84, self.crs, always_xy=True)

    def project(self, longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> np.ndarray:
        """Eastings and northings of WGS 84 positions, (n, 2) in the grid's unit.

        raises : CrsError when a position cannot be shown in the CRS
        """
        try:
            east, north = self._transformer.transform(
                np.asarray(longitude_deg, float), np.asarray(latitude_deg, float), errcheck=True
            )
        except ProjError as trouble:
            raise CrsError(
                f"the round's positions cannot be shown in {self.name} ({trouble}); choose a CRS "
                "that covers the round, or leave crs out of round.toml"
            ) from trouble
        return np.stack([east, north], axis=-1)


def round_grid(text: str | None, longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> Grid:
    """The grid of a round: the CRS asked for, else the UTM zone of the round's middle.

    longitude_deg, latitude_deg : (n,) WGS 84 positions of the round, n >= 1
    raises : CrsError
    """
    lon, lat = middle(longitude_deg, latitude_deg)
    asked = text is not None and bool(text.strip())
    crs = read_crs(text) if text is not None and asked else CRS.from_epsg(utm_epsg(lon, lat))
    notes = [] if asked else [f"round.toml names no CRS: {crs.name} was chosen for the round"]
    notes += _transformation_notes(crs, lon, lat)
    unit = float(crs.axis_info[0].unit_conversion_factor)
    if abs(unit - 1.0) > 1e-12:
        notes.append(
            f"eastings and northings are in the CRS's own unit, {crs.axis_info[0].unit_name} "
            f"({unit:.9g} m); every other length is in metres"
        )
    convergence, scale = _distortion(crs, lon, lat)
    if abs(scale - 1.0) > _SCALE_SAID:
        notes.append(
            f"lengths measured in {crs.name} are {100 * (scale - 1):+.2g} % off those on the "
            "ground here; a UTM zone or a national grid would be truer"
        )
    grid = Grid(crs, convergence, scale, unit, tuple(notes))
    grid.project(np.array([lon]), np.array([lat]))
    return grid


def read_crs(text: str) -> CRS:
    """A projected CRS from an EPSG code ('EPSG:32633' or '32633'), WKT or PROJ text.

    raises : CrsError, a sentence with what would be right
    """
    asked = text.strip()
    try:
        crs = CRS.from_user_input(int(asked) if asked.isdigit() else asked)
    except (CRSError, OverflowError) as trouble:
        raise CrsError(
            f"round.toml, crs is {_short(asked)!r}: no coordinate system is known by that text; "
            "write an EPSG code such as EPSG:32633, or WKT, or PROJ text"
        ) from trouble
    if crs.is_compound:
        crs = next(part for part in crs.sub_crs_list if not part.is_vertical)
    plain = (crs.source_crs or crs) if crs.is_bound else crs
    if not plain.is_projected:
        kind = "geographic: degrees are no lengths" if plain.is_geographic else "not projected"
        raise CrsError(
            f"round.toml, crs is {_short(asked)!r}, {plain.name}, which is {kind}; "
            "write a projected CRS, such as the UTM zone of the round"
        )
    directions = {axis.direction.lower() for axis in plain.axis_info}
    if "west" in directions:
        raise CrsError(
            f"round.toml, crs is {_short(asked)!r}, {plain.name}, whose axes count west and "
            "south; write a CRS with eastings and northings"
        )
    return crs


def utm_epsg(longitude_deg: float, latitude_deg: float) -> int:
    """EPSG code of the UTM zone on WGS 84, with the zones of Norway and Svalbard as they are.

    source : NGA.STND.0037_2.0.0_GRIDS (2014), zones 32V and 31X to 37X; polar grids beyond
    """
    lon = (longitude_deg + 180.0) % 360.0 - 180.0
    if latitude_deg >= _UTM_NORTH_LAT:
        return _POLAR_NORTH
    if latitude_deg < _UTM_SOUTH_LAT:
        return _POLAR_SOUTH
    zone = min(int((lon + 180.0) // 6.0) + 1, 60)
    if 56.0 <= latitude_deg < 64.0 and 3.0 <= lon < 12.0:
        zone = 32
    elif latitude_deg >= 72.0 and 0.0 <= lon < 42.0:
        zone = 31 + 2 * int(np.searchsorted([9.0, 21.0, 33.0], lon, side="right"))
    return (32600 if latitude_deg >= 0.0 else 32700) + zone


def middle(longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> tuple[float, float]:
    """Middle of positions, right also where they lie on both sides of longitude 180."""
    lon, lat = np.radians(longitude_deg), np.radians(latitude_deg)
    centre = np.mean(
        np.stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)], -1), axis=0
    )
    level = float(np.hypot(centre[0], centre[1]))
    return (
        float(np.degrees(np.arctan2(centre[1], centre[0]))),
        float(np.degrees(np.arctan2(centre[2], level))),
    )


def _distortion(crs: CRS, lon: float, lat: float) -> tuple[float, float]:
    """Grid convergence (azimuth of grid north) and scale factor at a WGS 84 position."""
    geographic = crs.geodetic_crs
    at = (lon, lat)
    if geographic is not None:
        at = Transformer.from_crs(_WGS84, geographic, always_xy=True).transform(lon, lat)
    try:
        factors = Proj(crs).get_factors(*at, errcheck=True)
    except ProjError as trouble:
        raise CrsError(
            f"the round lies outside what {crs.name} can show ({trouble}); choose a CRS that "
            "covers the round, or leave crs out of round.toml"
        ) from trouble
    scale = float(np.sqrt(abs(factors.meridional_scale * factors.parallel_scale)))
    return float(factors.meridian_convergence), scale


def _transformation_notes(crs: CRS, lon: float, lat: float) -> list[str]:
    """How WGS 84 gets into the CRS, how well, and what would do it better."""
    with warnings.catch_warnings():
        # The same is said below, in words for the user.
        warnings.simplefilter("ignore")
        group: Any = TransformerGroup(_WGS84, crs, always_xy=True)
    notes = []
    if not group.transformers:
        raise CrsError(f"no transformation from WGS 84 to {crs.name} is known; choose another CRS")
    used = Transformer.from_crs(_WGS84, crs, always_xy=True)
    used.transform(lon, lat)
    accuracy: float | None = used.accuracy
    if accuracy is not None and accuracy < 0:
        # A transformer that chooses among several by place tells nothing of its own.
        accuracies = [t.accuracy for t in group.transformers if t.accuracy is not None]
        accuracy = accuracies[0] if accuracies and accuracies[0] >= 0 else None
    if accuracy is None:
        notes.append(f"the accuracy of the transformation from WGS 84 to {crs.name} is not stated")
    elif accuracy > 0.0:
        notes.append(
            f"the transformation from WGS 84 to {crs.name} is accurate to {accuracy:g} m (as the "
            "EPSG dataset states); that is not in the position sds"
        )
    missing = sorted(
        {grid.short_name for t in group.unavailable_operations for grid in t.grids
         if not grid.available}
    )  # fmt: skip
    if missing and (accuracy is None or accuracy > 0.0):
        notes.append(
            f"a better transformation to {crs.name} needs grid files that this computer lacks: "
            + ", ".join(missing)
        )
    return notes


def _short(text: str) -> str:
    return text if len(text) <= 60 else text[:57] + "..."
