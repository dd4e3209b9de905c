"""Closed-form sizing of a round section from two views, in quadrances and spreads.

In: unit rays and baselines. Out: quadrances (square metres), spreads (0 to 1), diameters.
Spread of two directions = |a x b|^2 / (|a|^2 |b|^2), never 1 - cos^2, which cancels for the
small angles of this job. Source: N. J. Wildberger, Divine Proportions (2005).
"""

from __future__ import annotations

import numpy as np


def quadrance(vector: np.ndarray) -> np.ndarray:
    """Squared length, (..., 3) -> (...)."""
    return np.einsum("...i,...i->...", vector, vector)


def spread(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Spread of two directions, (..., 3), (..., 3) -> (...)."""
    return quadrance(np.cross(first, second)) / (quadrance(first) * quadrance(second))


def bisector(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Unit direction midway between two unit rays, (..., 3), (..., 3) -> (..., 3)."""
    middle = first + second
    return middle / np.sqrt(quadrance(middle))[..., None]


def semi_spread(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """sin^2 of half the angle between two unit rays, (..., 3), (..., 3) -> (...).

    For unit vectors |a - b|^2 = 4 sin^2(half angle): exact, with no cancellation.
    """
    return 0.25 * quadrance(first - second)


def readings(limbs_a: np.ndarray, limbs_b: np.ndarray, baseline: np.ndarray) -> np.ndarray:
    """Diameter seen by each view alone, from two limb rays a view (spread law).

    limbs_a, limbs_b : (n, 2, 3) unit limb rays in one frame; for a cylinder they are first
                       projected along its axis (`along_axis`) and the baseline with them
    baseline         : (n, 3) station B minus station A, metres
    returns          : (n, 2) diameters in metres, NaN where the sight lines are parallel
    source           : N. J. Wildberger, Divine Proportions (2005), spread law
    """
    centre_a = bisector(limbs_a[:, 0], limbs_a[:, 1])
    centre_b = bisector(limbs_b[:, 0], limbs_b[:, 1])
    base = quadrance(baseline)
    # |c x b|^2 / B * B = |c x b|^2 for a unit ray c: the quadrance of the baseline drops out.
    across_a = quadrance(np.cross(centre_a, baseline))
    across_b = quadrance(np.cross(centre_b, baseline))
    between = quadrance(np.cross(centre_a, centre_b))
    # A spread this small is rounding noise of double precision, not a parallax.
    seen = (between > 1e-24) & (base > 0.0)
    between = np.where(seen, between, np.nan)
    quadrances = np.stack(
        [
            semi_spread(limbs_a[:, 0], limbs_a[:, 1]) * across_b / between,
            semi_spread(limbs_b[:, 0], limbs_b[:, 1]) * across_a / between,
        ],
        axis=1,
    )
    return 2.0 * np.sqrt(quadrances)


def along_axis(rays: np.ndarray, axis: np.ndarray) -> np.ndarray:
    """Project rays along a cylinder's axis into the plane square to it, as unit rays.

    rays : (..., 3); axis : (..., 3) unit; returns : (..., 3), NaN for a ray along the axis
    """
    flat = rays - np.einsum("...i,...i->...", rays, axis)[..., None] * axis
    length = np.sqrt(quadrance(flat))[..., None]
    return flat / np.where(length > 0.0, length, np.nan)
