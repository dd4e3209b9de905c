"""Identities of rational trigonometry.

Source: N. J. Wildberger, Divine Proportions: Rational Trigonometry to Universal Geometry (2005),
chapter 1 (the main laws); the laws are quoted from memory, the triangles are invented.
"""

import numpy as np
from hypothesis import assume, given
from hypothesis import strategies as st

from fieldround.geometry.spreads import quadrance, spread

coordinates = st.floats(-10.0, 10.0)
points = st.tuples(coordinates, coordinates, coordinates).map(np.array)


def triangle(a, b, c):
    """Quadrances opposite to each corner and spreads at each corner."""
    quadrances = [quadrance(c - b), quadrance(a - c), quadrance(b - a)]
    spreads = [spread(b - a, c - a), spread(a - b, c - b), spread(a - c, b - c)]
    return quadrances, spreads


@given(points, points, points)
def test_spread_law(a, b, c):
    assume(_far(a, b, c))
    (q1, q2, q3), (s1, s2, s3) = triangle(a, b, c)
    assert np.isclose(s1 * q2, s2 * q1, rtol=1e-7, atol=1e-12)
    assert np.isclose(s2 * q3, s3 * q2, rtol=1e-7, atol=1e-12)


@given(points, points, points)
def test_cross_law(a, b, c):
    assume(_far(a, b, c))
    (q1, q2, q3), (_, _, s3) = triangle(a, b, c)
    left, right = (q1 + q2 - q3) ** 2, 4.0 * q1 * q2 * (1.0 - s3)
    assert np.isclose(left, right, rtol=1e-9, atol=1e-8 * q1 * q2)


@given(points, points, points)
def test_triple_spread_formula(a, b, c):
    assume(_far(a, b, c))
    _, (s1, s2, s3) = triangle(a, b, c)
    left = (s1 + s2 + s3) ** 2
    right = 2.0 * (s1**2 + s2**2 + s3**2) + 4.0 * s1 * s2 * s3
    assert np.isclose(left, right, atol=1e-9)


def _far(a, b, c):
    return min(quadrance(c - b), quadrance(a - c), quadrance(b - a)) > 1e-2
