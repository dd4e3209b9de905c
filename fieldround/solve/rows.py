"""Result rows of one solved pair: its own row, its objects' and what the verdict must know.

In: a `PairStart` and where it ended in the adjustment. Out: `PairResult`, `ObjectResult`s.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from fieldround.rounds.model import Mark, Pair, Photo, Round, RoundObject
from fieldround.solve.adjust import Adjusted
from fieldround.solve.derive import Finding, find_objects, vertical_from
from fieldround.solve.drawings import drawings_of
from fieldround.solve.intervals import diameter_interval
from fieldround.solve.pairwise import PairStart
from fieldround.solve.results import ObjectResult, PairResult
from fieldround.solve.scalar_residuals import scale_block
from fieldround.solve.settling import PairFit, tie_misfit_px
from fieldround.solve.verdicts import PairFacts, judge

# Two sources of scale contradict each other beyond this many sds of their difference.
SCALE_LIMIT = 3.0


@dataclass(frozen=True)
class SolvedObject:
    """One object in one pair: its finding and its result row."""

    finding: Finding
    result: ObjectResult
    camera_ids: tuple[int, ...]


@dataclass(frozen=True)
class SolvedPair:
    """One pair's row and its objects."""

    row: PairResult
    objects: tuple[SolvedObject, ...]


def taken_at_text(photo: Photo) -> str | None:
    """Time of a photo as ISO 8601 text, None where its EXIF has none."""
    return None if photo.taken_at is None else photo.taken_at.isoformat()


def solved_pair(
    round_: Round,
    pair: Pair,
    start: PairStart,
    adjusted: Adjusted,
    index: int,
    marks: Sequence[Mark],
    camera_remarks: Sequence[str],
    draws: int | None = None,
) -> SolvedPair:
    """Rows of one pair after the adjustment.

    index          : of the pair in `adjusted`
    camera_remarks : sentences about its cameras
    draws          : Monte Carlo draws asked for, None = only where the linear result is suspect
    """
    fit = adjusted.fits[index]
    findings = find_objects(adjusted, index)
    rms = tie_misfit_px(fit, adjusted.values) if fit.tie_keep.any() else None
    spoilers = [*start.spoilers, *scale_contradictions(fit)]
    remarks = [*start.remarks, *camera_remarks]
    if fit.limbs_dropped:
        remarks.append(f"{fit.limbs_dropped} stray limb marks in the pair were set aside")
    object_remarks: dict[str, tuple[str, ...]] = {}
    for name, sentence in start.object_remarks:
        object_remarks[name] = (*object_remarks.get(name, ()), sentence)
    for k, thing in enumerate(fit.problem.objects):
        for sentence in _height_remarks(fit, k):
            object_remarks[thing.name] = (*object_remarks.get(thing.name, ()), sentence)
    facts = PairFacts(
        orientation_from=start.orientation_from,
        ties_used=int(fit.tie_keep.sum()),
        tie_rms_px=rms,
        converged=adjusted.converged[index],
        remarks=tuple(remarks),
        spoilers=tuple(spoilers),
        object_remarks=object_remarks,
    )
    row = _pair_row(pair, start, adjusted, index, findings, facts)
    listed = {thing.object: thing for thing in round_.objects}
    photos = [round_.photos[name] for name in pair.photos]
    objects = []
    for k, finding in enumerate(findings):
        result = _object_row(
            round_,
            listed[finding.name],
            pair,
            row,
            finding,
            facts,
            photos,
            len({m.photo for m in marks if m.object == finding.name} & set(pair.photos)),
            draws,
        )
        result = replace(result, drawings=drawings_of(fit, adjusted.values, k, photos, marks))
        objects.append(SolvedObject(finding, result, fit.layout.camera_ids))
    return SolvedPair(row, tuple(objects))


def scale_contradictions(fit: PairFit) -> list[str]:
    """Sentences for sources of scale (tape, GNSS, known diameters) that contradict each other."""
    problem = fit.problem
    names = [f"the {length.source} between the stations" for length in problem.lengths]
    known = [t for t in problem.objects if t.known_diameter_m is not None and t.known_sd_m]
    names += [f"the known diameter of {t.name}" for t in known]
    if len(names) < 2:
        return []
    residuals = scale_block(problem, fit.layout, fit.state).residuals
    sizes = [length.length_m for length in problem.lengths]
    sds = [length.sd_m for length in problem.lengths]
    sizes += [float(t.known_diameter_m or 0.0) for t in known]
    sds += [float(t.known_sd_m or 0.0) for t in known]
    # One common scale is fitted: what is left beyond it is the contradiction.
    chi = float(residuals @ residuals)
    if chi <= SCALE_LIMIT**2 * (len(names) - 1):
        return []
    worst = int(np.argmax(np.abs(residuals)))
    off = float(residuals[worst] * sds[worst])
    others = " and ".join(name for i, name in enumerate(names) if i != worst)
    return [
        f"{names[worst]} contradicts {others}: with both, it is {1000 * abs(off):.0f} mm "
        f"({100 * abs(off) / sizes[worst]:.1f} %) off, {abs(residuals[worst]):.1f} sds; "
        "measure both again"
    ]


def _height_remarks(fit: PairFit, k: int) -> list[str]:
    thing = fit.problem.objects[k]
    if thing.ground_guess:
        return [
            f"no base mark: the height of {thing.ref_height_m:g} m above ground is taken from the "
            "height at which a camera is usually held"
        ]
    if thing.is_ball or thing.kind == "pipe" or thing.ref_height_m is not None:
        return []
    return ["no reference height: the diameter is that at the middle of the limb marks"]


def _pair_row(
    pair: Pair,
    start: PairStart,
    adjusted: Adjusted,
    index: int,
    findings: Sequence[Finding],
    facts: PairFacts,
) -> PairResult:
    fit, covariance = adjusted.fits[index], adjusted.covariances[index]
    baseline = fit.state.stations[1]
    length = float(np.linalg.norm(baseline))
    first = int(fit.layout.pose[1]) + 3
    along = baseline / length
    part = covariance[first : first + 3, first : first + 3]
    sources = [length_.source for length_ in fit.problem.lengths]
    sources += [
        f"known diameter of {t.name}"
        for t in fit.problem.objects
        if t.known_diameter_m is not None and t.known_sd_m
    ]
    up = slice(fit.layout.up, fit.layout.up + 2)
    return PairResult(
        pair=pair.pair,
        photos=pair.photos,
        status="solved",
        reasons=(*facts.spoilers, *facts.remarks),
        ties_found=start.ties_found,
        ties_used=facts.ties_used,
        tie_rms_px=facts.tie_rms_px,
        baseline_m=length,
        baseline_sd_m=float(np.sqrt(max(along @ part @ along, 0.0))),
        baseline_from=" and ".join(sources),
        tape_m=pair.tape_m,
        orientation_from=facts.orientation_from,
        parallax_deg=max((f.parallax_deg for f in findings), default=None),
        vertical_from=vertical_from(fit.problem),
        vertical_sd_deg=float(np.degrees(np.sqrt(0.5 * np.trace(covariance[up, up])))),
        extra=pair.extra,
    )


def _object_row(
    round_: Round,
    thing: RoundObject,
    pair: Pair,
    row: PairResult,
    finding: Finding,
    facts: PairFacts,
    photos: Sequence[Photo],
    views: int,
    draws: int | None,
) -> ObjectResult:
    budget = dict(finding.budget)
    roundness = 0.01 * round_.settings.roundness_pct.get(thing.kind, 0.0)
    if roundness > 0.0:
        # One pair sees one side: the mean diameter differs from the width it sees.
        budget["roundness"] = (roundness * finding.diameter_m) ** 2
    sd = float(np.sqrt(max(sum(budget.values()), 0.0)))
    agreement = finding.agreement
    if agreement is not None and roundness > 0.0:
        # Two sides of an out-of-round stem differ by up to sqrt(2) * 2 sin(parallax) sds of it.
        spread = (
            np.sqrt(2.0) * roundness * finding.diameter_m * np.sin(np.radians(finding.parallax_deg))
        )
        difference = finding.readings_m[0] - finding.readings_m[1]
        if agreement != 0.0 and difference != 0.0:
            plain = abs(difference / agreement)
            agreement = float(difference / np.hypot(plain, spread))
    finding = replace(finding, budget=budget, diameter_sd_m=sd, agreement=agreement)
    interval = diameter_interval(finding, pair.pair, roundness, draws)
    verdict, reasons = judge(finding, interval, facts, round_.settings)
    has_readings = len(finding.readings_m) >= 2
    return ObjectResult(
        object=finding.name,
        kind=thing.kind,
        label=thing.label,
        pair=pair.pair,
        views=views,
        verdict=verdict,
        reasons=reasons,
        diameter_m=finding.diameter_m,
        diameter_sd_m=sd,
        diameter_lo_m=interval[0],
        diameter_hi_m=interval[1],
        reading_a_m=finding.readings_m[0] if has_readings else None,
        reading_b_m=finding.readings_m[1] if has_readings else None,
        agreement=agreement,
        girth_m=float(np.pi * finding.diameter_m),
        ref_height_m=finding.ref_height_m,
        ground_diameter_m=finding.ground_diameter_m,
        taper_mm_per_m=finding.taper_mm_per_m,
        height_m=finding.height_m,
        height_sd_m=finding.height_sd_m,
        lean_deg=finding.lean_deg,
        lean_sd_deg=finding.lean_sd_deg,
        range_m=finding.ranges_m[0],
        baseline_m=row.baseline_m,
        baseline_sd_m=row.baseline_sd_m,
        baseline_from=row.baseline_from,
        orientation_from=row.orientation_from,
        photo_a=pair.photos[0],
        photo_b=pair.photos[1],
        taken_at=taken_at_text(photos[0]),
        extra=thing.extra,
        budget=budget,
    )
