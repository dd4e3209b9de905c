"""What a person is told when the work cannot be done, and the exit code that goes with it.

In: the exceptions of the work. Out: sentences on stderr; exit code 2 for wrong sheets, 1 else.
"""

from __future__ import annotations

import sys
import traceback
from collections.abc import Iterator
from contextlib import contextmanager

import click

from fieldround.rounds.errors import Fault, RoundError, SheetsError

WORK_FAILED = 1
SHEETS_WRONG = 2


@contextmanager
def failures_told(debug: bool) -> Iterator[None]:
    """Turn exceptions into sentences and exit codes; debug adds the traceback."""
    try:
        yield
    except SheetsError as wrong:
        click.echo(faults_text(wrong.faults), err=True)
        sys.exit(SHEETS_WRONG)
    except (click.ClickException, click.Abort, KeyboardInterrupt):
        raise
    except Exception as trouble:
        if debug:
            traceback.print_exc()
        text = " ".join(str(trouble).split())
        if not isinstance(trouble, RoundError):
            text = f"{type(trouble).__name__}{': ' if text else ''}{text}"
            if not debug:
                text += " (run again with --debug for the whole story)"
        click.echo(f"The work failed: {text}", err=True)
        sys.exit(WORK_FAILED)


def faults_text(faults: tuple[Fault, ...]) -> str:
    """Every fault on one line: file, row, column, value, remedy."""
    count = "1 thing is" if len(faults) == 1 else f"{len(faults)} things are"
    lines = [f"{count} wrong in the sheets; nothing was written.", ""]
    lines += [fault.sentence() for fault in faults]
    return "\n".join(lines)
