"""A pair's levelled frame laid onto the fixes of its stations.

In: fixes in east and north metres with their covariance, the stations in the frame. Out: how the
fixes alone turn the frame, and where station A stands for a given heading.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

# Fixes that disagree with the stations' distances beyond this probability have their sds enlarged.
_DOUBT = 0.01
_TAIL = 5.0
_ROUNDS = 10


@dataclass(frozen=True)
class FixFit:
    """The fixes of one pair against its stations.

    turn_deg, turn_weight : heading by the fixes alone and the concentration of its von Mises
                            likelihood; weight 0 with one fix
    weights  : (v,) share of each fix in the position, sum 1
    axis_var_m2 : variance of the position along each axis, for a known heading
    misfit   : root mean square of what the heading leaves of the fixes, metres (0 with one fix)
    enlarged : factor by which the fixes' sds were enlarged because they disagree, 1 when not
    """

    fixes_m: np.ndarray
    stations_m: np.ndarray
    turn_deg: float
    turn_weight: float
    weights: np.ndarray
    axis_var_m2: float
    misfit: float
    enlarged: float

    def origin(self, heading_deg: float) -> np.ndarray:
        """East and north of station A for a heading, (2,)."""
        turned = self.stations_m @ turn(heading_deg).T
        return np.asarray(self.weights @ (self.fixes_m - turned))

    def origin_slope(self, heading_deg: float) -> np.ndarray:
        """How station A follows the heading, (2,) metres a radian."""
        return np.asarray(-self.weights @ (self.stations_m @ turn_slope(heading_deg).T))


def turn(heading_deg: float) -> np.ndarray:
    """Rotation from the levelled frame to east and north, (2, 2)."""
    angle = np.radians(heading_deg)
    return np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])


def turn_slope(heading_deg: float) -> np.ndarray:
    """Derivative of `turn` by the heading, (2, 2) a radian."""
    angle = np.radians(heading_deg)
    return np.array([[-np.sin(angle), np.cos(angle)], [-np.cos(angle), -np.sin(angle)]])


def fit_fixes(
    fixes_m: np.ndarray,
    stations_m: np.ndarray,
    covariance_m2: np.ndarray,
    heading_deg: float | None = None,
) -> FixFit:
    """Lay the stations onto their fixes, for a heading that is known from elsewhere too, or not.

    fixes_m, stations_m : (v, 2) east and north, and x and y of the same stations
    covariance_m2       : (v, v) of one axis of the fixes' errors
    """
    count = len(fixes_m)
    cov = np.array(covariance_m2, dtype=float)
    fit = _fit(fixes_m, stations_m, cov)
    if count == 1:
        return fit
    at = fit.turn_deg if heading_deg is None else heading_deg
    if count > 2:
        # With three fixes or more, one that stands off alone is seen and weighs less.
        variance = np.diag(cov).copy()
        for _ in range(_ROUNDS):
            rest2 = (_residuals(fit, at) ** 2).sum(axis=1)
            calm = np.maximum(1.0, (_TAIL + rest2 / variance) / (_TAIL + 2.0))
            cov = np.array(covariance_m2, dtype=float)
            cov[np.diag_indices(count)] += (calm - 1.0) * variance
            fit = _fit(fixes_m, stations_m, cov)
            at = fit.turn_deg if heading_deg is None else heading_deg
    from scipy.special import chdtri

    rest = _residuals(fit, at)
    freedom = 2 * (count - 1)
    square = float(np.einsum("ik,ij,jk->", rest, np.linalg.inv(cov), rest))
    misfit = float(np.sqrt((rest**2).sum(axis=1).mean()))
    if square <= chdtri(freedom, _DOUBT):
        return _fit(fixes_m, stations_m, cov, misfit)
    factor = float(np.sqrt(square / freedom))
    return _fit(fixes_m, stations_m, cov * factor**2, misfit, factor)


def _residuals(fit: FixFit, heading_deg: float) -> np.ndarray:
    turned = fit.stations_m @ turn(heading_deg).T
    return np.asarray(fit.fixes_m - turned - fit.origin(heading_deg))


def _fit(
    fixes_m: np.ndarray,
    stations_m: np.ndarray,
    cov: np.ndarray,
    misfit: float = 0.0,
    enlarged: float = 1.0,
) -> FixFit:
    inverse = np.linalg.inv(cov)
    ones = inverse.sum(axis=1)
    weights = ones / ones.sum()
    z = fixes_m - weights @ fixes_m
    q = stations_m - weights @ stations_m
    # sum z' W R(heading) q = cos * a + sin * b
    a = float(np.sum(z * (inverse @ q)))
    b = float(z[:, 0] @ inverse @ q[:, 1] - z[:, 1] @ inverse @ q[:, 0])
    return FixFit(
        fixes_m=fixes_m,
        stations_m=stations_m,
        turn_deg=float(np.degrees(np.arctan2(b, a)) % 360.0),
        turn_weight=float(np.hypot(a, b)) if len(z) > 1 else 0.0,
        weights=weights,
        axis_var_m2=float(1.0 / ones.sum()),
        misfit=misfit,
        enlarged=enlarged,
    )
