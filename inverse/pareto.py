"""The tail of importance ratios: how heavy it is, and smoothing by the Pareto distribution fitted to it.

A draw's importance ratio is the posterior's density over the proposal's. Where their tail falls off like
that of a generalised Pareto distribution of shape k, moments up to 1/k exist: an average is to be trusted for
k below 0.7, whatever its own error bar says.
Sources: Zhang and Stephens, Technometrics 51 (2009) 316, the fit; Vehtari, Simpson, Gelman, Yao, Gabry,
J. Machine Learning Research 25 (2024) no. 72, length of the tail, prior of k, smoothing, and the k-hat of a
function's expectation.
"""

import math

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

SHORTEST = 5  # draws in a tail that says anything
PRIOR_DRAWS, PRIOR_SHAPE = 10, 0.5  # k is drawn to 0.5 as if by so many draws
PRIOR_SCALE = 3.0  # of the fit's grid, in units of the first quartile
ALL_ALIKE = 1e-12  # relative spread of a tail, below which it has no shape
LIGHT = -np.inf  # k of a tail that is all alike, or of no draws at all


def fit(excesses: Array) -> tuple[Array, Array]:
    """Return shapes k and scales of the Pareto distributions of positive excesses (..., n), rising.

    The survival function is (1 + k x/scale)^(-1/k). The mean of a posterior of theta = -k/scale over a grid,
    as Zhang and Stephens have it, without the prior of k that `shape` adds.
    """
    n = excesses.shape[-1]
    m = 30 + int(math.sqrt(n))
    theta = 1 - np.sqrt(m / (np.arange(1, m + 1) - 0.5))
    theta = theta / (PRIOR_SCALE * excesses[..., int(n / 4 + 0.5) - 1, None]) + 1 / excesses[..., -1, None]
    k = np.log1p(-theta[..., None] * excesses[..., None, :]).mean(axis=-1)
    profile = n * (np.log(-theta / k) - k - 1)
    weights = np.exp(profile - profile.max(axis=-1, keepdims=True))
    best = (weights * theta).sum(axis=-1) / weights.sum(axis=-1)
    found = np.log1p(-best[..., None] * excesses).mean(axis=-1)
    return found, -found / best


def _tail(values: Array) -> tuple[NDArray[np.intp], float]:
    """Return where the largest of non-negative values (n,) stand, rising, and the largest of the others."""
    n = len(values)
    length = _length(n)
    order = np.argpartition(values, (n - length - 1, n - length))
    tail = order[n - length :]
    return tail[np.argsort(values[tail])], float(values[order[n - length - 1]])


def _length(n: int) -> int:
    """Return how many of n values are their tail."""
    return min(math.ceil(min(0.2 * n, 3 * math.sqrt(n))), n - 1)


def _fit_tail(excesses: Array) -> tuple[float, float]:
    """Return shape, drawn a little to its prior, and scale of a tail's excesses (n,), rising."""
    positive = excesses[excesses > 0]
    if len(positive) < SHORTEST or positive[0] >= positive[-1] * (1 - ALL_ALIKE):
        return LIGHT, 0.0
    k, scale = fit(positive)
    return float(_drawn(k, len(positive))), float(scale)


def _drawn(k: Array, n: int) -> Array:
    """Return shapes fitted to n excesses, drawn a little to their prior."""
    return np.asarray((n * k + PRIOR_DRAWS * PRIOR_SHAPE) / (n + PRIOR_DRAWS))


def shapes(values: Array) -> Array:
    """Return k-hat (m,) of the upper tails of non-negative values (m, n); -inf where there is no tail."""
    n = values.shape[1]
    length = _length(n)
    tails = np.partition(values, (n - length - 1, n - length), axis=1)[:, n - length - 1 :]
    excesses = np.sort(tails[:, 1:], axis=1) - tails[:, :1]
    found = np.full(len(values), LIGHT)
    plain = (excesses[:, 0] > 0) & (excesses[:, 0] < excesses[:, -1] * (1 - ALL_ALIKE))
    if plain.any():
        found[plain] = _drawn(fit(excesses[plain])[0], length)
    for row in np.flatnonzero(~plain):
        found[row] = _fit_tail(excesses[row])[0]
    return found


def shape(values: Array) -> float:
    """Return k-hat of the upper tail of non-negative values (n,); -inf where there is no tail."""
    return float(shapes(values[None])[0])


def smooth(ratios: Array) -> tuple[Array, float]:
    """Return importance ratios (n,) with their tail smoothed, and its k-hat.

    The tail's ratios are replaced by what is expected of the fitted distribution, in the same order, and none
    exceeds the largest.
    """
    tail, cut = _tail(ratios)
    k, scale = _fit_tail(ratios[tail] - cut)
    if not math.isfinite(k):
        return ratios, k
    n = len(tail)
    survival = 1 - (np.arange(n) + 0.5) / n
    expected = -np.log(survival) if abs(k) < 1e-12 else np.expm1(-k * np.log(survival)) / k
    found = ratios.copy()
    found[tail] = np.minimum(cut + scale * expected, ratios[tail[-1]])
    return found, k
