"""report.html: the round on paper, one file that opens from disk and prints to a clean PDF.

In: a `RoundResult`, its layers, its crops. Out: front page, what to measure again, checks, pairs,
one card an object, method and cautions, and a last page that lists what the file contains.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from markupsafe import Markup

from fieldround import __version__
from fieldround.deliver import figures
from fieldround.deliver.crops import Crop, CropsByView
from fieldround.deliver.layers import VIEWS, Layer
from fieldround.deliver.pages import environment, part
from fieldround.deliver.places import place_of, station_of
from fieldround.deliver.shapes import degrees_per_metre
from fieldround.deliver.sketch import map_sketch
from fieldround.deliver.times import local_dates
from fieldround.place.frames import PlacedPoint
from fieldround.rounds.model import KINDS, Camera
from fieldround.solve.results import VERDICTS, CheckResult, ObjectResult, RoundResult

# More cards than this make a file nobody prints; those to be measured again come first.
CARDS_MAX = 1500
# Rows of a table; a round with more has them in the layer.
ROWS_MAX = 5000
_DOTS_MAX = 60


@dataclass(frozen=True)
class View:
    """One photo of a card: which view, its name, its crops."""

    letter: str
    photo: str
    whole: Crop | None
    section: Crop | None


@dataclass(frozen=True)
class Card:
    """One object of the report with its drawings."""

    found: ObjectResult
    place: PlacedPoint | None
    views: tuple[View, ...]
    scale: Markup
    budget: Markup
    half_pct: float | None


def write_report(
    path: Path, result: RoundResult, layers: Mapping[str, Layer], crops: CropsByView
) -> None:
    """Write the page; equal input gives equal bytes."""
    path.write_text(report_html(result, layers, crops), encoding="utf-8", newline="\n")


def report_html(result: RoundResult, layers: Mapping[str, Layer], crops: CropsByView) -> str:
    """The page as text."""
    needy = [found for found in result.objects if found.verdict != "accept"]
    carded = {id(f) for f in [*needy, *_accepted(result)][:CARDS_MAX]}
    cards = [_card(result, found, crops) for found in result.objects if id(found) in carded]
    template = environment().get_template("report.html.j2")
    return template.render(
        title=result.round.settings.title or "Round",
        settings=result.round.settings,
        version=__version__,
        dates=local_dates(result),
        placement=result.placement,
        totals=_totals(result.objects),
        verdicts=VERDICTS,
        sign=figures.sign,
        patterns=figures.patterns(),
        cameras=_cameras(result),
        instruments=_instruments(result),
        notes=[*result.round.notes, *(result.placement.notes if result.placement else ())],
        lost=result.round.lost_photos,
        needy=needy,
        objects=result.objects,
        rows_max=ROWS_MAX,
        half_pct=half_pct,
        sketch=_sketch(result, layers),
        plots=_plots(result),
        checks=result.checks,
        pairs=result.pairs,
        cards=cards,
        crops_held=_held(crops, {card.found.object for card in cards}),
        style=Markup(part("report.css")),
    )


def half_pct(found: ObjectResult) -> float | None:
    """Half the 95 % interval in percent of the diameter."""
    if not found.diameter_m or found.diameter_lo_m is None or found.diameter_hi_m is None:
        return None
    return 50.0 * (found.diameter_hi_m - found.diameter_lo_m) / found.diameter_m


def _accepted(result: RoundResult) -> list[ObjectResult]:
    return [found for found in result.objects if found.verdict == "accept"]


def _totals(objects: Sequence[ObjectResult]) -> list[tuple[str, list[int]]]:
    """Rows (kind, counts by verdict and in all) and the sum below them."""
    rows = []
    for kind in KINDS:
        verdicts = [found.verdict for found in objects if found.kind == kind]
        if verdicts:
            rows.append((kind, [*(verdicts.count(v) for v in VERDICTS), len(verdicts)]))
    every = [found.verdict for found in objects]
    return [*rows, ("all", [*(every.count(v) for v in VERDICTS), len(every)])]


def _cameras(result: RoundResult) -> list[tuple[Camera, Camera | None, int]]:
    """Each card, the same card as the round found it, and its number of photos."""
    used = [photo.camera for photo in result.round.photos.values()]
    return [
        (card, result.cameras_found.get(name), used.count(name))
        for name, card in result.round.cameras.items()
    ]


def _instruments(result: RoundResult) -> dict[str, Any]:
    photos = result.round.photos.values()
    models = sorted({" ".join(filter(None, (p.make, p.model))) for p in photos} - {""})
    sources: dict[str, int] = {}
    for pair in result.pairs:
        sources[pair.baseline_from or "none"] = sources.get(pair.baseline_from or "none", 0) + 1
    fixed = sum(photo.fix is not None for photo in photos)
    return {"models": models, "baselines": sources, "fixed": fixed, "photos": len(photos)}


def _card(result: RoundResult, found: ObjectResult, crops: CropsByView) -> Card:
    photos = next((p.photos for p in result.pairs if p.pair == found.pair), ())
    letters = dict(zip(photos, VIEWS, strict=False))
    views = []
    for drawing in found.drawings:
        held = crops.get((found.object, drawing.photo))
        if held is not None and held.whole is not None:
            letter = letters.get(drawing.photo, "")
            views.append(View(letter, drawing.photo, held.whole, held.section))
    scale = Markup("")
    if found.diameter_m is not None:
        own = [
            (letters[r.photo], r.diameter_m, r.sd_m)
            for r in result.readings
            if r.object == found.object
            and r.pair == found.pair
            and r.photo in letters
            and math.isfinite(r.diameter_m)
            and math.isfinite(r.sd_m)
        ]
        scale = figures.readings_scale(
            own, found.diameter_m, found.diameter_lo_m, found.diameter_hi_m
        )
    return Card(
        found,
        place_of(result, found.object),
        tuple(views),
        scale,
        figures.budget_bar(found.budget),
        half_pct(found),
    )


def _plots(result: RoundResult) -> list[Markup]:
    settings = result.round.settings
    diameters = [f.diameter_m for f in result.objects if f.diameter_m is not None]
    halves = [h for f in result.objects if (h := half_pct(f)) is not None]
    agreements = [f.agreement for f in result.objects if f.agreement is not None]
    rms = [(p.pair, p.tie_rms_px) for p in result.pairs if p.tie_rms_px is not None]
    plots = [
        figures.histogram(diameters, "Diameters", "m"),
        figures.histogram(
            halves,
            "Half 95 % interval (dashed: tolerance)",
            "% of the diameter",
            [settings.tolerance_pct],
        ),
        figures.histogram(
            agreements,
            "Agreement of the readings (dashed: limits)",
            "sd",
            [-settings.agreement_limit, settings.agreement_limit],
        ),
    ]
    ranges = [
        (f.verdict, f.range_m, half)
        for f in result.objects
        if f.range_m is not None and (half := half_pct(f)) is not None
    ]
    plots.append(
        figures.scatter(
            ranges,
            "Half 95 % interval by range (dashed: tolerance)",
            "m",
            "%",
            settings.tolerance_pct,
        )
    )
    checked = [
        (c.object, 100.0 * c.difference_m / c.check_m, 200.0 * _both_sd(c) / c.check_m)
        for c in result.checks
        if c.difference_m is not None and c.check_m > 0.0
    ]
    if len(checked) <= _DOTS_MAX:
        plots.append(figures.differences(checked, "Found minus direct, with the 95 % of both", "%"))
    if len(rms) > _DOTS_MAX:
        plots.append(figures.histogram([v for _, v in rms], "Tie residuals of the pairs", "px rms"))
    else:
        plots.append(figures.dots(rms, "Tie residuals by pair", "px rms"))
    return [plot for plot in plots if plot]


def _both_sd(check: CheckResult) -> float:
    return math.hypot(check.diameter_sd_m or 0.0, check.check_sd_m or 0.0)


def _sketch(result: RoundResult, layers: Mapping[str, Layer]) -> Markup:
    """The round from above in metres east and north of its first object."""
    placement = result.placement
    first = next(
        (at for f in result.objects if (at := place_of(result, f.object)) is not None), None
    )
    if placement is None or first is None:
        return Markup("")
    per_east, per_north = degrees_per_metre(np.array([first.latitude_deg]))[0]

    def local(at: PlacedPoint) -> tuple[float, float]:
        east = (at.longitude_deg - first.longitude_deg + 540.0) % 360.0 - 180.0
        return east / per_east, (at.latitude_deg - first.latitude_deg) / per_north

    spots = {
        (pair, photo): local(at)
        for pair, placed in placement.pairs.items()
        for photo in placed.stations
        if (at := station_of(result, pair, photo)) is not None
    }
    places = {
        f.object: local(at)
        for f in result.objects
        if (at := place_of(result, f.object)) is not None
    }
    rows = layers["sightlines"]
    column = {f.name: i for i, f in enumerate(rows.fields)}
    lines = []
    for row in rows.rows:
        start = spots.get((str(row[column["pair"]]), str(row[column["photo"]])))
        end = places.get(str(row[column["object"]]))
        if start is not None and end is not None:
            lines.append((*start, *end))
    objects = [
        (f.object, f.verdict, *places[f.object]) for f in result.objects if f.object in places
    ]
    return map_sketch(objects, list(spots.values()), lines[:4000])


def _held(crops: CropsByView, carded: set[str]) -> int:
    return sum(
        (held.whole is not None) + (held.section is not None)
        for (name, _), held in crops.items()
        if name in carded
    )
