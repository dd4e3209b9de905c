from __future__ import annotations

import json
import re
from dataclasses import replace

import pytest

from fieldround.deliver import leaflet
from fieldround.deliver.crops import cut_crops
from fieldround.deliver.layers import layers_of
from fieldround.deliver.map_page import map_html, page_content
from fieldround.deliver.pages import script_json
from tests.deliver import invented


def layers(result, folder):
    return {layer.table.name: layer for layer in layers_of(result, folder)}


@pytest.fixture(scope="module")
def page(tmp_path_factory):
    result = invented.small_round()
    folder = tmp_path_factory.mktemp("map")
    return map_html(result, layers(result, folder), cut_crops(result, invented.picture))


def test_nothing_in_the_page_is_loaded_from_anywhere(page):
    assert not re.search(r"<(script|link|img|iframe)[^>]+(src|href)=", page)
    assert "@import" not in page
    assert set(re.findall(r"url\(([^)]{0,12})", page)) <= {"data:image/p", "#default#VML"}
    for name in ("jquery", "bootstrap", "awesome", "cdn."):
        assert name not in page.lower()


def test_the_only_far_address_is_that_of_the_background(page):
    """Links that a reader may follow are not loaded; tiles are, but only when switched on."""
    script = page[page.rindex("<script>") :]
    far = set(re.findall(r'"(https?://[^"\\]+)"', script))
    assert len(far) == 1
    assert "{z}" in far.pop()
    assert re.search(r"var tile_layer_\w+ = L.tileLayer", script)
    assert not re.search(r"tile_layer_\w+\.addTo", script)


def test_names_from_the_sheets_cannot_become_script(page):
    assert "<script>window.hurt" not in page
    assert invented.NASTY not in page
    content = re.search(r'<script type="application/json" id="content">(.*?)</script>', page)[1]
    objects = json.loads(content)["objects"]
    assert objects[2][0] == invented.NASTY


def test_json_inside_a_page_keeps_any_text():
    nasty = {"a": '</script><!-- &amp; \u2028 "'}
    text = script_json(nasty)
    assert not set("<>&\u2028") & set(text)
    assert json.loads(text) == nasty
    with pytest.raises(ValueError, match="JSON compliant"):
        script_json(float("nan"))


def test_equal_rounds_give_equal_pages(page, tmp_path):
    result = invented.small_round()
    again = map_html(result, layers(result, tmp_path), cut_crops(result, invented.picture))
    assert again == page


def test_counts_are_those_of_the_layer(tmp_path):
    result = invented.small_round()
    content = page_content(result, layers(result, tmp_path))
    assert content["verdicts"] == {"accept": 17, "remeasure": 2, "no result": 1}
    assert sum(content["kinds"].values()) == len(content["objects"]) == 20
    assert content["unplaced"] == 1
    assert len(content["stations"]) == 20
    assert len(content["sightlines"]) == 40


def test_a_round_across_longitude_180_stays_in_one_piece(tmp_path):
    result = invented.large_round(30, epsg=32660, centre=(179.9999, -17.0))
    content = page_content(result, layers(result, tmp_path))
    lons = [row[-1][1] for row in content["objects"]] + [s[0][1] for s in content["stations"]]
    assert max(lons) - min(lons) < 0.01
    assert abs(content["centre"][1] - lons[0]) < 0.01
    true = [at.longitude_deg for at in result.placement.objects.values()]
    assert max(true) - min(true) > 359  # as longitudes they lie far apart


def test_a_round_without_positions_says_so(tmp_path):
    result = invented.without_places(invented.small_round())
    page = map_html(result, layers(result, tmp_path), {})
    assert "No positions" in page
    assert page_content(result, layers(result, tmp_path))["unplaced"] == 20


def test_large_rounds_open_without_sightlines_and_ellipses(tmp_path):
    few, many = invented.large_round(20), invented.large_round(450, drawn=False)
    shown = re.compile(r"feature_group_\w+\.addTo")
    assert len(shown.findall(map_html(few, layers(few, tmp_path), {}))) == 5
    assert len(shown.findall(map_html(many, layers(many, tmp_path), {}))) == 3


def test_a_title_that_is_missing_or_nasty(tmp_path):
    result = invented.large_round(1)
    for title in ("", invented.NASTY):
        named = replace(
            result,
            round=replace(result.round, settings=replace(result.round.settings, title=title)),
        )
        page = map_html(named, layers(named, tmp_path), {})
        assert "<script>window.hurt" not in page
        assert "<title></title>" not in page


def test_the_map_library_stands_inside_whole():
    assert "Leaflet" in leaflet.script()[:200]
    assert "sourceMappingURL" not in leaflet.script()
    assert "images/" not in leaflet.style()
    assert leaflet.style().count("url(data:image/png;base64,") == 3
