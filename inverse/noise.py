"""Noise: how readings scatter about what the physics predicts.

The covariance of the readings is fixed + sigma² D: `fixed` holds all that is stated (random noise, one block
a place for the common calibration error, hole positions through dT/dx, geometry through its sensitivities),
D marks the readings whose random noise sigma is estimated. One generalised eigenproblem turns it into
independent parts once, so that every further sigma costs one division:

    fixed + sigma0² D = M,  V' M V = I,  V' D V = diag(mu)   =>   V' C V = diag(1 + (sigma² - sigma0²) mu).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

REFERENCE_SIGMA = 0.3  # K; any positive number gives the same answer, this one keeps M well scaled


@dataclass(frozen=True, slots=True)
class Noise:
    """Gaussian noise of n readings.

    `basis` V (n, n); `floor`, `slope` (n,): variance of part i is floor_i + slope_i sigma²;
    `log_det` of V'V inverse, so that ln det C = log_det + sum ln(variances). `estimated`: is sigma unknown.
    """

    basis: Array
    floor: Array
    slope: Array
    log_det: float
    estimated: bool

    def variances(self, sigma: Array | float) -> Array:
        """Return the variances of the independent parts for sigma [K] of shape (n_sets, 1) or a float."""
        return self.floor + self.slope * np.square(sigma)

    def covariance(self, sigma: float) -> Array:
        """Return the covariance C of the readings (n, n) for one sigma [K]."""
        back = np.linalg.inv(self.basis)
        return np.asarray(back.T @ (self.variances(sigma)[:, None] * back), dtype=np.float64)


def build(fixed: Array, estimated: NDArray[np.bool_]) -> Noise:
    """Return the noise of readings with covariance `fixed` (n, n) plus sigma² where `estimated` (n,).

    Raises ValueError when a reading would have neither.
    """
    n = len(estimated)
    reference = fixed + np.diag(np.where(estimated, REFERENCE_SIGMA**2, 0.0))
    if np.any(np.diag(reference) <= 0):
        raise ValueError("every reading needs a noise, stated or estimated")
    lower = np.linalg.cholesky(reference)
    inverse = np.linalg.inv(lower)
    if not estimated.any():
        return Noise(inverse.T, np.ones(n), np.zeros(n), 2 * float(np.log(np.diag(lower)).sum()), False)
    marked = inverse[:, estimated]
    slope, vectors = np.linalg.eigh(marked @ marked.T)
    slope = np.clip(slope, 0.0, REFERENCE_SIGMA**-2)
    floor = np.clip(1 - REFERENCE_SIGMA**2 * slope, 0.0, None)
    floor[floor < 1e-12] = 0.0
    log_det = 2 * float(np.log(np.diag(lower)).sum())
    return Noise(inverse.T @ vectors, floor, slope, log_det, True)
