"""One pair as the adjustment sees it: observations with their sds, no names but for reports.

In: nothing (made by `assemble`, or by a simulation). Out: frozen dataclasses of arrays. Pixels
are those of the camera card's landscape picture; directions are in the card's camera frame.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np


def _none(*shape: int) -> np.ndarray:
    return np.zeros(shape)


@dataclass(frozen=True)
class SolidObject:
    """One object of a pair: what is expected of it and which marks it has.

    upright_sd_rad : None where no attitude is expected
    taper, taper_sd: change of the RADIUS per metre of height
    ref_height_m   : above the ground line; None = at the middle of the limb marks
    known_diameter_m, known_sd_m : an object of known size
    ground_guess   : True where no `base` mark tells the ground line and a height is wanted
    """

    name: str
    kind: str
    is_ball: bool
    upright_sd_rad: float | None = None
    taper: float = 0.0
    taper_sd: float = 0.0
    ref_height_m: float | None = None
    known_diameter_m: float | None = None
    known_sd_m: float | None = None
    has_base: bool = False
    has_top: bool = False
    ground_guess: bool = False


@dataclass(frozen=True)
class Marks:
    """Marks of one sort in one pair, flattened over objects and views.

    object, view : (m,) indices; px : (m, 2) card pixels; sd_px : (m,)
    side         : (m,) +1 or -1; for limbs the side of the axis, for ends 0 = base, 1 = top
    """

    object: np.ndarray = field(default_factory=lambda: _none(0).astype(int))
    view: np.ndarray = field(default_factory=lambda: _none(0).astype(int))
    px: np.ndarray = field(default_factory=lambda: _none(0, 2))
    sd_px: np.ndarray = field(default_factory=lambda: _none(0))
    side: np.ndarray = field(default_factory=lambda: _none(0))

    def __len__(self) -> int:
        return len(self.object)

    def only(self, keep: np.ndarray) -> Marks:
        """The marks for which `keep` (m,) is true."""
        return Marks(
            self.object[keep], self.view[keep], self.px[keep], self.sd_px[keep], self.side[keep]
        )


@dataclass(frozen=True)
class LengthObservation:
    """A length of the baseline A to B: from 'tape' or 'GNSS'."""

    length_m: float
    sd_m: float
    source: str


@dataclass(frozen=True)
class PosePrior:
    """What a fall-back says of one view's pose when the pair has no ties.

    rotation, rotation_sd_rad : camera-from-frame rotation and its sd about each axis
    direction, direction_sd_rad : unit direction of the station from A in the frame, and its sd
    """

    view: int
    rotation: np.ndarray
    rotation_sd_rad: float
    direction: np.ndarray
    direction_sd_rad: float


@dataclass(frozen=True)
class PairProblem:
    """Everything observed in one pair.

    cameras    : (v,) index of each view's camera among the round's cameras
    up         : (v, 3) up of the upright picture in the card's camera frame
    ties_px    : (n, v, 2), NaN where a view does not see the tie; ties_sd_px : (n,)
    limbs, outlines, ends : `Marks`
    plumb_view : (p,) view; plumb_normal : (p, 3) normal of the plane through the station and the
                 plumb line, camera frame; plumb_sd_rad : (p,)
    level_sd_rad : sd of "the camera was held level" about each axis, weak and heavy-tailed
    """

    pair: str
    photos: tuple[str, ...]
    cameras: np.ndarray
    up: np.ndarray
    objects: tuple[SolidObject, ...]
    ties_px: np.ndarray
    ties_sd_px: np.ndarray
    limbs: Marks = field(default_factory=Marks)
    outlines: Marks = field(default_factory=Marks)
    ends: Marks = field(default_factory=Marks)
    plumb_view: np.ndarray = field(default_factory=lambda: _none(0).astype(int))
    plumb_normal: np.ndarray = field(default_factory=lambda: _none(0, 3))
    plumb_sd_rad: np.ndarray = field(default_factory=lambda: _none(0))
    lengths: tuple[LengthObservation, ...] = ()
    pose_priors: tuple[PosePrior, ...] = ()
    level_sd_rad: float = float(np.radians(5.0))

    @property
    def views(self) -> int:
        """Number of views, A included."""
        return len(self.photos)
