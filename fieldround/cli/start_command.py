"""`fieldround start`: the first sheets of a round, proposed from its photos.

In: a folder with photos/. Out: round.toml and pairs.csv where there were none, what was proposed
on stdout, and the list of what the crew must still fill in.
"""

from __future__ import annotations

from pathlib import Path

import click

from fieldround.cli.failing import failures_told


@click.command()
@click.argument("folder", metavar="DIR", type=click.Path(path_type=Path))
@click.option("--quiet", is_flag=True, help="Print only what is still to be filled in.")
@click.option("--debug", is_flag=True, help="Show the traceback when the work fails.")
def start(folder: Path, quiet: bool, debug: bool) -> None:
    """Propose the pairs of the round in DIR from its photos.

    Reads photos/ and proposes pairs (and threes) by time, position and what the pictures share.
    Writes round.toml and pairs.csv, with every guess explained in the column note; a file that is
    there already is never overwritten. Prints what is still to be filled in, such as the tapes.
    """
    with failures_told(debug):
        from rich.console import Console

        from fieldround.plan.start import start_round
        from fieldround.run.progress import progress_for

        with progress_for(Console(stderr=True), quiet) as progress:

            def told(done: int, of: int) -> None:
                if done == 0 and of:
                    progress.begin("compare", of)
                elif of:
                    progress.done("")

            found = start_round(folder, told)
        if not quiet:
            for name, group in zip(found.names, found.groups, strict=True):
                click.echo(f"{name}: {', '.join(group.photos)} ({group.why})")
            for photo, why in found.left_over.items():
                click.echo(f"In no pair: {photo}, because {why}")
            for name in found.written:
                click.echo(f"Written: {folder / name}")
            for name in found.kept:
                click.echo(f"There already, left as it is: {folder / name}")
        if found.to_fill_in:
            click.echo("Still to be filled in:")
            for line in found.to_fill_in:
                click.echo(f"  {line}")
