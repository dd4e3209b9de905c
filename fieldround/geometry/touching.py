"""How far a ray passes from an axis or a centre, with analytic derivatives.

In: ray directions (any length), stations, axes, centres. Out: signed distances, feet along the
axis, and gradients. A limb ray of a cylinder touches it where the distance equals the radius.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np


class AxisDistance(NamedTuple):
    """Signed distance of rays to axes and the foot along the axis, with gradients.

    distance, foot : (n,) metres; by_offset, by_axis, by_ray : (n, 3) gradients of the distance
    with respect to (axis point minus station), axis direction and ray; foot_by_* : of the foot.
    """

    distance: np.ndarray
    foot: np.ndarray
    by_offset: np.ndarray
    by_axis: np.ndarray
    by_ray: np.ndarray
    foot_by_offset: np.ndarray
    foot_by_axis: np.ndarray
    foot_by_ray: np.ndarray


def _dot(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    return np.einsum("ij,ij->i", first, second)


def cross(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Cross products of (n, 3) arrays; np.cross spends most of its time on checks."""
    out = np.empty_like(first)
    out[:, 0] = first[:, 1] * second[:, 2] - first[:, 2] * second[:, 1]
    out[:, 1] = first[:, 2] * second[:, 0] - first[:, 0] * second[:, 2]
    out[:, 2] = first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]
    return out


def axis_distance(rays: np.ndarray, axes: np.ndarray, offsets: np.ndarray) -> AxisDistance:
    """Signed distance between rays and axes: s = (d x a) . (P - C) / |d x a|.

    rays    : (n, 3) directions d of any length
    axes    : (n, 3) unit directions a
    offsets : (n, 3) axis point P minus station C, metres
    returns : `AxisDistance`; the foot is the signed length from P along a to the foot of the
              common perpendicular
    """
    m = cross(rays, axes)
    length = np.sqrt(_dot(m, m))
    normal = m / length[:, None]
    distance = _dot(normal, offsets)
    g = (offsets - distance[:, None] * normal) / length[:, None]
    ad, dd = _dot(axes, rays), _dot(rays, rays)
    qd, qa = _dot(offsets, rays), _dot(offsets, axes)
    d2 = length * length
    foot = (qd * ad - qa * dd) / d2
    along = ad[:, None]
    foot_by_offset = (along * rays - dd[:, None] * axes) / d2[:, None]
    foot_by_axis = (
        qd[:, None] * rays - dd[:, None] * offsets + (2.0 * foot * ad)[:, None] * rays
    ) / d2[:, None]
    foot_by_ray = (
        along * offsets
        + qd[:, None] * axes
        - 2.0 * qa[:, None] * rays
        - foot[:, None] * 2.0 * (rays - along * axes)
    ) / d2[:, None]
    return AxisDistance(
        distance,
        foot,
        normal,
        cross(g, rays),
        cross(axes, g),
        foot_by_offset,
        foot_by_axis,
        foot_by_ray,
    )


class CentreDistance(NamedTuple):
    """Distance of rays to centres, (n,) metres, with its gradients by offset and ray, (n, 3)."""

    distance: np.ndarray
    by_offset: np.ndarray
    by_ray: np.ndarray


def centre_distance(rays: np.ndarray, offsets: np.ndarray) -> CentreDistance:
    """Distance between rays and centres: |d x (P - C)| / |d|.

    rays    : (n, 3) directions d of any length; offsets : (n, 3) centre P minus station C
    returns : `CentreDistance`
    """
    m = cross(rays, offsets)
    length = np.sqrt(_dot(m, m))
    unit = m / np.where(length > 0.0, length, 1.0)[:, None]
    ray_length = np.sqrt(_dot(rays, rays))
    distance = length / ray_length
    by_offset = cross(unit, rays) / ray_length[:, None]
    by_ray = cross(offsets, unit) / ray_length[:, None] - (distance / ray_length**2)[:, None] * rays
    return CentreDistance(distance, by_offset, by_ray)
