"""Ties of every pair: taken from an earlier run where they are kept, else found in the pictures.

In: a `Round` and its pictures. Out: `Ties` by pair, and the photos that could not be decoded.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from fieldround.geometry.camera import rays, to_card
from fieldround.rounds.errors import PictureError
from fieldround.rounds.model import Pair, Photo, Round
from fieldround.run.progress import Progress
from fieldround.vision.ties import Ties, find_ties

# OpenCV lets go of the interpreter, so two pairs at a time use two cores.
WORKERS = 2


@dataclass(frozen=True)
class Tied:
    """Ties by pair; lost : photo -> sentence, for photos whose picture cannot be decoded."""

    ties: dict[str, Ties]
    lost: dict[str, str]
