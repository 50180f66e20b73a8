"""Least squares on the readings, and how well each unknown is fixed by it.

The one entry for every fit without priors. Residuals come as a function of a whole block of parameter
vectors, and the method makes use of that: a 3-point Jacobian is one evaluation, and so are all the damped
steps of an iteration of Levenberg and Marquardt's method, of which the best is taken. Columns are scaled by
the Jacobian's, the iteration ends only when the full step has shrunk to rounding.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Residuals = Callable[[Array], Array]

MAX_ITERATIONS = 1000
SMALLEST_STEP = 1e-10  # of the values: looser ends report success on hard problems with no correct digits
SMALLEST_GAIN = 1e-15  # of the sum of squares, that the full step still promises
ROUNDING_GAIN = 1e-10  # the same, once no step gains anything any more
FULL_STEP_BELOW = 1e-2  # dampings below which the undamped step is tried too
SMALLEST_DAMPING = 1e-12
FIRST_DAMPING = 1e-1  # of the largest squared singular value
DAMPINGS = 10.0 ** np.array([-3.0, -2.0, -1.0, 0.0, 1.0, 2.0, 3.0, 5.0, 8.0])  # of the last one that was best
SINGULAR = 1e-14  # of the largest singular value: smaller ones are rounding
RANK_TOLERANCE = (
    1e-7  # of the scaled Jacobian's largest singular value; 3-point differences are good to 1e-10
)
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


def fit(residuals: Residuals, start: Array, typical: Array | float = 1.0) -> PointEstimate:
    """Minimise the sum of squared residuals.

    Arguments: residuals, from a block (n_sets, p) to (n_sets, n); start (p,); typical, the size of a change
    in each value that matters, which bounds the difference steps from below, (p,) or one for all.

    Returns a `PointEstimate`; `converged` is False when the iteration ended for want of progress or time.
    """
    z = np.array(start, dtype=np.float64)
    r, slopes = _linearise(residuals, z, typical)
    cost, scale, damping, converged = float(r @ r), np.zeros(len(z)), FIRST_DAMPING, False
    for _ in range(MAX_ITERATIONS):
        scale = np.maximum(scale, np.linalg.norm(slopes, axis=0))
        dampings = np.concatenate([[0.0], damping * DAMPINGS])
        steps, promised = _damped_steps(slopes, r, np.where(scale > 0, scale, 1.0), dampings)
        small = np.abs(steps[0]) <= SMALLEST_STEP * np.maximum(np.abs(z), typical)
        if small.all() or promised <= SMALLEST_GAIN * cost:
            converged = True
            break
        tried = steps if damping <= FULL_STEP_BELOW else steps[1:]
        # the first step is mostly the best one: what follows it is evaluated in the same block
        offsets, widths = _stencil(z + tried[0], typical)
        found = residuals(np.concatenate([z + tried[1:], z + tried[0] + offsets]))
        costs = np.einsum("ij,ij->i", found, found)[: len(tried)]
        costs = np.concatenate([costs[-1:], costs[:-1]])
        best = int(np.argmin(np.where(np.isfinite(costs), costs, np.inf)))
        if not costs[best] < cost:
            converged = promised <= ROUNDING_GAIN * cost
            break
        z, cost = z + tried[best], float(costs[best])
        damping = max(float(dampings[-len(tried) :][best]), SMALLEST_DAMPING)
        if best == 0:
            r, slopes = _differences(found[len(tried) - 1 :], widths)
        else:
            r, slopes = _linearise(residuals, z, typical)
    covariance, rank, null_space = invert_information(slopes)
    return PointEstimate(z, covariance, rank, null_space, r, slopes, converged)


def _damped_steps(slopes: Array, r: Array, scale: Array, dampings: Array) -> tuple[Array, float]:
    """Return the steps for all dampings (n_dampings, p), and the gain that the undamped one promises."""
    left, singular, right = np.linalg.svd(slopes / scale, full_matrices=False)
    kept = singular > SINGULAR * singular[0]
    along = -(left.T @ r)
    squares = np.square(singular)
    lost = np.where(kept, 0.0, np.inf)
    shares = singular / (squares + dampings[:, None] * squares[0] + lost)
    return ((shares * along) @ right) / scale, float(np.square(along[kept]).sum())


def _stencil(values: Array, typical: Array | float) -> tuple[Array, Array]:
    """Return the offsets of a central difference (2 p + 1, p), the centre first, and their widths (p,)."""
    p = len(values)
    widths = STEP * np.maximum(np.abs(values), typical)
    offsets = np.zeros((2 * p + 1, p))
    offsets[1 : p + 1] = np.diag(widths)
    offsets[p + 1 :] = -offsets[1 : p + 1]
    return offsets, widths


def _differences(found: Array, widths: Array) -> tuple[Array, Array]:
    """Return residuals (n,) and Jacobian (n, p) from the residuals at a stencil (2 p + 1, n)."""
    p = len(widths)
    return found[0], (found[1 : p + 1] - found[p + 1 :]).T / (2 * widths)


def _linearise(residuals: Residuals, values: Array, typical: Array | float) -> tuple[Array, Array]:
    """Return residuals (n,) and their Jacobian (n, p) from one block evaluation."""
    offsets, widths = _stencil(values, typical)
    return _differences(residuals(values + offsets), widths)


def jacobian(residuals: Residuals, values: Array, typical: Array | float = 1.0) -> Array:
    """Return d residuals/d values, shape (n, p), by central differences in one block evaluation."""
    return _linearise(residuals, values, typical)[1]


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
