"""A heavy-tailed proposal fitted to a posterior: a multivariate Student t."""

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from finback.laplace import Mode

Array = NDArray[np.float64]

FREEDOM = 8.0  # tails heavy enough for a posterior with an estimated noise, light enough to be accepted


@dataclass(frozen=True)
class Proposal:
    """A multivariate Student t: `centre` (p,), `root` (p, p) with scale matrix root @ root.T, `freedom`."""

    centre: Array
    root: Array
    freedom: float = FREEDOM

    @cached_property
    def _inverse(self) -> Array:
        return np.asarray(np.linalg.inv(self.root), dtype=np.float64)

    @cached_property
    def _constant(self) -> float:
        p, nu = len(self.centre), self.freedom
        spread = float(np.linalg.slogdet(self.root)[1])
        return math.lgamma((nu + p) / 2) - math.lgamma(nu / 2) - 0.5 * p * math.log(nu * math.pi) - spread

    def draw(self, n: int, random: np.random.RandomState) -> Array:
        """Draw n vectors, (n, p). The sampler's own kind of generator is asked for, since emcee passes it."""
        normal = random.standard_normal((n, len(self.centre)))
        shrink = np.sqrt(random.chisquare(self.freedom, n) / self.freedom)
        found: Array = self.centre + (normal / shrink[:, None]) @ self.root.T
        return found

    def log_density(self, z: Array) -> Array:
        """Return the log density of a block (n_sets, p) -> (n_sets,)."""
        scaled = (z - self.centre) @ self._inverse.T
        squares = np.einsum("ij,ij->i", scaled, scaled)
        power = (self.freedom + len(self.centre)) / 2
        found: Array = self._constant - power * np.log1p(squares / self.freedom)
        return found


def from_mode(mode: Mode) -> Proposal:
    """Return the proposal at a posterior's mode with its curvature."""
    return Proposal(mode.z, mode.root)


def from_draws(draws: Array) -> Proposal:
    """Return the proposal with the mean and covariance of draws (n, p)."""
    covariance = np.atleast_2d(np.cov(draws, rowvar=False))
    jitter = 1e-12 * np.diag(np.diag(covariance))
    root = np.asarray(np.linalg.cholesky(covariance + jitter), dtype=np.float64)
    return Proposal(draws.mean(axis=0), root)
