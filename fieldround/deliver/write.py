"""All results of a round, written so that the old ones stay whole until the new ones are.

In: a `RoundResult`, the folder out/, and a way to see the photos. Out: the files of out/.
"""

from __future__ import annotations

import shutil
import tempfile
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from fieldround import __version__
from fieldround.rounds.errors import RoundError
from fieldround.solve.results import RoundResult

PictureSource = Callable[[str], np.ndarray]
# What the sheet and the pages show of the layers; the others are written and let go.
_SHOWN = ("objects", "sightlines", "round")
_NO_TIME = "1970-01-01T00:00:00.000Z"


class WriteError(RoundError):
    """The results could not be written; those of the run before are still there."""


@dataclass(frozen=True)
class Extras:
    """What is written beyond the usual files.

    embed_crops : the crops stand inside results.gpkg too
    parquet     : the layers as GeoParquet beside it
    """

    embed_crops: bool = False
    parquet: bool = False


def write_results(
    result: RoundResult,
    out_dir: Path,
    pictures: PictureSource | None = None,
    extras: Extras | None = None,
) -> list[Path]:
    """Write every file of out/ and return their paths.

    pictures : gives the upright (h, w, 3) uint8 RGB picture of a photo's name, safe to call from
               several threads; None = no crops
    raises   : WriteError when a file of the run before is held open by another program
    """
    out_dir.mkdir(parents=True, exist_ok=True)
    beside = Path(tempfile.mkdtemp(prefix=".writing-", dir=out_dir))
    try:
        made = _write_all(result, out_dir, beside, pictures, extras or Extras())
        return [_move(path, out_dir / path.name) for path in made]
    finally:
        shutil.rmtree(beside, ignore_errors=True)


def _write_all(
    result: RoundResult,
    out_dir: Path,
    beside: Path,
    pictures: PictureSource | None,
    extras: Extras,
) -> list[Path]:
    from fieldround.deliver.crops import cut_crops
    from fieldround.deliver.facts import write_facts
    from fieldround.deliver.geojson import write_geojson
    from fieldround.deliver.geopackage import srs_of, write_geopackage
    from fieldround.deliver.layers import Layer, coordinates, layers_of
    from fieldround.deliver.map_page import write_map
    from fieldround.deliver.report import write_report
    from fieldround.deliver.sheet import write_sheet
    from fieldround.deliver.times import time_span

    layers: dict[str, Layer] = {}

    def kept(made: Iterable[Layer]) -> Iterator[Layer]:
        for layer in made:
            if layer.table.name in _SHOWN:
                layers[layer.table.name] = layer
            yield layer

    places = coordinates(result)
    placement = result.placement
    crs = (None, None) if placement is None else (placement.crs_wkt, placement.epsg)
    crops = cut_crops(result, pictures)
    # The GeoPackage comes first: it is the one another program most likely holds open.
    names = ("results.gpkg", "results.csv", "results.geojson", "run.json", "map.html")
    paths = [beside / name for name in (*names, "report.html")]
    write_geopackage(
        paths[0],
        kept(layers_of(result, out_dir)),
        srs_of(*crs),
        time_span(result)[1] or _NO_TIME,
        _about(result),
        crops if extras.embed_crops else None,
    )
    write_sheet(paths[1], layers["objects"], places)
    write_geojson(paths[2], layers["objects"], places)
    write_facts(paths[3], result)
    write_map(paths[4], result, layers, crops)
    write_report(paths[5], result, layers, crops)
    if extras.parquet:
        from fieldround.deliver.parquet import write_parquet

        paths += write_parquet(beside, layers_of(result, out_dir), *crs)
    return paths


def _about(result: RoundResult) -> dict[str, Any]:
    """What the metadata extension says of the file as a whole."""
    return {
        "program": f"fieldround {__version__}",
        "title": result.round.settings.title,
        "method": [
            "Diameters from the limbs of round objects in photos from two or more stations, "
            "adjusted jointly with ties, baseline, camera card and uprightness by least squares.",
            "Standard deviations by propagation of variances (JCGM 100); intervals are 95 %.",
            "Positions from GNSS of the photos, refined within each pair; ellipses are 95 %.",
        ],
        "lengths": "metre",
        "angles": "degree, bearings clockwise from true north",
        "times": "UTC; a time whose offset is not known stands in taken_local alone",
        "wgs84": "longitude and latitude of the sheet and the GeoJSON are WGS 84",
    }


def _move(path: Path, target: Path) -> Path:
    try:
        path.replace(target)
        if target.suffix == ".gpkg":
            # A log that a reader left beside the OLD file would be replayed into the new one.
            for end in ("-wal", "-shm", "-journal"):
                target.with_name(target.name + end).unlink(missing_ok=True)
    except PermissionError as error:
        raise WriteError(
            f"{target.name} in {target.parent} cannot be replaced: another program holds it "
            "open. Close that program and run again."
        ) from error
    return target
