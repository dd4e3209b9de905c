"""How far the work is, told while it goes on.

In: steps, their number of items, and what was done. Out: a bar a step on a terminal, plain lines
elsewhere, nothing when asked to be quiet.
"""

from __future__ import annotations

from types import TracebackType
from typing import Protocol, Self

from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, TaskID, TextColumn, TimeElapsedColumn
from rich.progress import Progress as Bars
from rich.text import Text

STEPS = {
    "compare": "Compare photos",
    "read": "Read sheets and photos",
    "ties": "Find ties",
    "limbs": "Find limbs",
    "solve": "Adjust the round",
    "place": "Place on the map",
    "write": "Write results",
}
# A step of more items than this is told in twentieths, not item by item.
TOLD_ITEM_BY_ITEM = 40


class Progress(Protocol):
    """What the work tells of itself."""

    def begin(self, step: str, total: int) -> None:
        """A step of `STEPS` begins, with so many items."""

    def done(self, what: str) -> None:
        """One item of the current step is done; `what` names it."""

    def say(self, sentence: str) -> None:
        """Something the user should know at once."""


class Quiet:
    """Tells nothing."""

    def begin(self, step: str, total: int) -> None:
        """Nothing."""

    def done(self, what: str) -> None:
        """Nothing."""

    def say(self, sentence: str) -> None:
        """Nothing."""

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        return None


class Lines:
    """One plain line an item, for logs and pipes."""

    def __init__(self, console: Console) -> None:
        self._console = console
        self._step, self._total, self._count = "", 0, 0

    def begin(self, step: str, total: int) -> None:
        """A line that names the step when it has several items."""
        self._step, self._total, self._count = STEPS[step], total, 0

    def done(self, what: str) -> None:
        """A line for the item, or for every twentieth part of a long step."""
        self._count += 1
        if self._total > TOLD_ITEM_BY_ITEM:
            before, now = (20 * n // self._total for n in (self._count - 1, self._count))
            if before == now:
                return
        count = f" {self._count} of {self._total}" if self._total > 1 else ""
        self._print(f"{self._step}{count}{': ' if what else ''}{what}")

    def say(self, sentence: str) -> None:
        """The sentence on a line of its own."""
        self._print(sentence)

    def _print(self, line: str) -> None:
        self._console.print(Text(line), soft_wrap=True)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        return None


class TerminalBars:
    """A bar a step that moves on a terminal."""

    def __init__(self, console: Console) -> None:
        self._bars = Bars(
            TextColumn("{task.description:<24}"),
            BarColumn(bar_width=24),
            MofNCompleteColumn(),
            TimeElapsedColumn(),
            TextColumn("{task.fields[what]}", markup=False),
            console=console,
        )
        self._task: TaskID | None = None

    def begin(self, step: str, total: int) -> None:
        """A new bar below the others."""
        self._task = self._bars.add_task(STEPS[step], total=max(total, 1), what="")

    def done(self, what: str) -> None:
        """The current bar moves by one item."""
        if self._task is not None:
            self._bars.update(self._task, advance=1, what=what)

    def say(self, sentence: str) -> None:
        """The sentence above the bars."""
        self._bars.console.print(Text(sentence))

    def __enter__(self) -> Self:
        self._bars.start()
        return self

    def __exit__(
        self,
        _kind: type[BaseException] | None,
        _error: BaseException | None,
        _trace: TracebackType | None,
    ) -> None:
        self._bars.stop()


def progress_for(console: Console, quiet: bool) -> Quiet | Lines | TerminalBars:
    """Bars on a terminal, lines elsewhere, nothing when quiet; each is a context manager."""
    if quiet:
        return Quiet()
    return TerminalBars(console) if console.is_terminal else Lines(console)
