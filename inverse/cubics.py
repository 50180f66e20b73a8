"""Smooth curves through values at evenly spaced places: the slopes of a cubic spline, and points on it."""

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def slopes(values: Array, step: float) -> Array:
    """Return the slopes (n, ...) of a cubic spline through values (n, ...), a step apart.

    The two ends take the slope of a parabola, so that a spline through a parabola is that parabola.
    """
    n = len(values)
    if n < 3:
        return np.broadcast_to(np.diff(values, axis=0).sum(axis=0) / step, values.shape).copy()
    matrix = 4 * np.eye(n) + np.eye(n, k=1) + np.eye(n, k=-1)
    matrix[0, :2] = matrix[-1, -2:] = 1.0
    right = np.empty_like(values)
    right[1:-1] = 3 * (values[2:] - values[:-2])
    right[0], right[-1] = 2 * (values[1] - values[0]), 2 * (values[-1] - values[-2])
    flat = np.asarray(np.linalg.solve(matrix, right.reshape(n, -1)) / step, dtype=np.float64)
    return flat.reshape(values.shape)


def refine(values: Array, slopes: Array, step: float, parts: int) -> tuple[Array, Array]:
    """Return values and slopes ((n - 1) * parts + 1, ...) on the cubics between n places, a step apart."""
    if len(values) < 2 or parts == 1:
        return values, slopes
    t = (np.arange(parts) / parts).reshape(1, -1, *(1 for _ in values.shape[1:]))
    low, high = values[:-1, None], values[1:, None]
    rise, end = step * slopes[:-1, None], step * slopes[1:, None]
    between = (
        (1 + 2 * t) * (1 - t) ** 2 * low
        + t * (1 - t) ** 2 * rise
        + t**2 * (3 - 2 * t) * high
        - t**2 * (1 - t) * end
    )
    change = 6 * t * (1 - t) * (high - low) + (1 - t) * (1 - 3 * t) * rise + t * (3 * t - 2) * end
    shape = (-1, *values.shape[1:])
    return (
        np.concatenate([between.reshape(shape), values[-1:]]),
        np.concatenate([change.reshape(shape) / step, slopes[-1:]]),
    )
