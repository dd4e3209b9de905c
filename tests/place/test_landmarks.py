"""Landmarks and antenna arms: known points that turn and hold a pair. All coordinates invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldround.geometry.earth import geodetic_from_enu
from fieldround.place.fitting import turn
from fieldround.place.frames import PairFrame, Sighting
from fieldround.rounds.model import Landmark, Round
from tests.place.invented import a_frame, a_photo, a_round
from tests.place.test_placing import ORIGIN, PAIRS, east_north, pair_photos, placed

HEADING = 70.0


def landmark(name: str, east: float, north: float, sd: float = 0.1) -> Landmark:
    lon, lat, _ = geodetic_from_enu(np.array([[east, north, 0.0]]), ORIGIN)[0]
    return Landmark(name, lon, lat, None, sd)


def sighting(east: float, north: float, photo: str = "a.jpg", off_deg: float = 0.0) -> Sighting:
    """From a station of a pair at the origin that looks along HEADING."""
    station = turn(HEADING) @ [2.0 if photo == "b.jpg" else 0.0, 0.0]
    way = np.array([east, north]) - station
    azimuth = np.radians(np.degrees(np.arctan2(way[0], way[1])) - HEADING + off_deg)
    return Sighting("spire", photo, np.array([np.sin(azimuth), np.cos(azimuth), 0.1]), 0.05)


def with_landmarks(round_: Round, *points: Landmark) -> Round:
    return replace(round_, landmarks=points)


def seeing(*sightings: Sighting) -> PairFrame:
    return replace(a_frame("P1"), sightings=sightings)


def test_a_far_landmark_turns_the_pair() -> None:
    far = (800.0, 900.0)
    round_ = with_landmarks(a_round(pair_photos(HEADING, 5.0), PAIRS), landmark("spire", *far))
    pair = placed(round_, [seeing(sighting(*far))]).pairs["P1"]
    assert pair.heading_from == "landmark"
    assert pair.heading_deg == pytest.approx(HEADING, abs=0.1)
    assert pair.heading_sd_deg == pytest.approx(np.degrees(5.0 / np.hypot(*far)), rel=0.1)


def test_a_landmark_outweighs_a_compass_that_is_out() -> None:
    far = (800.0, 900.0)
    photos = pair_photos(HEADING, 5.0, direction=HEADING + 40.0)
    round_ = with_landmarks(a_round(photos, PAIRS), landmark("spire", *far))
    pair = placed(round_, [seeing(sighting(*far), sighting(*far, "b.jpg"))]).pairs["P1"]
    assert pair.heading_deg == pytest.approx(HEADING, abs=0.5)
    assert pair.heading_from == "landmark"
    assert any("photo compass is 40 degrees off" in note for note in pair.notes)


def test_two_photos_of_one_landmark_do_not_count_twice() -> None:
    far = (300.0, 100.0)
    round_ = with_landmarks(a_round(pair_photos(HEADING, 5.0), PAIRS), landmark("spire", *far))
    one = placed(round_, [seeing(sighting(*far))]).pairs["P1"].heading_sd_deg
    two = placed(round_, [seeing(sighting(*far), sighting(*far, "b.jpg"))]).pairs["P1"]
    assert two.heading_deg == pytest.approx(HEADING, abs=0.1)
    assert one is not None
    assert two.heading_sd_deg is not None
    assert two.heading_sd_deg > 0.95 * one


def test_the_offset_of_the_second_station_is_in_the_direction() -> None:
    near = (60.0, 10.0)
    photos = pair_photos(HEADING, 0.02, base=2.0)
    round_ = with_landmarks(a_round(photos, PAIRS), landmark("spire", *near, sd=0.01))
    pair = placed(round_, [seeing(sighting(*near, "b.jpg"))]).pairs["P1"]
    # 2 m at 60 m would be 1.9 degrees.
    assert pair.heading_deg == pytest.approx(HEADING, abs=0.05)
    assert pair.heading_sd_deg is not None
    assert pair.heading_sd_deg < 0.1


def test_a_landmark_too_near_for_a_phone_is_said_so() -> None:
    near = (9.0, 0.0)
    photos = pair_photos(HEADING, 5.0, direction=HEADING)
    round_ = with_landmarks(a_round(photos, PAIRS), landmark("spire", *near))
    pair = placed(round_, [seeing(sighting(*near))]).pairs["P1"]
    assert pair.heading_from == "photo compass"
    assert any("landmark spire is too near" in note for note in pair.notes)


def test_an_object_of_known_coordinates_holds_its_pair() -> None:
    """T1 at 10 m is a surveyed point: the stations are known to its sd, not the phone's."""
    known = turn(HEADING) @ [1.0, 10.0]
    shifted = (4.0, -3.0)
    photos = pair_photos(HEADING, 5.0, at=shifted, direction=HEADING)
    frame = a_frame("P1", objects={"T1": (1.0, 10.0, 0.0), "T2": (3.0, 14.0, 0.0)})
    plain = placed(a_round(photos, PAIRS), [frame])
    held = placed(with_landmarks(a_round(photos, PAIRS), landmark("T1", *known, 0.02)), [frame])
    assert east_north(held.objects["T1"]) == pytest.approx(known, abs=0.05)
    assert held.objects["T1"].position_sd_m < 0.1
    assert held.objects["T2"].position_sd_m < 0.2 * plain.objects["T2"].position_sd_m
    assert held.pairs["P1"].stations["a.jpg"].position_sd_m < 2.0
    assert east_north(held.objects["T2"]) == pytest.approx(turn(HEADING) @ [3.0, 14.0], abs=2.0)


def test_a_pair_without_fixes_is_held_by_two_known_objects() -> None:
    photos = [a_photo("a.jpg"), a_photo("b.jpg")]
    frame = a_frame("P1", objects={"T1": (-4.0, 10.0, 0.0), "T2": (6.0, 14.0, 0.0),
                                   "T3": (0.0, 12.0, 0.0)})  # fmt: skip
    at = [turn(HEADING) @ [x, y] for x, y in ((-4.0, 10.0), (6.0, 14.0), (0.0, 12.0))]
    round_ = with_landmarks(a_round(photos, PAIRS), landmark("T1", *at[0], 0.02),
                            landmark("T2", *at[1], 0.02))  # fmt: skip
    found = placed(round_, [frame])
    assert found.pairs["P1"].heading_from == "landmark"
    assert found.pairs["P1"].heading_deg == pytest.approx(HEADING, abs=0.05)
    assert east_north(found.objects["T3"]) == pytest.approx(at[2], abs=0.02)
    assert found.objects["T3"].elevation_m is None
    assert found.epsg == 32633


def test_the_arm_from_antenna_to_camera_turns_with_the_view() -> None:
    """Cameras 0.5 m ahead of their antennas and 0.2 m to the right of them."""
    photos = []
    for photo in pair_photos(HEADING, 0.02, base=2.0):
        assert photo.fix is not None
        antenna = turn(HEADING) @ [-0.2, -0.5]
        origin = np.array([photo.fix.longitude_deg, photo.fix.latitude_deg, 0.0])
        lon, lat, _ = geodetic_from_enu(np.array([[*antenna, 0.0]]), origin)[0]
        moved = replace(photo.fix, longitude_deg=lon, latitude_deg=lat, arm_m=(0.2, 0.5))
        photos.append(replace(photo, fix=moved))
    found = placed(a_round(photos, PAIRS), [a_frame("P1")])
    assert east_north(found.pairs["P1"].stations["a.jpg"]) == pytest.approx([0.0, 0.0], abs=1e-3)
    assert east_north(found.objects["T1"]) == pytest.approx(turn(HEADING) @ [1.0, 10.0], abs=5e-3)
    bare = [replace(p, fix=replace(p.fix, arm_m=(0.0, 0.0))) for p in photos if p.fix]
    off = east_north(placed(a_round(bare, PAIRS), [a_frame("P1")]).pairs["P1"].stations["a.jpg"])
    assert np.hypot(*off) == pytest.approx(np.hypot(0.2, 0.5), abs=1e-2)
