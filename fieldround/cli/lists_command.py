"""`fieldround lists`: what each trade asks for, made of the results of a run.

In: a round that was run. Out: CSV files under out/lists/ and a section of report.html.
"""

from __future__ import annotations

from pathlib import Path

import click

from fieldround.cli.failing import failures_told


@click.command()
@click.argument("folder", metavar="DIR", type=click.Path(path_type=Path))
@click.option(
    "--out",
    "out_dir",
    metavar="DIR",
    type=click.Path(path_type=Path, file_okay=False),
    help="Folder of the results; DIR/out if left out.",
)
@click.option("--debug", is_flag=True, help="Show the traceback when the work fails.")
def lists(folder: Path, out_dir: Path | None, debug: bool) -> None:
    """Make the lists of the trades from the results of the round in DIR.

    Forestry, utility, municipal, tanks and balls: each list exists when the round has an object
    of its kind. Constants come from lists.toml in DIR, else from the program's own, each with its
    source. Writes out/lists/ and the section of that name in report.html; docs/lists.md tells more.
    """
    with failures_told(debug):
        from fieldround.trade.lists import write_lists

        for path in write_lists(folder, out_dir):
            click.echo(path)
