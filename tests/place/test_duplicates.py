"""Objects that may be one thing entered twice."""

from __future__ import annotations

import numpy as np

from fieldround.geometry.earth import geodetic_from_enu
from fieldround.place.duplicates import near_duplicates, twin_notes
from fieldround.place.ellipses import error_ellipse
from fieldround.place.frames import PlacedPoint
from fieldround.rounds.model import RoundObject


def at(east: float, north: float, sd: float, lon: float = 180.0) -> PlacedPoint:
    place = geodetic_from_enu(np.array([[east, north, 0.0]]), np.array([lon, -17.8, 0.0]))[0]
    cov = sd**2 * np.eye(2)
    return PlacedPoint(place[0], place[1], 0.0, 0.0, None, "", cov, sd, error_ellipse(cov))


def thing(name: str, kind: str = "pole", pair: str | None = None) -> RoundObject:
    return RoundObject(name, kind, (pair or f"P-{name}",))


def test_near_objects_of_one_kind_are_listed_nearest_first() -> None:
    things = [thing("T1"), thing("T2"), thing("T3"), thing("T4", "trunk"), thing("T5")]
    places = {
        "T1": at(0.0, 0.0, 4.0), "T2": at(6.0, 0.0, 4.0), "T3": at(2.0, 0.0, 4.0),
        "T4": at(0.5, 0.0, 4.0), "T5": at(80.0, 0.0, 4.0),
    }  # fmt: skip
    found = near_duplicates(things, places)
    assert [(twin.first, twin.second) for twin in found] == [
        ("T1", "T3"), ("T2", "T3"), ("T1", "T2"),
    ]  # fmt: skip
    assert abs(found[0].apart_m - 2.0) < 1e-6


def test_the_limit_is_the_joint_95_percent_ellipse() -> None:
    things = [thing("T1"), thing("T2")]
    limit = 3.0 * np.sqrt(2.0) * np.sqrt(5.9915)
    for factor, count in ((0.99, 1), (1.01, 0)):
        places = {"T1": at(0.0, 0.0, 3.0), "T2": at(0.0, factor * limit, 3.0)}
        assert len(near_duplicates(things, places)) == count


def test_objects_of_one_pair_are_two() -> None:
    things = [thing("T1", pair="P1"), thing("T2", pair="P1")]
    assert near_duplicates(things, {"T1": at(0, 0, 4.0), "T2": at(1, 0, 4.0)}) == ()


def test_long_lists_are_cut_in_the_notes_only() -> None:
    things = [thing(f"T{k}") for k in range(6)]
    twins = near_duplicates(things, {f"T{k}": at(0.1 * k, 0.0, 4.0) for k in range(6)})
    notes = twin_notes(twins)
    assert len(twins) == 15
    assert len(notes) == 11
    assert notes[-1].startswith("5 more pairs")
    assert near_duplicates([], {}) == ()
