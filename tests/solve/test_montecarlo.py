import numpy as np
import pytest

from fieldround.solve.montecarlo import diameter_from, numerical_tolerance, propagate, seed_of


def test_the_law_of_sines_of_a_right_triangle():
    # Baseline 2 m, square at A, 45 degrees parallax: the centre lies 2 m ahead of A.
    half = np.log(np.sin(np.radians(5.0)))
    found = diameter_from(np.array([[np.log(2.0), np.pi / 2, np.pi / 4, half]]))
    assert found[0] == pytest.approx(2 * 2.0 * np.sin(np.radians(5.0)))


def test_lines_that_do_not_meet_have_no_end():
    assert diameter_from(np.array([[0.0, 1.5, -0.01, -3.0]]))[0] == np.inf


def test_a_given_number_of_draws_is_kept_and_the_seed_settles_the_answer():
    def model(rng, n):
        return rng.standard_normal(n)

    first, again = propagate(model, 7, draws=5000), propagate(model, 7, draws=5000)
    assert first == again
    assert first.draws == 5000
    assert propagate(model, 8, draws=5000) != first


def test_an_open_tail_is_open():
    drawn = propagate(lambda rng, n: np.where(rng.random(n) < 0.1, np.inf, rng.random(n)), 1)
    assert drawn.high == np.inf
    assert np.isfinite(drawn.low)


def test_tolerance_is_half_a_unit_in_the_second_digit():
    assert numerical_tolerance(0.0345) == pytest.approx(0.0005)
    assert numerical_tolerance(0.0) == 0.0


def test_seeds_come_from_names():
    assert seed_of("pair 1", "P1") == seed_of("pair 1", "P1") != seed_of("pair 1", "P2")
