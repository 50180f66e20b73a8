"""The modes of a discretised fin: few enough for a short sum, exact enough to trust.

With the base held, the response to a load f is (K + ratio M)^-1 f = sum_j z_j (z_j f)/(1 + ratio s_j²), where
ratio is h/k and K and M are diagonal together in the modes: z_i K z_j = 1 or 0, z_i M z_j = s_j² or 0. The
fin's own modes would do, slowly: m L to 200 takes 64 of them and a tail to correct. The modes here are those
of the fin confined to its exact responses at n chosen ratios (a Galerkin projection). The sum has the same
form, but its error falls by a constant factor with each mode, like exp(-pi² n/ln(16 b/a)), if the ratios are
Zolotarev's points of the range a to b that ratio plus lowest eigenvalue takes; the heat's error falls twice
as fast. The error is measured against the full set of equations half-way between the chosen ratios, where it
is largest.

Sources: Druskin, Knizhnerman, Zaslavsky, Solution of large scale evolutionary problems using rational Krylov
subspaces with optimized shifts, SIAM J. Sci. Comput. 31 (2009) 3760; Beckermann, Townsend, On the singular
values of matrices with displacement structure, SIAM J. Matrix Anal. Appl. 38 (2017) 1227 (the factor).
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import ellipj, ellipkm1

from finback.models.elements import Elements

Array = NDArray[np.float64]

MOST = 80
"""Most values of h/k that are chosen [1]."""
NEAR_COLD_TIP = 1e-3
"""Share of the length [1] at a tip that is too sharp to be warm where no error is measured."""


@dataclass(frozen=True, slots=True)
class Modes:
    """Modes of a fin whose base is held.

    square: s_j² [m], shape (n,); vectors: z_j by the unknowns of the elements, (n_unknowns, n) [m^-1/2];
    load: the products z_j M 1 with a constant of one (n,) [m^3/2]; rest: what of M 1 no mode holds [m²];
    error: the largest error [1] of a temperature ratio where it was measured.
    """

    square: Array
    vectors: Array
    load: Array
    rest: float
    error: float


def find(elements: Elements, largest: float, accuracy: float, tip_driven: bool) -> Modes:
    """Find modes for every h/k from zero to the largest.

    Arguments: elements; largest h/k [1/m]; accuracy [1] asked for, of temperatures over that of the base, or
    of the tip; tip_driven, whether that may be held or have a coefficient of its own.
    Returns the modes with the error that was reached.
    """
    loads = [elements.load]
    if tip_driven:
        loads.append(np.eye(1, elements.n, elements.n - 1)[0])
    stacked = np.stack(loads, axis=1)
    lowest = _lowest_eigenvalue(elements)
    guess = 1.3 if elements.cold else 0.7 if tip_driven else 1.05  # from what shapes of every kind take
    span = np.log(16 * (1 + largest / lowest)) / np.pi**2
    n = max(3, int(np.ceil(span * np.log(0.3 / accuracy) * guess)))
    found = _project(elements, stacked, lowest, largest, n)
    while found.error > accuracy and n < MOST:
        n = min(MOST, n + 1 + int(np.ceil(1.2 * span * np.log(found.error / accuracy))))
        finer = _project(elements, stacked, lowest, largest, n)
        if finer.error > 0.7 * found.error:  # rounding is reached
            break
        found = finer
    return found


def _lowest_eigenvalue(elements: Elements) -> float:
    """Return the Rayleigh quotient of the first response, a close upper bound [1/m]."""
    response = elements.solve(0.0, elements.load[:, None])
    return float(elements.load @ response[:, 0]) / float(np.square(elements.values(response)).sum())


def _points(low: float, high: float, n: int) -> Array:
    """Return Zolotarev's n points between low and high, rising; low and high above zero."""
    quarter = ellipkm1(low / high)
    _, _, dn, _ = ellipj((2 * np.arange(n, 0, -1) - 1) * quarter / (2 * n), 1 - low / high)
    return np.asarray(high * dn**2)


def _project(elements: Elements, loads: Array, lowest: float, largest: float, n: int) -> Modes:
    chosen = _points(lowest, lowest + largest, n)
    halfway = np.sqrt(chosen[1:] * chosen[:-1]) - lowest
    checks = np.concatenate([halfway, [largest]])
    responses = [elements.solve(ratio, loads) for ratio in np.maximum(chosen - lowest, 0.0)]
    basis = np.concatenate(responses, axis=1)
    for _ in range(2):  # once more, since the responses are nearly alike
        basis = np.asarray(np.linalg.solve(_triangle(elements.slopes(basis)).T, basis.T).T, dtype=np.float64)
    _, singular, rotation = np.linalg.svd(_triangle(elements.values(basis)))
    vectors = basis @ rotation.T
    square = singular**2
    load = elements.load @ vectors
    rest = elements.surface - float(np.sum(load**2 / square))
    error = max(_error(elements, loads, vectors, square, ratio) for ratio in checks)
    return Modes(square, vectors, load, rest, error)


def _triangle(rows: Array) -> Array:
    """Return the R of rows = Q R: shape (n_rows, n) -> (n, n)."""
    found: Any = np.linalg.qr(rows, mode="r")
    return np.asarray(found, dtype=np.float64)


def _error(elements: Elements, loads: Array, vectors: Array, square: Array, ratio: float) -> float:
    exact = elements.solve(ratio, loads)
    summed = vectors @ ((loads.T @ vectors) / (1 + ratio * square)).T
    scale = np.full(loads.shape[1], 1 / ratio)
    scale[1:] = exact[-1, 1:]
    last = elements.n
    if elements.cold:
        length = elements.edges[-1]
        last = int(np.searchsorted(elements.edges, (1 - NEAR_COLD_TIP) * length)) * elements.degree
    return float(np.abs((exact - summed)[:last] / scale).max())
