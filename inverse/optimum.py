"""Where a problem's parameter vector is best: by least squares on the readings, and at the posterior's mode.

The least-squares fit uses the readings and what the rig states of k (as one more reading of it), no wide
prior. Where the noise is estimated it is the value at which chi-square equals the degrees of freedom.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import least_squares, posing, tails
from finback.least_squares import PointEstimate
from finback.models.constants import STEFAN_BOLTZMANN
from finback.noise import REFERENCE_SIGMA, Noise
from finback.parameters import UNMEASURED_AIR
from finback.problem import Problem

Array = NDArray[np.float64]

SMALLEST_SIGMA, LARGEST_SIGMA = 1e-7, 1e6  # K; readings that a model meets exactly leave no noise to estimate
FALLS = np.array([0.0, 0.3, 1.0, 4.0])  # times the fin's own fall: how far below its end unread air may be
LEAST_CONVECTED = 0.2  # share of a total coefficient that is convection at a start
NOISE_ROUNDS = 20
LINEARISING_ROUNDS = 2
NEAR = 1e-3  # of the sum of squares: near enough to the optimum for slopes, of which the noise is made


@dataclass(frozen=True, slots=True)
class LeastSquares:
    """Least-squares optimum of a problem.

    `problem`: with its noise linearised at the optimum. `z` (p,): the parameter vector, noise included.
    `point`: the estimate of the physical parameters, residuals whitened with `noise` at `sigma` [K]: the
    problem's, with a misfit held at its share in z.
    `chi_square` and `degrees_of_freedom` count the readings, without heaters and stated values.
    """

    problem: Problem
    z: Array
    point: PointEstimate
    sigma: float
    chi_square: float
    degrees_of_freedom: int
    noise: Noise


def fit(problem: Problem, start: Array | None = None) -> LeastSquares:
    """Fit a problem by least squares, from a start (p,) or one of its own.

    The share of a misfit stays at its start, or is the most probable one beforehand: by least squares alone
    it would be none.
    """
    z = starting_point(problem) if start is None else start
    if not posing.needs_linearising(problem):
        return _fit_given_noise_model(problem, z)
    z = _fit_given_noise_model(problem, z, NEAR).z
    for _ in range(LINEARISING_ROUNDS):
        problem = posing.linearise(problem, z)
        found = _fit_given_noise_model(problem, z)
        moved = found.point.jacobian @ (found.z - z)[: problem.n_physical]
        if moved @ moved <= NEAR * found.point.chi_square:
            break
        z = found.z
    return found


def refit(found: LeastSquares, start: Array) -> LeastSquares:
    """Fit again with the same noise, from a start (p,) that has another share of misfit."""
    return _fit_given_noise_model(found.problem, start)


def starting_point(problem: Problem) -> Array:
    """Return a parameter vector near the optimum (p,): the best of a grid in h and joint, levels adjusted.

    Where nothing reads the air, the grid also holds air temperatures towards which the fin's may fall. A fin
    that is not linear starts from the optimum of the linear one that is most like it, and a candidate with
    heavy tails from that of the same one with normal noise.
    """
    if problem.candidate.heavy_tails:
        return _from_normal(problem)
    if not problem.is_linear:
        return _from_linear(problem)
    measured = problem.measured
    fin = measured.values[: len(measured.positions)]
    near, far = (float(fin[end(measured.positions)]) for end in (np.argmin, np.argmax))
    level: dict[str, float] = {"base_temperature": near, "tip_temperature": far}
    level.update(problem.fixed)
    level.update({s.place: v for s, v in zip(measured.sensors, measured.values, strict=True)})
    airs = [UNMEASURED_AIR.mean, *(far - FALLS * (near - far))]
    if "air" in level:
        airs = [level["air"]]
    elif problem.rig.surroundings.air is not None:
        airs = [problem.rig.surroundings.air.value]
    block = np.concatenate([_grid(problem, {**level, "air": air}) for air in airs])
    whitened, _ = problem.whitened(block, REFERENCE_SIGMA)
    cost = np.einsum("ij,ij->i", whitened, whitened)
    return np.asarray(block[int(np.nanargmin(cost))])


def _from_normal(problem: Problem) -> Array:
    """Return a start (p,) from the fit with normal noise; what that noise holds of shared errors is none."""
    twin = posing.pose(problem.rig, problem.readings, replace(problem.candidate, heavy_tails=False))
    found = dict(zip(twin.names, fit(twin).z, strict=True))
    return np.array([found.get(name, 0.0) for name in problem.names])


def _from_linear(problem: Problem) -> Array:
    """Return a start (p,) from the fit of the same fin with one total h and one conductivity."""
    rig = replace(problem.rig, emissivity=None, change=None)
    twin = posing.pose(rig, problem.readings, replace(problem.candidate, law="uniform"))
    found = dict(zip(twin.names, fit(twin).z, strict=True))
    start = [found.get(name, mean) for name, mean in zip(problem.names, problem.prior_mean, strict=True)]
    values = problem.values(np.array([start]))
    if "emissivity" in values:
        surface = float(problem.measured.values[: len(problem.measured.positions)].mean())
        h, emissivity = (float(np.ravel(values[name])[0]) for name in ("h", "emissivity"))
        radiated = 4 * emissivity * STEFAN_BOLTZMANN * surface**3
        start[problem.names.index("h")] = math.log(max(h - radiated, LEAST_CONVECTED * h))
    return np.array(start)


def _grid(problem: Problem, level: Mapping[str, float]) -> Array:
    """Return a grid of starting points (n, p) in h and joint, for temperatures by name."""
    names, air = problem.names, level["air"]
    first = np.array([level.get(name, mean) for name, mean in zip(names, problem.prior_mean, strict=True)])
    h_grid = np.linspace(math.log(0.3), math.log(3e4), 47)
    joint_grid = np.log([3e-6, 3e-5, 3e-4, 3e-3]) if "joint" in names else np.zeros(1)
    block = np.tile(first, (len(h_grid) * len(joint_grid), 1))
    block[:, names.index("h")] = np.repeat(h_grid, len(joint_grid))
    if "joint" in names:
        block[:, names.index("joint")] = np.tile(joint_grid, len(h_grid))
    if "base_temperature" in names:
        column, n_fin = names.index("base_temperature"), len(problem.measured.positions)
        shape = problem.predict(block)[:, :n_fin] - air
        excess = problem.measured.values[:n_fin] - air
        scale = (shape @ excess) / np.maximum(np.einsum("ij,ij->i", shape, shape), 1e-12)
        block[:, column] = air + np.clip(scale, 0.1, 1e3) * (block[:, column] - air)
    return block


def _fit_given_noise_model(
    problem: Problem, start: Array, gain: float = least_squares.SMALLEST_GAIN
) -> LeastSquares:
    if problem.candidate.misfit:
        at = problem.n_physical
        found = _fit_given_noise_model(problem.given(math.exp(start[at])), np.delete(start, at), gain)
        return replace(found, problem=problem, z=np.insert(found.z, at, start[at]))
    physical, n = problem.n_physical, len(problem.measured.values)
    sigma = REFERENCE_SIGMA
    point = least_squares.fit(_residuals(problem, sigma), start[:physical], gain=gain)
    freedom = n + int(problem.is_stated[:physical].sum()) - point.rank
    if problem.noise.estimated and _scales_with_sigma(problem):
        sigma *= math.sqrt(point.chi_square / max(freedom, 1))
        sigma = min(max(sigma, SMALLEST_SIGMA), LARGEST_SIGMA)
        point = point.rescaled(REFERENCE_SIGMA / sigma)
    elif problem.noise.estimated:
        for _ in range(NOISE_ROUNDS):
            before = sigma
            sigma = _matching_sigma(problem, point.residuals, before, freedom)
            if abs(sigma - before) <= 1e-10 * before:
                break
            point = least_squares.fit(_residuals(problem, sigma), point.values, gain=gain)
    z = np.concatenate([point.values, [math.log(sigma)] * (len(problem.parameters) - physical)])
    is_reading = np.ones(len(point.residuals), dtype=bool)
    is_reading[n : n + len(problem.measured.bounds)] = False
    chi_square = float(np.square(point.residuals[is_reading]).sum())
    return LeastSquares(problem, z, point, sigma, chi_square, freedom, problem.noise)


def _residuals(problem: Problem, sigma: float) -> least_squares.Residuals:
    """Return the residuals of the physical parameters at one sigma: readings, heaters, stated values."""
    physical = problem.n_physical
    chosen = np.flatnonzero(problem.is_stated[:physical])
    mean, sd = problem.prior_mean[chosen], problem.prior_sd[chosen]

    def residuals(block: Array) -> Array:
        whole = np.zeros((len(block), len(problem.parameters)))
        whole[:, :physical] = block
        whitened, _ = problem.whitened(whole, sigma)
        if not len(chosen):
            return whitened
        return np.concatenate([whitened, (block[:, chosen] - mean) / sd], axis=1)

    return residuals


def _scales_with_sigma(problem: Problem) -> bool:
    """Tell whether sigma scales every residual alike, so that the optimum does not depend on it."""
    slope = problem.noise.slope
    alike = not problem.noise.floor.any() and bool(np.ptp(slope) <= 1e-12 * slope.max())
    free = not problem.is_stated.any() and not problem.measured.bounds and not problem.noise.heavy
    return alike and free


def _matching_sigma(problem: Problem, residuals: Array, sigma: float, freedom: int) -> float:
    """Return the sigma [K] at which chi-square equals the degrees of freedom, within given limits.

    Readings with heavy tails count by their weights. The residuals are whitened at the given `sigma` [K].
    """
    from scipy.optimize import brentq

    n = len(problem.measured.values)
    heavy = problem.noise.heavy
    squares = tails.squares(residuals[:n], heavy) * problem.noise.variances(sigma)
    rest = float(np.square(residuals[n + len(problem.measured.bounds) :]).sum())

    def excess(log_sigma: float) -> float:
        scaled = squares / problem.noise.variances(math.exp(log_sigma))
        return float(tails.counted(scaled, heavy).sum()) + rest - max(freedom, 1)

    low, high = math.log(SMALLEST_SIGMA), math.log(LARGEST_SIGMA)
    if excess(low) <= 0:
        return SMALLEST_SIGMA
    if excess(high) >= 0:
        return LARGEST_SIGMA
    return math.exp(brentq(excess, low, high, xtol=1e-13))
