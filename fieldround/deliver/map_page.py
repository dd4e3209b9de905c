"""map.html: the round on a map, one file that opens from disk with no network.

In: a `RoundResult`, its layers, its crops. Out: a page that folium puts together, with Leaflet
inside it. Nothing is asked of any host unless the reader switches the online background on.
"""

from __future__ import annotations

import base64
from collections.abc import Callable, Mapping
from itertools import count
from pathlib import Path
from typing import Any, cast

import folium
from branca.element import Element, Figure, MacroElement, Template

from fieldround.deliver import leaflet
from fieldround.deliver.crops import Crop, CropsByView
from fieldround.deliver.facts import plain
from fieldround.deliver.layers import VIEWS, Layer
from fieldround.deliver.pages import environment, part, path, script_json
from fieldround.deliver.places import place_of, station_of
from fieldround.deliver.times import local_dates
from fieldround.rounds.model import KINDS
from fieldround.solve.results import VERDICTS, RoundResult

# Rounds with more objects than this open with the sightlines and ellipses switched off.
_BUSY = 400
_MAX_ZOOM = 24
_TILES_MAX_ZOOM = 19
_SHOWN_FIELDS = (
    "object",
    "kind",
    "label",
    "verdict",
    "pair",
    "diameter_m",
    "diameter_sd_m",
    "diameter_lo_m",
    "diameter_hi_m",
    "reading_a_m",
    "reading_b_m",
    "agreement",
    "girth_m",
    "ref_height_m",
    "height_m",
    "height_sd_m",
    "lean_deg",
    "lean_sd_deg",
    "lean_to_deg",
    "position_sd_m",
    "elevation_m",
)


def write_map(
    path_: Path, result: RoundResult, layers: Mapping[str, Layer], crops: CropsByView
) -> None:
    """Write the page; equal input gives equal bytes."""
    path_.write_text(map_html(result, layers, crops), encoding="utf-8", newline="\n")


def map_html(result: RoundResult, layers: Mapping[str, Layer], crops: CropsByView) -> str:
    """The page as text."""
    content = page_content(result, layers)
    quiet = len(result.objects) > _BUSY
    page = folium.Map(
        location=content["centre"], tiles=None, prefer_canvas=True, control_scale=False
    )
    page.options["max_zoom"] = _MAX_ZOOM
    # folium asks its content hosts for these; the map needs Leaflet alone, and that is inside.
    page.default_js, page.default_css = [], []
    groups = {
        "ellipses": folium.FeatureGroup("Error ellipses, 95 %", show=not quiet),
        "sightlines": folium.FeatureGroup("Sightlines", show=not quiet),
        "stations": folium.FeatureGroup("Stations"),
        "sections": folium.FeatureGroup("Sections, true to scale"),
        "objects": folium.FeatureGroup("Objects"),
    }
    background = folium.TileLayer(
        "OpenStreetMap",
        name="Online background (asks a tile server)",
        overlay=True,
        show=False,
        max_zoom=_MAX_ZOOM,
        max_native_zoom=_TILES_MAX_ZOOM,
    )
    for layer in (*groups.values(), background):
        layer.add_to(page)
    folium.LayerControl(collapsed=True).add_to(page)
    page.add_child(_Start(page, groups, background), name="start")

    figure = cast(Figure, page.get_root())
    _name_in_order(figure)
    scripts = (leaflet.script(), part("map_marks.js"), part("map_table.js"), part("map_page.js"))
    styles = (leaflet.style(), part("map.css"))
    figure.header.add_child(Element("\n".join(f"<style>{text}</style>" for text in styles)))
    figure.header.add_child(Element("\n".join(f"<script>{text}</script>" for text in scripts)))
    figure._template = environment().get_template("map.html.j2")
    return figure.render(
        content=content,
        content_json=script_json(plain(content)),
        crops_json=script_json(_crops(result, crops)),
    )


class _Start(MacroElement):
    """The last line of the page's script: hands folium's map and layers to ours."""

    _template = Template(
        "{% macro script(this, kwargs) %}showRound({{ this.names }});{% endmacro %}"
    )

    def __init__(self, page: Any, groups: Mapping[str, Any], background: Any) -> None:
        super().__init__()
        self._parts = (page, groups, background)

    @property
    def names(self) -> str:
        page, groups, background = self._parts
        layers = ", ".join(f"{key}: {group.get_name()}" for key, group in groups.items())
        return f"{page.get_name()}, {{{layers}}}, {background.get_name()}"


def _name_in_order(root: Any) -> None:
    """Replace folium's random element names, so that equal rounds give equal pages."""
    numbers = count(1)
    waiting = [root]
    while waiting:
        element = waiting.pop(0)
        element._id = f"{next(numbers):03d}"
        waiting += list(element._children.values())


def page_content(result: RoundResult, layers: Mapping[str, Layer]) -> dict[str, Any]:
    """What the page shows, as plain lists: the objects' fields, stations, sightlines."""
    settings = result.round.settings
    about = dict(
        zip((f.name for f in layers["round"].fields), layers["round"].rows[0], strict=True)
    )
    objects = layers["objects"]
    column = {f.name: i for i, f in enumerate(objects.fields)}
    placed = [place_of(result, found.object) for found in result.objects]
    first = next((at.longitude_deg for at in placed if at is not None), 0.0)

    def near(longitude: float) -> float:
        """The meridian counted on past 180, so that a round there stays in one piece."""
        return round(first + (longitude - first + 540.0) % 360.0 - 180.0, 9)

    rows: list[list[Any]] = []
    for found, row, at in zip(result.objects, objects.rows, placed, strict=True):
        values = [row[column[name]] for name in _SHOWN_FIELDS]
        spot = (
            None
            if at is None
            else [
                round(at.latitude_deg, 9),
                near(at.longitude_deg),
                round(at.ellipse.semi_major_m, 3),
                round(at.ellipse.semi_minor_m, 3),
                round(at.ellipse.azimuth_deg, 1),
            ]
        )
        rows.append([*values, list(found.reasons), spot])
    stations, lines = _sights(result, layers, near)
    spots = [row[-1][:2] for row in rows if row[-1]] + [s[0] for s in stations if s[0]]
    middle = [sum(c) / len(c) for c in zip(*spots, strict=True)] if spots else [0.0, 0.0]
    verdicts = [found.verdict for found in result.objects]
    kinds = [found.kind for found in result.objects]
    return {
        "round": {
            **about,
            "title": about["title"] or "Round",
            "dates": local_dates(result),
            "tolerance": settings.tolerance_pct,
        },
        "centre": [round(c, 9) for c in middle],
        "fields": [*_SHOWN_FIELDS, "reasons", "spot"],
        "objects": rows,
        "stations": stations,
        "sightlines": lines,
        "verdicts": {verdict: verdicts.count(verdict) for verdict in VERDICTS},
        "kinds": {kind: kinds.count(kind) for kind in KINDS if kind in kinds},
        "unplaced": sum(at is None for at in placed),
    }


def _sights(
    result: RoundResult, layers: Mapping[str, Layer], near: Callable[[float], float]
) -> tuple[list[list[Any]], list[list[int]]]:
    """Stations ([latitude, longitude] or None, pair, view, photo, sd) and lines by index."""
    stations: list[list[Any]] = []
    index: dict[tuple[str, str], int] = {}
    for pair in result.pairs:
        for view, photo in zip(VIEWS, pair.photos, strict=False):
            at = station_of(result, pair.pair, photo)
            spot = None if at is None else [round(at.latitude_deg, 9), near(at.longitude_deg)]
            index[pair.pair, photo] = len(stations)
            sd = None if at is None else round(at.position_sd_m, 3)
            stations.append([spot, pair.pair, view, photo, sd])
    order = {found.object: i for i, found in enumerate(result.objects)}
    sights = layers["sightlines"]
    at_column = {f.name: i for i, f in enumerate(sights.fields)}
    lines = [
        [
            index[str(row[at_column["pair"]]), str(row[at_column["photo"]])],
            order[str(row[at_column["object"]])],
        ]
        for row in sights.rows
    ]
    return stations, lines


def _crops(result: RoundResult, crops: CropsByView) -> list[list[dict[str, Any]]]:
    """Small crops of each object, in the order of its drawings."""
    found_crops = []
    for found in result.objects:
        views = []
        for drawing in found.drawings:
            held = crops.get((found.object, drawing.photo))
            if held is not None and held.small is not None:
                views.append(_crop(held.small, drawing.photo))
        found_crops.append(views)
    return found_crops


def _crop(crop: Crop, photo: str) -> dict[str, Any]:
    return {
        "photo": photo,
        "width": crop.width,
        "height": crop.height,
        "jpeg": base64.b64encode(crop.jpeg).decode("ascii"),
        "outline": [path(line) for line in crop.outline],
        "section": path(crop.section),
        "marks": [list(mark) for mark in crop.marks],
    }
