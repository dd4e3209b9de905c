"""Essential matrices through five ray pairs, many samples at once.

In: (s, 5, 3) ray pairs of s samples. Out: all real essential matrices of every sample.
Source: H. Stewenius, C. Engels and D. Nister, "Recent developments on direct relative
orientation", ISPRS Journal 60 (2006): null space, ten cubic constraints, action matrix.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable
from functools import reduce

import numpy as np

# Monomials of x, y, z as exponent triples: cubic ones first, then the basis of the quotient ring.
_CUBIC = [
    (3, 0, 0), (2, 1, 0), (2, 0, 1), (1, 2, 0), (1, 1, 1),
    (1, 0, 2), (0, 3, 0), (0, 2, 1), (0, 1, 2), (0, 0, 3),
]  # fmt: skip
_BASIS = [
    (2, 0, 0), (1, 1, 0), (1, 0, 1), (0, 2, 0), (0, 1, 1),
    (0, 0, 2), (1, 0, 0), (0, 1, 0), (0, 0, 1), (0, 0, 0),
]  # fmt: skip
_ALL = _CUBIC + _BASIS
_LINEAR = [(1, 0, 0), (0, 1, 0), (0, 0, 1), (0, 0, 0)]
_REAL = 1e-7


def _product_map(first: list, second: list, out: list) -> np.ndarray:
    """(len(first), len(second), len(out)) of ones where monomials multiply into another."""
    table = np.zeros((len(first), len(second), len(out)))
    for (i, a), (j, b) in itertools.product(enumerate(first), enumerate(second)):
        table[i, j, out.index(tuple(np.add(a, b)))] = 1.0
    return table


_TWO = _product_map(_LINEAR, _LINEAR, _BASIS)
_THREE = _product_map(_BASIS, _LINEAR, _ALL)


def _sum(parts: Iterable[np.ndarray]) -> np.ndarray:
    return reduce(np.add, parts)


def _constraints(null: np.ndarray) -> np.ndarray:
    """Ten cubic constraints on E = x E1 + y E2 + z E3 + E4, (s, 10, 20) coefficients.

    null : (s, 4, 3, 3) basis of the null space
    """
    e = np.moveaxis(null, 1, -1)

    def times(left: np.ndarray, right: np.ndarray) -> np.ndarray:
        return np.einsum("...i,...j,ijk->...k", left, right, _TWO)

    def cubed(left: np.ndarray, right: np.ndarray) -> np.ndarray:
        return np.einsum("...i,...j,ijk->...k", left, right, _THREE)

    minors = [
        times(e[:, 1, j], e[:, 2, k]) - times(e[:, 1, k], e[:, 2, j])
        for j, k in ((1, 2), (2, 0), (0, 1))
    ]
    determinant = _sum(cubed(minor, e[:, 0, i]) for i, minor in enumerate(minors))
    square = _sum(times(e[:, :, None, k], e[:, None, :, k]) for k in range(3))
    trace = square[:, 0, 0] + square[:, 1, 1] + square[:, 2, 2]
    lifted = square - 0.5 * np.eye(3)[None, :, :, None] * trace[:, None, None, :]
    product = _sum(cubed(lifted[:, :, None, k], e[:, None, k, :]) for k in range(3))
    return np.concatenate([determinant[:, None], product.reshape(len(null), 9, 20)], axis=1)


def five_point(rays_a: np.ndarray, rays_b: np.ndarray) -> np.ndarray:
    """Essential matrices E with b' E a = 0 for each sample's five ray pairs.

    rays_a, rays_b : (s, 5, 3)
    returns        : (m, 3, 3) of Frobenius norm one, the real solutions of all samples
    """
    rows = (rays_b[:, :, :, None] * rays_a[:, :, None, :]).reshape(len(rays_a), 5, 9)
    null = np.linalg.svd(rows)[2][:, 5:].reshape(-1, 4, 3, 3)
    coefficients = _constraints(null)
    cubic, rest = coefficients[:, :, :10], coefficients[:, :, 10:]
    usable = np.abs(np.linalg.det(cubic)) > 1e-30
    null, cubic, rest = null[usable], cubic[usable], rest[usable]
    if not len(null):
        return np.zeros((0, 3, 3))
    reduced = -np.linalg.solve(cubic, rest)
    action = np.zeros((len(null), 10, 10))
    action[:, :6] = reduced[:, :6]
    # x * x, x * y, x * z and x * 1 are members of the basis themselves.
    for row, column in ((6, 0), (7, 1), (8, 2), (9, 6)):
        action[:, row, column] = 1.0
    values, vectors = np.linalg.eig(action)
    last = vectors[:, 9]
    real = (np.abs(values.imag) < _REAL * (1.0 + np.abs(values.real))) & (np.abs(last) > 1e-12)
    sample, which = np.nonzero(real)
    xyz = (vectors[sample, 6:9, which] / last[sample, which][:, None]).real
    found = np.einsum("mi,mijk->mjk", xyz, null[sample, :3]) + null[sample, 3]
    return found / np.linalg.norm(found, axis=(1, 2), keepdims=True)
