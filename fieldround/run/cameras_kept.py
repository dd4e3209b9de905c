"""Cameras that a round found for itself, taken along as cards for the next round.

In: run.json of a round's results. Out: `Camera`s and their TOML text, as cameras.toml holds them.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import fields
from pathlib import Path
from typing import Any

from fieldround.rounds.cards import read_cards, write_card
from fieldround.rounds.errors import Fault, RoundError, SheetsError
from fieldround.rounds.model import Camera


class KeepError(RoundError):
    """A card cannot be kept; the text says why and what to do."""


def found_cameras(out_dir: Path) -> dict[str, Camera]:
    """Cameras by name as the last run found them.

    raises : KeepError when there is no run, or its file cannot be read
    """
    path = out_dir / "run.json"
    try:
        facts = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise KeepError(f"{path} is not there; run `fieldround run` on the round first") from None
    except (OSError, ValueError) as wrong:
        raise KeepError(f"{path} cannot be read ({wrong}); run the round again") from None
    try:
        entries = facts["cameras"]
        return {
            name: _camera(entry["found"])
            for name, entry in entries.items()
            if entry.get("found") is not None
        }
    except (KeyError, TypeError, AttributeError) as wrong:
        raise KeepError(f"{path} is not as this program writes it ({wrong!r})") from None


def _camera(values: Mapping[str, Any]) -> Camera:
    known = {field.name for field in fields(Camera)}
    given: dict[str, Any] = {
        name: tuple(value) if isinstance(value, list) else value
        for name, value in values.items()
        if name in known
    }
    return Camera(**given)


def cards_text(cameras: Sequence[Camera]) -> str:
    """The cards as cameras.toml holds them, each with how well its focal length is known."""
    return "\n".join(_card_text(camera) for camera in cameras)


def _card_text(camera: Camera) -> str:
    relative = 100.0 * camera.focal_sd_px / camera.focal_px[0]
    return f"# found by a round of photos: focal length known to {relative:.2f} %\n" + write_card(
        camera
    )


def add_cards(path: Path, cameras: Sequence[Camera]) -> None:
    """Add cards at the end of a cameras.toml, which is made if it is not there.

    raises : KeepError when the file is wrong already or has a card of the same name
    """
    faults: list[Fault] = []
    there = read_cards(path, faults)
    if faults:
        raise SheetsError(faults)
    names = {card.camera.name for card in there}
    for camera in cameras:
        if camera.name in names:
            raise KeepError(
                f"{path} has a card named {camera.name!r} already; delete that one, or keep this "
                "one under another name with --name"
            )
    before = path.read_text(encoding="utf-8-sig") if path.exists() else ""
    gap = "" if not before else "\n" if before.endswith("\n") else "\n\n"
    beside = path.with_name(f".{path.name}.new")
    beside.write_text(before + gap + cards_text(cameras), encoding="utf-8", newline="\n")
    beside.replace(path)
