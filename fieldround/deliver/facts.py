"""run.json: what a later reader must know to believe or repeat the run.

In: a `RoundResult`. Out: versions, settings, camera values, counts, notes, as plain JSON.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import is_dataclass
from pathlib import Path
from typing import Any

import numpy as np

from fieldround import __version__
from fieldround.deliver.times import time_span
from fieldround.rounds.model import KINDS
from fieldround.solve.results import VERDICTS, RoundResult


def write_facts(path: Path, result: RoundResult) -> None:
    """Write run.json; what the run itself says (versions, seconds) is merged in by key."""
    text = json.dumps(facts(result), ensure_ascii=False, indent=2, allow_nan=False)
    path.write_text(text + "\n", encoding="utf-8", newline="\n")


def facts(result: RoundResult) -> dict[str, Any]:
    """The content of run.json."""
    verdicts = [found.verdict for found in result.objects]
    kinds = [found.kind for found in result.objects]
    first, last = time_span(result)
    placement = result.placement
    own: dict[str, Any] = {
        "program": "fieldround",
        "version": __version__,
        "settings": result.round.settings,
        "counts": {
            "objects": len(verdicts),
            "by_verdict": {verdict: verdicts.count(verdict) for verdict in VERDICTS},
            "by_kind": {kind: kinds.count(kind) for kind in KINDS if kind in kinds},
            "pairs": len(result.pairs),
            "photos": len(result.round.photos),
            "lost_photos": len(result.round.lost_photos),
            "checks": len(result.checks),
        },
        "photos_from": first,
        "photos_to": last,
        "crs": None
        if placement is None
        else {
            "name": placement.crs_name,
            "epsg": placement.epsg,
            "convergence_deg": placement.convergence_deg,
            "scale_factor": placement.scale_factor,
        },
        "cameras": {
            name: {"card": card, "found": result.cameras_found.get(name)}
            for name, card in result.round.cameras.items()
        },
        "lost_photos": result.round.lost_photos,
        "notes": [*result.round.notes, *(() if placement is None else placement.notes)],
    }
    merged = {**own, **result.run_facts}
    for key, value in own.items():
        given = result.run_facts.get(key)
        if isinstance(value, Mapping) and isinstance(given, Mapping):
            merged[key] = {**value, **given}
    return {str(key): plain(value) for key, value in merged.items()}


def plain(value: Any) -> Any:
    """A value as JSON can hold it: dataclasses as objects, arrays as lists, NaN as null."""
    if is_dataclass(value) and not isinstance(value, type):
        return {name: plain(v) for name, v in vars(value).items()}
    if isinstance(value, Mapping):
        return {str(key): plain(v) for key, v in value.items()}
    if isinstance(value, list | tuple | set | frozenset):
        items = sorted(value, key=str) if isinstance(value, set | frozenset) else value
        return [plain(v) for v in items]
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, np.generic):
        return plain(value.item())
    if value is None or isinstance(value, bool | int | str):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    return str(value)
