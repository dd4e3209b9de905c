"""`fieldround run`: a round's folder becomes a layer, a map and a report.

In: the folder. Out: the files of out/, a table of the results, an exit code.
"""

from __future__ import annotations

import os
from importlib.util import find_spec
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
@click.option("--embed-crops", is_flag=True, help="Put the photos' crops into results.gpkg too.")
@click.option("--parquet", is_flag=True, help="Write the layers as GeoParquet too.")
@click.option(
    "--postgis",
    metavar="DSN",
    help="Write the layers into this PostGIS database too, in one transaction.",
)
@click.option(
    "--postgis-mode",
    type=click.Choice(["replace", "append"]),
    default="replace",
    help="Replace this round's rows in the database (usual), or append and refuse a second time.",
)
@click.option("--quiet", is_flag=True, help="Print nothing but what is wrong.")
@click.option("--debug", is_flag=True, help="Show the traceback when the work fails.")
def run(
    folder: Path,
    out_dir: Path | None,
    draws: int | None,
    fresh: bool,
    embed_crops: bool,
    parquet: bool,
    postgis: str | None,
    postgis_mode: str,
    quiet: bool,
    debug: bool,
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
        # Asked for before the work, so that a long run is not lost for want of a package.
        _needed(parquet, "pyarrow", "parquet")
        _needed(postgis is not None, "psycopg", "postgis")

        from rich.console import Console

        from fieldround.deliver.write import Extras
        from fieldround.run.progress import progress_for
        from fieldround.run.summary import print_summary
        from fieldround.run.work import RunOptions, run_round

        target = folder / "out" if out_dir is None else out_dir
        with progress_for(Console(stderr=True), quiet) as progress:
            options = RunOptions(
                draws=draws,
                fresh=fresh,
                extras=Extras(embed_crops=embed_crops, parquet=parquet),
                postgis=postgis,
                postgis_mode=postgis_mode,
            )
            result = run_round(folder, target, progress, options)
        if not quiet:
            console = Console()
            if not console.is_terminal:
                console = Console(width=100)
            print_summary(result, target, console)


def _needed(asked: bool, package: str, extra: str) -> None:
    """Refuse an output whose package is not installed."""
    if asked and find_spec(package) is None:
        raise click.UsageError(
            f"--{extra} needs the Python package {package}; "
            f"install it with: pip install 'fieldround[{extra}]'"
        )
