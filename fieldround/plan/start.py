"""The first sheets of a round, proposed from its photos alone.

In: a folder with photos/. Out: round.toml and pairs.csv with every guess explained, and the list
of what the crew must still fill in. What is there already is never overwritten.
"""

from __future__ import annotations

import csv
import io
import os
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np

from fieldround.place.baselines import gnss_baselines
from fieldround.place.crs import CrsError, round_grid
from fieldround.plan.overlap import Sketch, shared, sketch
from fieldround.plan.pairing import Group, group_photos, in_order
from fieldround.rounds.errors import PictureError, RoundError
from fieldround.rounds.model import Pair, Photo, Round, Settings
from fieldround.rounds.photos import read_photo

ENDINGS = (".jpg", ".jpeg", ".heic", ".heif", ".tif", ".tiff", ".png")


class StartError(RoundError):
    """There is nothing to start a round from."""


@dataclass(frozen=True)
class Start:
    """What was proposed.

    written, kept : names of the sheets written, and of those that were there and stay as they are
    groups        : the proposed pairs; names: of each
    left_over     : photo -> why it is in no pair
    to_fill_in    : sentences on what the crew must still enter
    """

    written: tuple[str, ...]
    kept: tuple[str, ...]
    names: tuple[str, ...]
    groups: tuple[Group, ...]
    left_over: Mapping[str, str]
    to_fill_in: tuple[str, ...]


def start_round(folder: Path, told: Callable[[int, int], None] = lambda done, of: None) -> Start:
    """Propose pairs for the photos of a folder and write the sheets that are missing.

    told   : called with comparisons made and comparisons in all, for a progress bar
    raises : StartError when there is no photo
    """
    folder = Path(folder)
    photos, left_over = _photos(folder)
    walk = in_order(photos)

    @cache
    def seen(i: int) -> Sketch:
        return sketch(walk[i].path)

    groups, alone = group_photos(walk, lambda i, j: shared(seen(i), seen(j)), told)
    left_over.update(alone)
    width = max(2, len(str(len(groups))))
    names = tuple(f"P{k:0{width}d}" for k in range(1, len(groups) + 1))
    written: list[str] = []
    kept: list[str] = []
    contents = {"round.toml": _toml(folder, walk), "pairs.csv": _pairs(names, groups)}
    for name, text in contents.items():
        (written if _write_new(folder / name, text) else kept).append(name)
    by_name = {photo.name: photo for photo in walk}
    return Start(
        tuple(written), tuple(kept), names, groups, left_over, _missing(names, groups, by_name)
    )


def _photos(folder: Path) -> tuple[list[Photo], dict[str, str]]:
    """Photos under photos/, and those that cannot be used with the reason."""
    inside = folder / "photos"
    if not folder.is_dir():
        raise StartError(f"there is no folder {folder}")
    if not inside.is_dir():
        loose = [p.name for p in folder.iterdir() if p.suffix.casefold() in ENDINGS]
        remedy = f"; move the {len(loose)} photos of {folder} into it" if loose else ""
        raise StartError(f"{folder} has no folder photos/{remedy}")
    found: list[Photo] = []
    unusable: dict[str, str] = {}
    for root, folders, files in os.walk(inside):
        folders.sort()
        for file in sorted(files):
            path = Path(root, file)
            if path.suffix.casefold() not in ENDINGS or file.startswith("."):
                continue
            name = path.relative_to(inside).as_posix()
            try:
                read = read_photo(path)
            except PictureError as wrong:
                unusable[name] = str(wrong)
                continue
            exif = read.exif
            found.append(
                Photo(
                    name, path, read.size_px, read.turn_deg, "",
                    taken_at=exif.taken_at, fix=exif.fix, direction_deg=exif.direction_deg,
                    direction_from=exif.direction_from, make=exif.make, model=exif.model,
                    digest=read.digest, orientation=read.orientation,
                )
            )  # fmt: skip
    if not found:
        raise StartError(f"{inside} has no photo that can be read (JPEG, HEIC, TIFF, PNG)")
    return found, unusable


def _toml(folder: Path, photos: Sequence[Photo]) -> str:
    days = sorted({at.date().isoformat() for photo in photos if (at := photo.taken_at)})
    title = folder.resolve().name.replace("\\", "").replace('"', "")
    if days:
        title += f", {days[0]}" if len(days) == 1 else f", {days[0]} to {days[-1]}"
    lines = [
        "# Proposed from the photos; change what is wrong. Every key is told in docs/sheets.md.",
        "[round]",
        f'title = "{title}"',
        'crew = ""',
        'place = ""',
    ]
    fixes = [photo.fix for photo in photos if photo.fix is not None]
    if fixes:
        try:
            grid = round_grid(
                None,
                np.array([fix.longitude_deg for fix in fixes]),
                np.array([fix.latitude_deg for fix in fixes]),
            )
            lines.append(f"# Without this key the results are in {grid.name}:")
            lines.append(f'# crs = "EPSG:{grid.epsg}"')
        except CrsError:
            pass
    else:
        lines.append("# No photo says where it was taken, so the results will have no map.")
    lines += ["", "[tape]", "# sd of a tape reading from camera to camera, metres", "sd_m = 0.005"]
    return "\n".join(lines) + "\n"


def _pairs(names: Sequence[str], groups: Sequence[Group]) -> str:
    three = any(len(group.photos) > 2 for group in groups)
    columns = ["pair", "photo_a", "photo_b", *(["photo_c"] if three else []), "tape_m", "note"]
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    for name, group in zip(names, groups, strict=True):
        photos = list(group.photos) + [""] * (2 + three - len(group.photos))
        writer.writerow([name, *photos, "", f"proposed: {group.why}"])
    return text.getvalue()


def _write_new(path: Path, text: str) -> bool:
    """Write a file that is not there yet; False when it is."""
    try:
        with path.open("x", encoding="utf-8", newline="") as file:
            file.write(text)
    except FileExistsError:
        return False
    except OSError as wrong:
        raise StartError(f"{path} cannot be written ({wrong.strerror or wrong})") from None
    return True


def _missing(
    names: Sequence[str], groups: Sequence[Group], photos: Mapping[str, Photo]
) -> tuple[str, ...]:
    """What the crew must still enter: the tapes that no precise fix replaces."""
    pairs = tuple(
        Pair(name, group.photos) for name, group in zip(names, groups, strict=True)
    )
    round_ = Round(Path(), Settings(), {}, photos, pairs, (), ())
    baselines = gnss_baselines(round_)
    lines = []
    for pair in pairs:
        a, b = pair.photos[:2]
        baseline = baselines.get(pair.pair)
        if baseline is not None and baseline.usable and not baseline.reasons:
            continue
        lines.append(f"pairs.csv, pair {pair.pair}: tape_m from the station of {a} to that of {b}")
    return tuple(lines)
