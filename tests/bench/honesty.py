"""Do the intervals cover? Random pairs with known truth through the real solver.

Run:  python tests/bench/honesty.py [--pairs 2000] [--seed 1] [--svg FILE] [--processes 2]
Prints coverage of the 68 and 95 % intervals, the error against the Cramer-Rao bound, the shares
refused and accepted, and any accepted result that is grossly wrong, for the whole envelope and
for each of its cells. All pairs are invented.
"""

from __future__ import annotations

import argparse
import math
import sys
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from fieldround.geometry.camera import rays
from fieldround.rounds.model import Camera, Settings
from fieldround.solve.adjust import adjust_round
from fieldround.solve.assemble import Assembled
from fieldround.solve.cameras import camera_priors, free_values, prior_terms
from fieldround.solve.derive import find_objects
from fieldround.solve.equations import inverse_scaled
from fieldround.solve.intervals import diameter_interval
from fieldround.solve.normals import reduce_pair
from fieldround.solve.pairwise import PairStart, solve_alone
from fieldround.solve.scalar_residuals import section_radius
from fieldround.solve.settling import tie_misfit_px
from fieldround.solve.start import triangulated
from fieldround.solve.state import ABSENT, make_layout
from fieldround.solve.verdicts import PairFacts, judge
from tests.solve.simulated import HEIGHT, WIDTH, Truth, simulated_pair


@dataclass(frozen=True)
class Case:
    """One random pair of the envelope and what the solver made of it."""

    distance_m: float
    width_ratio: float
    base_ratio: float
    converge: float
    focal_sd: float
    mark_sd_px: float
    tape_sd_m: float
    ties: int
    wrong: float
    verdict: str
    reason: str
    error: float = math.nan
    sd: float = math.nan
    bound: float = math.nan
    covered_95: bool = False
    covered_68: bool = False


def log_uniform(rng: np.random.Generator, low: float, high: float) -> float:
    """A number whose logarithm is uniform."""
    return float(np.exp(rng.uniform(np.log(low), np.log(high))))


def bound_of(truth: Truth, card: Camera, right: np.ndarray) -> float:
    """Cramer-Rao bound of the diameter's sd at the truth, with the right ties only, metres."""
    problem, state = truth.problem, truth.state
    values = truth.values[None]
    directions = np.stack([rays(truth.tie_px[:, view], truth.values) for view in range(2)], axis=1)
    ties, rho = triangulated(directions, state.rotations, state.stations)
    state = type(state)(**{**state.__dict__, "ties": ties, "ties_rho": rho})
    layout = make_layout(problem)
    reduced = reduce_pair(
        problem, layout, state, values[problem.cameras], right.astype(float), None
    )
    priors = camera_priors([card])
    diagonal, _, _ = prior_terms(priors, priors.values)
    normal = reduced.normal.copy()
    normal[range(layout.own, layout.size), range(layout.own, layout.size)] += diagonal.ravel()
    free = np.concatenate([np.ones(layout.own, dtype=bool), free_values(priors).ravel()])
    covariance = np.zeros_like(normal)
    covariance[np.ix_(free, free)] = inverse_scaled(normal[np.ix_(free, free)])
    _, columns = section_radius(problem, layout, state, 0)
    gradient = np.zeros(layout.size)
    for column, part in columns.items():
        if column != ABSENT:
            gradient[column] = 2.0 * float(part)
    return float(np.sqrt(gradient @ covariance @ gradient))


def random_case(seed: int) -> Case:
    """Draw one pair from the stated envelope and solve it."""
    rng = np.random.default_rng(seed)
    distance = log_uniform(rng, 2.0, 100.0)
    width_ratio = log_uniform(rng, 0.003, 0.2)
    base_ratio = log_uniform(rng, 1.0 / 30.0, 0.5)
    converge = float(rng.uniform(0.0, 1.0)) if base_ratio < 0.35 else 1.0
    focal_sd = float(rng.choice([0.001, 0.03]))
    mark_sd = log_uniform(rng, 0.1, 1.0)
    tape_sd = log_uniform(rng, 0.001, 0.020)
    ties = int(log_uniform(rng, 12, 400))
    wrong = float(rng.uniform(0.0, 0.3))
    truth = simulated_pair(
        rng,
        distance_m=distance,
        diameter_m=width_ratio * distance,
        baseline_m=base_ratio * distance,
        converge=converge,
        ties=ties,
        wrong=wrong,
        tie_sd_px=float(rng.uniform(0.2, 0.6)),
        mark_sd_px=mark_sd,
        tape_sd_m=tape_sd,
    )
    focal = float(truth.values[0] * np.exp(rng.normal(0.0, focal_sd)))
    centre = rng.normal(truth.values[2:4], 2.0)
    spread = (0.002, 0.004, 0.0002, 0.0002, 0.0)
    start = tuple(float(v) for v in rng.normal(truth.values[4:], spread))
    card = Camera(
        "card",
        (WIDTH, HEIGHT),
        (focal, focal),
        focal_sd * focal,
        (float(centre[0]), float(centre[1])),
        2.0,
        start,
        spread,
    )
    shape = (distance, width_ratio, base_ratio, converge, focal_sd, mark_sd, tape_sd, ties, wrong)
    priors = camera_priors([card])
    found = solve_alone(Assembled(truth.problem, {}, ties), priors)
    if not isinstance(found, PairStart):
        return Case(*shape, "no result", found)
    adjusted = adjust_round([found.fit], found.values, priors)
    finding = find_objects(adjusted, 0)[0]
    fit = adjusted.fits[0]
    kept = fit.tie_keep > 0
    rms = tie_misfit_px(fit, adjusted.values)
    facts = PairFacts(
        found.orientation_from,
        int(kept.sum()),
        rms,
        adjusted.converged[0],
        found.remarks,
        found.spoilers,
    )
    low, high = diameter_interval(finding, "pair")
    verdict, reasons = judge(finding, (low, high), facts, Settings())
    true = truth.diameters_m[0]
    narrow = diameter_interval(finding, "pair", level=0.6827)
    return Case(
        *shape,
        verdict,
        reasons[0] if reasons else "",
        error=finding.diameter_m - true,
        sd=finding.diameter_sd_m,
        bound=bound_of(truth, card, truth.tie_right),
        covered_95=inside(true, (low, high)),
        covered_68=inside(true, narrow),
    )


def inside(value: float, interval: tuple[float | None, float | None]) -> bool:
    """Is a value inside an interval whose sides may be open?"""
    low, high = interval
    return (low is None or value >= low) and (high is None or value <= high)


def gross(case: Case) -> bool:
    """Accepted, yet more than 5 sds and more than 3 % wrong."""
    true = case.width_ratio * case.distance_m
    return (
        case.verdict == "accept"
        and abs(case.error) > 5.0 * case.sd
        and abs(case.error) > 0.03 * true
    )


CELLS = {
    "range below 8 m": lambda c: c.distance_m < 8,
    "range 8 to 30 m": lambda c: 8 <= c.distance_m < 30,
    "range above 30 m": lambda c: c.distance_m >= 30,
    "D / range below 2 %": lambda c: c.width_ratio < 0.02,
    "D / range above 2 %": lambda c: c.width_ratio >= 0.02,
    "baseline below 1/8 of range": lambda c: c.base_ratio < 1 / 8,
    "baseline above 1/8 of range": lambda c: c.base_ratio >= 1 / 8,
    "aim nearer parallel": lambda c: c.converge < 0.5,
    "aim nearer convergent": lambda c: c.converge >= 0.5,
    "focal known to 0.1 %": lambda c: c.focal_sd < 0.01,
    "focal known to 3 %": lambda c: c.focal_sd >= 0.01,
    "mark sd below 0.3 px": lambda c: c.mark_sd_px < 0.3,
    "mark sd above 0.3 px": lambda c: c.mark_sd_px >= 0.3,
    "tape sd below 5 mm": lambda c: c.tape_sd_m < 0.005,
    "tape sd above 5 mm": lambda c: c.tape_sd_m >= 0.005,
    "12 to 50 ties": lambda c: c.ties < 50,
    "50 to 400 ties": lambda c: c.ties >= 50,
    "wrong ties below 15 %": lambda c: c.wrong < 0.15,
    "wrong ties above 15 %": lambda c: c.wrong >= 0.15,
}


def summary_rows(cases: list[Case]) -> list[tuple[str, int, float, float, float, float, int]]:
    """Name, results, 95 % and 68 % coverage, error / bound, share accepted, gross ones."""
    rows = []
    for name, belongs in {"all": lambda c: True, **CELLS}.items():
        mine = [c for c in cases if belongs(c)]
        solved = [c for c in mine if c.verdict != "no result"]
        if not solved:
            continue
        # The bound is linear theory: it speaks of results whose sd is small.
        linear = [c for c in solved if c.bound < 0.05 * c.width_ratio * c.distance_m]
        ratio = (
            math.sqrt(np.mean([(c.error / c.bound) ** 2 for c in linear])) if linear else math.nan
        )
        rows.append(
            (
                name,
                len(solved),
                float(np.mean([c.covered_95 for c in solved])),
                float(np.mean([c.covered_68 for c in solved])),
                ratio,
                float(np.mean([c.verdict == "accept" for c in mine])),
                sum(gross(c) for c in mine),
            )
        )
    return rows


def svg_plot(cases: list[Case]) -> str:
    """Share of errors inside k sds against the normal law, as a small SVG."""
    z = np.sort([abs(c.error) / c.sd for c in cases if c.verdict != "no result" and c.sd > 0])
    size, edge = 320, 40
    wanted = np.linspace(0.0, 4.0, 81)
    law = np.array([math.erf(k / math.sqrt(2.0)) for k in wanted])
    seen = np.searchsorted(z, wanted, side="right") / max(len(z), 1)

    def path(shares: np.ndarray) -> str:
        points = [
            f"{edge + k / 4.0 * size:.1f},{edge + (1.0 - s) * size:.1f}"
            for k, s in zip(wanted, shares, strict=True)
        ]
        return "M" + " L".join(points)

    full = size + 2 * edge
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {full} {full}" '
        'font-family="sans-serif" font-size="11">'
        f'<rect x="{edge}" y="{edge}" width="{size}" height="{size}" fill="none" stroke="#777"/>'
        f'<path d="{path(law)}" fill="none" stroke="#999" stroke-dasharray="4 3"/>'
        f'<path d="{path(seen)}" fill="none" stroke="#000"/>'
        f'<text x="{edge}" y="{edge - 10}">share of errors inside k stated sds '
        f"(dashed: normal law), {len(z)} pairs</text>"
        f'<text x="{edge + size / 2}" y="{full - 12}" text-anchor="middle">k (0 to 4)</text></svg>'
    )


def main() -> None:
    """Draw, solve, print."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--pairs", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--processes", type=int, default=2)
    parser.add_argument("--svg", type=Path)
    options = parser.parse_args()
    seeds = [options.seed * 1_000_003 + i for i in range(options.pairs)]
    if options.processes > 1:
        with ProcessPoolExecutor(options.processes) as pool:
            cases = list(pool.map(random_case, seeds, chunksize=25))
    else:
        cases = [random_case(seed) for seed in seeds]
    print(
        f"{'cell':30}{'n':>6}{'95 %':>8}{'68 %':>8}{'error/bound':>13}{'accepted':>10}{'gross':>7}"
    )
    for name, n, wide, narrow, ratio, accepted, wrong in summary_rows(cases):
        print(f"{name:30}{n:6d}{wide:8.3f}{narrow:8.3f}{ratio:13.3f}{accepted:10.3f}{wrong:7d}")
    refused = [c for c in cases if c.verdict == "no result"]
    print(f"no result: {len(refused)} of {len(cases)}")
    reasons = [c.reason[:70] for c in refused]
    for reason in sorted(set(reasons), key=lambda r: -reasons.count(r))[:6]:
        print(f"  {reasons.count(reason):5d}  {reason}")
    for i, case in enumerate(cases):
        if gross(case):
            print(f"grossly wrong: seed {seeds[i]}, {case}")
    if options.svg:
        options.svg.write_text(svg_plot(cases), encoding="utf-8")
        print(f"plot written to {options.svg}")


if __name__ == "__main__":
    main()
