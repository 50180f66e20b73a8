"""Least squares on the readings, and how well each unknown is fixed by it.

The one entry for every fit without priors. Residuals come as a function of a whole block of parameter
vectors, and the method makes use of that: a 3-point Jacobian is one evaluation, and so are all the damped
steps of an iteration of Levenberg and Marquardt's method, of which the best is taken. Columns are scaled by
the Jacobian's, the iteration ends only when the full step has shrunk to rounding. In a long bent valley steps
are tried with a bend as well. The step that gains most may still lead astray there: an iteration that comes
to no end leaves the problem to a trust region, which takes shorter steps from the start.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Residuals = Callable[[Array], Array]

STRAIGHT_ITERATIONS = 20  # a fit that takes more is in a bent valley
MAX_ITERATIONS = 500  # and one that takes more than these, in one that a trust region follows faster
MAX_TRUST_REGION = 1000  # evaluations
PROBE = 0.1  # of a step, to measure how the residuals bend along it
TRUST_REGION_END = 4 * float(np.finfo(np.float64).eps)  # of values, gain and gradient alike
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


def fit(
    residuals: Residuals, start: Array, typical: Array | float = 1.0, gain: float = SMALLEST_GAIN
) -> PointEstimate:
    """Minimise the sum of squared residuals.

    Arguments: residuals, from a block (n_sets, p) to (n_sets, n); start (p,); typical, the size of a change
    in each value that matters, which bounds the difference steps from below, (p,) or one for all; gain, the
    share of the sum of squares that the full step must still promise, or the fit ends: more than the least
    where only a place near the minimum is asked for.

    Returns a `PointEstimate`; `converged` is False when the iteration ended for want of progress or time.
    """
    first = np.array(start, dtype=np.float64)
    found, ended = _iterate(residuals, first, typical, gain)
    if ended:
        return found
    other, _ = _iterate(residuals, _by_trust_region(residuals, first, typical), typical, gain)
    return min(found, other, key=lambda each: (not each.converged, each.chi_square))


def _iterate(
    residuals: Residuals, start: Array, typical: Array | float, gain: float
) -> tuple[PointEstimate, bool]:
    """Minimise by Levenberg and Marquardt's method; return also whether it ended before its time was up."""
    z = start
    r, slopes = _linearise(residuals, z, typical)
    cost, scale, damping, converged, ended = float(r @ r), np.zeros(len(z)), FIRST_DAMPING, False, False
    for iteration in range(MAX_ITERATIONS):
        scale = np.maximum(scale, np.linalg.norm(slopes, axis=0))
        local = _decompose(slopes, np.where(scale > 0, scale, 1.0))
        dampings = np.concatenate([[0.0], damping * DAMPINGS])
        tried = local.steps(r, dampings)
        small = np.abs(tried[0]) <= SMALLEST_STEP * np.maximum(np.abs(z), typical)
        promised = local.gain(r)
        if small.all() or promised <= gain * cost:
            converged = ended = True
            break
        if damping > FULL_STEP_BELOW:
            dampings, tried = dampings[1:], tried[1:]
        if iteration >= STRAIGHT_ITERATIONS:
            bends = local.steps(_curvature(residuals, z, r, slopes, tried), dampings)
            dampings, tried = np.tile(dampings, 2), np.concatenate([tried, tried + bends / 2])
        # the first step is mostly the best one: what follows it is evaluated in the same block
        offsets, widths = _stencil(z + tried[0], typical)
        found = residuals(np.concatenate([z + tried[1:], z + tried[0] + offsets]))
        costs = np.einsum("ij,ij->i", found, found)[: len(tried)]
        costs = np.concatenate([costs[-1:], costs[:-1]])
        best = int(np.argmin(np.where(np.isfinite(costs), costs, np.inf)))
        if not costs[best] < cost:
            converged, ended = promised <= ROUNDING_GAIN * cost, True
            break
        z, cost = z + tried[best], float(costs[best])
        damping = max(float(dampings[best]), SMALLEST_DAMPING)
        if best == 0:
            r, slopes = _differences(found[len(tried) - 1 :], widths)
        else:
            r, slopes = _linearise(residuals, z, typical)
    covariance, rank, null_space = invert_information(slopes)
    return PointEstimate(z, covariance, rank, null_space, r, slopes, converged), ended


@dataclass(frozen=True, slots=True)
class _Local:
    """The singular values of a scaled Jacobian (n, p), and the vectors to both sides, for damped steps."""

    left: Array
    singular: Array
    right: Array

    def steps(self, r: Array, dampings: Array) -> Array:
        """Return the steps (n_dampings, p) against residuals, (n,) for all or (n_dampings, n)."""
        largest = self.singular[0] or 1.0
        relative = self.singular / largest
        lost = np.where(self._kept, 0.0, np.inf)
        shares = relative / (np.square(relative) + dampings[:, None] + lost) / largest
        stepped: Array = (shares * -(r @ self.left)) @ self.right
        return stepped

    def gain(self, r: Array) -> float:
        """Return the fall of the sum of squares that the undamped step promises."""
        return float(np.square((r @ self.left)[self._kept]).sum())

    @property
    def _kept(self) -> NDArray[np.bool_]:
        kept: NDArray[np.bool_] = self.singular > SINGULAR * self.singular[0]
        return kept


def _decompose(slopes: Array, scale: Array) -> _Local:
    left, singular, right = np.linalg.svd(slopes / scale, full_matrices=False)
    return _Local(left, singular, right / scale)


def _curvature(residuals: Residuals, z: Array, r: Array, slopes: Array, steps: Array) -> Array:
    """Return the second derivatives of the residuals along each step (n_steps, n).

    Half the step against them, added to the step itself, follows a bent valley: geodesic acceleration,
    Transtrum and Sethna, arXiv:1201.5885 (2012).
    """
    probed = residuals(z + PROBE * steps)
    second: Array = 2 / PROBE * ((probed - r) / PROBE - steps @ slopes.T)
    return second


def _by_trust_region(residuals: Residuals, start: Array, typical: Array | float) -> Array:
    """Return the values (p,) where scipy's trust region ends."""
    from scipy.optimize import least_squares

    def at(z: Array) -> Array:
        return np.asarray(residuals(z[None])[0])

    def slopes(z: Array) -> Array:
        return jacobian(residuals, z, typical)

    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):  # it refuses steps out of range
        found = least_squares(
            at,
            start,
            slopes,
            x_scale="jac",
            ftol=TRUST_REGION_END,
            xtol=TRUST_REGION_END,
            gtol=TRUST_REGION_END,
            max_nfev=MAX_TRUST_REGION,
        )
    return np.asarray(found.x, dtype=np.float64)


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
