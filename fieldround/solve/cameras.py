"""Camera values as shared unknowns: their start, their priors, how a step moves them.

In: camera cards. Out: `CameraPriors` and steps of the (9,) values. The adjusted unknowns are
log(fx) with the ratio held, log(fy / fx), cx, cy, k1, k2, p1, p2, k3.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from fieldround.rounds.model import Camera
from fieldround.solve.equations import inverse_scaled
from fieldround.solve.robust import student

# A focal length from EXIF was 1 to 16 % off on real photo sets, once above 30 %: the tail of
# Student's t with 3 degrees of freedom admits that without believing it.
FOCAL_FREEDOM = 3.0


@dataclass(frozen=True)
class CameraPriors:
    """Start values and priors of the cameras of a round.

    values : (m, 9) card values; sds : (m, 9) of the adjusted unknowns, 0 where held fixed
    heavy  : (m,) True where the focal prior has heavy tails
    """

    values: np.ndarray
    sds: np.ndarray
    heavy: np.ndarray


def camera_priors(cameras: Sequence[Camera]) -> CameraPriors:
    """Priors of the cards, in the given order."""
    values, sds = [], []
    for card in cameras:
        fx, fy = card.focal_px
        values.append([fx, fy, *card.centre_px, *card.distortion])
        sds.append(
            [
                card.focal_sd_px / fx,
                card.ratio_sd,
                card.centre_sd_px,
                card.centre_sd_px,
                *card.distortion_sd,
            ]
        )
    return CameraPriors(
        np.array(values, dtype=float).reshape(-1, 9),
        np.array(sds, dtype=float).reshape(-1, 9),
        np.array([card.focal_heavy_tailed for card in cameras], dtype=bool),
    )


def values_moved(values: np.ndarray, step: np.ndarray) -> np.ndarray:
    """Card values (..., 9) after a step (..., 9) of the adjusted unknowns."""
    out = values + step
    out[..., 0] = values[..., 0] * np.exp(step[..., 0])
    out[..., 1] = values[..., 1] * np.exp(step[..., 0] + step[..., 1])
    return out


def departures(priors: CameraPriors, values: np.ndarray) -> np.ndarray:
    """Adjusted unknowns minus the prior's, (m, 9)."""
    out = values - priors.values
    out[:, 0] = np.log(values[:, 0] / priors.values[:, 0])
    out[:, 1] = np.log(values[:, 1] / priors.values[:, 1]) - out[:, 0]
    return out


def prior_terms(priors: CameraPriors, values: np.ndarray) -> tuple[np.ndarray, np.ndarray, float]:
    """Diagonal of the prior's normal matrix (m, 9), its gradient (m, 9) and its cost.

    Unknowns held fixed get a zero row; `free_values` names the others.
    """
    free = priors.sds > 0.0
    sds = np.where(free, priors.sds, 1.0)
    residuals = np.where(free, departures(priors, values) / sds, 0.0)
    weights = np.ones_like(residuals)
    cost = 0.5 * float((residuals**2).sum())
    for camera in np.flatnonzero(priors.heavy):
        weight, part = student(residuals[camera, :1], FOCAL_FREEDOM)
        weights[camera, 0] = weight[0]
        cost += part - 0.5 * float(residuals[camera, 0] ** 2)
    diagonal = np.where(free, weights / sds**2, 0.0)
    return diagonal, np.where(free, weights * residuals / sds, 0.0), cost


def free_values(priors: CameraPriors) -> np.ndarray:
    """(m, 9) True where a camera value is adjusted."""
    return priors.sds > 0.0


def camera_covariance(camera_normal: np.ndarray, priors: CameraPriors) -> np.ndarray:
    """Covariance (9m, 9m) of the adjusted unknowns, zero where they are held fixed."""
    free = free_values(priors).ravel()
    out = np.zeros_like(camera_normal)
    if free.any():
        grid = np.ix_(free, free)
        out[grid] = inverse_scaled(camera_normal[grid])
    return out


def found_card(card: Camera, values: np.ndarray, covariance: np.ndarray) -> Camera:
    """The card with adjusted values and their sds.

    values : (9,); covariance : (9, 9) of the adjusted unknowns
    """
    sds = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    k1, k2, p1, p2, k3 = (float(v) for v in values[4:])
    return replace(
        card,
        focal_px=(float(values[0]), float(values[1])),
        focal_sd_px=float(sds[0] * values[0]),
        centre_px=(float(values[2]), float(values[3])),
        centre_sd_px=float(max(sds[2], sds[3])),
        distortion=(k1, k2, p1, p2, k3),
        distortion_sd=(float(sds[4]), float(sds[5]), float(sds[6]), float(sds[7]), float(sds[8])),
        focal_heavy_tailed=False,
        source="adjusted",
    )
