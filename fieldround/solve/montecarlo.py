"""Propagation of distributions by Monte Carlo, with as many draws as the answer needs.

In: a function that draws and evaluates the model. Out: estimate, standard uncertainty, quantiles.
Source: JCGM 101:2008, clause 7.9 (adaptive procedure), 7.7 (coverage intervals from quantiles).
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fieldround.solve.derive import Finding

# JCGM 101, 7.9.4: a block is 10^4 draws, or more for a higher coverage probability.
BLOCK = 10_000
BLOCKS_MOST = 200


@dataclass(frozen=True)
class Distribution:
    """What the draws say: mean, sd, interval bounds (inf where a tail is open), draws used."""

    mean: float
    sd: float
    low: float
    high: float
    draws: int


def numerical_tolerance(sd: float, digits: int = 2) -> float:
    """Half a unit in the last of `digits` significant digits of an sd (JCGM 101, 7.9.2)."""
    if not (sd > 0.0 and np.isfinite(sd)):
        return 0.0
    exponent = np.floor(np.log10(sd)) - (digits - 1)
    return 0.5 * 10.0**exponent


def propagate(
    model: Callable[[np.random.Generator, int], np.ndarray],
    seed: int,
    level: float = 0.95,
    draws: int | None = None,
    digits: int = 2,
) -> Distribution:
    """Draw a model until mean, sd and both bounds are stable, or a given number of times.

    model  : (generator, n) -> (n,) values
    level  : coverage probability of the symmetric-in-probability interval
    draws  : number of draws; None = adaptive, blocks of 10^4 until twice the standard deviation
             of each block average is below the tolerance of `digits` digits of the sd
    source : JCGM 101:2008, 7.9.4
    """
    rng = np.random.default_rng(seed)
    tails = [0.5 * (1.0 - level), 0.5 * (1.0 + level)]
    if draws is not None:
        values = model(rng, draws)
        return _summary(values, tails)
    blocks: list[np.ndarray] = []
    figures: list[list[float]] = []
    while len(blocks) < BLOCKS_MOST:
        values = model(rng, BLOCK)
        blocks.append(values)
        one = _summary(values, tails)
        figures.append([one.mean, one.sd, one.low, one.high])
        if len(blocks) < 2:
            continue
        everything = np.concatenate(blocks)
        tolerance = numerical_tolerance(_summary(everything, tails).sd, digits)
        table = np.array(figures)
        table = table[:, np.isfinite(table).all(axis=0)]
        spread = table.std(axis=0, ddof=1) / np.sqrt(len(blocks))
        if np.all(2.0 * spread <= tolerance):
            break
    return _summary(np.concatenate(blocks), tails)


def _summary(values: np.ndarray, tails: list[float]) -> Distribution:
    finite = values[np.isfinite(values)]
    low, high = np.quantile(values, tails, method="inverted_cdf")
    return Distribution(
        float(finite.mean()), float(finite.std(ddof=1)), float(low), float(high), len(values)
    )


def seed_of(*names: str) -> int:
    """A seed from names of the round's content, the same on every machine."""
    return int.from_bytes(hashlib.sha256("/".join(names).encode()).digest()[:8], "big")


def diameter_distribution(
    finding: Finding,
    pair: str,
    roundness: float,
    freedom: float,
    level: float = 0.95,
    draws: int | None = None,
) -> Distribution:
    """Distribution of one diameter through the law of sines instead of its tangent.

    The observables (baseline, angle at A, parallax, half the visible angle) are near normal even
    where the diameter is not: its parallax stands in a denominator.
    roundness : relative sd of one side's width about the mean diameter
    freedom   : degrees of freedom behind the sds
    """
    mean = finding.observables
    sizes, axes = np.linalg.eigh(finding.observables_cov)
    root = axes * np.sqrt(np.maximum(sizes, 0.0))
    centre = diameter_from(mean[None])[0]

    def model(rng: np.random.Generator, n: int) -> np.ndarray:
        steps = rng.standard_normal((n, 4)) @ root.T
        if np.isfinite(freedom):
            # The sd itself is found from residuals: Student's t instead of the normal law.
            steps *= np.sqrt(freedom / rng.chisquare(freedom, n))[:, None]
        values = diameter_from(mean + steps)
        # The ratio carries the draw over to the section at the reference height.
        values = finding.diameter_m * values / centre
        return values * (1.0 + roundness * rng.standard_normal(n))

    return propagate(model, seed_of(pair, finding.name), level, draws)


def diameter_from(observables: np.ndarray) -> np.ndarray:
    """Diameter from the observables of the triangle station A, station B, centre (law of sines).

    observables : (n, 4) log of the baseline, angle at A, parallax, log of sin(half visible angle)
    returns     : (n,) metres; inf where the sight lines do not meet in front of the cameras
    """
    base, at_a, parallax, half = observables.T
    with np.errstate(divide="ignore", over="ignore"):
        values = 2.0 * np.exp(base + half) * np.sin(at_a + parallax) / np.sin(parallax)
    return np.where((parallax > 0.0) & (values > 0.0), values, np.inf)
