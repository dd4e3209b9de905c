"""The data model of a round: what a person typed and what the photos say of themselves.

In: nothing. Out: frozen dataclasses, units in the field names. Everything here is made by the
readers of this package (or by a test); nothing here opens a file.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path
from types import MappingProxyType

from fieldround.rounds.track_settings import TrackSettings

KINDS = ("pole", "trunk", "mast", "bollard", "tank", "pipe", "ball")
MARK_NAMES = ("left", "right", "outline", "middle", "base", "top", "tie", "plumb",
              "landmark")  # fmt: skip
# Marks whose `object` column holds a name of its own, not an object of the round.
OTHERS_NAMES = ("tie", "plumb", "landmark")

_EMPTY: Mapping[str, str] = MappingProxyType({})


@dataclass(frozen=True)
class Camera:
    """A camera card: how the upright landscape picture of one lens and zoom maps rays to pixels.

    focal_px, centre_px and distortion (k1 k2 p1 p2 k3, Brown-Conrady, OpenCV's order) hold for
    the picture of `size_px` (width >= height); the sd fields are the card's own.
    `focal_heavy_tailed` marks a card made from EXIF: its focal sd is only the core of a
    heavy-tailed prior. `ratio_sd` > 0 frees fx / fy. `source` is 'card' or 'exif'. A card holds
    for photos of its own `digital_zoom` only (None = none).
    """

    name: str
    size_px: tuple[int, int]
    focal_px: tuple[float, float]
    focal_sd_px: float
    centre_px: tuple[float, float]
    centre_sd_px: float
    distortion: tuple[float, float, float, float, float] = (0.0, 0.0, 0.0, 0.0, 0.0)
    distortion_sd: tuple[float, float, float, float, float] = (0.0, 0.0, 0.0, 0.0, 0.0)
    make: str | None = None
    model: str | None = None
    lens: str | None = None
    focal_mm: float | None = None
    ratio_sd: float = 0.0
    focal_heavy_tailed: bool = False
    source: str = "card"
    digital_zoom: float | None = None


@dataclass(frozen=True)
class Fix:
    """Where a photo was taken, from GNSS: WGS 84 degrees and metres, each with its sd.

    horizontal_sd_m is the sd of EACH horizontal axis (a stated 68 % radius is divided by 1.51
    by the reader); sds are None where the source states none. `altitude_m` is as the source
    gives it; `altitude_is` says of what ('sea level' or 'ellipsoid'). `source` is 'exif' or the
    track's file name. `arm_m` is the level part of the way from the antenna to the camera, to the
    right and forward along the view; a height is already the camera's.
    """

    longitude_deg: float
    latitude_deg: float
    altitude_m: float | None = None
    horizontal_sd_m: float | None = None
    vertical_sd_m: float | None = None
    altitude_is: str = "sea level"
    dop: float | None = None
    datum: str | None = None
    source: str = "exif"
    arm_m: tuple[float, float] = (0.0, 0.0)


@dataclass(frozen=True)
class Photo:
    """One photo of the round: its file, its upright size, its camera and what its EXIF says.

    name      : as the file lies under photos/; the marks and pairs of a `Round` use this name
    size_px   : width, height of the picture turned upright
    turn_deg  : clockwise quarter turn that made the card's landscape picture upright
                (0, 90, 180, 270)
    camera    : name of its camera card
    taken_at  : local time, with its UTC offset when the EXIF has one
    direction_deg : where the camera pointed, clockwise; `direction_from` 'true' or 'magnetic'
    problems  : sentences about EXIF that could not be used
    digest    : SHA-256 of the file's bytes, hexadecimal
    orientation : EXIF Orientation the decoded pixels still need (1 = none), see `load_picture`
    """

    name: str
    path: Path
    size_px: tuple[int, int]
    turn_deg: int
    camera: str
    taken_at: datetime | None = None
    fix: Fix | None = None
    direction_deg: float | None = None
    direction_from: str | None = None
    make: str | None = None
    model: str | None = None
    lens: str | None = None
    focal_mm: float | None = None
    focal_35mm: float | None = None
    problems: tuple[str, ...] = ()
    digest: str = ""
    orientation: int = 1


@dataclass(frozen=True)
class Pair:
    """Photos of the same objects from two stations (A, B), and more views C, D if they joined.

    tape_m is the slope distance from camera A to camera B, None where no tape was read.
    bearing_deg is the direction from station A to station B, clockwise from true north.
    """

    pair: str
    photos: tuple[str, ...]
    tape_m: float | None = None
    tape_sd_m: float = 0.005
    bearing_deg: float | None = None
    bearing_sd_deg: float | None = None
    note: str = ""
    extra: Mapping[str, str] = field(default_factory=lambda: _EMPTY)
    row: int | None = None


@dataclass(frozen=True)
class RoundObject:
    """One round thing as objects.csv lists it (or as marks.csv implies it).

    pairs          : every pair in which it is marked or listed
    ref_height_m   : height above the ground line at which the diameter is wanted
    known_diameter_m : set for an object of known size, with its sd
    """

    object: str
    kind: str
    pairs: tuple[str, ...] = ()
    label: str = ""
    ref_height_m: float | None = None
    known_diameter_m: float | None = None
    known_sd_m: float | None = None
    note: str = ""
    extra: Mapping[str, str] = field(default_factory=lambda: _EMPTY)
    row: int | None = None


@dataclass(frozen=True)
class Mark:
    """One pixel position that means something, in the photo turned upright.

    x right, y down; (0, 0) is the centre of the top-left pixel. `object` holds the tie's, the
    plumb line's or the landmark's own name for the marks `tie`, `plumb` and `landmark`.
    """

    object: str
    photo: str
    mark: str
    x_px: float
    y_px: float
    sd_px: float
    row: int | None = None


@dataclass(frozen=True)
class Check:
    """An independent direct measurement of an object, by tape or caliper."""

    object: str
    diameter_m: float
    sd_m: float | None = None
    method: str = ""
    height_m: float | None = None
    measured_on: str = ""
    by: str = ""
    extra: Mapping[str, str] = field(default_factory=lambda: _EMPTY)
    row: int | None = None


@dataclass(frozen=True)
class Landmark:
    """A point of known coordinates, WGS 84 degrees; sd_m is that of each horizontal axis."""

    landmark: str
    longitude_deg: float
    latitude_deg: float
    height_m: float | None = None
    sd_m: float = 0.1
    note: str = ""
    row: int | None = None


@dataclass(frozen=True)
class Settings:
    """What round.toml sets, each with its default.

    title, crew, place : text for the report
    crs                : EPSG code, WKT or PROJ text of the results; None = UTM zone of the round
    kind               : kind of objects that objects.csv does not list
    mark_sd_px         : sd of a hand mark whose sd_px is blank
    tape_sd_m          : sd of a tape reading whose tape_sd_m is blank
    tolerance_pct      : largest half 95 % interval of a diameter that is accepted, in percent
    agreement_limit    : largest |agreement| of the two readings that is accepted, in sds
    roundness_pct      : sd of one side's width about the mean diameter, by kind, in percent
    found_ties_max     : ties kept a pair of photos
    tracks             : how the files under tracks/ are read
    """

    title: str = ""
    crew: str = ""
    place: str = ""
    crs: str | None = None
    kind: str = "pole"
    mark_sd_px: float = 0.7
    tape_sd_m: float = 0.005
    tolerance_pct: float = 3.0
    agreement_limit: float = 3.0
    roundness_pct: Mapping[str, float] = field(
        default_factory=lambda: MappingProxyType({"trunk": 1.0})
    )
    found_ties_max: int = 400
    tracks: TrackSettings = field(default_factory=TrackSettings)


@dataclass(frozen=True)
class Round:
    """Everything that was read of one outing.

    cameras : by card name (only those some photo uses); photos : by name as in the sheets.
    lost_photos : name -> sentence, for photos the sheets name but that could not be read.
    """

    folder: Path
    settings: Settings
    cameras: Mapping[str, Camera]
    photos: Mapping[str, Photo]
    pairs: tuple[Pair, ...]
    objects: tuple[RoundObject, ...]
    marks: tuple[Mark, ...]
    checks: tuple[Check, ...] = ()
    lost_photos: Mapping[str, str] = field(default_factory=lambda: _EMPTY)
    notes: tuple[str, ...] = ()
    landmarks: tuple[Landmark, ...] = ()
