"""The closing table: the figures it shows and that it fits a terminal. Invented results."""

from __future__ import annotations

import io
from dataclasses import replace
from pathlib import Path

import pytest
from rich.console import Console

from fieldround.run.summary import LISTED_MOST, figures, print_summary
from fieldround.solve.results import CheckResult, RoundResult
from tests.run.invented import a_pair_row, a_result, a_round, an_object

LONG = "the 95 % interval is wider than what was asked for: measure the baseline better [or longer]"


def printed(result: RoundResult, width: int) -> str:
    text = io.StringIO()
    print_summary(result, Path("out"), Console(file=text, width=width))
    return text.getvalue()


@pytest.mark.parametrize(
    ("diameter_m", "sd_m", "low_m", "high_m", "shown"),
    [
        (0.30432, 0.00214, 0.3002, 0.30856, ("304.3 ± 2.1", "300.2 to 308.6")),
        (0.30432, 0.00014, 0.30402, 0.30462, ("304.32 ± 0.14", "304.02 to 304.62")),
        (11.9634, 0.0472, 11.871, 12.056, ("11963 ± 47", "11871 to 12056")),
        (0.412, 0.312, None, 1.9, ("412 ± 312", "? to 1900")),
        (0.412, 0.0005, None, None, ("412.00 ± 0.50", "")),
        (None, None, None, None, ("", "")),
    ],
)
def test_figures_show_the_second_digit_of_the_sd(
    diameter_m: float | None,
    sd_m: float | None,
    low_m: float | None,
    high_m: float | None,
    shown: tuple[str, str],
) -> None:
    thing = an_object(
        "T1", diameter_m=diameter_m, diameter_sd_m=sd_m, diameter_lo_m=low_m, diameter_hi_m=high_m
    )
    assert figures(thing) == shown


@pytest.mark.parametrize("width", [80, 100])
def test_the_table_fits_and_the_reasons_are_whole_below_it(tmp_path: Path, width: int) -> None:
    round_ = a_round(tmp_path, "abcd")
    objects = [
        an_object("T1", reasons=("a remark on an accepted one",)),
        an_object("a-very-long-name-of-an-object", "P2", verdict="remeasure", reasons=(LONG,)),
        an_object("T3", verdict="no result", reasons=("none",), diameter_m=None),
    ]
    refused = a_pair_row(round_.pairs[1], "no result", ("photo d.jpg: cannot be decoded",))
    text = printed(a_result(round_, objects, {"P2": refused}), width)
    table, _, below = text.partition("\n\n")
    assert len(table.splitlines()) == 1 + len(objects)
    assert max(map(len, table.splitlines())) <= width
    assert "304.3 ± 2.1" in table
    assert f"a-very-long-name-of-an-object: {LONG}" in below.splitlines()
    assert "a remark on an accepted one" not in below
    assert "Pair P2 has no result: photo d.jpg: cannot be decoded" in below.splitlines()
    assert "3 objects in 2 pairs: 1 accept, 1 remeasure, 1 no result." in below.splitlines()


def test_a_long_round_lists_only_what_is_not_accepted(tmp_path: Path) -> None:
    objects = [an_object(f"T{i}") for i in range(LISTED_MOST + 1)]
    objects[7] = replace(objects[7], verdict="remeasure", reasons=("why",))
    text = printed(a_result(a_round(tmp_path), objects), 100)
    assert "T7 " in text
    assert "T8 " not in text
    assert f"Not listed: {LISTED_MOST} accepted objects." in text


def test_checks_are_counted(tmp_path: Path) -> None:
    checks = tuple(
        CheckResult("T1", 0.3, 0.001, 0.301, 0.001, -0.001, number, "", "", "")
        for number in (0.4, -0.9, 1.2, None)
    )
    result = replace(a_result(a_round(tmp_path), [an_object("T1")]), checks=checks)
    assert "Checks: 2 of 3 agree" in printed(result, 100)
