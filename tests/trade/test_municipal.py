from __future__ import annotations

import numpy as np
import pytest

from fieldround.trade.constants import load_constants
from fieldround.trade.municipal import candidates, municipal_lists, tube_list
from tests.trade.made import changed, column, measured, row

# Outside diameters by nominal size, after EN 10253-4 tables of fittings for EN 10220 series 1
# (a maker's public dimension sheet; DN 15 to DN 40 there, the rest from memory).
DN = {
    15: 21.3, 20: 26.9, 25: 33.7, 32: 42.4, 40: 48.3, 50: 60.3, 65: 76.1, 80: 88.9, 100: 114.3,
    125: 139.7, 150: 168.3, 200: 219.1, 250: 273, 300: 323.9, 350: 355.6, 400: 406.4, 450: 457,
    500: 508, 600: 610, 700: 711, 800: 813, 900: 914, 1000: 1016,
}  # fmt: skip


@pytest.fixture
def constants():
    return load_constants()


def test_series_1_has_the_sizes_of_the_fittings(constants):
    sizes = constants["municipal.tube_series_1"].value
    assert set(DN.values()) <= set(sizes)
    for i in (1, 2, 3):
        series = constants[f"municipal.tube_series_{i}"].value
        assert series == sorted(series)
    every = [d for i in (1, 2, 3) for d in constants[f"municipal.tube_series_{i}"].value]
    assert len(every) == len(set(every))


def test_a_sharp_measurement_names_its_size(constants):
    mast = measured("M", "mast", 0.1679, 0.0009, height_m=8.1, height_sd_m=0.1)
    found = row(tube_list([mast], constants), "M")
    assert found["nominal_mm"] == 168.3
    assert found["series"] == 1
    assert found["in_words"].startswith("168.3 mm, ")
    assert found["probability_pct"] > 97


def test_probabilities_against_draws_of_the_whole_story(constants):
    """Nominal size at random, true size within tolerance, measurement with its sd."""
    draw = np.random.default_rng(3)
    sizes = np.array([d for i in (1, 2, 3) for d in constants[f"municipal.tube_series_{i}"].value])
    near = sizes[(sizes > 120) & (sizes < 180)]
    nominal = draw.choice(near, 2_000_000)
    tolerance = np.maximum(0.01 * nominal, 0.5)
    true = nominal + tolerance * draw.uniform(-1, 1, len(nominal))
    read = true + 2.0 * draw.standard_normal(len(nominal))
    taken = nominal[np.abs(read - 155.5) < 0.2]
    share = {d: float((taken == d).mean()) for d in near}
    found, _ = candidates(155.5, 2.0, constants)
    for candidate in found[:3]:
        assert candidate.probability == pytest.approx(share[candidate.nominal_mm], abs=0.04)
    assert sum(c.probability for c in found) == pytest.approx(1.0)


def test_between_two_sizes_both_are_named(constants):
    mast = measured("M", "mast", 0.1557, 0.003)
    found = row(tube_list([mast], constants), "M")
    assert found["probability_pct"] < 70
    assert "152.4 mm" in found["in_words"] + found["next"]
    assert "159 mm" in found["in_words"] + found["next"]


def test_far_from_every_size_nothing_fits(constants):
    found = row(tube_list([measured("M", "mast", 0.636, 0.002)], constants), "M")
    assert found["nominal_mm"] is None
    assert found["in_words"] == "none fits (nearest 660 mm)"


def test_paint_is_taken_off_and_series_are_chosen(tmp_path):
    constants = changed(tmp_path, "[municipal]\ncoating_mm = 1.0\nseries = [1]\n")
    found, away = candidates(170.3, 0.5, constants)
    assert found[0].nominal_mm == 168.3
    assert away == pytest.approx(0.0, abs=1e-9)
    assert {c.series for c in found} == {1}


def test_assets_stand_by_label_whatever_the_verdict(constants):
    items = [
        measured("M2", "mast", 0.1683, 0.001, label="Quay Street"),
        measured("B1", "bollard", None, verdict="no result", label="Alder Lane"),
        measured("M1", "mast", 0.1683, 0.001),
        measured("P1", "pole", 0.3),
    ]
    lists = municipal_lists(items, constants)
    assert column(lists[1], "object") == ["B1", "M2", "M1"]
    assert column(lists[0], "object") == ["M2", "M1"]
    assert municipal_lists(items[3:], constants) == []
