"""Verdicts with their reasons in plain words.

In: the figures of an object and of its pair, the round's tolerances. Out: (verdict, reasons).
A result is accepted only when nothing speaks against it; every reason names what to do.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from fieldround.rounds.model import Settings
from fieldround.solve.derive import Finding

# Below this many sds the reciprocal of a parallax is no longer near normal (design: 8).
PARALLAX_FEWEST_SDS = 8.0
# Redundant ties below which wrong ones cannot be told from right ones.
TIES_REDUNDANT = 6
TIE_RMS_LIMIT_PX = 2.5
LIMB_FACTOR_LIMIT = 6.0
REMEDIES = {
    "limb marks": "mark the limbs more finely or stand nearer",
    "ties": "take photos that share more of a textured scene, or mark ties by hand",
    "baseline": "measure the baseline better or make it longer",
    "camera": "use a calibrated camera card, or take more pairs with this camera",
    "uprightness": "mark a plumb line or the limbs over a greater height",
    "taper": "mark the limbs on both sides of the reference height",
    "ground line": "mark the base, which tells where the reference height lies",
    "roundness": "take another pair from the side",
}


@dataclass(frozen=True)
class PairFacts:
    """What the verdict needs to know of the pair an object was solved in.

    remarks : sentences that do not spoil the result; spoilers : sentences that do
    """

    orientation_from: str
    ties_used: int
    tie_rms_px: float | None
    converged: bool
    remarks: tuple[str, ...] = ()
    spoilers: tuple[str, ...] = ()
    object_remarks: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    object_spoilers: Mapping[str, tuple[str, ...]] = field(default_factory=dict)


def largest_source(budget: Mapping[str, float]) -> tuple[str, float]:
    """The source with the largest share of the variance, and that share (0 to 1)."""
    total = sum(budget.values())
    source = max(budget, key=lambda name: budget[name])
    return source, budget[source] / total if total > 0 else 0.0


def judge(
    finding: Finding,
    interval_m: tuple[float | None, float | None],
    facts: PairFacts,
    settings: Settings,
) -> tuple[str, tuple[str, ...]]:
    """Verdict and reasons for one object in one pair.

    interval_m : 95 % interval of the diameter, None where it is open
    """
    spoilers: list[str] = list(facts.spoilers)
    spoilers += facts.object_spoilers.get(finding.name, ())
    low, high = interval_m
    diameter = finding.diameter_m
    half_pct = None
    if low is not None and high is not None and diameter > 0:
        half_pct = 50.0 * (high - low) / diameter
    if half_pct is None or half_pct > settings.tolerance_pct:
        source, share = largest_source(finding.budget)
        width = "is open" if half_pct is None else f"is \N{PLUS-MINUS SIGN}{half_pct:.1f} %"
        spoilers.append(
            f"the 95 % interval {width}, wider than the {settings.tolerance_pct:g} % asked for; "
            f"{100 * share:.0f} % of the variance comes from {source}: {REMEDIES[source]}"
        )
    if finding.agreement is None:
        spoilers.append(
            "only one view shows both limbs, so no second reading confirms the diameter"
        )
    elif abs(finding.agreement) > settings.agreement_limit:
        spoilers.append(
            f"the two readings differ by {abs(finding.agreement):.1f} sds "
            f"({_millimetres(finding.readings_m)}): the marks may lie on different edges, or the "
            "object is not round"
        )
    if finding.parallax_deg < PARALLAX_FEWEST_SDS * finding.parallax_sd_deg:
        spoilers.append(
            f"the sight lines meet at {finding.parallax_deg:.2f} degrees, known to "
            f"\N{PLUS-MINUS SIGN}{finding.parallax_sd_deg:.2f}: the baseline is too short or "
            "points at the object; stand further apart, square to the line of sight"
        )
    if finding.limb_factor > LIMB_FACTOR_LIMIT:
        spoilers.append(
            f"the limb marks scatter {finding.limb_factor**0.5:.1f} times as much as their sd "
            "says: check that they lie on the limbs"
        )
    spoilers += _orientation_spoilers(facts)
    remarks = [*facts.remarks, *facts.object_remarks.get(finding.name, ())]
    if spoilers:
        return "remeasure", (*spoilers, *remarks)
    return "accept", tuple(remarks)


def _orientation_spoilers(facts: PairFacts) -> list[str]:
    out = []
    if not facts.converged:
        out.append("the adjustment of the pair did not settle")
    if facts.orientation_from == "ties":
        if facts.ties_used < 5 + TIES_REDUNDANT:
            out.append(
                f"only {facts.ties_used} ties agree; {5 + TIES_REDUNDANT} are the fewest that "
                "can show a wrong one"
            )
        if facts.tie_rms_px is not None and facts.tie_rms_px > TIE_RMS_LIMIT_PX:
            out.append(f"the ties fit only to {facts.tie_rms_px:.1f} px")
    return out


def _millimetres(readings_m: Sequence[float]) -> str:
    return " and ".join(f"{1000 * reading:.0f} mm" for reading in readings_m)
