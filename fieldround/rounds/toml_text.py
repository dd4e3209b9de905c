"""A TOML file together with the line on which each key stands.

In: round.toml or cameras.toml. Out: its values and, for a fault, the line of a section or key.
"""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from fieldround.rounds.errors import Fault
from fieldround.rounds.sheets import read_text

_HEADER = re.compile(r"\s*(\[\[?)\s*([^\[\]]+?)\s*\]\]?\s*(#.*)?")
_KEY = re.compile(r"\s*(?:([A-Za-z0-9_-]+)\s*\.\s*)?(\"[^\"]*\"|'[^']*'|[A-Za-z0-9_-]+)\s*=")
_AT_LINE = re.compile(r"\s*\(at line (\d+), column \d+\)")


@dataclass(frozen=True)
class TomlText:
    """Values of a TOML file; `rows` maps (section, which of that name, key or '') to its line."""

    name: str
    values: dict[str, Any]
    rows: dict[tuple[str, int, str], int]

    def row(self, section: str, key: str = "", which: int = 0) -> int | None:
        """The line of a key, else of its section (or of a key of that name), else None."""
        places = ((section, which, key), (section, which, ""), ("", 0, section))
        return next((self.rows[place] for place in places if place in self.rows), None)


def read_toml(path: Path, faults: list[Fault]) -> TomlText | None:
    """Read a TOML file; None with a fault (and its line) when it is not one."""
    text = read_text(path, faults)
    if text is None:
        return None
    try:
        values = tomllib.loads(text)
    except tomllib.TOMLDecodeError as problem:
        said = str(problem)
        at_line = _AT_LINE.search(said)
        row = int(at_line[1]) if at_line else len(text.splitlines())
        lines = text.splitlines()
        seen = lines[row - 1].strip()[:80] if 0 < row <= len(lines) else None
        reason = _AT_LINE.sub("", said).replace(" (at end of document)", "")
        remedy = f"this is not TOML ({reason[:1].lower()}{reason[1:]}); write key = value"
        faults.append(Fault(path.name, row, None, seen, remedy))
        return None
    return TomlText(path.name, values, _rows(text))


def _rows(text: str) -> dict[tuple[str, int, str], int]:
    rows: dict[tuple[str, int, str], int] = {}
    section, which = "", 0
    for row, line in enumerate(text.splitlines(), start=1):
        if header := _HEADER.fullmatch(line):
            section = header[2].strip("\"'")
            which = 0
            while (section, which, "") in rows:
                which += 1
            rows[(section, which, "")] = row
        elif key := _KEY.match(line):
            inside = (key[1], 0) if key[1] and not section else (section, which)
            rows.setdefault((*inside, key[2].strip("\"'")), row)
    return rows
