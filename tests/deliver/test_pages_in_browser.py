"""Both pages in a real browser with the network off: what a client sees when the file is opened."""

from __future__ import annotations

import shutil
from contextlib import contextmanager
from pathlib import Path

import numpy as np
import pytest

from fieldround.deliver.layers import layers_of
from fieldround.deliver.map_page import write_map
from fieldround.deliver.shapes import degrees_per_metre
from fieldround.deliver.write import write_results
from fieldround.trade.lists import write_lists
from tests.deliver import invented

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
pytest.importorskip("playwright", reason="playwright is not installed")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="no Chromium on this machine")


@pytest.fixture(scope="module")
def browser():
    from playwright.sync_api import sync_playwright

    quiet = ("quic", "background-networking", "component-update", "sync", "gpu")
    flags = ["--no-sandbox", "--no-first-run", *(f"--disable-{part}" for part in quiet)]
    with sync_playwright() as play:
        started = play.chromium.launch(executable_path=CHROMIUM, args=flags)
        yield started
        started.close()


@pytest.fixture(scope="module")
def small(tmp_path_factory) -> Path:
    folder = tmp_path_factory.mktemp("round")
    write_results(invented.small_round(folder), folder / "out", invented.picture)
    return folder / "out"


@contextmanager
def opened(browser, path: Path, *, scheme="light", width=1440, height=900, ready=True):
    """The page of a file; fails afterwards if a request left or an error was logged."""
    context = browser.new_context(viewport={"width": width, "height": height}, color_scheme=scheme)
    requests, errors = [], []
    page = context.new_page()
    page.on("request", lambda request: requests.append(request.url))
    page.on("pageerror", lambda error: errors.append(str(error)))
    page.on("console", lambda said: errors.append(said.text) if said.type == "error" else None)
    page.on("dialog", lambda dialog: errors.append(f"dialog: {dialog.message}"))
    page.route("**/*", _only_near)
    page.goto(path.as_uri())
    if ready:
        page.wait_for_selector("html[data-ready=yes]")
    yield page, requests
    far = [url for url in requests if not _near(url)]
    assert page.evaluate("window.hurt") is None
    context.close()
    assert errors == []
    assert far == []


def _only_near(route) -> None:
    if _near(route.request.url):
        route.continue_()
    else:
        route.abort()


def _near(url: str) -> bool:
    return url.startswith(("file:", "data:", "blob:"))


def shown(page) -> str:
    return page.text_content("#shown").strip()


def signs(page, which="map") -> int:
    """How many objects' signs are on the map (or on it and hidden)."""
    return page.evaluate(
        f"() => {{ let n = 0; {MAP}.eachLayer(l => {{"
        f" if (l instanceof Marks.Sign && ('{which}' === 'map' || l.hidden)) n++; }}); return n; }}"
    )


MAP = "Object.values(window).find(v => v instanceof L.Map)"


def test_the_map_opens_with_the_layers_counts(browser, small):
    with opened(browser, small / "map.html") as (page, requests):
        assert shown(page) == "20 of 20 objects"
        totals = [item.inner_text().split()[0] for item in page.query_selector_all("#totals li")]
        assert totals == ["17", "2", "1"]
        drawn = signs(page)
        assert drawn == 19  # one object has no position
        assert len(requests) == 1  # the page itself


def test_search_and_filters_narrow_table_and_map(browser, small):
    with opened(browser, small / "map.html") as (page, _):
        page.fill("#find", "b0")
        rows = page.query_selector_all("#list .row[data-object]")
        names = [row.get_attribute("data-object") for row in rows]
        assert names
        assert all("b0" in name.lower() for name in names)
        page.click("#clear")
        page.select_option("#kind", "tank")
        assert shown(page) == "3 of 20 objects"
        page.click("#clear")
        page.fill("#from", "0.5")
        page.fill("#to", "1.0")
        low_high = invented.small_round()
        expected = sum(0.5 <= (o.diameter_m or 0) <= 1.0 for o in low_high.objects)
        assert shown(page) == f"{expected} of 20 objects"
        page.click("#clear")
        page.uncheck("input[name=verdict][value=accept]")
        assert shown(page) == "3 of 20 objects"
        hidden = signs(page, "hidden")
        assert hidden == 16
        page.click("#clear")
        page.fill("#label", "quay 2")
        assert shown(page) == "10 of 20 objects"


def test_table_and_map_are_linked_both_ways(browser, small):
    with opened(browser, small / "map.html") as (page, _):
        page.click("#list .row[data-object=B004]")
        assert page.inner_text(".leaflet-popup h2") == "B004"
        assert page.locator(".leaflet-popup figure image").count() == 2
        assert page.locator(".leaflet-popup .limb").count() == 4
        page.keyboard.press("Escape")  # it would lie over the next object
        page.wait_for_selector(".leaflet-popup", state="detached")
        point = page.evaluate(
            f"""() => {{ let found; const map = {MAP};
            map.eachLayer(l => {{ if (l.row && l.row.object === 'P020') found = l; }});
            map.setView(found.getLatLng(), 20, {{animate: false}});
            const at = map.latLngToContainerPoint(found.getLatLng());
            const box = map.getContainer().getBoundingClientRect();
            return [box.left + at.x, box.top + at.y]; }}"""
        )
        page.mouse.click(*point)
        page.wait_for_selector("#list .row.chosen[data-object=P020]")
        assert page.inner_text(".leaflet-popup h2") == "P020"
        page.focus("#list")
        page.keyboard.press("ArrowUp")
        page.wait_for_selector("#list .row.chosen[data-object=T019]")


def test_nasty_names_are_shown_as_text(browser, small):
    with opened(browser, small / "map.html") as (page, _):
        page.locator("#list .row").nth(3).click()
        row = page.locator("#list .row[data-object*=hurt]")
        row.click()
        assert page.inner_text(".leaflet-popup h2") == invented.NASTY
        assert invented.NASTY in page.inner_text(".leaflet-popup .reasons")
        assert page.locator(".leaflet-popup script").count() == 0


def test_sections_are_drawn_true_to_scale(browser, small):
    with opened(browser, small / "map.html") as (page, _):
        pixels, metres = page.evaluate(
            f"""() => {{ const map = {MAP}; let found;
            map.eachLayer(l => {{
              if (l instanceof Marks.Ellipse && l.verdict && l.metres[0] > 1.5) found = l; }});
            map.setView(found.getLatLng(), 22, {{animate: false}});
            const at = found.getLatLng();
            const east = L.latLng(at.lat, at.lng + 1e-5);
            const px = map.project(east, 22).x - map.project(at, 22).x;
            return [found.pixels[0] / px, found.metres[0]]; }}"""
        )
        metres_east = 1e-5 / degrees_per_metre(np.array([48.03]))[0, 0]
        assert pixels * metres_east == pytest.approx(metres, rel=1e-3)


def test_the_background_asks_only_when_it_is_switched_on(browser, small):
    from playwright.sync_api import expect

    context = browser.new_context(viewport={"width": 1200, "height": 800})
    page = context.new_page()
    asked = []
    page.on("request", lambda request: asked.append(request.url))
    page.route("**/*", _only_near)
    page.goto((small / "map.html").as_uri())
    page.wait_for_selector("html[data-ready=yes]")
    assert [url for url in asked if not _near(url)] == []
    page.hover(".leaflet-control-layers")
    page.get_by_text("Online background").click()
    expect(page.locator(".leaflet-control-attribution")).to_contain_text("OpenStreetMap")
    page.wait_for_timeout(300)
    assert [url for url in asked if not _near(url)] != []
    context.close()


def test_the_map_on_a_phone_and_in_the_dark(browser, small):
    with opened(browser, small / "map.html", width=390, height=844, scheme="dark") as (page, _):
        assert page.evaluate("document.documentElement.scrollWidth") <= 390
        page.click("#list .row[data-object=P001]")
        assert page.inner_text("#sheet h2") == "P001"
        assert page.locator("#sheet").bounding_box()["y"] > 250
        page.click("#sheet button[aria-label=Close]")
        assert not page.is_visible("#sheet")
        paper = page.evaluate("getComputedStyle(document.body).backgroundColor")
        assert paper == "rgb(21, 24, 28)"


def test_the_map_prints_on_one_page(browser, small, tmp_path):
    for paper in ("A4", "Letter"):
        with opened(browser, small / "map.html") as (page, _):
            page.pdf(path=tmp_path / "map.pdf", format=paper)
            assert pages_of(tmp_path / "map.pdf") == 1


def test_an_address_can_name_an_object(browser, small):
    with opened(browser, small / "map.html") as (page, _):
        page.goto((small / "map.html").as_uri() + "#object=B011")
        page.reload()
        page.wait_for_selector("html[data-ready=yes]")
        assert page.inner_text(".leaflet-popup h2") == "B011"


def test_the_report_opens_and_prints(browser, small, tmp_path):
    with opened(browser, small / "report.html", ready=False) as (page, requests):
        assert page.locator("article.card").count() == 20
        assert page.locator(".sum td").all_inner_texts() == ["17", "2", "1", "20"]
        assert page.evaluate("document.documentElement.scrollWidth") <= 1440
        broken = page.evaluate(
            "Promise.all([...document.querySelectorAll('image')].map(i => { const t = new Image();"
            " t.src = i.getAttribute('href'); return t.decode().then(() => 0, () => 1); }))"
            ".then(all => all.reduce((a, b) => a + b, 0))"
        )
        assert broken == 0
        assert len([url for url in requests if url.startswith("file:")]) == 1
        for paper in ("A4", "Letter"):
            page.pdf(path=tmp_path / f"{paper}.pdf", format=paper)
            # A front page or two, tables, two cards a page, method, contents.
            assert 12 <= pages_of(tmp_path / f"{paper}.pdf") <= 20


def test_the_report_with_lists_fits_the_paper(browser, tmp_path):
    """Whatever is wider than the paper makes a browser print everything smaller."""
    write_results(invented.small_round(tmp_path), tmp_path / "out")
    write_lists(tmp_path)
    with opened(browser, tmp_path / "out" / "report.html", ready=False, width=690) as (page, _):
        page.emulate_media(media="print")
        assert page.locator("#lists table").count() >= 11
        assert page.evaluate("document.documentElement.scrollWidth") <= 690


def test_the_report_on_a_phone_does_not_run_over_the_edge(browser, small):
    with opened(browser, small / "report.html", ready=False, width=390, height=844) as (page, _):
        assert page.evaluate("document.documentElement.scrollWidth") <= 390


def test_five_thousand_objects_open_and_are_all_there(browser, tmp_path):
    result = invented.large_round(5000, drawn=False)
    layers = {layer.table.name: layer for layer in layers_of(result, tmp_path)}
    write_map(tmp_path / "map.html", result, layers, {})
    with opened(browser, tmp_path / "map.html") as (page, _):
        assert shown(page) == "5000 of 5000 objects"
        assert page.locator("#list .row[data-object]").count() < 100  # only those in sight
        page.click("#list .thead .c-diameter_m")
        first = float(page.locator("#list .row[data-object] .c-diameter_m").first.inner_text())
        smallest = min(o.diameter_m for o in result.objects)
        assert first == pytest.approx(smallest, abs=6e-4)


def test_a_round_without_positions_shows_its_table(browser, tmp_path):
    result = invented.without_places(invented.small_round(tmp_path))
    write_results(result, tmp_path / "out")
    with opened(browser, tmp_path / "out" / "map.html") as (page, _):
        assert page.is_visible("#nowhere")
        page.click("#list .row[data-object=P001]")
        assert page.inner_text("#sheet h2") == "P001"


def test_a_round_across_longitude_180_fits_the_screen(browser, tmp_path):
    write_results(invented.large_round(20, epsg=32660, centre=(179.9999, -17.0)), tmp_path / "out")
    with opened(browser, tmp_path / "out" / "map.html") as (page, _):
        assert page.evaluate(f"{MAP}.getZoom()") >= 18


def pages_of(pdf: Path) -> int:
    return pdf.read_bytes().count(b"/Type /Page\n") or pdf.read_bytes().count(b"/Type /Page ")
