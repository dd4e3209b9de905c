"""What both pages are made of: their templates, escaped text, figures in words.

In: values. Out: HTML-safe strings. Everything that came from a sheet, a photo or a file name is
escaped here or by the templates; nothing is trusted because it looks like plain text.
"""

from __future__ import annotations

import base64
import functools
import json
import math
from importlib import resources
from typing import Any

import jinja2

from fieldround.deliver.crops import Crop, Line


@functools.cache
def environment(package: str = "fieldround.deliver") -> jinja2.Environment:
    """The templates of a package; every expression is escaped unless it is marked safe."""
    env = jinja2.Environment(
        loader=jinja2.PackageLoader(package, "templates"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    env.filters.update(number=number, metres=metres, interval=interval, data_address=data_address)
    env.globals.update(path=path)
    return env


def part(name: str) -> str:
    """The text of a style sheet or script that is part of this package."""
    return resources.files("fieldround.deliver").joinpath("templates", name).read_text("utf-8")


def script_json(content: Any) -> str:
    """JSON that can stand inside a <script> element whatever the strings in it say."""
    text = json.dumps(content, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for sign, escaped in (("<", "\\u003c"), (">", "\\u003e"), ("&", "\\u0026")):
        text = text.replace(sign, escaped)
    return text.replace("\u2028", "\\u2028").replace("\u2029", "\\u2029")


def number(value: float | None, digits: int = 2, missing: str = "–") -> str:
    """A number with a fixed count of decimals, or a dash; -0 is 0."""
    if value is None or not math.isfinite(value):
        return missing
    return f"{round(value, digits) + 0.0:.{digits}f}".replace("-", "−")


def interval(low: float | None, high: float | None, digits: int = 3) -> str:
    """Both ends of an interval in metres; an end that was not found is open."""
    if low is None and high is None:
        return "–"
    ends = ("open" if end is None else number(end, digits) for end in (low, high))
    return " … ".join(ends)


def metres(value: float | None, digits: int = 3) -> str:
    """A length with its unit, or a dash."""
    return number(value, digits) + ("" if value is None else " m")


def data_address(crop: Crop) -> str:
    """The crop as an address that needs no file and no network."""
    return "data:image/jpeg;base64," + base64.b64encode(crop.jpeg).decode("ascii")


def path(line: Line) -> str:
    """A polyline as SVG path data."""
    return "" if len(line) < 2 else "M" + "L".join(f"{x:g} {y:g}" for x, y in line)
