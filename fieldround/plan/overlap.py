"""How much of the same scene two photos show, judged quickly on small copies.

In: photo files. Out: `Sketch`es of features, and for two of them the points they share.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from fieldround.rounds.errors import PictureError
from fieldround.rounds.picture_files import is_jpeg, open_picture

# Longer side of the small copy, features kept, and the ratio test (D. Lowe, IJCV 2004, 7.1).
_SIDE_PX, _MOST, _RATIO = 800, 1200, 0.8
# Distance from the epipolar line in the small copy.
_NEAR_PX = 1.5
FEWEST = 8


@dataclass(frozen=True)
class Sketch:
    """Features of a small copy.

    xy : (n, 2) in shares of the longer side; descriptors : (n, 128) uint8
    """

    xy: np.ndarray
    descriptors: np.ndarray


@dataclass(frozen=True)
class Shared:
    """What two photos share.

    points  : matches that agree on one epipolar geometry
    matches : features that look alike, whether they agree or not
    moved   : median distance between matched points, in shares of the longer side
    """

    points: int
    matches: int
    moved: float


def sketch(path: Path) -> Sketch:
    """Features of one photo; none for a file that cannot be decoded."""
    import cv2

    nothing = Sketch(np.zeros((0, 2)), np.zeros((0, 128), dtype=np.uint8))
    try:
        grey = _small(path)
    except (OSError, PictureError, ValueError, cv2.error):
        return nothing
    sift: Any = cv2.SIFT_create(nfeatures=_MOST)  # type: ignore[attr-defined]
    points, descriptors = sift.detectAndCompute(grey, None)
    if descriptors is None or not len(points):
        return nothing
    xy = np.array([point.pt for point in points]) / max(grey.shape)
    # The descriptors are whole numbers up to 255: a quarter of the room.
    return Sketch(xy, descriptors.astype(np.uint8))


def shared(first: Sketch, second: Sketch) -> Shared:
    """Points of the same scene in both, by mutual nearest features and one epipolar geometry."""
    import cv2

    none = Shared(0, 0, 0.0)
    if min(len(first.xy), len(second.xy)) < FEWEST:
        return none
    matcher = cv2.BFMatcher(cv2.NORM_L2)
    one, two = first.descriptors.astype(np.float32), second.descriptors.astype(np.float32)
    there = _sure(matcher.knnMatch(one, two, k=2))
    back = _sure(matcher.knnMatch(two, one, k=2))
    pairs = np.array([(i, j) for i, j in there.items() if back.get(j) == i], dtype=int)
    if len(pairs) < FEWEST:
        return none
    a, b = first.xy[pairs[:, 0]] * _SIDE_PX, second.xy[pairs[:, 1]] * _SIDE_PX
    cv2.setRNGSeed(1)
    _, inside = cv2.findFundamentalMat(a, b, cv2.FM_RANSAC, _NEAR_PX, 0.999, 2000)
    if inside is None:
        return none
    kept = inside.ravel().astype(bool)
    moved = np.linalg.norm(a[kept] - b[kept], axis=1) / _SIDE_PX
    return Shared(int(kept.sum()), len(pairs), float(np.median(moved)) if kept.any() else 0.0)


def _sure(matches: Any) -> dict[int, int]:
    return {
        two[0].queryIdx: two[0].trainIdx
        for two in matches
        if len(two) == 2 and two[0].distance < _RATIO * two[1].distance
    }


def _small(path: Path) -> np.ndarray:
    """A photo as a small grey picture, as it lies in the file (not turned upright)."""
    import cv2

    data = path.read_bytes()
    if is_jpeg(data):
        raw = np.frombuffer(data, dtype=np.uint8)
        flags = cv2.IMREAD_REDUCED_GRAYSCALE_2 | cv2.IMREAD_IGNORE_ORIENTATION
        grey = cv2.imdecode(raw, flags)
        if grey is None:
            raise PictureError("the picture cannot be decoded")
    else:
        picture = open_picture(data)
        if hasattr(picture, "to_pillow"):
            picture = picture.to_pillow()
        grey = np.asarray(picture.convert("L"))
    scale = _SIDE_PX / max(grey.shape)
    size = (max(1, round(grey.shape[1] * scale)), max(1, round(grey.shape[0] * scale)))
    return np.asarray(cv2.resize(grey, size, interpolation=cv2.INTER_AREA))
