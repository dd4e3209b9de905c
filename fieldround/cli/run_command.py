"""`fieldround run`: a round's folder becomes a layer, a map and a report.

In: the folder. Out: the files of out/, a table of the results, an exit code.
"""

from __future__ import annotations

import os
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
    help="Folder for the results; DIR/out if left out.",
)
@click.option(
    "--draws",
    type=click.IntRange(min=1),
    metavar="N",
    help="Monte Carlo draws for every interval; as many as the linear one needs if left out.",
)
@click.option("--fresh", is_flag=True, help="Find the ties again, whatever an earlier run kept.")
@click.option("--quiet", is_flag=True, help="Print nothing but what is wrong.")
@click.option("--debug", is_flag=True, help="Show the traceback when the work fails.")
def run(
    folder: Path, out_dir: Path | None, draws: int | None, fresh: bool, quiet: bool, debug: bool
) -> None:
    """Size and place every object of the round in DIR.

    Reads pairs.csv, photos/ and, where they are there, round.toml, objects.csv, marks.csv,
    checks.csv, cameras.toml and tracks/. Writes results.gpkg, results.csv, results.geojson,
    map.html, report.html and run.json.

    Exit code: 0 when every pair was processed, whatever the verdicts; 2 when the sheets are
    wrong (nothing is written); 1 when the work failed.
    """
    # The matrices are small: threads inside the linear algebra cost more than they bring, and
    # the pairs are spread over threads already. A value that the user set is kept.
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
        os.environ.setdefault(name, "1")
    with failures_told(debug):
        from rich.console import Console

        from fieldround.run.progress import progress_for
        from fieldround.run.summary import print_summary
        from fieldround.run.work import RunOptions, run_round

        target = folder / "out" if out_dir is None else out_dir
        with progress_for(Console(stderr=True), quiet) as progress:
            result = run_round(folder, target, progress, RunOptions(draws=draws, fresh=fresh))
        if not quiet:
            console = Console()
            if not console.is_terminal:
                console = Console(width=100)
            print_summary(result, target, console)
