"""Twos and threes of a walk, from invented times, places and overlaps."""

from __future__ import annotations

import numpy as np

from fieldround.geometry.earth import geodetic_from_enu
from fieldround.plan.overlap import Shared
from fieldround.plan.pairing import group_photos, in_order
from fieldround.rounds.model import Photo
from tests.place.invented import a_photo

ORIGIN = np.array([180.0, -17.8, 0.0])


def photo(name: str, seconds: float | None, east: float | None = 0.0, **given: object) -> Photo:
    if east is None:
        return a_photo(name, seconds=seconds, **given)  # type: ignore[arg-type]
    lon, lat, _ = geodetic_from_enu(np.array([[east, 0.0, 0.0]]), ORIGIN)[0]
    return a_photo(name, lon, lat, seconds=seconds, **given)  # type: ignore[arg-type]


def grouped(
    photos: list[Photo], scenes: dict[str, str], points: int = 200, moved: float = 0.05
) -> tuple[list[tuple[str, ...]], dict[str, str], list[str]]:
    """Groups when photos of one scene share points; scenes: photo -> scene."""
    walk = in_order(photos)

    def sharing(i: int, j: int) -> Shared:
        same = scenes[walk[i].name] == scenes[walk[j].name]
        return Shared(points, points + 20, moved) if same else Shared(12, 60, 0.3)

    groups, alone = group_photos(walk, sharing)
    return [group.photos for group in groups], alone, [group.why for group in groups]


def test_pairs_of_a_walk() -> None:
    photos = [photo(f"{k}.jpg", 20.0 * k + 100.0 * (k // 2), 15.0 * (k // 2)) for k in range(6)]
    groups, alone, why = grouped(photos, {f"{k}.jpg": str(k // 2) for k in range(6)})
    assert groups == [("0.jpg", "1.jpg"), ("2.jpg", "3.jpg"), ("4.jpg", "5.jpg")]
    assert alone == {}
    assert why[0] == "20 s apart, 0 m by GNSS (sd 5 m), 200 shared points"


def test_threes_when_all_three_show_the_scene() -> None:
    photos = [photo(f"{k}.jpg", 15.0 * k) for k in range(5)]
    groups, _, why = grouped(photos, dict(zip(("0.jpg", "1.jpg", "2.jpg", "3.jpg", "4.jpg"),
                                              "aaabb", strict=True)))  # fmt: skip
    assert groups == [("0.jpg", "1.jpg", "2.jpg"), ("3.jpg", "4.jpg")]
    assert why[0].startswith("0.jpg and 1.jpg: 15 s apart")


def test_one_scene_seen_twice_is_cut_at_the_pause() -> None:
    photos = [photo(f"{k}.jpg", t) for k, t in enumerate((0.0, 10.0, 400.0, 410.0))]
    groups, _, _ = grouped(photos, dict.fromkeys([f"{k}.jpg" for k in range(4)], "a"))
    assert groups == [("0.jpg", "1.jpg"), ("2.jpg", "3.jpg")]


def test_a_crew_that_photographs_all_first_stations_before_the_second() -> None:
    photos = [photo(f"{k}A.jpg", 20.0 * k, 30.0 * k) for k in range(4)]
    photos += [photo(f"{k}B.jpg", 200.0 + 20.0 * k, 30.0 * k + 3.0) for k in range(4)]
    groups, _, _ = grouped(photos, {p.name: p.name[0] for p in photos})
    assert sorted(groups) == [(f"{k}A.jpg", f"{k}B.jpg") for k in range(4)]


def test_without_times_the_names_give_the_order() -> None:
    photos = [photo(f"IMG_{k}.jpg", None, None) for k in range(4)]
    groups, _, why = grouped(photos, {f"IMG_{k}.jpg": str(k // 2) for k in range(4)})
    assert groups == [("IMG_0.jpg", "IMG_1.jpg"), ("IMG_2.jpg", "IMG_3.jpg")]
    assert why == ["200 shared points"] * 2


def test_what_does_not_go_together_says_why() -> None:
    far = [photo("a.jpg", 0.0), photo("b.jpg", 20.0, 500.0)]
    groups, alone, _ = grouped(far, {"a.jpg": "a", "b.jpg": "a"})
    assert groups == []
    assert alone["a.jpg"] == "with b.jpg: their positions are 500 m apart"
    late = [photo("a.jpg", 0.0), photo("b.jpg", 4000.0)]
    assert "67 min apart" in grouped(late, {"a.jpg": "a", "b.jpg": "a"})[1]["a.jpg"]
    other = [photo("a.jpg", 0.0, None), photo("b.jpg", 20.0, None)]
    assert "no common scene" in grouped(other, {"a.jpg": "a", "b.jpg": "b"})[1]["b.jpg"]
    twice = [photo("a.jpg", 0.0), photo("b.jpg", 5.0)]
    assert "same spot" in grouped(twice, {"a.jpg": "a", "b.jpg": "a"}, moved=0.001)[1]["a.jpg"]
    assert grouped([photo("a.jpg", 0.0)], {"a.jpg": "a"})[1] == {"a.jpg": "it is the only photo"}


def test_two_left_over_that_are_near_are_proposed_with_a_warning() -> None:
    scenes = {"a.jpg": "a", "b.jpg": "b"}
    near = [photo("a.jpg", 0.0, direction=10.0), photo("b.jpg", 20.0, 4.0, direction=30.0)]
    groups, alone, why = grouped(near, scenes)
    assert groups == [("a.jpg", "b.jpg")]
    assert alone == {}
    assert "no common scene was found: check" in why[0]
    turned = [near[0], photo("b.jpg", 20.0, 4.0, direction=170.0)]
    assert grouped(turned, scenes)[0] == []


def test_few_shared_points_are_said_to_be_few() -> None:
    photos = [photo("a.jpg", 0.0), photo("b.jpg", 20.0)]
    _, _, why = grouped(photos, {"a.jpg": "a", "b.jpg": "a"}, points=18)
    assert "18 shared points (few: check" in why[0]


def test_the_order_of_a_walk_is_time_then_name() -> None:
    photos = [photo("z.jpg", None), photo("b.jpg", 5.0), photo("a.jpg", 9.0), photo("c.jpg", None)]
    assert [p.name for p in in_order(photos)] == ["b.jpg", "a.jpg", "c.jpg", "z.jpg"]


def test_every_photo_is_in_one_group_or_has_a_reason() -> None:
    rng = np.random.default_rng(7)
    for _ in range(20):
        count = int(rng.integers(2, 15))
        photos = [
            photo(f"{k:02d}.jpg", float(rng.integers(0, 900)), float(rng.integers(0, 200)))
            for k in range(count)
        ]
        scenes = {p.name: str(rng.integers(0, count // 2 + 1)) for p in photos}
        groups, alone, _ = grouped(photos, scenes)
        names = [name for group in groups for name in group] + list(alone)
        assert sorted(names) == sorted(scenes)
        assert all(len(group) in (2, 3) for group in groups)
