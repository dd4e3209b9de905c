"""The round's settings: what round.toml sets, the rest at its default.

In: round.toml. Out: `Settings`, or faults with the line and the nearest known key.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import fields
from pathlib import Path
from typing import Any

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import KINDS, Settings
from fieldround.rounds.sheets import nearest_hint
from fieldround.rounds.toml_text import TomlText, read_toml
from fieldround.rounds.track_settings import TrackSettings, track_keys

# Keys of [tracks] make a record of their own.
_TRACKS = "tracks."
_TRACK_FIELDS = {"utc_offset": "utc_offset_min"}


def default_settings() -> Settings:
    """The settings of a round without round.toml."""
    return _settings({})


def read_settings(path: Path, faults: list[Fault]) -> Settings:
    """Read round.toml (a missing file means all defaults); every wrong key is a fault."""
    if not path.exists():
        return default_settings()
    toml = read_toml(path, faults)
    if toml is None:
        return default_settings()
    found: dict[str, Any] = {}
    roundness = dict(Settings().roundness_pct)
    for section, keys in toml.values.items():
        if section not in SECTIONS or not isinstance(keys, dict):
            _unknown_section(toml, section, keys, faults)
            continue
        for key, value in keys.items():
            row = toml.row(section, key)
            if section == "roundness":
                _roundness(toml, row, key, value, roundness, faults)
            elif key not in SECTIONS[section]:
                faults.append(_unknown_key(toml, row, section, key, value))
            else:
                field, judge = SECTIONS[section][key]
                try:
                    found[field] = judge(value)
                except ValueError as wrong:
                    faults.append(Fault(toml.name, row, key, str(value), str(wrong)))
    found["roundness_pct"] = roundness
    tracks = {key: found.pop(key) for key in list(found) if key.startswith(_TRACKS)}
    found["tracks"] = TrackSettings(
        **{_TRACK_FIELDS.get(k, k): v for key, v in tracks.items() if (k := key[len(_TRACKS) :])}
    )
    return _settings(found)


def _settings(found: dict[str, Any]) -> Settings:
    # A plain dict, not a read-only view, so that a round can be sent to another process.
    found.setdefault("roundness_pct", dict(Settings().roundness_pct))
    assert set(found) <= {field.name for field in fields(Settings)}
    return Settings(**found)


def _text(value: Any) -> str:
    if not isinstance(value, str):
        raise ValueError("write text in double quotes")
    return value.strip()


def _kind(value: Any) -> str:
    kind = _text(value).casefold()
    if kind not in KINDS:
        raise ValueError(f"write one of {', '.join(KINDS)}{nearest_hint(kind, KINDS)}")
    return kind


def _crs(value: Any) -> str | None:
    """A projected CRS as text; an EPSG code may be a bare number."""
    if isinstance(value, int) and not isinstance(value, bool):
        value = f"EPSG:{value}"
    name = _text(value)
    if not name:
        return None
    import pyproj

    try:
        crs = pyproj.CRS.from_user_input(name)
    except pyproj.exceptions.CRSError:
        raise ValueError(
            'no CRS of this name is known; write an EPSG code such as "EPSG:32633", WKT or PROJ '
            "text, or leave the key out for the UTM zone of the round"
        ) from None
    if not crs.is_projected:
        raise ValueError("write a projected CRS (eastings and northings), not a geographic one")
    return name


def _any_crs(value: Any) -> str | None:
    """Any CRS of positions on earth, geographic or projected, as text."""
    if isinstance(value, int) and not isinstance(value, bool):
        value = f"EPSG:{value}"
    name = _text(value)
    if not name:
        return None
    import pyproj

    try:
        pyproj.CRS.from_user_input(name)
    except pyproj.exceptions.CRSError:
        raise ValueError(
            'no CRS of this name is known; write an EPSG code such as "EPSG:25833", WKT or PROJ '
            "text, or leave the key out for longitude and latitude on WGS 84"
        ) from None
    return name


def _positive(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise ValueError("write a finite number, without quotes and without its unit")
    if value <= 0:
        raise ValueError("write a number above 0")
    return float(value)


def _percent(value: Any) -> float:
    number = _positive(value)
    if number > 100:
        raise ValueError("write a percentage between 0 and 100")
    return number


def _count(value: Any) -> int:
    if isinstance(value, bool) or not isinstance(value, int) or value < 0:
        raise ValueError("write a whole number, 0 or more")
    return value


SECTIONS: dict[str, dict[str, tuple[str, Callable[[Any], Any]]]] = {
    "round": {
        "title": ("title", _text),
        "crew": ("crew", _text),
        "place": ("place", _text),
        "crs": ("crs", _crs),
        "kind": ("kind", _kind),
    },
    "marks": {"sd_px": ("mark_sd_px", _positive)},
    "tape": {"sd_m": ("tape_sd_m", _positive)},
    "tolerance": {
        "diameter_pct": ("tolerance_pct", _percent),
        "agreement": ("agreement_limit", _positive),
    },
    "roundness": {},
    "ties": {"most": ("found_ties_max", _count)},
    "tracks": {key: (_TRACKS + key, judge) for key, judge in track_keys(_any_crs).items()},
}


def _roundness(
    toml: TomlText,
    row: int | None,
    kind: str,
    value: Any,
    roundness: dict[str, float],
    faults: list[Fault],
) -> None:
    if kind not in KINDS:
        remedy = f"the keys of [roundness] are kinds: {', '.join(KINDS)}"
        faults.append(Fault(toml.name, row, kind, str(value), remedy + nearest_hint(kind, KINDS)))
        return
    try:
        roundness[kind] = 0.0 if value == 0 and not isinstance(value, bool) else _percent(value)
    except ValueError as wrong:
        faults.append(Fault(toml.name, row, kind, str(value), str(wrong)))


def _unknown_section(toml: TomlText, section: str, value: Any, faults: list[Fault]) -> None:
    if section in SECTIONS:
        remedy = f"write this once, as a section [{section}] with its keys below it"
    elif isinstance(value, dict | list):
        remedy = f"the sections are {', '.join(f'[{name}]' for name in SECTIONS)}"
        remedy += nearest_hint(section, SECTIONS)
    else:
        row = toml.row("", section)
        faults.append(_unknown_key(toml, row, "", section, value))
        return
    faults.append(Fault(toml.name, toml.row(section), section, None, remedy))


def _unknown_key(toml: TomlText, row: int | None, section: str, key: str, value: Any) -> Fault:
    homes = [name for name, keys in SECTIONS.items() if key in keys]
    if homes:
        remedy = f"this key belongs under [{homes[0]}]"
    elif section:
        known = SECTIONS[section]
        remedy = f"the keys of [{section}] are {', '.join(known)}{nearest_hint(key, known)}"
    else:
        every = [f"{name}.{key_name}" for name, keys in SECTIONS.items() for key_name in keys]
        remedy = f"no such key; the keys are {', '.join(every)}"
    return Fault(toml.name, row, key, str(value), remedy)
