"""Densities whose moments and evidence are known exactly, taking a block (n_sets, p) as the samplers want."""

import math
from collections.abc import Callable

import numpy as np
from scipy.special import digamma, polygamma

from finback.laplace import Mode

LogDensity = Callable[[np.ndarray], np.ndarray]

CORRELATED = np.array(
    [
        [1.00, 0.99, 0.50, 0.00, -0.70, 0.20],
        [0.99, 1.00, 0.50, 0.00, -0.70, 0.20],
        [0.50, 0.50, 1.00, 0.30, -0.40, 0.10],
        [0.00, 0.00, 0.30, 1.00, 0.10, -0.30],
        [-0.70, -0.70, -0.40, 0.10, 1.00, 0.00],
        [0.20, 0.20, 0.10, -0.30, 0.00, 1.00],
    ]
)
"""A correlation matrix with one narrow ridge, as h and k have one."""

SCALES = np.array([0.03, 0.2, 1.0, 5.0, 40.0, 1e-3])


def gaussian(mean: np.ndarray, covariance: np.ndarray) -> LogDensity:
    """A normal distribution, normalised: its log evidence is 0."""
    lower = np.linalg.cholesky(covariance)
    inverse = np.linalg.inv(lower)
    constant = -0.5 * len(mean) * math.log(2 * math.pi) - float(np.log(np.diag(lower)).sum())

    def log_density(z: np.ndarray) -> np.ndarray:
        return constant - 0.5 * np.square((z - mean) @ inverse.T).sum(axis=1)

    return log_density


def log_gamma(shapes: np.ndarray) -> LogDensity:
    """Logarithms of independent Gamma(shape) variables, normalised; skewed to the left."""
    constant = -sum(math.lgamma(a) for a in shapes)
    return lambda z: constant + (shapes * z - np.exp(z)).sum(axis=1)


def log_gamma_moments(shapes: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Means and standard deviations of `log_gamma`: digamma and the root of trigamma."""
    return digamma(shapes), np.sqrt(polygamma(1, shapes))


def log_gamma_mode(shapes: np.ndarray) -> Mode:
    """The mode of `log_gamma`, with its curvature."""
    z = np.log(shapes)
    return Mode(z, float(log_gamma(shapes)(z[None])[0]), np.diag(shapes**-0.5))
