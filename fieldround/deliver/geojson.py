"""results.geojson: the objects as RFC 7946 asks for them.

In: the `objects` layer and its coordinates. Out: one FeatureCollection of points, WGS 84
longitude and latitude; an object without a place has a null geometry (section 3.2).
"""

from __future__ import annotations

import itertools
import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from fieldround.deliver.layers import Layer, Value


def write_geojson(path: Path, layer: Layer, coordinates: Sequence[tuple[Value, ...]]) -> None:
    """Write the collection, with its bounding box (which may cross longitude 180)."""
    features = []
    points: list[tuple[float, float]] = []
    for row, place in zip(layer.rows, coordinates, strict=True):
        longitude, latitude = place[2], place[3]
        geometry = None
        if isinstance(longitude, float) and isinstance(latitude, float):
            points.append((wrap(longitude), latitude))
            geometry = {"type": "Point", "coordinates": list(points[-1])}
        properties = {f.name: value for f, value in zip(layer.fields, row, strict=True)}
        features.append(
            {
                "type": "Feature",
                "id": row[0],
                "geometry": geometry,
                "properties": properties,
            }
        )
    collection: dict[str, Any] = {"type": "FeatureCollection"}
    if points:
        collection["bbox"] = list(bounding_box(points))
    collection["features"] = features
    path.write_text(_lines(collection), encoding="utf-8", newline="\n")


def wrap(longitude_deg: float) -> float:
    """The same meridian between -180 and 180 degrees."""
    if -180.0 <= longitude_deg <= 180.0:
        return longitude_deg
    return (longitude_deg + 180.0) % 360.0 - 180.0


def bounding_box(points: Sequence[tuple[float, float]]) -> tuple[float, float, float, float]:
    """West, south, east, north of points; west > east where the box crosses longitude 180.

    The box is the narrow one: it leaves out the widest gap between neighbouring meridians
    (RFC 7946 section 5.2).
    """
    meridians = sorted({longitude for longitude, _ in points})
    latitudes = [latitude for _, latitude in points]
    west, east = meridians[0], meridians[-1]
    widest = west + 360.0 - east
    for left, right in itertools.pairwise(meridians):
        if right - left > widest:
            widest, west, east = right - left, right, left
    return west, min(latitudes), east, max(latitudes)


def _lines(collection: dict[str, Any]) -> str:
    """One feature a line, so that two results can be compared line by line."""
    features = [_json(feature) for feature in collection.pop("features")]
    head = _json(collection)[:-1]
    return head + ', "features": [\n' + ",\n".join(features) + "\n]}\n"


def _json(content: Any) -> str:
    return json.dumps(content, ensure_ascii=False, allow_nan=False)
