from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import binom

from fieldround.rounds.model import Camera
from fieldround.solve.adjust import adjust_round
from fieldround.solve.assemble import Assembled
from fieldround.solve.cameras import camera_priors
from fieldround.solve.derive import find_objects
from fieldround.solve.pairwise import PairStart, common_start, solve_alone
from fieldround.solve.start_objects import closed_form_readings
from tests.bench.honesty import gross, random_case
from tests.solve.simulated import HEIGHT, WIDTH, simulated_pair


def card(focal_px=3000.0, relative_sd=1e-3, k1_sd=0.0, heavy=False):
    return Camera(
        "card",
        (WIDTH, HEIGHT),
        (focal_px, focal_px),
        relative_sd * focal_px,
        (2010.0, 1490.0),
        1.0,
        distortion_sd=(k1_sd, 0.0, 0.0, 0.0, 0.0),
        focal_heavy_tailed=heavy,
    )


def solved(truth, camera):
    priors = camera_priors([camera])
    start = solve_alone(Assembled(truth.problem, {}, len(truth.problem.ties_px)), priors)
    assert isinstance(start, PairStart), start
    return adjust_round([start.fit], start.values, priors), start


def test_exact_observations_give_the_exact_diameter():
    truth = simulated_pair(np.random.default_rng(1), noise=False, ties=60)
    adjusted, start = solved(truth, card())
    finding = find_objects(adjusted, 0)[0]
    assert start.converged
    assert finding.diameter_m == pytest.approx(truth.diameters_m[0], rel=2e-5)
    assert finding.taper_mm_per_m == pytest.approx(-10.0, abs=0.05)
    assert finding.lean_deg == pytest.approx(0.0, abs=0.5)


def test_the_budget_sums_to_the_variance():
    adjusted, _ = solved(simulated_pair(np.random.default_rng(2)), card())
    finding = find_objects(adjusted, 0)[0]
    assert sum(finding.budget.values()) == pytest.approx(finding.diameter_sd_m**2, rel=1e-9)
    linear = finding.gradient @ adjusted.covariances[0] @ finding.gradient
    assert finding.diameter_sd_m**2 >= linear * (1 - 1e-6)
    assert min(finding.budget.values()) >= 0.0


def test_the_readings_agree_with_the_closed_form():
    adjusted, _ = solved(simulated_pair(np.random.default_rng(4)), card())
    finding = find_objects(adjusted, 0)[0]
    fit = adjusted.fits[0]
    spreads = closed_form_readings(fit.problem, adjusted.values, fit.state, 0)
    # The closed form holds the poses fixed: equal within a fraction of the readings' sd.
    assert np.allclose(spreads, finding.readings_m, atol=1.5 * max(finding.reading_sd_m))
    assert finding.agreement is not None


def test_wrong_ties_are_set_aside():
    truth = simulated_pair(np.random.default_rng(5), wrong=0.3)
    adjusted, _ = solved(truth, card())
    kept = adjusted.fits[0].tie_keep > 0
    assert kept[truth.tie_right].mean() > 0.97
    # A wrong tie may lie on its epipolar line by chance and do no harm there.
    assert kept[~truth.tie_right].mean() < 0.1


def test_a_stray_limb_mark_is_set_aside():
    truth = simulated_pair(np.random.default_rng(6), mark_sd_px=0.3)
    px = truth.problem.limbs.px.copy()
    px[3, 0] += 15.0
    limbs = replace(truth.problem.limbs, px=px)
    truth = replace(truth, problem=replace(truth.problem, limbs=limbs))
    adjusted, _ = solved(truth, card())
    finding = find_objects(adjusted, 0)[0]
    assert adjusted.fits[0].limbs_dropped == 1
    assert abs(finding.diameter_m - truth.diameters_m[0]) < 4 * finding.diameter_sd_m


def test_ten_pairs_find_their_common_focal_length():
    """Focal length 3 % off and k1 unknown: ten pairs bring the focal length to 0.4 %."""
    focal_px = 3000.0
    priors = camera_priors([card(focal_px * 1.03, 0.03, k1_sd=0.03)])
    starts = []
    for seed in range(10):
        truth = simulated_pair(
            np.random.default_rng(100 + seed),
            distortion=(-0.02, 0, 0, 0, 0),
            mark_sd_px=0.3,
            converge=1.0,
        )
        start = solve_alone(Assembled(truth.problem, {}, 200), priors)
        assert isinstance(start, PairStart), start
        starts.append(start)
    together, values, strangers = common_start(starts, priors)
    assert strangers == []
    adjusted = adjust_round([s.fit for s in together], values, priors)
    assert adjusted.values[0, 0] == pytest.approx(focal_px, rel=0.004)
    errors = [
        (find_objects(adjusted, i)[0].diameter_m - 0.3) / find_objects(adjusted, i)[0].diameter_sd_m
        for i in range(10)
    ]
    assert max(map(abs, errors)) < 4.0


def test_a_photo_of_another_zoom_stays_alone():
    priors = camera_priors([card(3000.0, 0.03)])
    starts = []
    for seed in range(6):
        focal = 3600.0 if seed == 3 else 3000.0
        truth = simulated_pair(np.random.default_rng(200 + seed), focal_px=focal, ties=300)
        starts.append(solve_alone(Assembled(truth.problem, {}, 300), priors))
    _, values, strangers = common_start(starts, priors)
    assert [s.fit is starts[3].fit for s in strangers] == [True]
    assert "another camera" in strangers[0].spoilers[-1]
    assert values[0, 0] == pytest.approx(3000.0, rel=0.01)


def test_the_same_pair_gives_the_same_bits_and_rows_may_change_places():
    truth = simulated_pair(np.random.default_rng(7), wrong=0.1)
    first, again = (find_objects(solved(truth, card())[0], 0)[0] for _ in range(2))
    assert first.diameter_m == again.diameter_m
    problem = truth.problem
    order = np.random.default_rng(0).permutation(len(problem.limbs))
    shuffled = replace(truth, problem=replace(problem, limbs=problem.limbs.only(order)))
    other = find_objects(solved(shuffled, card())[0], 0)[0]
    assert other.diameter_m == pytest.approx(first.diameter_m, rel=1e-9)
    assert other.diameter_sd_m == pytest.approx(first.diameter_sd_m, rel=1e-7)


def test_intervals_cover_over_the_envelope():
    """Short form of tests/bench/honesty.py: fixed seeds, binomial bounds of 1 in 1,000."""
    cases = [random_case(5_000_000 + i) for i in range(150)]
    results = [c for c in cases if c.verdict != "no result"]
    assert len(results) > 140
    inside = sum(c.covered_95 for c in results)
    assert binom.cdf(inside, len(results), 0.95) > 1e-3
    narrow = sum(c.covered_68 for c in results)
    assert 1e-3 < binom.cdf(narrow, len(results), 0.6827) < 1 - 1e-3
    assert not any(gross(c) for c in cases)
