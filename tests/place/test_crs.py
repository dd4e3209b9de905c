"""The round's grid: zones, texts, refusals, notes."""

from __future__ import annotations

import numpy as np
import pytest

from fieldround.place.crs import CrsError, middle, read_crs, round_grid, utm_epsg

HERE = (np.array([13.0]), np.array([52.0]))


@pytest.mark.parametrize(
    ("lon", "lat", "epsg"),
    [
        (13.0, 52.0, 32633), (18.6, -34.0, 32734), (36.8, 0.0, 32637), (36.8, -1e-9, 32737),
        (179.99, -17.8, 32760), (-179.99, -17.8, 32701), (180.0, 10.0, 32601),
        (-180.0, 10.0, 32601), (5.3, 60.4, 32632), (2.9, 60.4, 32631), (5.3, 64.0, 32631),
        (5.3, 55.9, 32631), (8.9, 78.2, 32631), (9.0, 78.2, 32633), (15.6, 78.2, 32633),
        (21.0, 78.2, 32635), (33.0, 78.2, 32637), (41.9, 78.2, 32637), (42.0, 78.2, 32638),
        (8.9, 71.9, 32632), (10.0, 84.0, 5041), (10.0, -80.1, 5042), (10.0, -80.0, 32732),
        (373.0, 52.0, 32633),
    ],
)  # fmt: skip
def test_the_utm_zone_of_a_place(lon: float, lat: float, epsg: int) -> None:
    assert utm_epsg(lon, lat) == epsg


def test_the_middle_of_a_round_across_longitude_180() -> None:
    lon, lat = middle(np.array([179.998, -179.996]), np.array([-17.8, -17.8]))
    assert lon == pytest.approx(-179.999, abs=1e-6)
    assert lat == pytest.approx(-17.8, abs=1e-6)
    grid = round_grid(None, np.array([179.998, -179.996]), np.array([-17.8, -17.8]))
    assert grid.epsg == 32701
    east = grid.project(np.array([179.998, -179.996]), np.array([-17.8, -17.8]))[:, 0]
    assert 0.0 < east[1] - east[0] < 700.0


@pytest.mark.parametrize(
    "text",
    [
        "EPSG:25833", "25833", " epsg:25833 ",
        "+proj=utm +zone=33 +ellps=GRS80 +units=m +type=crs",
    ],
)  # fmt: skip
def test_one_grid_by_many_texts(text: str) -> None:
    grid = round_grid(text, *HERE)
    wanted = round_grid("EPSG:25833", *HERE)
    assert np.allclose(grid.project(*HERE), wanted.project(*HERE), atol=1e-3)
    again = round_grid(grid.wkt, *HERE)
    assert np.allclose(again.project(*HERE), grid.project(*HERE), atol=1e-6)


def test_the_default_is_said_and_has_its_code() -> None:
    grid = round_grid(None, *HERE)
    assert (grid.epsg, grid.name) == (32633, "WGS 84 / UTM zone 33N")
    assert grid.notes == (
        "round.toml names no CRS: WGS 84 / UTM zone 33N was chosen for the round",
    )
    assert round_grid("  ", *HERE).epsg == 32633


def test_easting_comes_first_whatever_the_axis_order_of_the_crs() -> None:
    """EPSG:2180 and EPSG:31467 count northing first, EPSG:25833 easting first."""
    at = (np.array([19.0]), np.array([52.0]))
    east, north = round_grid("EPSG:2180", *at).project(*at)[0]
    assert east == pytest.approx(500000.0, abs=1.0)
    assert north == pytest.approx(459309.2, abs=1.0)
    at = (np.array([9.0]), np.array([50.0]))
    east, _ = round_grid("EPSG:31467", *at).project(*at)[0]
    assert east == pytest.approx(3500000.0, abs=200.0)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("EPSG:4326", "geographic: degrees are no lengths"),
        ("EPSG:4978", "not projected"),
        ("EPSG:123456", "no coordinate system is known"),
        ("99999999999999999999", "no coordinate system is known"),
        ("somewhere", "no coordinate system is known"),
        ("EPSG:2048", "count west and south"),
    ],
)
def test_what_cannot_be_used_is_refused_in_a_sentence(text: str, said: str) -> None:
    with pytest.raises(CrsError) as caught:
        read_crs(text)
    assert said in str(caught.value)
    assert f"round.toml, crs is {text!r}" in str(caught.value)


def test_a_round_far_outside_the_grid_is_refused() -> None:
    with pytest.raises(CrsError, match="choose a CRS that covers"):
        round_grid("EPSG:32633", np.array([-165.0]), np.array([0.0]))


def test_a_compound_crs_gives_its_horizontal_part() -> None:
    """EPSG:7415 is Amersfoort / RD New with NAP heights."""
    grid = round_grid("EPSG:7415", np.array([5.4]), np.array([52.2]))
    assert grid.epsg == 28992


def test_a_datum_shift_has_its_accuracy_and_missing_grids_named() -> None:
    grid = round_grid("EPSG:27700", np.array([-2.0]), np.array([52.0]))
    accuracy = [note for note in grid.notes if "is accurate to" in note]
    assert len(accuracy) == 1
    assert "that is not in the position sds" in accuracy[0]
    missing = [note for note in grid.notes if "needs grid files" in note]
    if missing:
        assert "OSTN15" in missing[0]
    else:
        # Whoever has the grid gets its accuracy instead.
        assert "1 m" in accuracy[0]


def test_a_grid_in_feet_is_said_to_be() -> None:
    """EPSG:2263, New York Long Island in US survey feet (1200 / 3937 m)."""
    at = (np.array([-74.0]), np.array([40.7]))
    grid = round_grid("EPSG:2263", *at)
    assert grid.metres_a_unit == pytest.approx(1200.0 / 3937.0)
    assert any("US survey foot" in note for note in grid.notes)
    # 300 000 m false easting, given in feet.
    assert grid.project(*at)[0, 0] == pytest.approx(300000.0 * 3937.0 / 1200.0, abs=1.0)
    assert grid.scale_factor == pytest.approx(1.0, abs=1e-4)


def test_convergence_and_scale_of_a_utm_grid() -> None:
    """On the central meridian 0 and 0.9996; elsewhere atan(tan dlon sin lat) to a few seconds."""
    grid = round_grid(None, np.array([15.0]), np.array([52.0]))
    assert grid.convergence_deg == pytest.approx(0.0, abs=1e-9)
    assert grid.scale_factor == pytest.approx(0.9996, abs=1e-9)
    for lon, lat in ((17.5, 52.0), (13.0, 69.0), (17.0, -34.0)):
        grid = round_grid(None, np.array([lon]), np.array([lat]))
        centre = 6.0 * np.floor(lon / 6.0) + 3.0
        wanted = np.degrees(np.arctan(np.tan(np.radians(lon - centre)) * np.sin(np.radians(lat))))
        assert grid.convergence_deg == pytest.approx(wanted, abs=5.0 / 3600.0)


def test_a_grid_that_distorts_lengths_is_said_to() -> None:
    grid = round_grid("EPSG:3857", np.array([10.0]), np.array([60.0]))
    assert any("off those on the ground" in note for note in grid.notes)
