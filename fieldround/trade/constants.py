"""Constants of the lists, each with its source, in a TOML file anyone can edit.

In: lists.toml of the package and, over it, lists.toml of the round. Out: `Constants`, which also
says which of them a list used.
"""

from __future__ import annotations

import math
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from importlib import resources
from pathlib import Path
from typing import Any

from fieldround.rounds.errors import Fault, SheetsError

FILE = "lists.toml"
# Entries under these names are free: any key may be added.
_FREE = ("forestry.volume_by_species",)
_CHOICES: dict[str, tuple[Any, ...]] = {
    "lists.verdicts": ("accept", "remeasure"),
    "forestry.class_rule": ("nearest", "down"),
    "municipal.series": (1, 2, 3),
}
_POSITIVE = ("forestry.class_width_cm", "tanks.level_step_pct")


@dataclass(frozen=True)
class Constant:
    """One value with its unit and where it comes from."""

    key: str
    value: Any
    unit: str
    source: str


class Constants:
    """All constants by key (`forestry.class_width_cm`)."""

    def __init__(self, by_key: Mapping[str, Constant]) -> None:
        self._by_key = dict(by_key)

    def __getitem__(self, key: str) -> Constant:
        return self._by_key[key]

    def number(self, key: str) -> float:
        """A constant that is a number."""
        return float(self[key].value)

    def under(self, prefix: str) -> dict[str, Constant]:
        """Constants whose key starts with `prefix.`, by the rest of the key."""
        return {
            key.removeprefix(f"{prefix}."): constant
            for key, constant in self._by_key.items()
            if key.startswith(f"{prefix}.")
        }

    def of(self, *sections: str) -> list[Constant]:
        """The constants of some sections, in their order."""
        return [c for key, c in self._by_key.items() if key.split(".")[0] in sections]


def load_constants(folder: Path | None = None) -> Constants:
    """The package's constants, with those of the round's lists.toml in their place.

    raises : SheetsError with every fault of the round's file
    """
    text = resources.files("fieldround.trade").joinpath(FILE).read_text("utf-8")
    by_key = {c.key: c for c in _entries(tomllib.loads(text))}
    path = None if folder is None else folder / FILE
    if path is None or not path.exists():
        return Constants(by_key)
    try:
        given = tomllib.loads(path.read_text("utf-8-sig"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise SheetsError([Fault(FILE, None, None, None, f"is not TOML: {error}")]) from error
    faults = []
    tables = frozenset(key for key, c in by_key.items() if isinstance(c.value, dict))
    for constant in _entries(given, tables):
        default = by_key.get(constant.key)
        free = constant.key.startswith(tuple(f"{name}." for name in _FREE))
        if default is None and not free:
            known = ", ".join(by_key)
            faults.append(Fault(FILE, None, constant.key, None, f"is not known; known are {known}"))
            continue
        fault = None if default is None else _unfit(constant, default)
        if fault is not None:
            faults.append(fault)
            continue
        unit = constant.unit or ("" if default is None else default.unit)
        by_key[constant.key] = replace(
            constant, unit=unit, source=constant.source or "set by the user"
        )
    if faults:
        raise SheetsError(faults)
    return Constants(by_key)


def _entries(tree: Mapping[str, Any], tables: frozenset[str] = frozenset()) -> list[Constant]:
    """Constants of a TOML tree: tables with a `value`, or plain values.

    tables : keys whose plain value may itself be a table (`top_classes = { 1 = 68.6 }`)
    """
    found: list[Constant] = []

    def walk(key: str, node: Any) -> None:
        if isinstance(node, Mapping) and "value" in node:
            found.append(
                Constant(key, node["value"], str(node.get("unit", "")), str(node.get("source", "")))
            )
        elif isinstance(node, Mapping) and key.count(".") < 2 and key not in tables:
            for name, child in node.items():
                walk(f"{key}.{name}" if key else str(name), child)
        else:
            found.append(Constant(key, node, "", ""))

    walk("", tree)
    return found


def _unfit(constant: Constant, default: Constant) -> Fault | None:
    """What is wrong with a value that takes the place of a default of the same key."""
    value, model = constant.value, default.value
    remedy = None
    if constant.key in _CHOICES:
        given = value if isinstance(value, list) else [value]
        allowed = _CHOICES[constant.key]
        if isinstance(model, list) and not isinstance(value, list):
            remedy = "must be a list in square brackets"
        elif not given or any(v not in allowed for v in given):
            remedy = f"must be of {', '.join(map(repr, allowed))}"
    elif isinstance(model, str):
        remedy = None if isinstance(value, str) else "must be text in quotes"
    elif isinstance(model, list):
        fits = isinstance(value, list) and bool(value) and all(map(_is_number, value))
        remedy = None if fits else "must be a list of numbers in square brackets"
    elif isinstance(model, dict):
        fits = isinstance(value, dict) and bool(value) and all(map(_is_number, value.values()))
        remedy = None if fits else "must be a table of numbers: { name = number, … }"
    elif not _is_number(value):
        remedy = "must be a number, zero or more"
    elif constant.key in _POSITIVE and not value > 0:
        remedy = "must be more than zero"
    return None if remedy is None else Fault(FILE, None, constant.key, repr(value), remedy)


def _is_number(value: Any) -> bool:
    number = isinstance(value, int | float) and not isinstance(value, bool)
    return number and math.isfinite(value) and value >= 0
