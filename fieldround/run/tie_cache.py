"""Ties kept from run to run, so that a second run takes seconds.

In: a pair's photos, settings, a folder. Out: `Ties` found before under the same key, or none. The
key is made of the photos' contents, everything the search depends on and the search's version;
files are written whole or not at all, and a damaged one is found again.
"""

from __future__ import annotations

import contextlib
import hashlib
import os
import zipfile
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from fieldround.rounds.model import Camera, Photo
from fieldround.vision.ties import Ties

# Raised whenever the search would find other ties in the same pictures.
SEARCH_VERSION = 1


def tie_key(photos: Sequence[Photo], cameras: Sequence[Camera], most: int) -> str:
    """Name under which a pair's ties are kept, 32 hexadecimal digits."""
    parts = [f"search {SEARCH_VERSION}", f"most {most}"]
    for photo, camera in zip(photos, cameras, strict=True):
        parts.append(f"{photo.digest} {photo.turn_deg} {photo.size_px}")
        parts.append(f"{camera.focal_px} {camera.centre_px} {camera.distortion}")
    return hashlib.sha256("\n".join(parts).encode()).hexdigest()[:32]


def kept_ties(folder: Path, key: str) -> Ties | None:
    """Ties kept under a key, None when there are none or the file is damaged."""
    path = folder / f"{key}.npz"
    try:
        with np.load(path, allow_pickle=False) as held:
            xy_px, sd_px = held["xy_px"], held["sd_px"]
            found, notes = int(held["found"]), tuple(str(note) for note in held["notes"])
    except (OSError, ValueError, KeyError, zipfile.BadZipFile, EOFError):
        return None
    if xy_px.ndim != 3 or xy_px.shape[2] != 2 or sd_px.shape != (len(xy_px),):
        return None
    return Ties(xy_px, sd_px, found, notes)


def keep_ties(folder: Path, key: str, ties: Ties) -> None:
    """Keep ties under a key; a folder that cannot be written costs only the next run's time."""
    target = folder / f"{key}.npz"
    partial = folder / f".{key}.{os.getpid()}.npz"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with partial.open("wb") as file:
            np.savez(
                file,
                xy_px=ties.xy_px,
                sd_px=ties.sd_px,
                found=np.array(ties.found),
                notes=np.array(ties.notes, dtype=str),
            )
        partial.replace(target)
    except OSError:
        with contextlib.suppress(OSError):
            partial.unlink(missing_ok=True)
