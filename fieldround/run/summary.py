"""The table a person reads when a run has ended.

In: a `RoundResult`. Out: a rich table of the objects and a few lines on a console.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path
from typing import Literal

from rich.console import Console
from rich.table import Table
from rich.text import Text

from fieldround.solve.results import VERDICTS, ObjectResult, RoundResult

# Beyond this many objects only those that are not accepted are listed.
LISTED_MOST = 60
WIDEST = 100
NAME_WIDEST = 16
_STYLES = {"accept": "green", "remeasure": "yellow", "no result": "red"}


def print_summary(result: RoundResult, out_dir: Path, console: Console) -> None:
    """Print the table, what is to be measured again, the counts and where the results are."""
    listed = list(result.objects)
    if len(listed) > LISTED_MOST:
        listed = [thing for thing in listed if thing.verdict != "accept"]
    if listed:
        console.print(objects_table(listed, min(console.width, WIDEST)))
        console.print()
    for line in closing_lines(result, len(listed), out_dir):
        console.print(Text(line), soft_wrap=True)


def objects_table(objects: list[ObjectResult], width: int) -> Table:
    """One row an object: diameter, sd and interval in millimetres, verdict, first reason.

    The figures keep their width; what a narrow terminal cuts off is the reason.
    """
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0))
    rows = [(_cut(thing.object), thing.kind, *figures(thing), thing.verdict) for thing in objects]
    names = ("object", "kind", "diameter ± sd, mm", "95 % interval", "verdict")
    left = width
    for i, name in enumerate(names):
        wide = max(len(name), *(len(row[i]) for row in rows))
        justify: Literal["left", "right"] = "right" if i in (2, 3) else "left"
        table.add_column(name, justify=justify, no_wrap=True, width=wide)
        left -= wide + 2
    table.add_column("first reason", no_wrap=True, overflow="ellipsis", width=max(left - 2, 1))
    for thing, row in zip(objects, rows, strict=True):
        verdict = Text(thing.verdict, style=_STYLES.get(thing.verdict, ""))
        reason = Text(thing.reasons[0] if thing.reasons else "")
        table.add_row(*(Text(cell) for cell in row[:-1]), verdict, reason)
    return table


def _cut(name: str) -> str:
    return name if len(name) <= NAME_WIDEST else name[: NAME_WIDEST - 1] + "…"


def figures(thing: ObjectResult) -> tuple[str, str]:
    """Diameter with its sd, and interval, in millimetres to the sd's second digit; '' if none."""
    if thing.diameter_m is None or thing.diameter_sd_m is None:
        return "", ""
    digits = _digits(1000.0 * thing.diameter_sd_m)

    def millimetres(metres: float | None) -> str:
        return "?" if metres is None else f"{1000.0 * metres:.{digits}f}"

    low, high = thing.diameter_lo_m, thing.diameter_hi_m
    span = "" if low is None and high is None else f"{millimetres(low)} to {millimetres(high)}"
    return f"{millimetres(thing.diameter_m)} ± {millimetres(thing.diameter_sd_m)}", span


def _digits(sd_mm: float) -> int:
    """Decimal places that show two digits of an sd, between none and two."""
    if not sd_mm > 0.0:
        return 1
    return min(2, max(0, 1 - math.floor(math.log10(sd_mm))))


def closing_lines(result: RoundResult, listed: int, out_dir: Path) -> Iterator[str]:
    """What failed, the counts, the checks, and where the results lie."""
    if listed < len(result.objects):
        yield f"Not listed: {_many(len(result.objects) - listed, 'accepted object')}."
    for thing in result.objects:
        if thing.verdict != "accept" and thing.reasons:
            yield f"{thing.object}: {thing.reasons[0]}"
    for pair in result.pairs:
        if pair.status != "solved":
            reason = pair.reasons[0] if pair.reasons else "no reason was given"
            yield f"Pair {pair.pair} has no result: {reason}"
    used = {name for pair in result.round.pairs for name in pair.photos}
    for name, sentence in result.round.lost_photos.items():
        if name not in used:
            yield f"Left out: {sentence}"
    verdicts = [thing.verdict for thing in result.objects]
    counts = ", ".join(f"{verdicts.count(verdict)} {verdict}" for verdict in VERDICTS)
    yield f"{_many(len(verdicts), 'object')} in {_many(len(result.pairs), 'pair')}: {counts}."
    numbers = [check.en_number for check in result.checks if check.en_number is not None]
    if numbers:
        agree = sum(abs(number) <= 1.0 for number in numbers)
        yield f"Checks: {agree} of {len(numbers)} agree within both uncertainties (|En| <= 1)."
    yield f"Results are in {out_dir}; open map.html or report.html there."


def _many(count: int, what: str) -> str:
    return f"{count} {what}{'' if count == 1 else 's'}"
