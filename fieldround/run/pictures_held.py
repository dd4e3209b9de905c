"""Decoded pictures of a round, each held for as long as there is room.

In: a `Round`. Out: upright pictures by photo name; the ones not asked for longest are dropped.
"""

from __future__ import annotations

from collections import OrderedDict
from collections.abc import Callable
from threading import Lock

import numpy as np

from fieldround.rounds.errors import PictureError
from fieldround.rounds.model import Photo, Round
from fieldround.rounds.pictures import load_picture

# Room for two pairs of 48 megapixel photos, or a dozen of 12 megapixels.
ROOM_BYTES = 600_000_000


class PicturesHeld:
    """Pictures by name; safe to ask from several threads, each photo is decoded by one of them."""

    def __init__(
        self,
        round_: Round,
        room_bytes: int = ROOM_BYTES,
        load: Callable[[Photo], np.ndarray] = load_picture,
    ) -> None:
        self._photos = round_.photos
        self._room_bytes = room_bytes
        self._load = load
        self._held: OrderedDict[str, np.ndarray] = OrderedDict()
        self._lock = Lock()
        self._locks = {name: Lock() for name in round_.photos}

    def __call__(self, name: str) -> np.ndarray:
        """The upright picture of a photo, (h, w, 3) uint8 RGB.

        raises : PictureError when the photo cannot be decoded
        """
        if name not in self._photos:
            raise PictureError(f"photo {name} was not read")
        with self._locks[name]:
            with self._lock:
                if name in self._held:
                    self._held.move_to_end(name)
                    return self._held[name]
            picture = self._load(self._photos[name])
            picture.flags.writeable = False
            with self._lock:
                self._held[name] = picture
                held = sum(kept.nbytes for kept in self._held.values())
                while held > self._room_bytes and len(self._held) > 1:
                    held -= self._held.popitem(last=False)[1].nbytes
            return picture
