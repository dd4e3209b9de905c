"""Camera cards: read from cameras.toml, matched to photos, written back.

In: cameras.toml, and the EXIF facts and size of a photo. Out: the `Camera` that holds for the
photo's landscape picture; faults with their line; TOML text of a card.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from fieldround.rounds.errors import Fault
from fieldround.rounds.exif import ExifFacts
from fieldround.rounds.exif_cards import CENTRE_SD, DISTORTION_SD
from fieldround.rounds.model import Camera
from fieldround.rounds.sheets import nearest_hint
from fieldround.rounds.toml_text import TomlText, read_toml

# Focal lengths in millimetres are rounded by the maker: within 2 % they are the same zoom.
FOCAL_MATCH = 0.02
# sd of the focal length of a card that does not state one.
FOCAL_SD = 0.01

_TEXT_KEYS = ("name", "make", "model", "lens")
KEYS = (
    *_TEXT_KEYS, "focal_mm", "digital_zoom", "size_px", "focal_px", "focal_sd_px", "centre_px",
    "centre_sd_px", "distortion", "distortion_sd", "ratio_sd",
)  # fmt: skip


@dataclass(frozen=True)
class Card:
    """A card of cameras.toml and the line on which it begins."""

    camera: Camera
    row: int | None


class CardMisfitError(Exception):
    """A card is meant for the photo but cannot hold for it; the text says why."""


class CardsAmbiguousError(Exception):
    """Two cards fit a photo equally well; `card` is the later one, the text is the remedy."""

    def __init__(self, card: Card, remedy: str) -> None:
        super().__init__(remedy)
        self.card = card


def read_cards(path: Path, faults: list[Fault]) -> tuple[Card, ...]:
    """Read cameras.toml; a missing file means no cards, every wrong value is a fault."""
    if not path.exists():
        return ()
    toml = read_toml(path, faults)
    if toml is None:
        return ()
    for section in toml.values:
        if section != "camera":
            row = toml.row(section)
            remedy = "the file holds [[camera]] sections only"
            remedy += nearest_hint(section, ["camera"])
            faults.append(Fault(toml.name, row, section, None, remedy))
    tables = toml.values.get("camera", [])
    if not isinstance(tables, list) or not all(isinstance(table, dict) for table in tables):
        remedy = "write the section as [[camera]], with double brackets"
        faults.append(Fault(toml.name, toml.row("camera"), "camera", None, remedy))
        return ()
    cards: list[Card] = []
    for which, table in enumerate(tables):
        camera = _CardReader(toml, which, table, faults).camera()
        if camera is None:
            continue
        if camera.name in [card.camera.name for card in cards]:
            remedy = "two cards have this name; give each its own"
            row = toml.row("camera", "name", which)
            faults.append(Fault(toml.name, row, "name", camera.name, remedy))
            continue
        cards.append(Card(camera, toml.row("camera", "", which)))
    return tuple(cards)


def match_card(
    cards: Sequence[Card], facts: ExifFacts, landscape_px: tuple[int, int], upright: bool
) -> tuple[Camera, bool, str] | None:
    """The card that holds for a photo, for exactly its size; None when no card is meant for it.

    landscape_px : the photo's longer and shorter side
    upright      : the photo is a portrait as stored, so a portrait card of its very size holds
    returns      : camera, whether it is that portrait card, and a note ('' if nothing to say)
    raises       : CardMisfitError, CardsAmbiguousError

    The card with the most of make, model, lens and focal_mm wins, then the one whose size fits
    best. A smaller copy of the whole picture scales the card: x' = (x + 0.5) s - 0.5.
    """
    ranked = []
    for card in cards:
        fields = _fields_met(card.camera, facts)
        if fields is not None:
            portrait = upright and card.camera.size_px == landscape_px[::-1]
            fit = 2 if portrait or card.camera.size_px == landscape_px else 0
            fit = fit or int(_is_smaller_copy(card.camera.size_px, landscape_px))
            if fit or fields:
                ranked.append(((fields, fit), card, portrait))
    if not ranked:
        return None
    best = max(rank for rank, _, _ in ranked)
    chosen = [(card, portrait) for rank, card, portrait in ranked if rank == best]
    if len(chosen) > 1:
        first, last = chosen[0][0], chosen[-1][0]
        raise CardsAmbiguousError(
            last,
            f"the card {first.camera.name!r} fits the same photos; add make, model, lens or "
            "focal_mm to tell them apart, or delete one",
        )
    (card, portrait) = chosen[0]
    camera = card.camera
    if best[1] == 2:
        return camera, portrait, ""
    if best[1] == 0:
        raise CardMisfitError(
            f"its camera card {camera.name!r} is for pictures of {camera.size_px[0]} x "
            f"{camera.size_px[1]} pixels and this one, {landscape_px[0]} x {landscape_px[1]}, is "
            "no smaller or larger copy of the whole of such a picture; add a card of this size"
        )
    scaled = scale_card(camera, landscape_px)
    note = (
        f"the camera card {camera.name!r} of {camera.size_px[0]} x {camera.size_px[1]} pixels was "
        f"scaled to {landscape_px[0]} x {landscape_px[1]}, taking the photo for a resized copy of "
        "the whole picture"
    )
    return scaled, False, note


def scale_card(camera: Camera, size_px: tuple[int, int]) -> Camera:
    """The card of a resized copy of the picture; (0, 0) stays the centre of the first pixel."""
    across = size_px[0] / camera.size_px[0]
    down = size_px[1] / camera.size_px[1]
    return replace(
        camera,
        name=f"{camera.name} at {size_px[0]} x {size_px[1]}",
        size_px=size_px,
        focal_px=(camera.focal_px[0] * across, camera.focal_px[1] * down),
        focal_sd_px=camera.focal_sd_px * across,
        centre_px=(
            (camera.centre_px[0] + 0.5) * across - 0.5,
            (camera.centre_px[1] + 0.5) * down - 0.5,
        ),
        centre_sd_px=camera.centre_sd_px * across,
    )


def write_card(camera: Camera) -> str:
    """The TOML text of one card, as `read_cards` reads it."""
    lines = ["[[camera]]"]
    for key in _TEXT_KEYS:
        value = getattr(camera, key)
        if value is not None:
            lines.append(f"{key} = {_quoted(value)}")
    for key in ("focal_mm", "digital_zoom"):
        value = getattr(camera, key)
        if value is not None:
            lines.append(f"{key} = {float(value)!r}")
    lines.append(f"size_px = {list(camera.size_px)!r}")
    for key in ("focal_px", "focal_sd_px", "centre_px", "centre_sd_px", "distortion",
                "distortion_sd", "ratio_sd"):  # fmt: skip
        value = getattr(camera, key)
        numbers = [float(part) for part in value] if isinstance(value, tuple) else float(value)
        if not all(math.isfinite(part) for part in _flat(numbers)):
            raise ValueError(f"the card {camera.name!r} has a {key} that is not finite")
        if key != "ratio_sd" or numbers:
            lines.append(f"{key} = {numbers!r}")
    return "\n".join(lines) + "\n"


def _flat(numbers: float | list[float]) -> list[float]:
    return numbers if isinstance(numbers, list) else [numbers]


def _quoted(value: str) -> str:
    """A TOML basic string."""
    letters = []
    for letter in value:
        if letter in '"\\':
            letters.append("\\" + letter)
        elif ord(letter) < 0x20 or ord(letter) == 0x7F:
            letters.append(f"\\u{ord(letter):04x}")
        else:
            letters.append(letter)
    return '"' + "".join(letters) + '"'


def _fields_met(camera: Camera, facts: ExifFacts) -> int | None:
    """How many of the card's conditions the photo meets, None when it fails one."""
    if (camera.digital_zoom or 1.0) != (facts.digital_zoom or 1.0):
        return None
    met = 0
    for wanted, found in (
        (camera.make, facts.make),
        (camera.model, facts.model),
        (camera.lens, facts.lens),
    ):
        if wanted is None:
            continue
        if found is None or _plain(wanted) != _plain(found):
            return None
        met += 1
    if camera.focal_mm is not None:
        if facts.focal_mm is None or abs(facts.focal_mm / camera.focal_mm - 1.0) > FOCAL_MATCH:
            return None
        met += 1
    return met


def _plain(text: str) -> str:
    return " ".join(text.casefold().split())


def _is_smaller_copy(card_px: tuple[int, int], photo_px: tuple[int, int]) -> bool:
    """True when both sides have one scale, but for the rounding of the shorter to whole pixels."""
    return abs(photo_px[1] - card_px[1] * photo_px[0] / card_px[0]) < 1.0


class _CardReader:
    """Reads one [[camera]] table and collects its faults."""

    def __init__(
        self, toml: TomlText, which: int, table: dict[str, Any], faults: list[Fault]
    ) -> None:
        self.toml, self.which, self.table, self.faults = toml, which, table, faults
        self.wrong = False

    def fault(self, key: str, remedy: str) -> None:
        """Add a fault at the line of a key, or of the card when the key is missing."""
        row = self.toml.row("camera", key, self.which)
        value = str(self.table[key]) if key in self.table else None
        self.faults.append(Fault(self.toml.name, row, key, value, remedy))
        self.wrong = True

    def camera(self) -> Camera | None:
        """The card, None when anything in it is wrong."""
        for key in self.table:
            if key not in KEYS:
                remedy = f"the keys of a card are {', '.join(KEYS)}{nearest_hint(key, KEYS)}"
                self.fault(key, remedy)
        for key in ("size_px", "focal_px"):
            if key not in self.table:
                self.fault(key, "the card lacks this key; add it")
        texts = {key: self._text(key) for key in _TEXT_KEYS}
        size = self._numbers("size_px", (2,), above=0.0) or [1.0, 1.0]
        if any(side != int(side) for side in size):
            self.fault("size_px", "write whole pixels, [width, height]")
        width, height = int(size[0]), int(size[1])
        focal = self._numbers("focal_px", (1, 2), above=0.0) or [1.0]
        focal = focal * 2 if len(focal) == 1 else focal
        centre = self._numbers("centre_px", (2,))
        middle = ((width - 1) / 2.0, (height - 1) / 2.0)
        if centre and not (0 <= centre[0] < width and 0 <= centre[1] < height):
            self.fault("centre_px", f"the centre must lie inside the {width} x {height} picture")
        distortion = self._numbers("distortion", (4, 5)) or [0.0] * 5
        distortion_sd = self._numbers("distortion_sd", (4, 5), least=0.0) or list(DISTORTION_SD)
        camera = Camera(
            name=texts["name"] or f"card {self.which + 1}",
            size_px=(width, height),
            focal_px=(focal[0], focal[1]),
            focal_sd_px=self._number("focal_sd_px") or focal[0] * FOCAL_SD,
            centre_px=(centre[0], centre[1]) if centre else middle,
            centre_sd_px=self._number("centre_sd_px") or max(width, height) * CENTRE_SD,
            distortion=_five(distortion),
            distortion_sd=_five(distortion_sd),
            make=texts["make"],
            model=texts["model"],
            lens=texts["lens"],
            focal_mm=self._number("focal_mm"),
            ratio_sd=(self._numbers("ratio_sd", (1,), least=0.0) or [0.0])[0],
            digital_zoom=self._number("digital_zoom"),
        )
        return None if self.wrong else camera

    def _text(self, key: str) -> str | None:
        value = self.table.get(key)
        if value is not None and not isinstance(value, str):
            self.fault(key, "write text in double quotes")
            return None
        return value.strip() or None if value else None

    def _number(self, key: str) -> float | None:
        found = self._numbers(key, (1,), above=0.0)
        return found[0] if found else None

    def _numbers(
        self,
        key: str,
        counts: tuple[int, ...],
        above: float | None = None,
        least: float | None = None,
    ) -> list[float] | None:
        """A number (where one is enough) or a list of numbers, None if absent or wrong."""
        value = self.table.get(key)
        if value is None:
            return None
        values = value if isinstance(value, list) else [value]
        wanted = "one number" if counts == (1,) else f"{' or '.join(map(str, counts))} numbers"
        if (
            len(values) not in counts
            or (isinstance(value, list) and counts == (1,))
            or not all(isinstance(part, int | float) for part in values)
            or any(isinstance(part, bool) or not math.isfinite(part) for part in values)
        ):
            self.fault(key, f"write {wanted}, finite and without quotes")
            return None
        if above is not None and not all(part > above for part in values):
            self.fault(key, f"write {wanted} above {above:g}")
            return None
        if least is not None and not all(part >= least for part in values):
            self.fault(key, f"write {wanted}, {least:g} or more")
            return None
        return [float(part) for part in values]


def _five(values: list[float]) -> tuple[float, float, float, float, float]:
    k1, k2, p1, p2, k3 = [*values, 0.0][:5]
    return k1, k2, p1, p2, k3
