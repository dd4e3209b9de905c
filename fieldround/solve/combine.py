"""Objects seen in several pairs made one row; objects without a result given their reason.

In: the solved rows of every pair. Out: one `ObjectResult` an object of the round.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from scipy.stats import chi2

from fieldround.rounds.model import Round, RoundObject
from fieldround.solve.intervals import linear_interval
from fieldround.solve.results import ObjectResult, PairResult
from fieldround.solve.rows import SolvedObject, SolvedPair
from fieldround.solve.state import CAMERA_VALUES

# Pairs that differ more than this in 1,000 do not show the same figure.
DISAGREE_QUANTILE = 0.999


def combined_objects(
    round_: Round,
    pairs: Mapping[str, SolvedPair],
    refused: Mapping[str, PairResult],
    lost: Mapping[str, Mapping[str, str]],
    camera_covariance: np.ndarray,
) -> tuple[tuple[ObjectResult, ...], dict[str, SolvedObject]]:
    """One row an object, in the order of the sheets, and the pair that speaks best for each.

    camera_covariance : (9m, 9m) of the cameras the pairs share
    """
    groups: dict[str, list[SolvedObject]] = {}
    for pair in round_.pairs:
        for seen in pairs[pair.pair].objects if pair.pair in pairs else ():
            groups.setdefault(seen.result.object, []).append(seen)
    rows, chosen = [], {}
    for thing in round_.objects:
        group = groups.get(thing.object, [])
        if not group:
            rows.append(_no_result(round_, thing, pairs, refused, lost))
            continue
        best = min(
            group, key=lambda s: (s.result.verdict != "accept", s.result.diameter_sd_m or np.inf)
        )
        chosen[thing.object] = best
        rows.append(best.result if len(group) == 1 else _mean(group, best, camera_covariance))
    return tuple(rows), chosen


def _mean(
    group: Sequence[SolvedObject], best: SolvedObject, camera_covariance: np.ndarray
) -> ObjectResult:
    """Weighted mean of the pairs that are fit for it; pairs of one camera are not independent."""
    fit = [s for s in group if s.result.verdict == "accept"] or list(group)
    names = " ".join(s.result.pair for s in group)
    views = sum(s.result.views for s in group)
    left_out = [s.result.pair for s in group if s not in fit]
    reasons = list(best.result.reasons)
    if left_out:
        reasons.append(f"pair {', '.join(left_out)} was left out: it is not fit by itself")
    whole = replace(best.result, **_seen_elsewhere(best, group))
    if len(fit) == 1:
        return replace(whole, pair=names, views=views, reasons=tuple(reasons))
    values = np.array([s.finding.diameter_m for s in fit])
    cov = np.diag([(s.result.diameter_sd_m or 0.0) ** 2 for s in fit])
    roundness = [s.result.budget.get("roundness", 0.0) for s in fit]
    for i, first in enumerate(fit):
        for j in range(i):
            cov[i, j] = cov[j, i] = _shared_variance(first, fit[j], camera_covariance)
    # An out-of-round stem differs from side to side: that part is common until it is solved for.
    own = cov + 1e-18 * np.eye(len(fit))
    weights = np.linalg.solve(own, np.ones(len(fit)))
    weights = np.maximum(weights, 0.0)
    weights /= weights.sum()
    mean = float(weights @ values)
    departure = values - mean
    chi = float(departure @ np.linalg.solve(own, departure))
    variance = float(weights @ own @ weights)
    common = float(weights @ np.sqrt(roundness)) ** 2 - float(weights**2 @ roundness)
    sd = float(np.sqrt(max(variance + max(common, 0.0), 0.0)))
    verdict = best.result.verdict
    if chi > chi2.ppf(DISAGREE_QUANTILE, len(fit) - 1):
        verdict = "remeasure"
        sd *= float(np.sqrt(chi / (len(fit) - 1)))
        listed = ", ".join(
            f"{1000 * v:.0f} mm in {s.result.pair}" for v, s in zip(values, fit, strict=True)
        )
        reasons.insert(0, f"its pairs disagree ({listed})")
    low, high = linear_interval(mean, sd)
    scale = sd**2 / max(sum(best.result.budget.values()), 1e-300)
    return replace(
        whole,
        pair=names,
        views=views,
        verdict=verdict,
        reasons=tuple(reasons),
        diameter_m=mean,
        diameter_sd_m=sd,
        diameter_lo_m=low,
        diameter_hi_m=high,
        girth_m=float(np.pi * mean),
        budget={source: part * scale for source, part in best.result.budget.items()},
    )


def _seen_elsewhere(best: SolvedObject, group: Sequence[SolvedObject]) -> dict[str, Any]:
    """Height and ground diameter from another pair where the best one does not show them."""
    found: dict[str, Any] = {}
    for names in (("height_m", "height_sd_m"), ("ground_diameter_m",)):
        if getattr(best.result, names[0]) is not None:
            continue
        other = next((s for s in group if getattr(s.result, names[0]) is not None), None)
        if other is not None:
            found.update({name: getattr(other.result, name) for name in names})
    return found


def _shared_variance(
    first: SolvedObject, second: SolvedObject, camera_covariance: np.ndarray
) -> float:
    """Covariance of two diameters through the cameras they share."""

    def columns(ids: Sequence[int]) -> np.ndarray:
        return np.concatenate([np.arange(CAMERA_VALUES * i, CAMERA_VALUES * (i + 1)) for i in ids])

    part = camera_covariance[np.ix_(columns(first.camera_ids), columns(second.camera_ids))]
    return float(first.finding.by_camera @ part @ second.finding.by_camera)


def _no_result(
    round_: Round,
    thing: RoundObject,
    pairs: Mapping[str, SolvedPair],
    refused: Mapping[str, PairResult],
    lost: Mapping[str, Mapping[str, str]],
) -> ObjectResult:
    reasons = []
    for pair in round_.pairs:
        if thing.pairs and pair.pair not in thing.pairs:
            continue
        if thing.object in lost.get(pair.pair, {}):
            reasons.append(f"pair {pair.pair}: {lost[pair.pair][thing.object]}")
        elif pair.pair in refused:
            reasons += [f"pair {pair.pair}: {sentence}" for sentence in refused[pair.pair].reasons]
    if not reasons:
        reasons.append("it is marked in no pair")
    named = [p for p in round_.pairs if p.pair in thing.pairs]
    return ObjectResult(
        object=thing.object,
        kind=thing.kind,
        label=thing.label,
        pair=" ".join(p.pair for p in named),
        views=0,
        verdict="no result",
        reasons=tuple(reasons),
        photo_a=named[0].photos[0] if named else None,
        photo_b=named[0].photos[1] if named else None,
        extra=thing.extra,
    )
