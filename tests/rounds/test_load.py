"""A whole round: what is read, what is filled in, and every fault of every sheet in its place."""

from __future__ import annotations

import pickle
from datetime import UTC, datetime
from pathlib import Path

import pytest

from fieldround.rounds.errors import SheetsError
from fieldround.rounds.load import load_round
from fieldround.rounds.model import MARK_NAMES, Check, Mark, Pair, RoundObject, Settings
from tests.rounds.exif_writing import ASCII, GOOD_GPS, RATIONAL, SHORT, exif_block
from tests.rounds.folders import (
    MARKS,
    OBJECTS,
    PAIRS,
    faults_of,
    one_fault,
    place,
    shared,
    write_photo,
    write_round,
)

CARD = '[[camera]]\nname = "phone"\nsize_px = [64, 48]\nfocal_px = 60\n'


def test_the_least_round_is_pairs_and_photos(tmp_path: Path) -> None:
    read = load_round(write_round(tmp_path))
    assert read.folder == tmp_path
    assert read.settings == Settings()
    assert read.pairs == (Pair("P1", ("a.jpg", "b.jpg"), 1.5, 0.005, row=2),)
    assert (read.objects, read.marks, read.checks) == ((), (), ())
    assert list(read.photos) == ["a.jpg", "b.jpg"]
    assert read.photos["a.jpg"].size_px == (64, 48)
    assert read.photos["a.jpg"].path == tmp_path / "photos" / "a.jpg"
    assert len(read.photos["a.jpg"].digest) == 64
    assert {photo.camera for photo in read.photos.values()} == set(read.cameras)
    assert read.lost_photos == {}


def test_a_full_round(tmp_path: Path) -> None:
    write_round(
        tmp_path,
        ("a.jpg", "b.jpg", "sub/c.jpg"),
        round_toml="[marks]\nsd_px = 0.9\n[tape]\nsd_m = 0.01\n",
        cameras_toml=CARD,
        pairs_csv=(
            "\ufeffpair;photo_a;photo_b;photo_c;tape_m;tape_sd_m;bearing_deg;bearing_sd_deg;note;"
            "crew\r\n"
            "P1;a.jpg;b.jpg;sub/c.jpg;1,5;0,003;-10;2,5;by the gate;east\r\n"
            "P2;b.jpg;sub/c.jpg;;;;;;;west\r\n"
        ),
        objects_csv=(
            "object,kind,pair,label,ref_height_m,known_diameter_m,known_sd_m,note,street\n"
            "T1,Trunk,,Oak,1.3,,,leans,Quay\n"
            "B1,ball,P2,,,0.3,0.0005,,\n"
            "B2,ball,P2 P1,,,0.3,,,\n"
            "M1,,P1|P2,,0,,,,\n"
        ),
        marks_csv=MARKS + "M1,sub/c.jpg,Middle,1,2,3\nq1,a.jpg,tie,1,1,\nq1,b.jpg,tie,2,2,\n",
        checks_csv=(
            "object,diameter_m,sd_m,method,height_m,measured_on,by,tool\n"
            "T1,0.31,0.002,girth tape,1.3,2026-05-14,crew,no. 3\nT1,0.312,,,,,,\n"
        ),
    )
    read = load_round(tmp_path)
    assert read.pairs == (
        Pair(
            "P1", ("a.jpg", "b.jpg", "sub/c.jpg"), 1.5, 0.003, 350.0, 2.5, "by the gate",
            {"crew": "east"}, 2,
        ),
        Pair("P2", ("b.jpg", "sub/c.jpg"), None, 0.01, extra={"crew": "west"}, row=3),
    )  # fmt: skip
    blank = {"street": ""}
    assert read.objects == (
        RoundObject(
            "T1", "trunk", ("P1", "P2"), "Oak", 1.3, note="leans", extra={"street": "Quay"}, row=2
        ),
        RoundObject("B1", "ball", ("P2",), "", None, 0.3, 0.0005, extra=blank, row=3),
        RoundObject("B2", "ball", ("P1", "P2"), "", None, 0.3, 0.0015, extra=blank, row=4),
        RoundObject("M1", "pole", ("P1", "P2"), "", 0.0, extra=blank, row=5),
    )
    assert read.marks == (
        Mark("T1", "a.jpg", "left", 10.0, 20.0, 0.5, 2),
        Mark("T1", "b.jpg", "right", 30.0, 20.0, 0.9, 3),
        Mark("M1", "sub/c.jpg", "middle", 1.0, 2.0, 3.0, 4),
        Mark("q1", "a.jpg", "tie", 1.0, 1.0, 0.9, 5),
        Mark("q1", "b.jpg", "tie", 2.0, 2.0, 0.9, 6),
    )
    assert read.checks == (
        Check(
            "T1", 0.31, 0.002, "girth tape", 1.3, "2026-05-14", "crew", {"tool": "no. 3"}, 2
        ),
        Check("T1", 0.312, extra={"tool": ""}, row=3),
    )  # fmt: skip
    assert list(read.cameras) == ["phone"]
    assert read.notes == ()


def test_the_small_known_object_gets_the_least_sd(tmp_path: Path) -> None:
    objects = "object,known_diameter_m\nB1,0.05\n"
    assert load_round(write_round(tmp_path, objects_csv=objects)).objects[0].known_sd_m == 0.0005


def test_objects_from_marks_alone(tmp_path: Path) -> None:
    marks = (
        "object,photo,mark,x_px,y_px\nT2,b.jpg,left,1,1\nT1,a.jpg,base,1,1\n"
        "B1,a.jpg,outline,2,2\nline,a.jpg,plumb,3,3\nq,a.jpg,tie,3,3\n"
    )
    write_round(tmp_path, marks_csv=marks, round_toml='[round]\nkind = "trunk"\n')
    assert [(one.object, one.kind, one.pairs) for one in load_round(tmp_path).objects] == [
        ("T2", "trunk", ("P1",)), ("T1", "trunk", ("P1",)), ("B1", "ball", ("P1",)),
    ]  # fmt: skip


def test_pair_names_with_spaces(tmp_path: Path) -> None:
    write_round(
        tmp_path,
        pairs_csv="pair,photo_a,photo_b\nnorth bank,a.jpg,b.jpg\nsouth,b.jpg,a.jpg\n",
        objects_csv="object,pair\nT1,north bank\nT2,north bank | south\n",
    )
    assert [one.pairs for one in load_round(tmp_path).objects] == [
        ("north bank",), ("north bank", "south"),
    ]  # fmt: skip


def test_a_column_that_looks_like_one_of_ours_is_told(tmp_path: Path) -> None:
    """A tape reading under a wrong title would otherwise be missed in silence."""
    pairs = PAIRS.replace("tape_m", "tape")
    read = load_round(
        write_round(tmp_path, pairs_csv=pairs, objects_csv="object,refheight_m\nT,1\n")
    )
    assert read.pairs[0].tape_m is None
    assert read.pairs[0].extra == {"tape": "1.5"}
    assert read.notes[:2] == (
        "pairs.csv: the column 'tape' is passed through unread; did you mean 'tape_m'?",
        "objects.csv: the column 'refheight_m' is passed through unread; "
        "did you mean 'ref_height_m'?",
    )


def test_names_of_another_case_are_read_with_a_note(tmp_path: Path) -> None:
    write_round(
        tmp_path,
        pairs_csv="pair,photo_a,photo_b\nP1,A.JPG,b.jpg\n",
        marks_csv="object,photo,mark,x_px,y_px\nT1,a.jpg,left,1,1\nT1,a.JPG,left,1,2\n",
    )
    read = load_round(tmp_path)
    assert read.pairs[0].photos == ("a.jpg", "b.jpg")
    assert [mark.photo for mark in read.marks] == ["a.jpg", "a.jpg"]
    assert read.notes[0] == "pairs.csv, row 2: 'A.JPG' was read as 'a.jpg'"


def test_what_the_photos_say_of_themselves(tmp_path: Path) -> None:
    write_round(tmp_path)
    block = exif_block(
        {0x10F: (ASCII, "Alder"), 0x110: (ASCII, "A7"), 0x112: (SHORT, [6])},
        {
            0x9003: (ASCII, "2026:05:14 12:00:07"), 0x9011: (ASCII, "+00:00"),
            0x920A: (RATIONAL, [(51, 10)]), 0xA405: (SHORT, [26]), 0xA434: (ASCII, "main"),
        },
        {**GOOD_GPS, 0x10: (ASCII, "Q")},
    )  # fmt: skip
    write_photo(tmp_path / "photos" / "a.jpg", exif=block)
    photo = load_round(tmp_path).photos["a.jpg"]
    assert (photo.size_px, photo.turn_deg, photo.orientation) == ((48, 64), 90, 6)
    assert photo.taken_at == datetime(2026, 5, 14, 12, 0, 7, tzinfo=UTC)
    assert photo.fix is not None
    assert (photo.make, photo.model, photo.lens) == ("Alder", "A7", "main")
    assert (photo.focal_mm, photo.focal_35mm) == (5.1, 26.0)
    assert photo.direction_deg is None
    assert photo.problems == ("the image direction does not say true or magnetic and was not used",)


def test_portrait_and_landscape_photos_share_one_camera_from_exif(tmp_path: Path) -> None:
    write_round(tmp_path)
    for name, orientation in (("a.jpg", 1), ("b.jpg", 6)):
        block = exif_block({0x10F: (ASCII, "Alder"), 0x112: (SHORT, [orientation])})
        write_photo(tmp_path / "photos" / name, exif=block)
    read = load_round(tmp_path)
    assert list(read.cameras) == ["EXIF: Alder 64 x 48"]
    assert [photo.turn_deg for photo in read.photos.values()] == [0, 90]
    assert len([note for note in read.notes if "no camera card fits" in note]) == 1


def test_marks_are_judged_on_the_upright_picture(tmp_path: Path) -> None:
    write_round(tmp_path, marks_csv="object,photo,mark,x_px,y_px\nT1,a.jpg,left,40,60\n")
    write_photo(tmp_path / "photos" / "a.jpg", exif=exif_block({0x112: (SHORT, [6])}))
    assert load_round(tmp_path).marks[0].y_px == 60.0
    write_photo(tmp_path / "photos" / "a.jpg", exif=exif_block({0x112: (SHORT, [1])}))
    fault = one_fault(tmp_path)
    assert place(fault) == ("marks.csv", 2, "y_px", "60")
    assert "lying on its side" in fault.remedy


@pytest.mark.parametrize(("x", "y"), [("-0.5", "-0.5"), ("63.5", "47.5")])
def test_the_outermost_marks(tmp_path: Path, x: str, y: str) -> None:
    marks = f"object,photo,mark,x_px,y_px\nT1,a.jpg,left,{x},{y}\n"
    assert len(load_round(write_round(tmp_path, marks_csv=marks)).marks) == 1


def test_a_portrait_stored_as_such_with_a_card_of_its_size(tmp_path: Path) -> None:
    write_round(tmp_path)
    for name in ("a.jpg", "b.jpg"):
        write_photo(tmp_path / "photos" / name, (48, 64), exif_block({0x112: (SHORT, [1])}))
    assert {photo.turn_deg for photo in load_round(tmp_path).photos.values()} == {90}
    card = "[[camera]]\nsize_px = [48, 64]\nfocal_px = 60\n"
    (tmp_path / "cameras.toml").write_text(card)
    assert {photo.turn_deg for photo in load_round(tmp_path).photos.values()} == {0}


def test_lost_photos_do_not_stop_the_round(tmp_path: Path) -> None:
    write_round(tmp_path, objects_csv=OBJECTS, marks_csv=MARKS + "T1,a.jpg,left,9999,1,\n")
    (tmp_path / "photos" / "a.jpg").write_bytes(b"\xff\xd8\xff\xe0 not much of a photo")
    read = load_round(tmp_path)
    assert list(read.photos) == ["b.jpg"]
    assert list(read.lost_photos) == ["a.jpg"]
    assert read.lost_photos["a.jpg"].startswith("photo a.jpg: ")
    assert read.pairs[0].photos == ("a.jpg", "b.jpg")
    assert len(read.marks) == 3
    assert read.objects[0].pairs == ("P1",)


def test_a_photo_whose_card_is_of_another_shape_is_lost(tmp_path: Path) -> None:
    card = '[[camera]]\nname = "phone"\nmake = "Alder"\nsize_px = [64, 36]\nfocal_px = 60\n'
    write_round(tmp_path, cameras_toml=card)
    write_photo(tmp_path / "photos" / "a.jpg", exif=exif_block({0x10F: (ASCII, "Alder")}))
    read = load_round(tmp_path)
    assert "'phone' is for pictures of 64 x 36" in read.lost_photos["a.jpg"]
    assert list(read.photos) == ["b.jpg"]


def test_a_scaled_card_is_a_camera_of_its_own_with_a_note(tmp_path: Path) -> None:
    card = '[[camera]]\nname = "phone"\nsize_px = [128, 96]\nfocal_px = 120\n'
    read = load_round(write_round(tmp_path, cameras_toml=card))
    assert list(read.cameras) == ["phone at 64 x 48"]
    assert len(read.notes) == 1


def test_a_round_can_be_sent_to_another_process(tmp_path: Path) -> None:
    read = load_round(write_round(tmp_path, objects_csv=OBJECTS, marks_csv=MARKS))
    assert pickle.loads(pickle.dumps(read)) == read


HEAD = "object,photo,mark,x_px,y_px,sd_px\n"
KNOWN = "object,known_diameter_m,known_sd_m\n"

# What is written in which file, and where the one fault must be said to lie.
FAULTS = {
    "no pairs": ({"pairs_csv": None}, ("pairs.csv", None, None, None), "missing"),
    "empty pairs": ({"pairs_csv": ""}, ("pairs.csv", None, None, None), "empty"),
    "no pair": (
        {"pairs_csv": "pair,photo_a,photo_b\n"},
        ("pairs.csv", None, None, None),
        "no pair",
    ),
    "column": (
        {"pairs_csv": "pair,photo_a\nP1,a.jpg\n"},
        ("pairs.csv", 1, "photo_b", None),
        "add it",
    ),
    "unknown photo": (
        {"pairs_csv": "pair,photo_a,photo_b\nP1,a.jpg,c.jpg\n"},
        ("pairs.csv", 2, "photo_b", "c.jpg"),
        "no such file",
    ),
    "extra photo": (
        {"pairs_csv": "pair,photo_a,photo_b,photo_c\nP1,a.jpg,b.jpg,c.jpg\n"},
        ("pairs.csv", 2, "photo_c", "c.jpg"),
        "no such file",
    ),
    "escape": (
        {"pairs_csv": "pair,photo_a,photo_b\nP1,a.jpg,../photos/b.jpg\n"},
        ("pairs.csv", 2, "photo_b", "../photos/b.jpg"),
        "inside photos/",
    ),
    "absolute": (
        {"pairs_csv": "pair,photo_a,photo_b\nP1,/a.jpg,b.jpg\n"},
        ("pairs.csv", 2, "photo_a", "/a.jpg"),
        "inside photos/",
    ),
    "blank photo": (
        {"pairs_csv": "pair,photo_a,photo_b\nP1,a.jpg,\n"},
        ("pairs.csv", 2, "photo_b", ""),
        "file name",
    ),
    "blank pair": (
        {"pairs_csv": "pair,photo_a,photo_b\n,a.jpg,b.jpg\n"},
        ("pairs.csv", 2, "pair", ""),
        "name",
    ),
    "twice the photo": (
        {"pairs_csv": "pair,photo_a,photo_b\nP1,a.jpg,A.jpg\n"},
        ("pairs.csv", 2, "photo_b", "A.jpg"),
        "different photos",
    ),
    "twice the third": (
        {"pairs_csv": "pair,photo_a,photo_b,photo_c\nP1,a.jpg,b.jpg,a.jpg\n"},
        ("pairs.csv", 2, "photo_c", "a.jpg"),
        "photo_a names the same",
    ),
    "twice the pair": (
        {"pairs_csv": "pair,photo_a,photo_b\nP1,a.jpg,b.jpg\nP1,b.jpg,a.jpg\n"},
        ("pairs.csv", 3, "pair", "P1"),
        "row 2",
    ),
    "tape text": (
        {"pairs_csv": PAIRS.replace("1.5", "one")},
        ("pairs.csv", 2, "tape_m", "one"),
        "digits",
    ),
    "tape unit": (
        {"pairs_csv": PAIRS.replace("1.5", "1.5m")},
        ("pairs.csv", 2, "tape_m", "1.5m"),
        "unit",
    ),
    "tape nought": (
        {"pairs_csv": PAIRS.replace("1.5", "0")},
        ("pairs.csv", 2, "tape_m", "0"),
        "blank",
    ),
    "tape negative": (
        {"pairs_csv": PAIRS.replace("1.5", "-2")},
        ("pairs.csv", 2, "tape_m", "-2"),
        "above 0",
    ),
    "tape nan": (
        {"pairs_csv": PAIRS.replace("1.5", "nan")},
        ("pairs.csv", 2, "tape_m", "nan"),
        "finite",
    ),
    "tape in mm": (
        {"pairs_csv": PAIRS.replace("1.5", "1778")},
        ("pairs.csv", 2, "tape_m", "1778"),
        "metres",
    ),
    "decimal comma": (
        {"pairs_csv": PAIRS.replace("1.5", '"1,5"')},
        ("pairs.csv", 2, "tape_m", "1,5"),
        "1.5",
    ),
    "decimal comma splits": (
        {"pairs_csv": PAIRS.replace("1.5", "1,5")},
        ("pairs.csv", 2, None, "P1,a.jpg,b.jpg,1,5"),
        "1.5",
    ),
    "tape sd": (
        {"pairs_csv": "pair,photo_a,photo_b,tape_sd_m\nP1,a.jpg,b.jpg,0\n"},
        ("pairs.csv", 2, "tape_sd_m", "0"),
        "above 0",
    ),
    "tape sd in mm": (
        {"pairs_csv": "pair,photo_a,photo_b,tape_m,tape_sd_m\nP1,a.jpg,b.jpg,1.5,3\n"},
        ("pairs.csv", 2, "tape_sd_m", "3"),
        "in metres",
    ),
    "bearing": (
        {"pairs_csv": "pair,photo_a,photo_b,bearing_deg\nP1,a.jpg,b.jpg,400\n"},
        ("pairs.csv", 2, "bearing_deg", "400"),
        "at most 360",
    ),
    "bearing sd": (
        {"pairs_csv": "pair,photo_a,photo_b,bearing_sd_deg\nP1,a.jpg,b.jpg,-1\n"},
        ("pairs.csv", 2, "bearing_sd_deg", "-1"),
        "above 0",
    ),
    "empty objects": ({"objects_csv": ""}, ("objects.csv", None, None, None), "empty"),
    "object column": (
        {"objects_csv": "name,kind\nT1,pole\n"},
        ("objects.csv", 1, "object", None),
        "add it",
    ),
    "blank object": (
        {"objects_csv": "object,kind\n,pole\n"},
        ("objects.csv", 2, "object", ""),
        "name",
    ),
    "twice the object": (
        {"objects_csv": "object\nT1\nT2\nT1\n"},
        ("objects.csv", 4, "object", "T1"),
        "row 2",
    ),
    "kind": (
        {"objects_csv": "object,kind\nT1,tree\n"},
        ("objects.csv", 2, "kind", "tree"),
        "trunk",
    ),
    "object's pair": (
        {"objects_csv": "object,pair\nT1,P1 P9\n"},
        ("objects.csv", 2, "pair", "P1 P9"),
        "no pair 'P9'",
    ),
    "height": (
        {"objects_csv": "object,ref_height_m\nT1,-1\n"},
        ("objects.csv", 2, "ref_height_m", "-1"),
        "0 or more",
    ),
    "diameter": (
        {"objects_csv": KNOWN + "B,0,\n"},
        ("objects.csv", 2, "known_diameter_m", "0"),
        "blank",
    ),
    "diameter in mm": (
        {"objects_csv": KNOWN + "B,300,\n"},
        ("objects.csv", 2, "known_diameter_m", "300"),
        "metres",
    ),
    "sd nought": (
        {"objects_csv": KNOWN + "B,1,0\n"},
        ("objects.csv", 2, "known_sd_m", "0"),
        "above 0",
    ),
    "sd in mm": (
        {"objects_csv": KNOWN + "B,0.3,5\n"},
        ("objects.csv", 2, "known_sd_m", "5"),
        "in metres",
    ),
    "half a diameter": (
        {"objects_csv": KNOWN + "B,,0.001\n"},
        ("objects.csv", 2, "known_diameter_m", ""),
        "needs its",
    ),
    "empty marks": ({"marks_csv": ""}, ("marks.csv", None, None, None), "empty"),
    "marks column": (
        {"marks_csv": "object,photo,mark,x_px\nT,a.jpg,left,1\n"},
        ("marks.csv", 1, "y_px", None),
        "add it",
    ),
    "mark name": (
        {"marks_csv": HEAD + "T,a.jpg,lft,1,1,\n"},
        ("marks.csv", 2, "mark", "lft"),
        "'left'",
    ),
    "blank mark": ({"marks_csv": HEAD + "T,a.jpg,,1,1,\n"}, ("marks.csv", 2, "mark", ""), "one of"),
    "blank x": ({"marks_csv": HEAD + "T,a.jpg,left,,1,\n"}, ("marks.csv", 2, "x_px", ""), "pixels"),
    "y text": (
        {"marks_csv": HEAD + "T,a.jpg,left,1,low,\n"},
        ("marks.csv", 2, "y_px", "low"),
        "digits",
    ),
    "y inf": (
        {"marks_csv": HEAD + "T,a.jpg,left,1,inf,\n"},
        ("marks.csv", 2, "y_px", "inf"),
        "finite",
    ),
    "mark sd": (
        {"marks_csv": HEAD + "T,a.jpg,left,1,1,0\n"},
        ("marks.csv", 2, "sd_px", "0"),
        "above 0",
    ),
    "right of photo": (
        {"marks_csv": HEAD + "T,a.jpg,left,63.6,1,\n"},
        ("marks.csv", 2, "x_px", "63.6"),
        "64 x 48",
    ),
    "left of photo": (
        {"marks_csv": HEAD + "T,a.jpg,left,-0.6,1,\n"},
        ("marks.csv", 2, "x_px", "-0.6"),
        "-0.5 and 63.5",
    ),
    "below photo": (
        {"marks_csv": HEAD + "T,a.jpg,left,1,47.6,\n"},
        ("marks.csv", 2, "y_px", "47.6"),
        "-0.5 and 47.5",
    ),
    "mark's photo": (
        {"marks_csv": HEAD + "T,d.jpg,left,1,1,\n"},
        ("marks.csv", 2, "photo", "d.jpg"),
        "no such file",
    ),
    "mark's escape": (
        {"marks_csv": HEAD + "T,../x.jpg,left,1,1,\n"},
        ("marks.csv", 2, "photo", "../x.jpg"),
        "inside photos/",
    ),
    "mark's object": (
        {"objects_csv": OBJECTS, "marks_csv": HEAD + "T2,a.jpg,left,1,1,\n"},
        ("marks.csv", 2, "object", "T2"),
        "no such object",
    ),
    "outline of a trunk": (
        {"objects_csv": OBJECTS, "marks_csv": HEAD + "T1,a.jpg,outline,1,1,\n"},
        ("marks.csv", 2, "mark", "outline"),
        "left and right",
    ),
    "tie twice": (
        {"marks_csv": HEAD + "q,a.jpg,tie,1,1,\nq,a.jpg,tie,2,2,\n"},
        ("marks.csv", 3, "object", "q"),
        "row 2",
    ),
    "empty checks": ({"checks_csv": ""}, ("checks.csv", None, None, None), "empty"),
    "check's object": (
        {"objects_csv": OBJECTS, "checks_csv": "object,diameter_m\nT9,1\n"},
        ("checks.csv", 2, "object", "T9"),
        "no such object",
    ),
    "check's diameter": (
        {"objects_csv": OBJECTS, "checks_csv": "object,diameter_m\nT1,\n"},
        ("checks.csv", 2, "diameter_m", ""),
        "metres",
    ),
    "check negative": (
        {"objects_csv": OBJECTS, "checks_csv": "object,diameter_m\nT1,-0.3\n"},
        ("checks.csv", 2, "diameter_m", "-0.3"),
        "above 0",
    ),
    "check's sd": (
        {"objects_csv": OBJECTS, "checks_csv": "object,diameter_m,sd_m\nT1,0.3,0\n"},
        ("checks.csv", 2, "sd_m", "0"),
        "above 0",
    ),
    "check's height": (
        {"objects_csv": OBJECTS, "checks_csv": "object,diameter_m,height_m\nT1,0.3,high\n"},
        ("checks.csv", 2, "height_m", "high"),
        "digits",
    ),
    "settings": ({"round_toml": "[tape]\nsd = 1\n"}, ("round.toml", 2, "sd", "1"), "sd_m"),
    "toml": ({"round_toml": "[tape\n"}, ("round.toml", 1, None, "[tape"), "not TOML"),
    "card": (
        {"cameras_toml": CARD + "focal_sd_px = 0\n"},
        ("cameras.toml", 5, "focal_sd_px", "0"),
        "above 0",
    ),
    "two cards": (
        {"cameras_toml": CARD + CARD.replace("phone", "other")},
        ("cameras.toml", 5, "name", "other"),
        "'phone' fits the same",
    ),
}


@pytest.mark.parametrize("case", FAULTS)
def test_one_fault_and_its_place(tmp_path: Path, case: str) -> None:
    files, expected, word = FAULTS[case]
    write_round(tmp_path, **files)  # type: ignore[arg-type]
    fault = one_fault(tmp_path)
    assert place(fault) == expected
    assert word in fault.remedy
    assert fault.sentence().startswith(f"{fault.file}")
    assert not (tmp_path / "out").exists()


def test_no_photos_folder_is_said_once(tmp_path: Path) -> None:
    (tmp_path / "pairs.csv").write_text(PAIRS)
    (tmp_path / "marks.csv").write_text(MARKS)
    fault = one_fault(tmp_path)
    assert place(fault) == ("photos", None, None, None)


def test_a_photo_of_no_pair(tmp_path: Path) -> None:
    marks = HEAD + "T,c.jpg,left,1,1,\n"
    write_round(tmp_path, ("a.jpg", "b.jpg", "c.jpg"), marks_csv=marks)
    fault = one_fault(tmp_path)
    assert place(fault) == ("marks.csv", 2, "photo", "c.jpg")
    assert "no pair of pairs.csv has this photo" in fault.remedy


def test_marks_on_a_photo_that_pairs_csv_misses_are_not_said_again(tmp_path: Path) -> None:
    write_round(
        tmp_path,
        pairs_csv="pair,photo_a,photo_b\nP1,a.jpg,c.jpg\n",
        marks_csv=HEAD + "T,c.jpg,left,1,1,\n",
    )
    assert place(one_fault(tmp_path)) == ("pairs.csv", 2, "photo_b", "c.jpg")


def test_an_unusable_objects_sheet_does_not_make_every_mark_a_fault(tmp_path: Path) -> None:
    write_round(
        tmp_path, objects_csv="name\nT1\n", marks_csv=MARKS, checks_csv="object,diameter_m\nT1,1\n"
    )
    assert place(one_fault(tmp_path)) == ("objects.csv", 1, "object", None)


def test_a_wrong_row_still_names_its_object_and_pair(tmp_path: Path) -> None:
    write_round(
        tmp_path,
        pairs_csv=PAIRS.replace("1.5", "x"),
        objects_csv="object,kind,pair\nT1,tree,P1\n",
        marks_csv=MARKS,
    )
    assert [place(fault)[:3] for fault in faults_of(tmp_path)] == [
        ("pairs.csv", 2, "tape_m"), ("objects.csv", 2, "kind"),
    ]  # fmt: skip


def test_every_fault_of_every_file_in_one_go(tmp_path: Path) -> None:
    write_round(
        tmp_path,
        round_toml="[tape]\nsd = 1\n[marks]\nsd_px = -1\n",
        cameras_toml=CARD + "focal_sd_px = 0\ncentre_sd_px = 0\n",
        pairs_csv="pair,photo_a,photo_b,tape_m\nP1,a.jpg,a.jpg,-1\nP1,b.jpg,z.jpg,nan\n",
        objects_csv="object,kind,pair,known_sd_m\nT1,tree,P7,1\nT1,pole,P1,\n",
        marks_csv="object,photo,mark,x_px,y_px\nT9,a.jpg,side,-5,99\nT1,b.jpg,left,1\n",
        checks_csv="object,diameter_m\nT8,0\n",
    )
    found = [place(fault)[:3] for fault in faults_of(tmp_path)]
    assert found == [
        ("round.toml", 2, "sd"),
        ("round.toml", 4, "sd_px"),
        ("cameras.toml", 5, "focal_sd_px"),
        ("cameras.toml", 6, "centre_sd_px"),
        ("pairs.csv", 2, "photo_b"),
        ("pairs.csv", 2, "tape_m"),
        ("pairs.csv", 3, "photo_b"),
        ("pairs.csv", 3, "tape_m"),
        ("pairs.csv", 3, "pair"),
        ("objects.csv", 2, "kind"),
        ("objects.csv", 2, "known_diameter_m"),
        ("objects.csv", 2, "pair"),
        ("objects.csv", 3, "object"),
        ("marks.csv", 2, "mark"),
        ("marks.csv", 2, "object"),
        ("marks.csv", 2, "x_px"),
        ("marks.csv", 2, "y_px"),
        ("marks.csv", 3, None),
        ("checks.csv", 2, "object"),
        ("checks.csv", 2, "diameter_m"),
    ]


def test_no_such_folder(tmp_path: Path) -> None:
    with pytest.raises(SheetsError, match="no such folder"):
        load_round(tmp_path / "missing")


def test_faults_do_not_depend_on_the_spreadsheet(tmp_path: Path) -> None:
    """BOM, CRLF and semicolons change no line number and no column name."""
    lines = ["pair;photo_a;photo_b;tape_m", "P1;a.jpg;b.jpg;1,5", "P2;b.jpg;a.jpg;1,5 m"]
    write_round(tmp_path, pairs_csv="\ufeff" + "\r\n".join(lines) + "\r\n")
    assert place(one_fault(tmp_path)) == ("pairs.csv", 3, "tape_m", "1,5 m")


def test_every_mark_name_is_read(tmp_path: Path) -> None:
    lines = [f"B,a.jpg,{name},{place},1," for place, name in enumerate(MARK_NAMES)]
    known = "landmark,longitude,latitude\nB,13,52\n"
    folder = write_round(tmp_path, marks_csv=HEAD + "\n".join(lines), landmarks_csv=known)
    read = load_round(folder)
    assert tuple(mark.mark for mark in read.marks) == MARK_NAMES


def test_practice_rounds_load() -> None:
    folders = [path.parent for path in sorted(shared("practice").glob("*/pairs.csv"))]
    assert len(folders) == 9
    for folder in folders:
        read = load_round(folder)
        assert read.lost_photos == {}
        for photo in read.photos.values():
            assert photo.fix is not None
            assert photo.fix.horizontal_sd_m is not None
            assert photo.taken_at is not None
            assert photo.problems == ()
        assert all(one.pairs for one in read.objects)
        sources = {camera.source for camera in read.cameras.values()}
        assert sources == {"exif" if folder.name == "p9-round" else "card"}
        assert len(read.cameras) == 1
