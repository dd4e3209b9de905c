"""The layers as GeoParquet, for those who compute on them.

In: `Layer`s and the CRS. Out: one file a layer (`objects.parquet`, `sections.parquet` …), the
geometries as WKB with the CRS in the file's metadata.
"""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any

from fieldround.deliver.layers import Layer
from fieldround.rounds.errors import RoundError

_TYPES = {"TEXT": "object", "INTEGER": "Int64", "REAL": "float64"}


def write_parquet(
    folder: Path, layers: Iterable[Layer], crs_wkt: str | None, epsg: int | None
) -> list[Path]:
    """Write every layer that has geometries; plain tables stay with the GeoPackage.

    raises : RoundError when pyarrow is not installed
    """
    try:
        import pyarrow  # noqa: F401
    except ImportError as error:
        raise RoundError(
            "GeoParquet needs the Python package pyarrow. Install it with: "
            "pip install 'fieldround[parquet]'"
        ) from error
    import geopandas
    import pandas

    paths = []
    for layer in layers:
        if layer.geometry is None:
            continue
        columns = list(zip(*layer.rows, strict=True)) or [()] * len(layer.fields)
        table: dict[str, Any] = {}
        for field, values in zip(layer.fields, columns, strict=True):
            if field.type == "DATETIME":
                table[field.name] = pandas.to_datetime(pandas.Series(values, dtype="str"), utc=True)
            else:
                table[field.name] = pandas.Series(values, dtype=_TYPES[field.type])
        frame = geopandas.GeoDataFrame(table, geometry=list(layer.geometry), crs=epsg or crs_wkt)
        paths.append(folder / f"{layer.table.name}.parquet")
        frame.to_parquet(paths[-1], index=False, write_covering_bbox=True)
    return paths
