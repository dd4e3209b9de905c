"""All lists of a round: CSV files and a section of the report.

In: the round's folder (lists.toml, boundary.geojson) and the results of its run. Out: out/lists/
and the section "Lists" of report.html, both renamed into place when whole.
"""

from __future__ import annotations

import csv
import io
import shutil
import tempfile
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from fieldround.deliver.report_section import insert_section
from fieldround.trade.balls import ball_lists
from fieldround.trade.constants import Constant, Constants, load_constants
from fieldround.trade.forestry import forestry_lists
from fieldround.trade.listing import Listing
from fieldround.trade.measured import Measured, from_geopackage
from fieldround.trade.municipal import municipal_lists
from fieldround.trade.page import section_html
from fieldround.trade.plots import plot_of
from fieldround.trade.tanks import tank_lists
from fieldround.trade.utility import utility_lists

FOLDER = "lists"


@dataclass(frozen=True)
class Trade:
    """The lists of one trade."""

    name: str
    lists: tuple[Listing, ...]


def trade_lists(folder: Path, items: Sequence[Measured], constants: Constants) -> list[Trade]:
    """Every list the round has objects for, by trade."""
    stems = [item for item in items if item.kind == "trunk"]
    plot = plot_of(folder, constants, stems) if stems else None
    made: dict[str, Callable[[], list[Listing]]] = {
        "Forestry": lambda: forestry_lists(items, constants, plot),
        "Utility": lambda: utility_lists(items, constants),
        "Municipal": lambda: municipal_lists(items, constants),
        "Tanks and pipes": lambda: tank_lists(items, constants),
        "Balls": lambda: ball_lists(items, constants),
    }
    trades = [Trade(name, tuple(make())) for name, make in made.items()]
    return [trade for trade in trades if trade.lists]


def write_lists(folder: Path, out_dir: Path | None = None) -> list[Path]:
    """Write the lists of a round that was run; returns the paths written.

    raises : SheetsError for a faulty lists.toml or boundary.geojson (nothing is written then),
             RoundError when the round was not run yet
    """
    out_dir = folder / "out" if out_dir is None else out_dir
    constants = load_constants(folder)
    items = from_geopackage(out_dir / "results.gpkg")
    trades = trade_lists(folder, items, constants)
    target = out_dir / FOLDER
    beside = Path(tempfile.mkdtemp(prefix=".writing-", dir=out_dir))
    try:
        names = []
        for listing in (listing for trade in trades for listing in trade.lists):
            names.append(f"{listing.name}.csv")
            (beside / names[-1]).write_text(listing.csv_text(), encoding="utf-8", newline="")
        used = constants.of(*{s for trade in trades for l_ in trade.lists for s in l_.sections})
        names.append("constants.csv")
        (beside / names[-1]).write_text(_constants_csv(used), encoding="utf-8", newline="")
        paths = [target / name for name in names]
        report = out_dir / "report.html"
        if report.exists():
            page = insert_section(report.read_text("utf-8"), str(section_html(trades, used, items)))
            (beside / report.name).write_text(page, encoding="utf-8", newline="\n")
        target.mkdir(exist_ok=True)
        for old in target.glob("*.csv"):
            if old.name not in names:
                old.unlink()  # a list of an earlier run that no longer has an object
        for path in paths:
            (beside / path.name).replace(path)
        if report.exists():
            (beside / report.name).replace(report)
            paths.append(report)
        return paths
    finally:
        shutil.rmtree(beside, ignore_errors=True)


def _constants_csv(constants: Sequence[Constant]) -> str:
    text = io.StringIO(newline="")
    sheet = csv.writer(text, lineterminator="\r\n")
    sheet.writerow(("constant", "value", "unit", "source"))
    for constant in constants:
        sheet.writerow((constant.key, constant.value, constant.unit, constant.source))
    return text.getvalue()
