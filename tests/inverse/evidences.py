"""Problems whose evidence is known, and the ways in which the package finds it."""

import math

import numpy as np
from densities import LogDensity
from rigs import Truth, draw, pin_rig
from scipy.stats import multivariate_normal

from finback import evidence, fast, optimum, posing, routes, sampling
from finback import proposal as proposals
from finback.evidence import Evidence
from finback.laplace import Mode
from finback.problem import Candidate, Problem
from finback.quantity import Quantity
from finback.sampling import Settings


def both(log_density: LogDensity, mode: Mode, seed: int = 1) -> dict[str, Evidence]:
    """The evidence by bridge sampling and by the fast route."""
    random = np.random.RandomState(seed)
    proposal, efficiency = proposals.adapt(log_density, proposals.from_mode(mode), random)
    seeds = np.random.SeedSequence(seed).spawn(2)
    chain = sampling.sample(log_density, proposal, efficiency, seeds[0], Settings(), lambda _: None)
    return {
        "bridge": evidence.bridge(log_density, chain, seeds[1]),
        "fast": fast.sample(log_density, proposal, np.random.default_rng(seed)).evidence,
    }


def linear_gaussian(seed: int) -> tuple[LogDensity, Mode, float]:
    """A linear model of 12 readings and 4 unknowns with normal priors: density, mode, exact log evidence."""
    rng = np.random.default_rng(seed)
    design, sd, prior_sd = rng.normal(size=(12, 4)), 0.3, np.array([0.5, 2.0, 10.0, 300.0])
    y = design @ (prior_sd * rng.standard_normal(4)) + sd * rng.standard_normal(12)
    exact = multivariate_normal.logpdf(
        y, np.zeros(12), sd**2 * np.eye(12) + (design * prior_sd**2) @ design.T
    )
    covariance = np.linalg.inv(design.T @ design / sd**2 + np.diag(prior_sd**-2))
    mean = covariance @ design.T @ y / sd**2
    constant = -12 * math.log(sd) - float(np.log(prior_sd).sum()) - 8 * math.log(2 * math.pi)

    def log_density(z: np.ndarray) -> np.ndarray:
        misfit = np.square((y - z @ design.T) / sd).sum(axis=1)
        return constant - 0.5 * (misfit + np.square(z / prior_sd).sum(axis=1))

    return log_density, Mode(mean, 0.0, np.linalg.cholesky(covariance)), float(exact)


def gauss_hermite(log_density: LogDensity, mode: Mode, nodes: int) -> float:
    """Log evidence by a tensor Gauss-Hermite rule about the mode, widened so that tails are seen."""
    p = len(mode.z)
    x, w = np.polynomial.hermite_e.hermegauss(nodes)
    grid = np.stack(np.meshgrid(*[x] * p, indexing="ij"), axis=-1).reshape(-1, p)
    weights = np.prod(np.stack(np.meshgrid(*[w] * p, indexing="ij"), axis=-1).reshape(-1, p), axis=1)
    root = 1.3 * mode.root
    heights = log_density(mode.z + grid @ root.T) + 0.5 * np.square(grid).sum(axis=1)
    top = heights.max()
    return float(top + np.log((weights * np.exp(heights - top)).sum()) + np.linalg.slogdet(root)[1])


def fin_problem(noise: float | None) -> tuple[Problem, Mode]:
    """A fin with three unknowns, h, base and air temperature, and the noise where it is not stated."""
    rig = pin_rig(
        places=("air",), noise=noise, calibration=0.0, position_sd=0.0, conductivity=Quantity(167.0)
    )
    readings, _ = draw(rig, Truth(joint=None), np.random.default_rng(3))
    problem = posing.pose(rig, readings, Candidate("convective", joint=False, joint_possible=False))
    point = optimum.fit(problem)
    return point.problem, routes.find_mode(point)
