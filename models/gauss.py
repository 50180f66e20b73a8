"""Gauss rules of any weight that is given by its integrals over the points of a fine grid.

Lanczos' recurrence, with every vector made orthogonal to all before it, gives the polynomials that are
orthogonal under the weight; the eigenvalues of their Jacobi matrix are the points of the rule, the
eigenvectors turn them into the polynomials that are one at a point and zero at all others.

Source: Golub, Welsch, Calculation of Gauss quadrature rules, Math. Comp. 23 (1969) 221; Gautschi, Orthogonal
Polynomials: Computation and Approximation, Oxford 2004, section 2.2.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Rule:
    """A rule of n points.

    points (n,) [1], in the unit of the coordinate; roots (n,), of the points' weights; functions (..., n) on
    the grid: the polynomial that belongs to each point, orthonormal under the weight; last (2, n): times the
    loads of such functions, their last two coefficients in orthonormal polynomials of rising degree.
    """

    points: Array
    roots: Array
    functions: Array
    last: Array


def gauss(coordinate: Array, weight: Array, n: int) -> Rule:
    """Return the rule of n points [1].

    Arguments: coordinate and weight on a grid, any shape, the weight not negative and above zero at more than
    n points; n, number of points. Its polynomials, of degree below 2 n, are integrated as the grid integrates
    them.
    """
    low, high = float(coordinate.min()), float(coordinate.max())
    y = (2 * coordinate - low - high) / (high - low)
    diagonal, beside, total = _recurrence(y.ravel(), weight.ravel(), n)
    points, vectors = np.linalg.eigh(np.diag(diagonal) + np.diag(beside, 1) + np.diag(beside, -1))
    vectors *= np.where(vectors[0] < 0, -1.0, 1.0)
    orthonormal = np.empty((*y.shape, n))
    orthonormal[..., 0] = 1 / np.sqrt(total)
    before = np.zeros_like(y)
    for k in range(n - 1):
        here = orthonormal[..., k]
        orthonormal[..., k + 1] = ((y - diagonal[k]) * here - before) / beside[k]
        before = beside[k] * here
    return Rule(
        points=(low + high + points * (high - low)) / 2,
        roots=np.sqrt(total) * vectors[0],
        functions=orthonormal @ vectors,
        last=vectors[-2:],
    )


def _recurrence(y: Array, weight: Array, n: int) -> tuple[Array, Array, float]:
    """Return diagonal (n,) and off-diagonal (n - 1,) of the Jacobi matrix, and the whole weight."""
    total = float(weight.sum())
    known = np.zeros((n, y.size))
    vector = np.sqrt(weight / total)
    diagonal, beside = np.empty(n), np.empty(n)
    for k in range(n):
        known[k] = vector
        vector = y * vector
        diagonal[k] = vector @ known[k]
        for _ in range(2):
            vector = vector - known.T @ (known @ vector)
        beside[k] = np.linalg.norm(vector)
        vector /= beside[k]
    return diagonal, beside[:-1], total
