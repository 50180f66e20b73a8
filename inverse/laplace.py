"""The mode of a posterior and its curvature there, by Newton's method, one block of differences a step."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
LogDensity = Callable[[Array], Array]

MAX_STEPS = 60
STEP = 1e-2  # of a standard deviation: differences of a curvature of about one
SMALLEST_CURVATURE = 1e-3  # of the guess's, that is taken for positive
TOLERANCE = 1e-5  # Newton decrement, in nats


@dataclass(frozen=True, slots=True)
class Mode:
    """A posterior's mode: `z` (p,), `log_density` there, `root` (p, p) with covariance root @ root.T."""

    z: Array
    log_density: float
    root: Array

    @property
    def log_evidence(self) -> float:
        """Laplace's estimate of the log evidence."""
        p = len(self.z)
        return self.log_density + 0.5 * p * float(np.log(2 * np.pi)) + float(np.linalg.slogdet(self.root)[1])


def find_mode(log_density: LogDensity, start: Array, root: Array, tolerance: float = TOLERANCE) -> Mode:
    """Find the mode of a log density.

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); start (p,), at finite density; root (p, p),
    a guess of the scale, covariance root @ root.T; tolerance, the Newton decrement [nats] at which to stop.
    Where the curvature is not positive the guess's is kept.
    """
    z = start
    height, gradient, curvature = _derivatives(log_density, z, root)
    shrinking = 0.5 ** np.arange(12)
    growing = 2.0 ** np.arange(4, -10, -1)  # for where the curvature is not positive and bounds no step
    for _ in range(MAX_STEPS):
        if not np.isfinite(curvature).all():  # at the edge of where there is any density
            return Mode(z, height, root)
        weights, axes = np.linalg.eigh(curvature)
        bounded = weights.min() > SMALLEST_CURVATURE
        weights = np.where(weights > SMALLEST_CURVATURE, weights, np.maximum(np.abs(weights), 1.0))
        step = axes @ ((axes.T @ gradient) / weights)
        decrement = float(gradient @ step)
        refined = root @ (axes / np.sqrt(weights))
        if decrement < tolerance:
            return Mode(z, height, refined)
        away = root @ step
        if bounded:  # the full step is mostly the best one
            found = _derivatives(log_density, z + away, refined)
            if found[0] > height and np.isfinite(found[2]).all():
                z, root, (height, gradient, curvature) = z + away, refined, found
                continue
        trials = z + (shrinking if bounded else growing)[:, None] * away
        heights = log_density(trials)
        best = int(np.argmax(heights))
        if not heights[best] > height:
            return Mode(z, height, refined)
        z, root = trials[best], refined
        height, gradient, curvature = _derivatives(log_density, z, root)
    return Mode(z, height, root)


def _derivatives(log_density: LogDensity, z: Array, root: Array) -> tuple[float, Array, Array]:
    """Return the height, and the gradient (p,) and minus the Hessian (p, p) along the columns of root."""
    p = len(z)
    unit = STEP * np.eye(p)
    rows, columns = np.tril_indices(p, -1)
    crossed = unit[rows] + unit[columns]
    offsets = np.concatenate([np.zeros((1, p)), unit, -unit, crossed, -crossed])
    f = log_density(z + offsets @ root.T)
    centre, up, down = f[0], f[1 : p + 1], f[p + 1 : 2 * p + 1]
    with np.errstate(invalid="ignore"):  # at the edge of where there is any density
        gradient = (up - down) / (2 * STEP)
        curvature = np.diag(-(up - 2 * centre + down) / STEP**2)
        both = f[2 * p + 1 :].reshape(2, -1).sum(axis=0) + 2 * centre
        mixed = (both - (up + down)[rows] - (up + down)[columns]) / (2 * STEP**2)
    curvature[rows, columns] = curvature[columns, rows] = -mixed
    return float(centre), gradient, curvature
