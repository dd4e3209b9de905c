"""The heading of every pair's levelled frame, from all the round knows of north.

In: by pair, compass readings, bearings, and how the fixes turn the stations. Out: headings with
sds, and the bias of every compass. Everything is an observation with its sd; a device's readings
share its bias, a pair's readings share what stands around (iron, cars), and the tails are heavy,
so that one reading far out does not turn the map.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import partial

import numpy as np

# Phone compasses are good to 5 to 10 degrees (common practice). The 8 degrees taken here are
# split into what all photos of a device share, what one place adds, and each reading's own.
COMPASS_BIAS_SD_DEG = 5.0
COMPASS_SITE_SD_DEG = 4.0
COMPASS_OWN_SD_DEG = 5.0
# Student's t with 5 degrees of freedom, scaled to the stated sd.
_TAIL = 5.0
_T_SCALE = float(np.sqrt((_TAIL - 2.0) / _TAIL))
# A heading with a larger sd is none: a third of the way to knowing nothing (104 degrees).
NO_HEADING_SD_DEG = 40.0
# A source is named when it carries at least this share of what is known of the heading.
_NAMED_SHARE = 0.2
_COARSE_DEG = 0.5
_FINE_POINTS = 401
_SITE_NODES, _SITE_WEIGHTS = np.polynomial.hermite_e.hermegauss(15)
_ROUNDS = 50


@dataclass(frozen=True)
class CompassReadings:
    """Headings that the readings of one device give one pair.

    headings_deg : (n,) reading (from true north) minus the photo's direction in the frame
    own_sd_deg   : (n,) sd of each reading by itself
    site_sd_deg  : sd of what the pair's readings share, device bias apart
    """

    device: str
    headings_deg: np.ndarray
    own_sd_deg: np.ndarray
    site_sd_deg: float = COMPASS_SITE_SD_DEG


@dataclass(frozen=True)
class DirectionReading:
    """A heading from one direction that no device's bias touches: `source` names it."""

    source: str
    heading_deg: float
    sd_deg: float


@dataclass(frozen=True)
class NorthObservations:
    """All that one pair knows of north.

    fixes_deg, fixes_weight : heading that turns the stations onto their fixes, and the
        concentration of its von Mises likelihood (1 / variance in rad, when large)
    """

    compasses: tuple[CompassReadings, ...] = ()
    directions: tuple[DirectionReading, ...] = ()
    fixes_deg: float = 0.0
    fixes_weight: float = 0.0
    fixes_source: str = "GNSS baseline"


@dataclass(frozen=True)
class Heading:
    """The heading of one pair.

    heading_deg, sd_deg : None when nothing tells it to better than 40 degrees
    follows  : (d,) how the heading follows each compass' bias (deg a deg)
    misfits  : sentences on readings that disagree
    """

    heading_deg: float | None
    sd_deg: float | None
    source: str
    follows: np.ndarray
    misfits: tuple[str, ...] = ()


@dataclass(frozen=True)
class Headings:
    """Headings by pair, and the compass biases (deg) with covariance (deg^2), device by device."""

    by_pair: Mapping[str, Heading]
    devices: tuple[str, ...] = ()
    bias_deg: np.ndarray = field(default_factory=lambda: np.zeros(0))
    bias_cov_deg2: np.ndarray = field(default_factory=lambda: np.zeros((0, 0)))


def wrap(angle_deg: np.ndarray | float) -> np.ndarray:
    """Angles in -180 .. 180 degrees."""
    return (np.asarray(angle_deg, dtype=float) + 180.0) % 360.0 - 180.0


def round_headings(observed: Mapping[str, NorthObservations]) -> Headings:
    """Headings of all pairs of a round, adjusted together through the compass biases."""
    devices = tuple(sorted({c.device for o in observed.values() for c in o.compasses}))
    groups = {pair: _groups(o, devices) for pair, o in observed.items()}
    bias, cov, weights = _biases(groups, len(devices))
    found = {}
    for pair, seen in observed.items():
        found[pair] = _heading(seen, groups[pair], devices, bias, cov, weights[pair])
    return Headings(found, devices, bias, cov)


@dataclass(frozen=True)
class _Group:
    """One summed-up observation of a heading: its value and variance, its device or -1."""

    source: str
    value_deg: float
    variance_deg2: float
    device: int


def _groups(seen: NorthObservations, devices: Sequence[str]) -> list[_Group]:
    out = []
    for compass in seen.compasses:
        value, sd = _summary(partial(_compass_log, compass))
        out.append(_Group("photo compass", value, sd**2, devices.index(compass.device)))
    for one in seen.directions:
        out.append(_Group(one.source, one.heading_deg, one.sd_deg**2, -1))
    if seen.fixes_weight > 0.0:
        value, sd = _summary(partial(_fixes_log, seen))
        out.append(_Group(seen.fixes_source, seen.fixes_deg, sd**2, -1))
    return out


def _biases(
    groups: Mapping[str, list[_Group]], count: int
) -> tuple[np.ndarray, np.ndarray, dict[str, np.ndarray]]:
    """Compass biases of the round: headings eliminated pair by pair, robust weights repeated.

    returns : (d,) degrees, (d, d) covariance, weights of every pair's groups (1 / deg^2)
    """
    bias: np.ndarray = np.zeros(count)
    prior = np.eye(count) / COMPASS_BIAS_SD_DEG**2
    cov: np.ndarray = np.eye(count) * COMPASS_BIAS_SD_DEG**2
    weights = {pair: np.array([1.0 / g.variance_deg2 for g in gs]) for pair, gs in groups.items()}
    headings = {pair: _start(gs) for pair, gs in groups.items()}
    for _ in range(_ROUNDS):
        normal, right = prior.copy(), np.asarray(-prior @ bias, dtype=float)
        for pair, gs in groups.items():
            if not gs:
                continue
            w = weights[pair]
            misfit = _misfits(gs, headings[pair], bias)
            whole = float(w.sum())
            own = np.zeros(count)
            for g, weight, m in zip(gs, w, misfit, strict=True):
                if g.device >= 0:
                    own[g.device] += weight
                    normal[g.device, g.device] += weight
                    right[g.device] += weight * m
            normal -= np.outer(own, own) / whole
            right -= own * float(w @ misfit) / whole
        cov = np.linalg.inv(normal)
        step = cov @ right
        bias = bias + step
        moved = float(np.abs(step).max(initial=0.0))
        for pair, gs in groups.items():
            if not gs:
                continue
            misfit = _misfits(gs, headings[pair], bias)
            shift = float(weights[pair] @ misfit) / float(weights[pair].sum())
            headings[pair] = float((headings[pair] + shift) % 360.0)
            moved = max(moved, abs(shift))
            misfit = _misfits(gs, headings[pair], bias)
            weights[pair] = np.array(
                [
                    min(1.0, (_TAIL + 1.0) / (_TAIL + m * m / g.variance_deg2)) / g.variance_deg2
                    for g, m in zip(gs, misfit, strict=True)
                ]
            )
        if moved < 1e-7:
            break
    return bias, cov, weights


def _start(groups: Sequence[_Group]) -> float:
    """The heading on which most of a pair's groups agree, biases taken into their spread."""
    grid = np.arange(0.0, 360.0, _COARSE_DEG)
    log = np.zeros(len(grid))
    for g in groups:
        spread = g.variance_deg2 + (COMPASS_BIAS_SD_DEG**2 if g.device >= 0 else 0.0)
        # A fine observation must not fall between two points of the grid.
        log += _t_log(wrap(grid - g.value_deg), np.sqrt(spread + _COARSE_DEG**2))
    return float(grid[int(np.argmax(log))])


def _misfits(groups: Sequence[_Group], heading: float, bias: np.ndarray) -> np.ndarray:
    shift = np.array([bias[g.device] if g.device >= 0 else 0.0 for g in groups])
    return wrap(np.array([g.value_deg for g in groups]) - heading - shift)


def _heading(
    seen: NorthObservations,
    groups: Sequence[_Group],
    devices: Sequence[str],
    bias: np.ndarray,
    cov: np.ndarray,
    weights: np.ndarray,
) -> Heading:
    follows = np.zeros(len(devices))
    if not groups:
        return Heading(None, None, "none", follows)

    def log_density(at: np.ndarray) -> np.ndarray:
        total = _fixes_log(seen, at)
        for compass in seen.compasses:
            total = total + _compass_log(compass, at + bias[devices.index(compass.device)])
        for one in seen.directions:
            total = total + _t_log(wrap(at - one.heading_deg), one.sd_deg)
        return total

    heading, spread = _summary(log_density)
    for g, weight in zip(groups, weights, strict=True):
        if g.device >= 0:
            follows[g.device] -= weight / float(weights.sum())
    sd = float(np.sqrt(spread**2 + follows @ cov @ follows))
    if sd > NO_HEADING_SD_DEG:
        return Heading(None, None, "none", np.zeros(len(devices)))
    known: dict[str, float] = {}
    for g, weight in zip(groups, weights, strict=True):
        own = 1.0 / weight + (cov[g.device, g.device] if g.device >= 0 else 0.0)
        known[g.source] = known.get(g.source, 0.0) + 1.0 / own
    whole = sum(known.values())
    named = sorted((s for s in known if known[s] >= _NAMED_SHARE * whole), key=lambda s: -known[s])
    plain = _misfits(groups, heading, np.zeros(len(devices)))
    misfits = tuple(
        f"the {g.source} is {abs(p):.0f} degrees off the heading that the pair's other "
        "directions give"
        for g, m, p in zip(groups, _misfits(groups, heading, bias), plain, strict=True)
        if len(groups) > 1 and abs(m) > 3.0 * np.sqrt(g.variance_deg2 + sd**2)
    )
    return Heading(heading % 360.0, sd, " and ".join(named), follows, misfits)


def _t_log(misfit_deg: np.ndarray, sd_deg: np.ndarray | float) -> np.ndarray:
    """Logarithm of a heavy-tailed density with the given sd, up to a constant."""
    ratio = misfit_deg / (np.asarray(sd_deg) * _T_SCALE)
    return -0.5 * (_TAIL + 1.0) * np.log1p(ratio**2 / _TAIL)


def _compass_log(compass: CompassReadings, at_deg: np.ndarray) -> np.ndarray:
    """Log density of headings by one device's readings, what they share integrated out."""
    shared = compass.site_sd_deg * _SITE_NODES
    misfit = wrap(compass.headings_deg - (at_deg[:, None, None] + shared[None, :, None]))
    log = _t_log(misfit, compass.own_sd_deg).sum(axis=-1)
    top = log.max(axis=1)
    return top + np.log(np.exp(log - top[:, None]) @ _SITE_WEIGHTS)


def _fixes_log(seen: NorthObservations, at_deg: np.ndarray) -> np.ndarray:
    return seen.fixes_weight * (np.cos(np.radians(at_deg - seen.fixes_deg)) - 1.0)


def _summary(log_density: Callable[[np.ndarray], np.ndarray]) -> tuple[float, float]:
    """Circular mean and sd (degrees) of a density over all headings.

    The sd is the root mean square about the mean, so that two readings that contradict each other
    give a wide heading between them, not a sharp one at either.
    """
    at = np.arange(0.0, 360.0, _COARSE_DEG)
    step = _COARSE_DEG
    for _ in range(12):
        log = log_density(at)
        mass = np.exp(log - log.max())
        mass /= mass.sum()
        turn = np.radians(at)
        centre = float(np.degrees(np.arctan2(mass @ np.sin(turn), mass @ np.cos(turn))))
        sd = float(np.sqrt(mass @ wrap(at - centre) ** 2))
        if sd > 3.0 * step:
            break
        half = 8.0 * max(sd, step)
        step = 2.0 * half / (_FINE_POINTS - 1)
        at = centre + np.linspace(-half, half, _FINE_POINTS)
    return centre % 360.0, max(sd, 1e-6)
