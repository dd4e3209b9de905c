"""EXIF: every fact that is used, every form of it that is not a fact, and garbled files.

The values are invented; the tags and their types are those of EXIF 2.32 (CIPA DC-008).
"""

from __future__ import annotations

import io
import logging
from collections.abc import Callable, Mapping
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from fieldround.rounds import exif as exif_module
from fieldround.rounds.exif import ExifFacts, read_exif
from fieldround.rounds.exif_fix import RADIUS_68_IN_SDS
from tests.rounds.exif_writing import (
    ASCII,
    BYTE,
    FLOAT,
    GOOD_GPS,
    LONG,
    RATIONAL,
    SHORT,
    SRATIONAL,
    UNDEFINED,
    Value,
    exif_block,
    rational,
)
from tests.rounds.folders import picture, shared, write_photo

LATITUDE = 52 + 30 / 60 + 18 / 3600
LONGITUDE = -(1 + 15 / 60 + 36 / 3600)


def facts_of(
    image: Mapping[int, Value] = {}, exif: Mapping[int, Value] = {},
    gps: Mapping[int, Value] = {}, order: str = "<",
) -> ExifFacts:  # fmt: skip
    """What is read of a JPEG with these tags."""
    file = io.BytesIO()
    block = exif_block(image, exif, gps, order)
    picture().save(file, "JPEG", exif=b"Exif\0\0" + block)
    return read_exif(file.getvalue())


@pytest.mark.parametrize("order", ["<", ">"])
def test_the_camera(order: str) -> None:
    facts = facts_of(
        {0x010F: (ASCII, "Alder  "), 0x0110: (ASCII, "A7"), 0x0112: (SHORT, [6])},
        {
            0x920A: (RATIONAL, [(51, 10)]),
            0xA405: (SHORT, [26]),
            0xA434: (ASCII, "main lens 5.1 mm"),
            0xA404: (RATIONAL, [(2, 1)]),
            0xA20E: (RATIONAL, [(254_000, 1)]),
            0xA210: (SHORT, [2]),
            0xA002: (LONG, [4032]),
        },
        order=order,
    )
    assert facts == ExifFacts(
        orientation=6,
        make="Alder",
        model="A7",
        lens="main lens 5.1 mm",
        focal_mm=5.1,
        focal_35mm=26.0,
        digital_zoom=2.0,
        plane_px_per_mm=pytest.approx(10_000.0),
        plane_width_px=4032.0,
    )


@pytest.mark.parametrize(
    ("unit", "per_mm"),
    [(None, 1000 / 25.4), (2, 1000 / 25.4), (3, 100.0), (4, 1000.0), (9, None)],
)
def test_units_of_the_focal_plane(unit: int | None, per_mm: float | None) -> None:
    tags: dict[int, Value] = {0xA20E: (RATIONAL, [(1000, 1)])}
    if unit is not None:
        tags[0xA210] = (SHORT, [unit])
    found = facts_of(exif=tags).plane_px_per_mm
    assert found == (None if per_mm is None else pytest.approx(per_mm))


def test_the_position_with_its_sd() -> None:
    facts = facts_of(gps=GOOD_GPS)
    assert facts.problems == ()
    fix = facts.fix
    assert fix is not None
    assert fix.latitude_deg == pytest.approx(LATITUDE, abs=1e-12)
    assert fix.longitude_deg == pytest.approx(LONGITUDE, abs=1e-12)
    assert fix.altitude_m == 81.25
    assert fix.altitude_is == "sea level"
    assert fix.horizontal_sd_m == pytest.approx(4.53 / 1.51)
    assert fix.vertical_sd_m is None
    assert fix.dop == 1.2
    assert fix.datum == "WGS-84"
    assert (facts.direction_deg, facts.direction_from) == (273.5, "true")


def test_a_68_percent_radius_is_1_51_sds_of_one_axis() -> None:
    """Counted over a million draws of a circular normal with sd 1 (fixed seed)."""
    draws = np.random.default_rng(1).standard_normal((1_000_000, 2))
    inside = np.hypot(draws[:, 0], draws[:, 1]) < RADIUS_68_IN_SDS
    assert inside.mean() == pytest.approx(0.68, abs=0.0015)


@pytest.mark.parametrize(
    ("changes", "latitude", "word"),
    [
        ({}, LATITUDE, None),
        ({0x01: (ASCII, "S")}, -LATITUDE, None),
        ({0x01: (ASCII, "n")}, LATITUDE, None),
        ({0x01: (ASCII, "North")}, LATITUDE, None),
        ({0x02: (RATIONAL, [(525_050, 10_000), (0, 0), (0, 0)])}, 52.505, None),
        ({0x02: (RATIONAL, [(52, 1), (3030, 100), (0, 0)])}, 52.505, None),
        ({0x02: (RATIONAL, [(525_050, 10_000)])}, 52.505, None),
        ({0x1F: None}, LATITUDE, None),
        ({0x01: None}, None, "does not say N or S"),
        ({0x01: (ASCII, "")}, None, "does not say N or S"),
        ({0x01: (ASCII, "E")}, None, "does not say N or S"),
        ({0x01: (SHORT, [300])}, None, "does not say N or S"),
        ({0x03: None}, None, "does not say E or W"),
        ({0x02: None}, None, None),
        ({0x02: (RATIONAL, [(0, 0), (0, 0), (0, 0)])}, None, "latitude is not a number"),
        ({0x02: (RATIONAL, [(5, 0), (1, 1), (1, 1)])}, None, "latitude is not a number"),
        ({0x02: (RATIONAL, [(52, 1), (0, 0), (18, 1)])}, None, "degrees, minutes and seconds"),
        ({0x02: (RATIONAL, [(52, 1), (75, 1), (18, 1)])}, None, "degrees, minutes and seconds"),
        ({0x02: (SRATIONAL, [(-52, 1), (5, 1), (18, 1)])}, None, "degrees, minutes and seconds"),
        ({0x02: (RATIONAL, [(91, 1), (0, 1), (0, 1)])}, None, "out of range"),
        ({0x04: (RATIONAL, [(180, 1), (0, 1), (1, 1)])}, None, "out of range"),
        ({0x02: (ASCII, "52.5 north")}, None, "latitude is not a number"),
        ({0x02: (UNDEFINED, b"\x01\x02\x03\x04\x05")}, 1 + 2 / 60 + 3 / 3600, None),
        ({0x09: (ASCII, "V")}, None, "no valid fix"),
        ({0x09: (ASCII, "A")}, LATITUDE, None),
        ({0x12: (ASCII, "TOKYO")}, LATITUDE, "TOKYO"),
        ({0x12: (ASCII, "WGS 84")}, LATITUDE, None),
    ],
)  # fmt: skip
def test_latitudes_that_are_facts_and_that_are_not(
    changes: dict[int, Value | None], latitude: float | None, word: str | None
) -> None:
    gps = {tag: value for tag, value in {**GOOD_GPS, **changes}.items() if value is not None}
    facts = facts_of(gps=gps)
    found = None if facts.fix is None else facts.fix.latitude_deg
    assert found == (None if latitude is None else pytest.approx(latitude, abs=1e-12))
    assert len(facts.problems) == (0 if word is None else 1), facts.problems
    assert word is None or word in facts.problems[0]


def test_nought_nought_is_no_fix_but_a_nought_alone_is() -> None:
    nought: Value = (RATIONAL, [(0, 1), (0, 1), (0, 1)])
    facts = facts_of(gps={**GOOD_GPS, 0x02: nought, 0x04: nought})
    assert facts.fix is None
    assert "both exactly 0" in facts.problems[0]
    on_the_equator = facts_of(gps={**GOOD_GPS, 0x02: nought}).fix
    assert on_the_equator is not None
    assert on_the_equator.latitude_deg == 0.0


@pytest.mark.parametrize(
    ("changes", "altitude_m", "above"),
    [
        ({0x05: (BYTE, [1])}, -81.25, "sea level"),
        ({0x05: (BYTE, [2])}, 81.25, "ellipsoid"),
        ({0x05: (BYTE, [3])}, -81.25, "ellipsoid"),
        ({0x05: None}, 81.25, "sea level"),
        ({0x05: (ASCII, "")}, 81.25, "sea level"),
        ({0x06: (RATIONAL, [(0, 0)])}, None, "sea level"),
        ({0x06: (RATIONAL, [(90_000, 1)])}, None, "sea level"),
        ({0x06: None}, None, "sea level"),
    ],
)
def test_altitudes(changes: dict[int, Value | None], altitude_m: float | None, above: str) -> None:
    gps = {tag: value for tag, value in {**GOOD_GPS, **changes}.items() if value is not None}
    fix = facts_of(gps=gps).fix
    assert fix is not None
    assert (fix.altitude_m, fix.altitude_is) == (altitude_m, above)


@pytest.mark.parametrize("error", [(0, 1), (0, 0), (5, 0), (4_000_000_000, 1)])
def test_an_error_radius_that_is_no_fact(error: tuple[int, int]) -> None:
    fix = facts_of(gps={**GOOD_GPS, 0x1F: (RATIONAL, [error])}).fix
    assert fix is not None
    assert fix.horizontal_sd_m is None


@pytest.mark.parametrize(
    ("reference", "value", "expected", "problems"),
    [
        ((ASCII, "M"), (RATIONAL, [(36_000, 100)]), (0.0, "magnetic"), 0),
        ((ASCII, "T"), (RATIONAL, [(0, 1)]), (0.0, "true"), 0),
        (None, (RATIONAL, [(90, 1)]), (None, None), 1),
        ((ASCII, "X"), (RATIONAL, [(90, 1)]), (None, None), 1),
        ((ASCII, "T"), (RATIONAL, [(361, 1)]), (None, None), 1),
        ((ASCII, "T"), (RATIONAL, [(90, 0)]), (None, None), 0),
        ((ASCII, "T"), None, (None, None), 0),
    ],
)
def test_image_directions(
    reference: Value | None, value: Value | None, expected: tuple[float | None, str | None],
    problems: int,
) -> None:  # fmt: skip
    changes = {**GOOD_GPS, 0x10: reference, 0x11: value}
    facts = facts_of(gps={tag: value for tag, value in changes.items() if value is not None})
    assert (facts.direction_deg, facts.direction_from) == expected
    assert len(facts.problems) == problems


EAST = timezone(timedelta(hours=2))
NOON = datetime(2026, 5, 14, 12, 0, 7)


def clock(text: str) -> Value:
    return (ASCII, text)


def gnss(hours: int, minutes: int, seconds: int, date: str = "2026:05:14") -> dict[int, Value]:
    return {0x07: (RATIONAL, [(hours, 1), (minutes, 1), (seconds, 1)]), 0x1D: (ASCII, date)}


@pytest.mark.parametrize(
    ("image", "exif", "gps", "expected"),
    [
        ({}, {0x9003: clock("2026:05:14 12:00:07")}, {}, NOON),
        ({}, {0x9003: clock("2026-05-14T12:00:07")}, {}, NOON),
        ({0x132: clock("2026:05:14 12:00:07")}, {}, {}, NOON),
        ({0x132: clock("2001:01:01 00:00:01")}, {0x9004: clock("2026:05:14 12:00:07")}, {}, NOON),
        (
            {},
            {0x9003: clock("2026:05:14 12:00:07"), 0x9291: clock("054 "), 0x9011: clock("+02:00")},
            {},
            NOON.replace(microsecond=54_000, tzinfo=EAST),
        ),
        (
            {},
            {0x9003: clock("2026:05:14 12:00:07"), 0x9011: clock("-0330")},
            {},
            NOON.replace(tzinfo=timezone(-timedelta(hours=3, minutes=30))),
        ),
        (
            {},
            {0x9003: clock("2026:05:14 12:00:07"), 0x9011: clock("Z")},
            gnss(3, 0, 0),
            NOON.replace(tzinfo=UTC),
        ),
        ({}, {0x9003: clock("2026:05:14 12:00:60")}, {}, datetime(2026, 5, 14, 12, 1, 0)),
        # No offset, but a GNSS stamp a minute old: the clock runs two hours ahead of UTC.
        ({}, {0x9003: clock("2026:05:14 12:00:07")}, gnss(9, 59, 2), NOON.replace(tzinfo=EAST)),
        # Over midnight: the clock of a camera at UTC+5:45 is a day ahead of the GNSS date.
        (
            {},
            {0x9003: clock("2026:05:14 02:00:07")},
            gnss(20, 15, 7, "2026:05:13"),
            datetime(2026, 5, 14, 2, 0, 7, tzinfo=timezone(timedelta(hours=5, minutes=45))),
        ),
        ({}, {}, gnss(10, 0, 7), NOON.replace(hour=10, tzinfo=UTC)),
        ({}, {0x9003: clock("0000:00:00 00:00:00")}, {}, None),
        ({}, {0x9003: clock("    :  :     :  :  ")}, {}, None),
        ({}, {}, {}, None),
    ],
)
def test_times(
    image: dict[int, Value], exif: dict[int, Value], gps: dict[int, Value],
    expected: datetime | None,
) -> None:  # fmt: skip
    facts = facts_of(image, exif, gps)
    assert facts.taken_at == expected
    assert (facts.taken_at and facts.taken_at.tzinfo) == (expected and expected.tzinfo)
    assert facts.problems == ()


@pytest.mark.parametrize(
    ("exif", "gps", "expected", "word"),
    [
        ({0x9003: clock("2026:02:30 12:00:00")}, {}, None, "no date and time"),
        ({0x9003: clock("2026:05:14 25:00:00")}, {}, None, "no date and time"),
        ({0x9003: clock("2026:05:14 12:00:75")}, {}, None, "no date and time"),
        ({0x9003: clock("yesterday, 3 pm")}, {}, None, "no date and time"),
        ({0x9003: clock("2026:05:14 12:00:07"), 0x9011: clock("+27:00")}, {}, NOON, "offset"),
        ({0x9003: clock("2026:05:14 12:00:07"), 0x9011: clock("CET")}, {}, NOON, "offset"),
        ({0x9003: clock("2026:05:14 12:00:07")}, gnss(27, 0, 0), NOON, "GNSS date"),
        ({0x9003: clock("2026:05:14 12:00:07")}, gnss(7, 0, 0, "2026:13:01"), NOON, "GNSS date"),
        (
            {0x9003: clock("2026:05:14 12:08:00")},
            gnss(10, 0, 7),
            NOON.replace(hour=10, tzinfo=UTC),
            "contradicts the GNSS time",
        ),
        (
            {0x9003: clock("2020:01:01 00:00:30")},
            gnss(10, 0, 7),
            NOON.replace(hour=10, tzinfo=UTC),
            "contradicts the GNSS time",
        ),
    ],
)
def test_times_with_a_problem(
    exif: dict[int, Value], gps: dict[int, Value], expected: datetime | None, word: str
) -> None:
    facts = facts_of(exif=exif, gps=gps)
    assert facts.taken_at == expected
    assert len(facts.problems) == 1
    assert word in facts.problems[0]


@pytest.mark.parametrize(
    ("image", "exif"),
    [
        ({0x0112: (SHORT, [0])}, {}),
        ({}, {0x920A: (RATIONAL, [(0, 1)]), 0xA405: (SHORT, [0])}),
        ({}, {0x920A: (RATIONAL, [(0, 0)]), 0xA404: (RATIONAL, [(0, 0)])}),
        ({}, {0x920A: (ASCII, "wide"), 0xA405: (ASCII, "x")}),
        ({}, {0x920A: (FLOAT, [float("nan")]), 0xA404: (RATIONAL, [(1, 1)])}),
        ({0x010F: (ASCII, ""), 0x0110: (ASCII, "  ")}, {0xA434: (ASCII, "\x01\x02")}),
        ({0x010F: (SHORT, [999, 1])}, {0xA20E: (RATIONAL, [(0, 0)]), 0xA002: (LONG, [0])}),
    ],
)
def test_blanks_and_noughts_are_no_facts(image: dict[int, Value], exif: dict[int, Value]) -> None:
    assert facts_of(image, exif) == ExifFacts()


@pytest.mark.parametrize(
    ("image", "exif", "word"),
    [
        ({0x0112: (SHORT, [9])}, {}, "Orientation 9"),
        ({}, {0x920A: rational(60_000.0, 1)}, "focal length of 60000 mm"),
        ({}, {0xA405: (SHORT, [1])}, "35 mm equivalent focal length of 1 mm"),
    ],
)
def test_values_that_cannot_be(image: dict[int, Value], exif: dict[int, Value], word: str) -> None:
    facts = facts_of(image, exif)
    assert (facts.orientation, facts.focal_mm, facts.focal_35mm) == (1, None, None)
    assert len(facts.problems) == 1
    assert word in facts.problems[0]


def test_other_types_of_the_same_value_are_understood() -> None:
    facts = facts_of(
        {0x010F: (UNDEFINED, b"Alder\0x"), 0x0112: (LONG, [8])},
        {0x920A: (FLOAT, [4.25]), 0xA405: (RATIONAL, [(265, 10)])},
    )
    assert (facts.make, facts.orientation) == ("Alder", 8)
    assert (facts.focal_mm, facts.focal_35mm) == (4.25, 26.5)


def test_names_of_tags_do_not_matter(monkeypatch: pytest.MonkeyPatch) -> None:
    """Another version of the EXIF library may name what today is `GPS Tag 0x001F`."""
    import exifread
    from exifread.tags.exif import GPS_TAGS

    monkeypatch.setitem(GPS_TAGS, 0x1F, ("GPSHPositioningError", None))
    file = io.BytesIO()
    picture().save(file, "JPEG", exif=b"Exif\0\0" + exif_block(gps=GOOD_GPS))
    assert "GPS GPSHPositioningError" in exifread.process_file(file)
    fix = read_exif(file.getvalue()).fix
    assert fix is not None
    assert fix.horizontal_sd_m == pytest.approx(3.0)


@pytest.mark.parametrize("content", [b"", b"\xff", b"\xff\xd8", b"not a picture", b"II*\0"])
def test_no_picture_at_all(content: bytes) -> None:
    assert read_exif(content).orientation == 1


def test_a_path_reads_like_its_bytes(tmp_path: Path) -> None:
    path = write_photo(tmp_path / "a.jpg", exif=exif_block(gps=GOOD_GPS))
    assert read_exif(path) == read_exif(path.read_bytes())
    assert "cannot be read" in read_exif(tmp_path / "missing.jpg").problems[0]


@pytest.mark.parametrize("ending", ["jpg", "png", "heic"])
def test_formats(tmp_path: Path, ending: str) -> None:
    exif = Image.Exif()
    exif[0x010F] = "Alder"
    exif.get_ifd(0x8769)[0x920A] = 4.25
    exif.get_ifd(0x8825).update(
        {1: "N", 2: (52.0, 30.0, 18.0), 3: "W", 4: (1.0, 15.0, 36.0), 0x1F: 3.02}
    )
    path = tmp_path / f"a.{ending}"
    if ending == "heic":
        import pillow_heif

        pillow_heif.from_pillow(picture()).save(path, exif=exif.tobytes())
    else:
        picture().save(path, exif=exif)
    facts = read_exif(path)
    assert (facts.make, facts.focal_mm) == ("Alder", 4.25)
    assert facts.fix is not None
    assert facts.fix.latitude_deg == pytest.approx(LATITUDE)
    assert facts.fix.horizontal_sd_m == pytest.approx(2.0)


@pytest.mark.parametrize("order", ["<", ">"])
def test_a_tiff_is_its_own_exif(order: str) -> None:
    size: dict[int, Value] = {0x100: (SHORT, [64]), 0x101: (SHORT, [48]), 0x10F: (ASCII, "Alder")}
    facts = read_exif(exif_block(size, {0x920A: rational(4.25)}, GOOD_GPS, order))
    assert (facts.make, facts.focal_mm) == ("Alder", 4.25)
    assert facts.fix is not None
    assert facts.fix.latitude_deg == pytest.approx(LATITUDE)


def test_directories_without_end_are_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    """65,535 entries that each lead to a further directory as long: four billion entries."""
    entries = (
        (0x8825).to_bytes(2, "little") + (4).to_bytes(2, "little")
        + (1).to_bytes(4, "little") + (8).to_bytes(4, "little")
    ) * 65_535  # fmt: skip
    tiff = b"II*\0" + (8).to_bytes(4, "little") + b"\xff\xff" + entries
    reads = 0
    original = exif_module._metered

    def counting(read: Callable[[int], bytes], left: int) -> Callable[[int], bytes]:
        def counted(size: int) -> bytes:
            nonlocal reads
            reads += 1
            return read(size)

        return original(counted, left)

    monkeypatch.setattr(exif_module, "_metered", counting)
    facts = read_exif(tiff)
    assert any("no end" in problem for problem in facts.problems)
    assert 0.1 * exif_module._MOST_READS < reads <= exif_module._MOST_READS


def test_the_library_stays_silent(caplog: pytest.LogCaptureFixture) -> None:
    with caplog.at_level(logging.DEBUG):
        read_exif(b"not a picture")
    assert caplog.records == []


def test_real_samples_never_raise() -> None:
    read = 0
    for path in sorted(shared("real", "exif").rglob("*.*")):
        facts = read_exif(path)
        assert facts.orientation in range(1, 9), path
        read += 1
    assert read > 60


def test_real_street_photos_have_a_fix() -> None:
    paths = sorted(shared("real", "street").glob("*.jpg"))
    assert len(paths) == 10
    for path in paths:
        facts = read_exif(path)
        assert facts.fix is not None, path
        assert 55.6 < facts.fix.latitude_deg < 55.8
        assert 13.1 < facts.fix.longitude_deg < 13.3
        assert facts.focal_35mm == 35.0
