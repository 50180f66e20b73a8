"""Many hypotheses about one run at once, each by its posterior's mode and curvature.

A hypothesis differs from the problem it belongs to in what its unknowns are beforehand, in the readings (two
of them exchanged) and in their covariance (one of them freed of its thermometer). All take their Newton steps
side by side, one block of predictions a step, so that a few hundred cost as much as a few.

With residuals r = y - f(z), covariance C, prior a +- s of the unknowns, J = df/dz and A = J' C^-1 J + S^-1 at
the mode, the log evidence is  -(r' C^-1 r + (z - a)' S^-1 (z - a) + ln det C + ln det S + ln det A
+ n ln 2 pi)/2: Laplace's method with the curvature of Gauss and Newton.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.problem import LOG_TWO_PI, Problem

Array = NDArray[np.float64]

MAX_STEPS = 25
DIFFERENCE = 1e-3  # of a standard deviation beforehand or of 0.1, whichever is less: for slopes
LARGEST_DIFFERENCE = 1e-4
SHORTER = np.array([1.0, 0.5, 0.2, 0.05])  # shares of a step that are tried
DONE = 1e-6  # Newton decrement [nats] at which a mode is found
CREEPING = 1e-4  # nats gained by a step, below which a mode that lies far out is near enough


@dataclass(frozen=True, slots=True)
class Posed:
    """Hypotheses about a problem.

    `values` (H, n) [K, W], `covariances` (H, n, n), `means`, `sds` (H, p); `bounded` (H,): 1 where heaters
    limit the heat, 0 where what they read is wrong.
    """

    values: Array
    covariances: Array
    means: Array
    sds: Array
    bounded: Array


@dataclass(frozen=True, slots=True)
class Normals:
    """Normal posteriors, one a hypothesis.

    `log_evidence` (H,); `modes` (H, p); `spreads` (H, p, p), covariances of the unknowns; `pulls` (H, n),
    C^-1 r; `precisions` (H, n, n), C^-1; `slopes` (H, n, p), df/dz.
    """

    log_evidence: Array
    modes: Array
    spreads: Array
    pulls: Array
    precisions: Array
    slopes: Array

    def freed(self, row: int, readings: list[int], sd: Array) -> tuple[Array, Array, Array]:
        """Return what a hypothesis says of the errors of readings that it was freed of.

        Arguments: row of the hypothesis; readings, their numbers (m,); sd (m,), of the errors beforehand, as
        they stand in its covariance. Returns their mean (m,) and covariance (m, m), and their covariance with
        the unknowns (p, m).
        """
        scale = np.square(sd)
        mean = scale * self.pulls[row, readings]
        of_slopes = self.precisions[row][readings] @ self.slopes[row]
        given = np.diag(scale) - scale[:, None] * self.precisions[row][np.ix_(readings, readings)] * scale
        with_unknowns = -self.spreads[row] @ of_slopes.T * scale
        covariance = given - (scale[:, None] * of_slopes) @ with_unknowns
        return mean, covariance, with_unknowns


def fit(problem: Problem, posed: Posed, start: Array) -> Normals:
    """Find the modes of hypotheses about a problem, whose noise and misfit are no unknowns.

    Arguments: problem, of p unknowns and n readings; posed; start (H, p) or (p,).
    """
    n = len(problem.measured.values)
    precisions: Array = np.asarray(np.linalg.inv(posed.covariances), dtype=np.float64)
    weights = 1 / np.square(posed.sds)
    z = np.array(np.broadcast_to(start, posed.means.shape))
    widths = np.minimum(DIFFERENCE * posed.sds, LARGEST_DIFFERENCE)
    active = np.arange(len(z))
    residuals, slopes, bounds, bound_slopes = _linearise(problem, posed.values, z, widths, posed.bounded)
    costs = _costs(residuals, bounds, precisions, z - posed.means, weights)
    for _ in range(MAX_STEPS):
        at = active
        curvature = _curvature(slopes[at], bound_slopes[at], precisions[at], weights[at])
        gradient = np.einsum("hnp,hnm,hm->hp", slopes[at], precisions[at], residuals[at])
        gradient -= np.einsum("hbp,hb->hp", bound_slopes[at], bounds[at])
        gradient -= weights[at] * (z[at] - posed.means[at])
        steps = np.linalg.solve(curvature, gradient[..., None])[..., 0]
        promised = np.einsum("hp,hp->h", gradient, steps)
        moving = promised > DONE
        at, steps, promised = at[moving], steps[moving], promised[moving]
        if not len(at):
            break
        trials = z[at, None] + SHORTER[:, None] * steps[:, None]
        found = _trial_costs(problem, posed, precisions, weights, at, trials)
        best = np.argmin(found, axis=1)
        lowest = np.take_along_axis(found, best[:, None], axis=1)[:, 0]
        gains = costs[at] - lowest
        better = gains > 0
        moved = at[better]
        if not len(moved):
            break
        z[moved] = trials[better, best[better]]
        costs[moved] = lowest[better]
        fresh = _linearise(problem, posed.values[moved], z[moved], widths[moved], posed.bounded[moved])
        residuals[moved], slopes[moved], bounds[moved], bound_slopes[moved] = fresh
        active = at[gains > CREEPING]
        if not len(active):
            break
    curvature = _curvature(slopes, bound_slopes, precisions, weights)
    spreads: Array = np.asarray(np.linalg.inv(curvature), dtype=np.float64)
    log_dets = (
        np.linalg.slogdet(posed.covariances)[1]
        + np.linalg.slogdet(curvature)[1]
        - np.log(weights).sum(axis=1)
    )
    logs = -0.5 * (2 * costs + log_dets + n * LOG_TWO_PI)
    return Normals(
        log_evidence=np.where(np.isfinite(logs), logs, -np.inf),
        modes=z,
        spreads=spreads,
        pulls=np.einsum("hnm,hm->hn", precisions, residuals),
        precisions=precisions,
        slopes=slopes,
    )


def _curvature(slopes: Array, bound_slopes: Array, precisions: Array, weights: Array) -> Array:
    found = slopes.transpose(0, 2, 1) @ precisions @ slopes + bound_slopes.transpose(0, 2, 1) @ bound_slopes
    p = found.shape[1]
    found[:, np.arange(p), np.arange(p)] += weights
    return np.asarray(found)


def _costs(residuals: Array, bounds: Array, precisions: Array, away: Array, weights: Array) -> Array:
    """Return half the sum of squares (...,) of readings, heaters and unknowns."""
    of_readings = np.einsum("...n,...nm,...m->...", residuals, precisions, residuals)
    found = 0.5 * (of_readings + np.square(bounds).sum(axis=-1) + (np.square(away) * weights).sum(axis=-1))
    return np.where(np.isfinite(found), found, np.inf)


def _trial_costs(
    problem: Problem, posed: Posed, precisions: Array, weights: Array, at: NDArray[np.intp], trials: Array
) -> Array:
    count, tried, p = trials.shape
    n = len(problem.measured.values)
    predicted = problem.predict(trials.reshape(-1, p)).reshape(count, tried, -1)
    residuals = posed.values[at, None] - predicted[..., :n]
    bounds = problem.bound_residuals(predicted[..., n:]) * posed.bounded[at, None, None]
    away = trials - posed.means[at, None]
    return _costs(residuals, bounds, precisions[at, None], away, weights[at, None])


def _linearise(
    problem: Problem, values: Array, z: Array, widths: Array, bounded: Array
) -> tuple[Array, Array, Array, Array]:
    """Return residuals (H, n) and slopes of the predictions (H, n, p), the same of heaters' bounds."""
    count, p = z.shape
    n = values.shape[1]
    unit = np.concatenate([np.zeros((1, p)), np.eye(p), -np.eye(p)])
    block = z[:, None] + unit * widths[:, None]
    predicted = problem.predict(block.reshape(-1, p)).reshape(count, 2 * p + 1, -1)
    bounds = problem.bound_residuals(predicted[..., n:]) * bounded[:, None, None]
    both = np.concatenate([predicted[..., :n], bounds], axis=-1)
    slopes = (both[:, 1 : p + 1] - both[:, p + 1 :]).transpose(0, 2, 1) / (2 * widths[:, None])
    return values - both[:, 0, :n], slopes[:, :n], bounds[:, 0], slopes[:, n:]
