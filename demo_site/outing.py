"""The round of Quillwater as it was walked: cameras, stations, pairs, what was noted.

In: nothing. Out: the true lenses, the pairs with their views, and `Outing`, which the sheets, the
EXIF and the pictures are made from.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from demo_site.inventory import Thing, quillwater, things
from demo_site.scene import Lens, Scene, View

# Open sea: no place has this position, so that no real one is drawn here.
SITE = (2.4310, 54.7480, 11.0)
SITE_IS = "longitude, latitude (degrees, WGS 84), altitude of the ground (m)"
DECLINATION_DEG = 0.9


@dataclass(frozen=True)
class Body:
    """What a camera writes about itself, and whether cameras.toml has a card for it."""

    lens: Lens
    make: str
    model: str
    focal_mm: float
    focal_35mm: int
    card: str | None
    direction_ref: str
    lens_model: str = ""


@dataclass(frozen=True)
class Walked:
    """One pair: its bodies and views, the objects looked at, notes and time.

    objects : names marked in it; plumb : (name, bottom point, top point) of true verticals
    limbs   : limb points a side
    scene   : where it was taken, None for the outing's one place
    """

    pair: str
    body: Body
    views: tuple[View, ...]
    objects: tuple[str, ...]
    taken_at: str
    tape: bool = True
    note: str = ""
    limbs: int = 6
    plumb: tuple[tuple[str, tuple[float, float, float], tuple[float, float, float]], ...] = ()
    scene: Scene | None = None


@dataclass(frozen=True)
class Outing:
    """A whole round: place, things, pairs and the number its scatter is drawn from."""

    scene: Scene
    things: tuple[Thing, ...]
    pairs: tuple[Walked, ...]
    site: tuple[float, float, float]
    seed: int
    title: str
    crew: str
    place: str
    checks: tuple[tuple[str, float, str], ...] = ()
    tape_sd_m: float = 0.003

    def scene_of(self, pair: Walked) -> Scene:
        """The place a pair's photos show."""
        return pair.scene or self.scene

    def thing(self, name: str) -> Thing:
        """An object of the inventory by its name."""
        return next(t for t in self.things if t.object == name)


WIDE = Lens(
    "wide", (2000, 1500),
    (1706.4, 1706.4, 1004.8, 745.1, -0.0612, 0.0418, 0.00035, -0.00028, 0.0), 0.60, 1.3,
)  # fmt: skip
LONG = Lens(
    "long", (2000, 1500),
    (3598.2, 3598.2, 992.6, 753.9, 0.0240, -0.0310, -0.00020, 0.00015, 0.0), 0.65, 1.5,
)  # fmt: skip
PHONE = Lens(
    "phone", (1920, 1440),
    (1482.7, 1482.7, 953.8, 725.2, 0.0212, -0.0345, 0.00025, 0.00040, 0.0), 0.55, 1.6,
)  # fmt: skip

CAMERA_WIDE = Body(WIDE, "Odderfell", "Reedling 4", 6.1, 30, "crew camera, wide", "T")
CAMERA_LONG = Body(LONG, "Odderfell", "Reedling 4", 12.9, 62, "crew camera, long", "T")
POCKET = Body(PHONE, "Brantwick", "Pocket 2", 4.7, 26, None, "M", "Brantwick main")

Point = tuple[float, float, float]


def _views(
    pair: str, body: Body, stations: Sequence[Point], aims: Sequence[Point],
    rolls: Sequence[float], portrait: bool = False,
) -> tuple[View, ...]:  # fmt: skip
    return tuple(
        View(f"{pair}-{letter}.jpg", body.lens, station, aim, roll, portrait,
             seed=sum(map(ord, pair + letter)))
        for letter, station, aim, roll in zip("ABCD", stations, aims, rolls, strict=False)
    )  # fmt: skip


def quillwater_round() -> Outing:
    """The demo: eleven pairs on one afternoon."""
    pairs = (
        Walked("01-towpath", CAMERA_WIDE,
               _views("01-towpath", CAMERA_WIDE, ((-3.1, -6.1, 1.62), (-3.5, -4.3, 1.58)),
                      ((6.5, -2.6, 2.15), (6.5, -2.9, 2.1)), (0.7, -0.5)),
               ("K1", "K2"), "2026:06:18 14:06:11", note="across the cobbles"),
        Walked("02-bollards", POCKET,
               _views("02-bollards", POCKET, ((-0.3, -2.75, 1.55), (0.75, -3.2, 1.60)),
                      ((2.9, -0.7, 0.62), (2.95, -0.72, 0.66)), (-0.8, 0.9)),
               ("B1", "B2"), "2026:06:18 14:12:40", note="from the towpath"),
        Walked("03-far-bank", CAMERA_WIDE,
               _views("03-far-bank", CAMERA_WIDE, ((-7.6, -1.3, 1.60), (-4.4, -1.2, 1.66)),
                      ((-6.4, 15.0, 1.9), (-6.0, 15.0, 1.9)), (0.4, 0.9)),
               ("T1", "T2", "T3"), "2026:06:18 14:18:02",
               note="trunks stand across the water, no girth tape possible"),
        Walked("04-lamps", POCKET,
               _views("04-lamps", POCKET, ((-3.4, -6.9, 1.63), (-3.7, -4.9, 1.66)),
                      ((-12.5, -6.0, 2.1), (-12.5, -6.0, 2.05)), (-0.6, 0.3), portrait=True),
               ("M1", "M2"), "2026:06:18 14:23:37", limbs=7),
        Walked("05-gauge", CAMERA_WIDE,
               _views("05-gauge", CAMERA_WIDE, ((-10.4, -3.0, 1.50), (-10.9, -4.2, 1.46)),
                      ((-14.7, -1.7, 0.72), (-14.7, -1.7, 0.70)), (0.5, -0.9), portrait=True),
               ("G1", "B3"), "2026:06:18 14:30:15", tape=False,
               note="no tape at hand, gauge ball of 300 mm set out"),
        Walked("06-leaning", CAMERA_WIDE,
               _views("06-leaning", CAMERA_WIDE, ((13.6, -7.2, 1.60), (13.1, -5.2, 1.64)),
                      ((24.5, -3.7, 2.6), (24.5, -3.9, 2.55)), (0.8, -0.6)),
               ("L1", "K3"), "2026:06:18 14:36:50", note="pole 3 leans towards the water",
               plumb=(("corner of no. 21", (29.6, -9.7, 0.6), (29.6, -9.7, 4.6)),
                      ("corner of no. 32", (32.4, -9.7, 0.6), (32.4, -9.7, 4.6)))),
        Walked("07-main", CAMERA_WIDE,
               _views("07-main", CAMERA_WIDE, ((38.6, -2.6, 1.56), (42.3, -4.1, 1.62)),
                      ((45.2, 5.0, 2.7), (45.5, 4.0, 2.9)), (-0.4, 0.7)),
               ("P1", "M3"), "2026:06:18 14:44:29", note="insulated pipe, outside of the sheet"),
        Walked("08-gate", POCKET,
               _views("08-gate", POCKET, ((0.3, 12.6, 1.58), (2.3, 11.9, 1.61)),
                      ((3.9, 20.3, 2.0), (3.9, 20.3, 2.0)), (0.6, -0.5)),
               ("O1",), "2026:06:18 14:53:08", note="over the road bridge to the far bank"),
        Walked("09-west-bank", POCKET,
               _views("09-west-bank", POCKET,
                      ((-18.9, -1.5, 1.61), (-15.7, -1.3, 1.64), (-12.2, -1.4, 1.58)),
                      ((-16.6, 14.6, 2.0), (-16.3, 14.6, 2.0), (-16.0, 14.6, 2.05)),
                      (0.5, -0.7, 0.2)),
               ("T4", "M4"), "2026:06:18 15:02:44", note="three stations", limbs=7),
        Walked("10-tank", CAMERA_WIDE,
               _views("10-tank", CAMERA_WIDE, ((-0.6, -1.2, 1.63), (5.6, -1.1, 1.60)),
                      ((26.0, 50.0, 3.0), (27.0, 50.0, 3.0)), (-0.3, 0.5)),
               ("S1",), "2026:06:18 15:09:12", note="long sight over the water", limbs=7),
        Walked("11-east-light", CAMERA_LONG,
               _views("11-east-light", CAMERA_LONG, ((3.6, -5.9, 1.64), (5.4, -1.3, 1.60)),
                      ((42.0, 13.4, 3.1), (41.8, 13.4, 3.1)), (0.2, -0.3), portrait=True),
               ("M3", "T5"), "2026:06:18 15:14:55", note="zoomed in", limbs=7),
        Walked("12-pole-6", CAMERA_WIDE,
               _views("12-pole-6", CAMERA_WIDE, ((-19.0, -4.7, 1.60), (-20.5, -4.58, 1.64)),
                      ((-31.0, -3.0, 2.0), (-31.0, -3.0, 2.0)), (0.3, 0.4)),
               ("K4",), "2026:06:18 15:21:30", note="stepped forward in a hurry"),
    )  # fmt: skip
    return Outing(
        quillwater(), tuple(things()), pairs, SITE, 20260618,
        "Quillwater, round objects of the canal side", "crew 2", "Quillwater (made up)",
        checks=(("K1", 0.0025, "girth tape"), ("B1", 0.002, "caliper"), ("M1", 0.002, "caliper"),
                ("L1", 0.0025, "girth tape"), ("O1", 0.003, "girth tape")),
    )  # fmt: skip
