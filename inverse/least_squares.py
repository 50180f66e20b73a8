"""Least squares on the readings, and how well each unknown is fixed by it.

The one entry for every fit without priors. Residuals come as a function of a whole block of parameter
vectors, so that a 3-point Jacobian costs one evaluation of it.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Residuals = Callable[[Array], Array]

TOLERANCE = 1e-12  # looser ones report success on hard problems with no correct digits
RANK_TOLERANCE = 1e-7  # of the scaled Jacobian's largest singular value; 3-point differences are good to 1e-10
STEP = np.finfo(np.float64).eps ** (1 / 3)


@dataclass(frozen=True, slots=True)
class PointEstimate:
    """Outcome of a least-squares fit.

    `values` (p,); `covariance` (p, p) for residuals of unit variance, the pseudo-inverse where the rank falls
    short; `rank`; `null_space` (p, p - rank), the combinations that are not determined; `residuals` (n,);
    `jacobian` (n, p); `converged`.
    """

    values: Array
    covariance: Array
    rank: int
    null_space: Array
    residuals: Array
    jacobian: Array
    converged: bool

    @property
    def chi_square(self) -> float:
        """Sum of squared residuals."""
        return float(self.residuals @ self.residuals)

    def rescaled(self, factor: float) -> "PointEstimate":
        """Return the estimate as it would be with every residual times `factor`."""
        return replace(
            self,
            covariance=self.covariance / factor**2,
            residuals=self.residuals * factor,
            jacobian=self.jacobian * factor,
        )


def jacobian(residuals: Residuals, values: Array) -> Array:
    """Return d residuals/d values, shape (n, p), by central differences in one block evaluation."""
    p = len(values)
    steps = STEP * np.maximum(1.0, np.abs(values))
    block = np.concatenate([values + np.diag(steps), values - np.diag(steps)])
    found = residuals(block)
    return np.asarray((found[:p] - found[p:]).T / (2 * steps), dtype=np.float64)


def fit(residuals: Residuals, start: Array) -> PointEstimate:
    """Minimise the sum of squared residuals.

    Arguments: residuals, from a block (n_sets, p) to (n_sets, n); start (p,). Returns a `PointEstimate`.
    """
    from scipy.optimize import least_squares

    found = least_squares(
        lambda z: residuals(z[None])[0],
        start,
        jac=lambda z: jacobian(residuals, z),
        method="trf",
        x_scale="jac",
        ftol=TOLERANCE,
        xtol=TOLERANCE,
        gtol=TOLERANCE,
        max_nfev=200,
    )
    covariance, rank, null_space = invert_information(found.jac)
    return PointEstimate(
        values=found.x,
        covariance=covariance,
        rank=rank,
        null_space=null_space,
        residuals=found.fun,
        jacobian=found.jac,
        converged=bool(found.success),
    )


def invert_information(derivatives: Array) -> tuple[Array, int, Array]:
    """Return covariance (J'J)^-1, rank and null space of a Jacobian (n, p), judged on scaled columns."""
    scale = np.linalg.norm(derivatives, axis=0)
    scale = np.where(scale > 0, scale, 1.0)
    _, singular, right = np.linalg.svd(derivatives / scale)
    p = derivatives.shape[1]
    padded = np.zeros(p)
    padded[: len(singular)] = singular
    kept = padded > RANK_TOLERANCE * max(float(padded[0]), np.finfo(np.float64).tiny)
    root = (right[kept] / padded[kept, None]) / scale
    null_space = (right[~kept] / scale).T
    return root.T @ root, int(kept.sum()), null_space
