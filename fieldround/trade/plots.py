"""The ground a stand's stems stand on: an area that was typed, or a polygon that was drawn.

In: constants, boundary.geojson of the round's folder, the stems. Out: a `Plot`.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from fieldround.rounds.errors import Fault, SheetsError
from fieldround.trade.constants import Constants
from fieldround.trade.forestry import Plot
from fieldround.trade.measured import Measured

FILE = "boundary.geojson"


def plot_of(folder: Path, constants: Constants, items: Sequence[Measured]) -> Plot | None:
    """The round's plot: boundary.geojson before the typed area, None where neither is given.

    raises : SheetsError when the file holds no polygon in longitude and latitude
    """
    path = folder / FILE
    if path.exists():
        return plot_inside(_polygon(path), items)
    area = constants.number("forestry.plot_area_ha")
    return Plot(area, f"{area:g} ha, {constants['forestry.plot_area_ha'].source}") if area else None


def plot_inside(polygon: Any, items: Sequence[Measured]) -> Plot:
    """A polygon (shapely, longitude and latitude) and the objects inside it.

    The area is that on the ellipsoid (C. F. F. Karney, Algorithms for geodesics, 2013, by PROJ).
    """
    import shapely
    from pyproj import Geod

    geod = Geod(ellps="WGS84")
    area, _ = geod.geometry_area_perimeter(shapely.geometry.polygon.orient(polygon))
    inside, near = set(), []
    for item in items:
        if item.longitude is None or item.latitude is None:
            continue
        at = shapely.Point(item.longitude, item.latitude)
        if polygon.covers(at):
            inside.add(item.object)
        edge = shapely.shortest_line(at, polygon.boundary)
        away = geod.geometry_length(edge)
        if away < 2.0 * (item.position_sd_m or 0.0):
            near.append(item.object)
    notes = (
        (f"Within two position sds of the boundary, so that in or out is not sure: "
         f"{', '.join(near)}",) if near else ()
    )  # fmt: skip
    return Plot(abs(area) / 1e4, f"{FILE}, {abs(area) / 1e4:.4f} ha", frozenset(inside), notes)


def _polygon(path: Path) -> Any:
    import shapely

    def fault(remedy: str) -> SheetsError:
        return SheetsError([Fault(path.name, None, None, None, remedy)])

    try:
        tree = json.loads(path.read_text("utf-8-sig"))
        shapes = [f["geometry"] for f in tree["features"]] if "features" in tree else [tree]
        shapes = [s.get("geometry", s) for s in shapes]
        found = shapely.union_all([shapely.geometry.shape(s) for s in shapes])
    except (ValueError, KeyError, TypeError, AttributeError, shapely.errors.ShapelyError) as error:
        raise fault(f"is not GeoJSON that can be read ({error})") from error
    if found.geom_type not in ("Polygon", "MultiPolygon") or found.is_empty:
        raise fault(f"holds a {found.geom_type}; a polygon is needed")
    west, south, east, north = found.bounds
    if not (-180.0 <= west <= east <= 180.0 and -90.0 <= south <= north <= 90.0):
        raise fault("must be in longitude and latitude, as RFC 7946 says")
    return found
