from __future__ import annotations

import math

import numpy as np
import pytest
from pyproj import Geod
from shapely import Polygon

from fieldround.rounds.errors import SheetsError
from fieldround.trade.constants import load_constants
from fieldround.trade.forestry import (
    Plot,
    basal_area_m2,
    class_of,
    class_table,
    forestry_lists,
    stand_totals,
    volume_of,
)
from fieldround.trade.plots import plot_inside, plot_of
from tests.reference.black_cherry_stems import (
    FOOT_M,
    INCH_M,
    LOG_FIT,
    LOG_RESIDUAL_SD,
    MEANS,
    STEMS,
)
from tests.trade.made import changed, column, measured, row

FT2 = FOOT_M**2


@pytest.fixture
def constants():
    return load_constants()


@pytest.fixture
def cherries():
    return [
        measured(f"C{i + 1:02d}", "trunk", d * INCH_M, height_m=h * FOOT_M, ref_height_m=1.37)
        for i, (d, h, _) in enumerate(STEMS)
    ]


def test_the_stems_are_those_of_the_source():
    assert np.mean(STEMS, axis=0) == pytest.approx(MEANS, abs=0.005)


def test_basal_area_of_handbook_examples():
    # A tree of 707 cm2 has a dbh of 30 cm (worked example of a forestry course, queshub 1148133).
    assert basal_area_m2(0.30) * 1e4 == pytest.approx(707, abs=0.5)
    # A 12-inch tree has 0.785376 ft2 with the constant 0.005454 (point sampling course notes).
    assert basal_area_m2(12 * INCH_M) / FT2 == pytest.approx(0.785376, rel=1e-4)


def test_quadratic_mean_diameter_of_a_worked_example(constants):
    """Average basal area 0.68978 ft2 gives 11.2 in (Maine Forest Ecology Research Network)."""
    diameter = math.sqrt(0.68978 / 0.00545415) * INCH_M
    stems = [measured(f"T{i}", "trunk", diameter) for i in range(5)]
    mean = row(stand_totals(stems, constants, None), "Quadratic mean diameter")
    assert mean["value"] / 2.54 == pytest.approx(11.2, abs=0.05)


def test_quadratic_mean_is_that_of_the_mean_basal_area(constants, cherries):
    stand = stand_totals(cherries, constants, None)
    d = np.array([s[0] for s in STEMS]) * 2.54
    assert row(stand, "Quadratic mean diameter")["value"] == pytest.approx(
        np.sqrt((d**2).mean()), rel=1e-12
    )
    assert row(stand, "Arithmetic mean diameter")["value"] == pytest.approx(13.25 * 2.54, abs=0.02)
    assert row(stand, "Basal area")["value"] == pytest.approx(
        np.pi * (d / 200) @ (d / 200), rel=1e-12
    )


@pytest.mark.parametrize("width", [1.0, 2.0, 4.0, 5.0])
@pytest.mark.parametrize("rule", ["nearest", "down"])
def test_class_table_of_the_cherries(tmp_path, cherries, width, rule):
    """Counted again with numpy's histogram."""
    constants = changed(tmp_path, f"[forestry]\nclass_width_cm = {width}\nclass_rule = '{rule}'\n")
    table = class_table(cherries, constants)
    d = np.array([s[0] for s in STEMS]) * 2.54
    edges = np.array([*column(table, "from_cm"), column(table, "below_cm")[-1]])
    counted, _ = np.histogram(d, edges)
    assert column(table, "stems") == counted.tolist()
    assert sum(column(table, "stems")) == 31
    assert column(table, "stems_expected") == pytest.approx(counted)  # no sd, no doubt
    assert np.diff(column(table, "class_cm")) == pytest.approx(width)
    total = sum(basal_area_m2(v / 100) for v in d)
    assert sum(column(table, "basal_area_m2")) == pytest.approx(total)


def test_the_local_rounding_rule():
    assert [class_of(d, 5.0, "nearest") for d in (17.49, 17.5, 22.49)] == [15.0, 20.0, 20.0]
    assert [class_of(d, 5.0, "down") for d in (17.5, 20.0, 24.99)] == [15.0, 20.0, 20.0]


def test_expected_counts_carry_the_doubt(constants):
    """A stem on a class boundary belongs half to each side; the count's sd is a coin's."""
    table = class_table([measured("T", "trunk", 0.225, 0.002)], constants)
    again = class_table(
        [measured("T", "trunk", 0.225, 0.002), measured("U", "trunk", 0.20, 0.0)], constants
    )
    assert column(table, "stems_expected") == pytest.approx([0.5])
    assert column(table, "stems_sd") == pytest.approx([0.5])
    assert column(again, "stems_expected") == pytest.approx([1.5, 0.5])


def test_sds_of_the_stand_against_random_draws(constants):
    """Own parts are drawn for each stem, the camera's part once for all."""
    stems = [
        measured(f"T{i}", "trunk", 0.2 + 0.02 * i, 0.005, common_sd_m=0.003) for i in range(20)
    ]
    stand = stand_totals(stems, constants, None)
    draw = np.random.default_rng(1)
    d = np.array([s.diameter_m for s in stems])
    own = math.sqrt(0.005**2 - 0.003**2)
    drawn = d + own * draw.standard_normal((20000, 20)) + 0.003 * draw.standard_normal((20000, 1))
    area = (np.pi * drawn**2 / 4).sum(axis=1)
    mean = 100 * np.sqrt((drawn**2).mean(axis=1))
    assert row(stand, "Basal area")["sd"] == pytest.approx(area.std(), rel=0.03)
    assert row(stand, "Quadratic mean diameter")["sd"] == pytest.approx(mean.std(), rel=0.03)


def test_volume_by_an_equation_of_the_cherries(tmp_path, cherries):
    """The published log fit, typed as a user would, leaves the published residuals."""
    a, b, c = LOG_FIT
    text = f"exp({a}) * (d_cm / 2.54) ** {b} * (h_m / 0.3048) ** {c} * 0.0283168466"
    constants = changed(tmp_path, f"[forestry]\nvolume = '{text}'\n")
    found = np.array([volume_of(stem, constants).m3 for stem in cherries]) / FOOT_M**3
    true = np.array([s[2] for s in STEMS])
    residual = np.log(true) - np.log(found)
    assert math.sqrt((residual @ residual) / 28) == pytest.approx(LOG_RESIDUAL_SD, abs=5e-5)
    refit = np.linalg.lstsq(
        np.column_stack([np.ones(31), np.log([s[:2] for s in STEMS])]), np.log(true), rcond=None
    )[0]
    assert refit == pytest.approx(LOG_FIT, abs=5e-6)
    stand = stand_totals(cherries, constants, None)
    assert row(stand, "Volume")["value"] / FOOT_M**3 == pytest.approx(true.sum(), rel=0.01)


def test_volume_by_the_form_factor_and_its_sd(constants):
    stem = measured("T", "trunk", 0.30, 0.006, height_m=20.0, height_sd_m=0.5, common_sd_m=0.004)
    volume = volume_of(stem, constants)
    cylinder = math.pi * 0.30**2 / 4 * 20.0
    assert volume.m3 == pytest.approx(0.5 * cylinder)
    # Relative parts of a product: 2 sd/d, sd/h, sd/f.
    expected = volume.m3 * math.hypot(2 * 0.006 / 0.30, 0.5 / 20.0, 0.05 / 0.5)
    assert volume.sd_m3 == pytest.approx(expected, rel=1e-4)
    assert volume.factor_sd_m3 == pytest.approx(0.1 * volume.m3, rel=1e-6)


def test_species_have_equations_of_their_own(tmp_path):
    constants = changed(
        tmp_path, '[forestry.volume_by_species]\noak = "0.4 * pi / 4 * d_m ** 2 * h_m"\n'
    )
    oak = measured("T", "trunk", 0.3, height_m=10.0, extra={"species": "oak"})
    ash = measured("U", "trunk", 0.3, height_m=10.0, extra={"species": "ash"})
    assert volume_of(oak, constants).m3 / volume_of(ash, constants).m3 == pytest.approx(0.8)


def test_no_height_no_volume(constants):
    assert volume_of(measured("T", "trunk", 0.3), constants) is None
    lists = forestry_lists(
        [measured("T", "trunk", 0.3), measured("U", "trunk", 0.3, height_m=9.0)], constants, None
    )
    assert any("Volume of 1 stems" in note for note in lists[1].notes)


def test_an_equation_without_a_value_leaves_the_volume_empty(tmp_path):
    constants = changed(tmp_path, "[forestry]\nvolume = 'log(d_m - 1) * h_m'\n")
    assert volume_of(measured("T", "trunk", 0.3, height_m=9.0), constants) is None


def test_per_hectare_of_a_typed_area(constants, cherries):
    stand = stand_totals(cherries, constants, Plot(0.25, "typed"))
    whole, per = row(stand, "Basal area"), row(stand, "Basal area per hectare")
    assert per["value"] == pytest.approx(whole["value"] / 0.25)
    assert row(stand, "Stems per hectare")["value"] == 124


def test_a_boundary_gives_the_area_and_says_who_is_inside(tmp_path, constants):
    """A square of 100 m by 100 m on the ellipsoid (pyproj's geodesic) is one hectare."""
    geod = Geod(ellps="WGS84")
    lon, lat = 11.4, 48.03
    east = geod.fwd(lon, lat, 90, 100)[:2]
    north = geod.fwd(lon, lat, 0, 100)[:2]
    corner = geod.fwd(*east, 0, 100)[:2]
    square = Polygon([(lon, lat), east, corner, north])
    at = {"A": geod.fwd(lon, lat, 45, 50), "B": geod.fwd(lon, lat, 225, 30),
          "C": geod.fwd(lon, lat, 45, 3)}  # fmt: skip
    items = [
        measured(n, "trunk", 0.3, longitude=p[0], latitude=p[1], position_sd_m=2.0)
        for n, p in at.items()
    ]
    plot = plot_inside(square, items)
    assert plot.area_ha == pytest.approx(1.0, rel=1e-5)
    assert plot.inside == {"A", "C"}
    assert "not sure: C" in plot.notes[0]
    lists = forestry_lists(items, constants, plot)
    assert row(lists[1], "Stems per hectare")["value"] == pytest.approx(2.0, rel=1e-5)
    assert any("outside the plot: B" in note for note in lists[0].notes)

    import shapely

    (tmp_path / "boundary.geojson").write_text(shapely.to_geojson(square), encoding="utf-8")
    assert plot_of(tmp_path, constants, items).area_ha == pytest.approx(1.0, rel=1e-5)


@pytest.mark.parametrize(
    "text, word",
    [
        ("no json", "not GeoJSON"),
        ('{"type": "Point", "coordinates": [1, 2]}', "polygon is needed"),
        ('{"type": "Polygon", "coordinates": [[[4e5, 5e6], [5e5, 5e6], [5e5, 6e6], [4e5, 5e6]]]}',
         "longitude and latitude"),
        ('{"features": 3}', "not GeoJSON"),
    ],
)  # fmt: skip
def test_a_faulty_boundary_is_said(tmp_path, constants, text, word):
    (tmp_path / "boundary.geojson").write_text(text, encoding="utf-8")
    with pytest.raises(SheetsError, match=word):
        plot_of(tmp_path, constants, [])


def test_stems_that_are_not_accepted_are_named(constants):
    items = [
        measured("A", "trunk", 0.3),
        measured("B", "trunk", 0.3, verdict="remeasure"),
        measured("C", "trunk", None, verdict="no result"),
        measured("D", "pole", 0.3),
    ]
    lists = forestry_lists(items, constants, None)
    assert column(lists[2], "object") == ["A"]
    assert any("2 of 3 are not in this list" in note for note in lists[0].notes)
    assert forestry_lists(items[3:], constants, None) == []
