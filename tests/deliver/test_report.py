from __future__ import annotations

import re
from dataclasses import replace

import pytest

from fieldround.deliver import figures, report
from fieldround.deliver.crops import cut_crops
from fieldround.deliver.layers import layers_of
from fieldround.deliver.pages import interval, metres, number
from fieldround.deliver.report import report_html
from fieldround.deliver.sketch import map_sketch
from fieldround.solve.results import BUDGET_SOURCES
from tests.deliver import invented


def made(result, folder, crops=None):
    layers = {layer.table.name: layer for layer in layers_of(result, folder)}
    return report_html(result, layers, crops or {})


@pytest.fixture(scope="module")
def page(tmp_path_factory):
    result = invented.small_round()
    crops = cut_crops(result, invented.picture)
    return made(result, tmp_path_factory.mktemp("report"), crops)


def test_nothing_in_the_page_is_loaded_from_anywhere(page):
    assert not re.search(r"<(script|link|img|iframe|object|embed)\b", page)
    text = re.sub(r"base64,[A-Za-z0-9+/=]+", "", page)
    assert "http" not in text.replace("http-equiv", "")
    assert set(re.findall(r'href="([^"]{0,11})', page)) == {"data:image/"}
    assert "url(" not in re.sub(r"url\(#b\d\)", "", page)


def test_names_from_the_sheets_are_text(page):
    assert "<script" not in page
    assert invented.NASTY not in page
    assert page.count("&lt;script&gt;") >= 4


def test_figures_of_the_round_stand_on_the_front_page(page):
    front = page[: page.index("What to measure again")]
    for words in ("Harbour round, invented", "Crew 2", "2031-05-04", "EPSG:32632", "956.4 ± 1.2"):
        assert words in front
    totals = re.search(r'<tr class="sum">(.*?)</tr>', front, re.S)[1]
    assert re.findall(r">(\d+)<", totals) == ["17", "2", "1", "20"]


def test_every_object_has_a_card_and_every_fault_its_reason(page):
    assert page.count('<article class="card">') == 20
    again = page[page.index("What to measure again") : page.index("The round from above")]
    assert again.count("<li>") == 3
    assert "only one limb is marked in photo B" in again


def test_the_checks_show_en_and_say_which_do_not_agree(page):
    checks = page[page.index("Checks against") : page.index("<h2>Pairs")]
    assert "−0.31" in checks
    assert "1.84 !" in checks
    assert checks.count(" !") == 1


def test_the_last_page_counts_the_crops(page):
    shown = len(re.findall(r'<svg class="crop', page))
    assert f"{shown} crops of the objects" in page
    assert shown == page.count("data:image/jpeg")


def test_no_number_is_nan(page):
    text = re.sub(r"base64,[A-Za-z0-9+/=]+", "", page)
    assert not re.search(r"\bnan\b|\binf\b|\bNone\b", text)


def test_without_checks_positions_or_crops(tmp_path):
    bare = replace(invented.without_places(invented.small_round()), checks=())
    page = made(bare, tmp_path)
    assert "Checks against" not in page
    assert "The round from above" not in page
    assert "no photo says where it was taken" in page
    assert page.count("No crops") == 20


def test_too_many_cards_keep_those_to_measure_again(tmp_path, monkeypatch):
    monkeypatch.setattr(report, "CARDS_MAX", 5)
    result = invented.small_round()
    page = made(result, tmp_path)
    assert page.count('<article class="card">') == 5
    assert "Cards of 5 of 20 objects" in page
    cards = page[page.index("Object by object") :]
    for found in result.objects:
        if found.verdict != "accept":
            assert f"<h3>{found.object}</h3>" in cards


def test_budget_bar_is_as_wide_as_the_shares():
    parts = {source: float(i + 1) for i, source in enumerate(BUDGET_SOURCES)}
    bar = str(figures.budget_bar(parts))
    widths = [float(w) for w in re.findall(r'width="([\d.]+)" height="14"', bar)]
    whole = sum(parts.values())
    assert widths == pytest.approx([340 * v / whole for v in parts.values()], abs=0.06)
    assert len(set(re.findall(r"url\((#b\d)\)", bar))) == len(parts)  # told apart without colour
    assert figures.budget_bar({}) == ""
    assert figures.budget_bar({"ties": 0.0}) == ""


def test_every_budget_source_has_a_pattern(page):
    assert set(re.findall(r'<pattern id="(b\d)"', page)) == {
        f"b{i}" for i in range(len(BUDGET_SOURCES))
    }


def test_histogram_counts_every_value():
    values = [0.5, 1.0, 1.2, 2.9, 3.0, -1.0, float("nan")]
    drawn = str(figures.histogram(values, "t", "u"))
    heights = [float(h) for h in re.findall(r'height="([\d.]+)" class="count"', drawn)]
    unit = min(h for h in heights if h > 0)
    assert sum(heights) / unit == pytest.approx(6, abs=0.05)
    assert "n = 6" in drawn
    assert figures.histogram([], "t", "u") == ""
    assert "n = 3" in figures.histogram([2.0, 2.0, 2.0], "t", "u")


def test_readings_scale_places_every_value_between_its_ends():
    drawn = str(figures.readings_scale([("A", 0.31, 0.002), ("B", 0.30, 0.004)], 0.306, 0.3, 0.312))
    (a,), (b,), (d,) = (
        re.findall(pattern, drawn)
        for pattern in (
            r'cx="([\d.]+)" cy="12"',
            r'cx="([\d.]+)" cy="29"',
            r'<rect x="([\d.]+)"',
        )
    )
    a, b, d = float(a), float(b), float(d) + 3
    assert (d - b) / (a - b) == pytest.approx(0.6, abs=0.01)
    assert all(58 <= v <= 320 for v in (a, b, d))


def test_an_open_end_is_an_arrow_and_a_word(tmp_path):
    shut = str(figures.readings_scale([("A", 0.3, 0.01)], 0.3, 0.28, 0.32))
    ajar = str(figures.readings_scale([("A", 0.3, 0.01)], 0.3, 0.28, None))
    assert "l-5 4" in ajar
    assert "l-5 4" not in shut
    assert interval(0.28, None) == "0.280 … open"
    assert interval(None, None) == "–"
    result = invented.large_round(1)
    found = replace(result.objects[0], diameter_hi_m=None)
    assert "… open m" in made(replace(result, objects=(found,)), tmp_path)


def test_names_in_drawings_are_escaped():
    drawn = map_sketch([("<b>", "accept", 0.0, 0.0)], [(1.0, 1.0)], [(1.0, 1.0, 0.0, 0.0)])
    assert "&lt;b&gt;" in drawn
    assert "<b>" not in drawn
    assert "<b>" not in figures.dots([("<b>", 0.3)], "<b>", "px")
    assert "<b>" not in figures.differences([("<b>", 0.3, 0.1)], "<b>", "%")


def test_numbers_in_words():
    assert number(-0.0001, 2) == "0.00"
    assert number(-1.5, 1) == "−1.5"
    assert number(None) == number(float("nan")) == "–"
    assert metres(0.3184) == "0.318 m"
    assert metres(None) == "–"
