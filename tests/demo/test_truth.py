"""Marks, stations and true dimensions belong together; positions against pymap3d (PyPI).

The limbs are checked by the touching condition (distance of sight line and axis = radius), not by
the formula the marks were made with.
"""

from __future__ import annotations

import numpy as np
import pytest

from demo_site.outing import SITE, quillwater_round
from demo_site.truth import geodetic
from fieldround.geometry.camera import rays, to_card
from tests.demo.test_site import rows

pymap3d = pytest.importorskip("pymap3d")

VIEWS = {row["photo"]: row for row in rows("truth_views.csv")}
TRUTH = {row["object"]: row for row in rows("truth.csv")}


def sight(photo: str, xy_px: np.ndarray) -> tuple[np.ndarray, np.ndarray, float]:
    """Station (3,), directions (n, 3) and focal length, from truth_views.csv alone."""
    row = VIEWS[photo]
    values = np.array(
        [float(row[k]) for k in ["fx", "fy", "cx", "cy", "k1", "k2", "p1", "p2", "k3"]]
    )
    rotation = np.array([float(row[f"r{i}{j}"]) for i in range(3) for j in range(3)]).reshape(3, 3)
    size = (int(row["width_px"]), int(row["height_px"]))
    directions = rays(to_card(xy_px, int(row["turn_deg"]), size), values) @ rotation
    station = np.array([float(row[k]) for k in ("east_m", "north_m", "up_m")])
    return station, directions, values[0]


def place(row: dict[str, str], up_m: float) -> np.ndarray:
    east, north, _ = pymap3d.geodetic2enu(
        float(row["latitude"]), float(row["longitude"]), SITE[2] + up_m, SITE[1], SITE[0], SITE[2]
    )
    return np.array([east, north, up_m])


def scatter() -> dict[str, list[float]]:
    """How far every mark lies from the truth, in sds, by mark."""
    found: dict[str, list[float]] = {}
    things = {thing.object: thing for thing in quillwater_round().things}
    for mark in rows("marks.csv"):
        if mark["mark"] == "plumb":
            continue
        row = TRUTH[mark["object"]]
        pixel = np.array([[float(mark["x_px"]), float(mark["y_px"])]])
        station, direction, focal = sight(mark["photo"], pixel)
        radius = float(row["diameter_m"]) / 2
        if row["kind"] == "ball":
            centre = place(row, things[mark["object"]].place[2])
            away = centre - station
            miss = np.linalg.norm(np.cross(direction[0], away)) - radius
            size = focal / np.linalg.norm(away)
        elif mark["mark"] in ("left", "right"):
            if row["kind"] == "pipe":
                axis, taper = np.array([0.0, 1.0, 0.0]), 0.0
                foot = place(row, things[mark["object"]].place[2])
            else:
                lean, to = (
                    np.radians(float(row["lean_deg"])),
                    np.radians(float(row["lean_to_deg"] or 0)),
                )
                axis = np.array(
                    [np.sin(lean) * np.sin(to), np.sin(lean) * np.cos(to), np.cos(lean)]
                )
                taper = float(row["taper_mm_per_m"]) / 2000
                foot = place(row, 0.0)
                radius -= taper * float(row["ref_height_m"])
            square = np.cross(direction[0], axis)
            length = np.linalg.norm(square)
            away = foot - station
            side = away @ square / length
            # Height on the axis nearest to the sight line, for the taper.
            onto = np.stack([direction[0], -axis], axis=1)
            along, height = np.linalg.lstsq(onto, away, rcond=None)[0]
            lean_of_side = np.sqrt(1.0 + taper**2)
            miss = abs(side) - (radius + taper * height) / lean_of_side
            size = focal / along
        else:
            height = float(row["height_m"]) if mark["mark"] == "top" else 0.0
            lean, to = (
                np.radians(float(row["lean_deg"])),
                np.radians(float(row["lean_to_deg"] or 0)),
            )
            away = place(row, 0.0) - station
            away[2] += height
            away[:2] += height * np.tan(lean) * np.array([np.sin(to), np.cos(to)])
            miss = np.linalg.norm(np.cross(direction[0], away)) / np.sqrt(2.0)
            size = focal / np.linalg.norm(away)
        kind = mark["mark"] if mark["mark"] not in ("left", "right") else "limb"
        found.setdefault(kind, []).append(float(miss * size / float(mark["sd_px"])))
    return found


def test_marks_scatter_about_the_truth_as_their_sd_says() -> None:
    found = scatter()
    assert set(found) == {"limb", "outline", "base", "top"}
    for mark, misses in found.items():
        count = len(misses)
        assert np.abs(misses).max() < 4.0, mark
        spread = np.sqrt(np.mean(np.square(misses)))
        # Four sds of a root mean square of `count` normal draws.
        assert abs(spread - 1.0) < 4.0 / np.sqrt(2.0 * count) + 0.03, (mark, spread)
    # Neither inward nor outward on the whole: four sds of a mean.
    for mark in ("limb", "outline"):
        assert abs(np.mean(found[mark])) < 4.0 / np.sqrt(len(found[mark])), mark


def test_every_object_has_enough_marks_in_every_view() -> None:
    seen: dict[tuple[str, str], dict[str, int]] = {}
    for mark in rows("marks.csv"):
        counts = seen.setdefault((mark["object"], mark["photo"]), {})
        counts[mark["mark"]] = counts.get(mark["mark"], 0) + 1
    photos = {
        (thing["object"], name)
        for thing in rows("objects.csv")
        for pair in rows("pairs.csv")
        if pair["pair"] in thing["pair"].split()
        for name in (pair["photo_a"], pair["photo_b"], pair["photo_c"])
        if name
    }
    assert {key for key in seen if "plumb" not in seen[key]} == photos
    for key in photos:
        counts = seen[key]
        assert counts.get("outline", 0) >= 10 or min(counts["left"], counts["right"]) >= 5, key


def test_plumb_marks_are_of_vertical_lines() -> None:
    by_photo: dict[tuple[str, str], list[list[float]]] = {}
    for mark in rows("marks.csv"):
        if mark["mark"] == "plumb":
            spot = [float(mark["x_px"]), float(mark["y_px"])]
            by_photo.setdefault((mark["object"], mark["photo"]), []).append(spot)
    assert len(by_photo) >= 2
    for (_, photo), spots in by_photo.items():
        _, directions, focal = sight(photo, np.array(spots))
        plane = np.cross(directions[0], directions[-1])
        tilt = abs(plane[2]) / np.linalg.norm(plane)
        # Two ends, each with an sd of a pixel, over the line's length in the picture.
        length = np.linalg.norm(np.subtract(spots[0], spots[-1]))
        assert tilt < 4.0 * np.sqrt(2.0) / length, photo
        assert focal > 0


def test_tapes_and_checks_scatter_as_they_say() -> None:
    stations = {
        name: np.array([float(row[k]) for k in ("east_m", "north_m", "up_m")])
        for name, row in VIEWS.items()
    }
    for pair in rows("pairs.csv"):
        if pair["tape_m"]:
            true = np.linalg.norm(stations[pair["photo_b"]] - stations[pair["photo_a"]])
            assert abs(float(pair["tape_m"]) - true) < 4.0 * float(pair["tape_sd_m"])
    checks = rows("checks.csv")
    assert len(checks) >= 4
    for check in checks:
        true = float(TRUTH[check["object"]]["diameter_m"])
        assert abs(float(check["diameter_m"]) - true) < 4.0 * float(check["sd_m"])


@pytest.mark.parametrize(
    "site", [SITE, (179.9995, 69.0, 3.0), (-58.4, -34.6, 25.0), (0.0, 0.0, 0.0)]
)
def test_positions_agree_with_pymap3d(site: tuple[float, float, float]) -> None:
    points = np.array([[0.0, 0.0, 0.0], [60.0, -35.0, 1.6], [-400.0, 900.0, 30.0]])
    found = geodetic(site, points)
    latitude, longitude, height = pymap3d.enu2geodetic(*points.T, site[1], site[0], site[2])
    turn = (found[:, 0] - longitude + 180.0) % 360.0 - 180.0
    np.testing.assert_allclose(turn, 0.0, atol=1e-9)
    np.testing.assert_allclose(found[:, 1], latitude, atol=1e-9)
    np.testing.assert_allclose(found[:, 2], height, atol=1e-4)
