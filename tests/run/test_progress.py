"""Progress: lines where there is no terminal, bars where there is one, silence when asked."""

from __future__ import annotations

import io

import pytest
from rich.console import Console

from fieldround.run.progress import STEPS, Lines, Quiet, TerminalBars, progress_for


def console(terminal: bool) -> tuple[Console, io.StringIO]:
    text = io.StringIO()
    return Console(file=text, force_terminal=terminal, width=100), text


def test_each_item_gets_a_plain_line() -> None:
    to, text = console(False)
    with progress_for(to, quiet=False) as progress:
        assert isinstance(progress, Lines)
        progress.begin("read", 1)
        progress.done("2 pairs [bold]")
        progress.begin("ties", 2)
        progress.done("P1, 120 ties")
        progress.say("photo b.jpg: cannot be decoded")
        progress.done("P2, 80 ties")
    assert text.getvalue().splitlines() == [
        "Read sheets and photos: 2 pairs [bold]",
        "Find ties 1 of 2: P1, 120 ties",
        "photo b.jpg: cannot be decoded",
        "Find ties 2 of 2: P2, 80 ties",
    ]


def test_a_step_of_many_items_is_told_in_twentieths() -> None:
    to, text = console(False)
    progress = Lines(to)
    progress.begin("ties", 5000)
    for i in range(5000):
        progress.done(f"P{i + 1}")
    lines = text.getvalue().splitlines()
    assert len(lines) == 20
    assert lines[-1] == "Find ties 5000 of 5000: P5000"


def test_bars_move_on_a_terminal() -> None:
    to, text = console(True)
    with progress_for(to, quiet=False) as progress:
        assert isinstance(progress, TerminalBars)
        for step in STEPS:
            progress.begin(step, 2)
            progress.done("P1 [x]")
            progress.done("P2 [x]")
        progress.say("said above")
    shown = text.getvalue()
    for name in STEPS.values():
        assert name in shown
    assert "2/2" in shown
    assert "P2 [x]" in shown
    assert "said above" in shown


@pytest.mark.parametrize("terminal", [True, False])
def test_quiet_prints_nothing(terminal: bool) -> None:
    to, text = console(terminal)
    with progress_for(to, quiet=True) as progress:
        assert isinstance(progress, Quiet)
        progress.begin("read", 1)
        progress.done("x")
        progress.say("y")
    assert text.getvalue() == ""
