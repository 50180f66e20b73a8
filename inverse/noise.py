"""Noise: how readings scatter about what the physics predicts.

The covariance of the readings is fixed + sigma² D: `fixed` holds all that is stated (random noise, one block
a place for the common calibration error, hole positions through dT/dx, geometry through its sensitivities),
D marks the readings whose random noise sigma is estimated. One generalised eigenproblem turns it into
independent parts once, so that every further sigma costs one division:

    fixed + sigma0² D = M,  V' M V = I,  V' D V = diag(mu)   =>   V' C V = diag(1 + (sigma² - sigma0²) mu).

A smooth misfit adds a² K. Where sigma is stated V can be turned so that V' K V is diagonal as well; where
both are unknown no V makes all three diagonal, and each set has a Cholesky factor of its own.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

REFERENCE_SIGMA = 0.3  # K; any positive number gives the same answer, this one keeps M well scaled
EVERY = slice(None)
ALIKE = 12  # digits to which parts of the noise that are alike are made equal
PIECE = 2**16  # numbers of covariances at a time, that stay in the processor's cache


@dataclass(frozen=True, slots=True)
class Noise:
    """Gaussian noise of n readings.

    `basis` V (n, n); `floor`, `slope` (n,): variance of part i is floor_i + slope_i sigma²;
    `log_det` of V'V inverse, so that ln det C = log_det + sum ln(variances). `estimated`: is sigma unknown.
    `smooth`: what a misfit of share 1 adds to the parts, their variances (n,) or their covariance (n, n);
    None where none is looked for. `heavy`: how many parts, the first ones, have heavy tails (`tails`) and
    their variance's root for a scale.
    """

    basis: Array
    floor: Array
    slope: Array
    log_det: float
    estimated: bool
    smooth: Array | None = None
    heavy: int = 0

    def variances(self, sigma: Array | float, parts: NDArray[np.intp] | slice = EVERY) -> Array:
        """Return the variances of the parts without misfit for sigma [K] of shape (n_sets, 1) or a float."""
        return self.floor[parts] + self.slope[parts] * np.square(sigma)

    def covariance(self, sigma: float, misfit: float = 0.0) -> Array:
        """Return the covariance C of the readings (n, n) for one sigma [K] and one share of misfit [1]."""
        back = np.linalg.inv(self.basis)
        found = back.T @ (self.variances(sigma)[:, None] * back)
        if self.smooth is not None:
            found = found + misfit**2 * (back.T @ self._smooth_matrix() @ back)
        return np.asarray(found, dtype=np.float64)

    def whiten(self, residuals: Array, sigma: Array | float, misfit: Array | float) -> tuple[Array, Array]:
        """Return whitened residuals (n_sets, n), and ln det C less `log_det` (n_sets,), with a misfit.

        Arguments: residuals (n_sets, n) [K, W]; sigma [K] and misfit [1], (n_sets,) each or a float.
        """
        sets, n = residuals.shape
        parts = residuals @ self.basis
        shares = np.broadcast_to(np.square(misfit), (sets,))
        variances = np.broadcast_to(self.variances(np.reshape(sigma, (-1, 1))), (sets, n))
        assert self.smooth is not None, "there is a misfit"
        if self.smooth.ndim == 1:
            variances = variances + shares[:, None] * self.smooth
            return parts / np.sqrt(variances), np.log(variances).sum(axis=1)
        at_a_time = max(1, PIECE // (n * n))
        pieces = [slice(i, i + at_a_time) for i in range(0, sets, at_a_time)]
        found = [_factorise(self.smooth, parts[p].T, variances[p].T, shares[p]) for p in pieces]
        return np.concatenate([one[0] for one in found], axis=1).T, np.concatenate([one[1] for one in found])

    def precision(self, sigma: Array | float, misfit: Array | float) -> Array:
        """Return the inverse of C (n_sets, n, n) for sigma [K] and misfit [1], (n_sets,) each or a float."""
        variances = self.variances(np.reshape(sigma, (-1, 1)))
        of_parts = variances[:, :, None] * np.eye(len(self.floor))
        if self.smooth is not None:
            of_parts = of_parts + np.square(np.reshape(misfit, (-1, 1, 1))) * self._smooth_matrix()
        return np.asarray(self.basis @ np.linalg.inv(of_parts) @ self.basis.T)

    def given(self, misfit: float) -> "Noise":
        """Return the noise with the misfit at one share [1], which is then as any stated error."""
        at = self.floor + self.slope * REFERENCE_SIGMA**2
        factor = np.diag(np.sqrt(self.slope))
        turned = _part(np.diag(at) + misfit**2 * self._smooth_matrix(), factor, self.estimated)
        log_det = self.log_det + turned.log_det
        return replace(turned, basis=self.basis @ turned.basis, log_det=log_det)

    def _smooth_matrix(self) -> Array:
        assert self.smooth is not None, "there is a misfit"
        return np.diag(self.smooth) if self.smooth.ndim == 1 else self.smooth


def build(fixed: Array, estimated: NDArray[np.bool_], smooth: Array | None = None) -> Noise:
    """Return the noise of readings with covariance `fixed` (n, n) plus sigma² where `estimated` (n,).

    `smooth` (n, n) [K²] is what a misfit of share 1 adds. Raises ValueError when a reading would have no
    noise.
    """
    reference = fixed + np.diag(np.where(estimated, REFERENCE_SIGMA**2, 0.0))
    if np.any(np.diag(reference) <= 0):
        raise ValueError("every reading needs a noise, stated or estimated")
    found = _part(reference, np.eye(len(estimated))[:, estimated], bool(estimated.any()))
    if smooth is None:
        return found
    of_parts = found.basis.T @ smooth @ found.basis
    if found.estimated:
        return replace(found, smooth=of_parts)
    weights, axes = np.linalg.eigh(of_parts)
    return replace(found, basis=found.basis @ axes, smooth=np.clip(weights, 0.0, None))


def side_by_side(parts: Sequence[Noise]) -> Noise:
    """Return the noise of readings that come in groups, without an error that two groups share or misfit."""
    sizes = [len(part.floor) for part in parts]
    basis, start = np.zeros((sum(sizes), sum(sizes))), 0
    for part, size in zip(parts, sizes, strict=True):
        own = slice(start, start + size)
        basis[own, own] = part.basis
        start += size
    return Noise(
        basis,
        np.concatenate([part.floor for part in parts]),
        np.concatenate([part.slope for part in parts]),
        sum(part.log_det for part in parts),
        any(part.estimated for part in parts),
    )


def _part(reference: Array, factor: Array, estimated: bool) -> Noise:
    """Return the noise of covariance reference + (sigma² - sigma0²) factor factor' in independent parts."""
    n = len(reference)
    lower = np.linalg.cholesky(reference)
    inverse = np.linalg.inv(lower)
    log_det = 2 * float(np.log(np.diag(lower)).sum())
    if not estimated:
        return Noise(inverse.T, np.ones(n), np.zeros(n), log_det, False)
    marked = inverse @ factor
    slope, vectors = np.linalg.eigh(marked @ marked.T)
    slope = np.clip(
        np.round(slope * REFERENCE_SIGMA**2, ALIKE) / REFERENCE_SIGMA**2, 0.0, REFERENCE_SIGMA**-2
    )
    floor = np.clip(1 - REFERENCE_SIGMA**2 * slope, 0.0, None)
    floor[floor < 1e-12] = 0.0
    return Noise(inverse.T @ vectors, floor, slope, log_det, True)


def _factorise(smooth: Array, parts: Array, variances: Array, shares: Array) -> tuple[Array, Array]:
    """Whiten by Cholesky factors of diag(variances) + shares smooth, all sets at once.

    Arguments: smooth (n, n); parts, variances (n, n_sets); shares (n_sets,). Parts are one more row below
    each matrix: what becomes of that row are the whitened ones. Returns them, and the log determinants.
    """
    n, sets = parts.shape
    factor = np.empty((n + 1, n, sets))
    log_det = np.zeros(sets)
    for j in range(n):
        column = np.concatenate([smooth[j:, j, None] * shares, parts[j, None]])
        if j:
            column -= np.einsum("iks,ks->is", factor[j:, :j], factor[j, :j])
        column[0] = np.maximum(column[0], 0.0) + variances[j]  # none is negative but by rounding
        factor[j:, j] = column / np.sqrt(column[0])
        log_det += np.log(column[0])
    return factor[n], log_det
