"""A heavy-tailed proposal fitted to a posterior: a multivariate Student t, or several along its longest axis.

It starts at the posterior's mode and is fitted again to its own weighted draws where that helps: a posterior
with an estimated noise, or one that a prior cuts off, is not shaped like its mode. One that is bent, such as
that of h and an air temperature nobody read, needs several components side by side. One that is a funnel, as
wide in the others as an estimated noise is large, gets a component for each step of the noise.
Source of the refitting: Cappé, Guillin, Marin, Robert, J. Comp. Graph. Stat. 13 (2004) 907, population Monte
Carlo; the largest weights are cut, so that no single draw decides.
"""

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from finback import laplace
from finback.laplace import LogDensity, Mode

Array = NDArray[np.float64]

FREEDOM = 8.0  # tails heavy enough for a posterior with an estimated noise, light enough to be accepted
COMPONENTS = (1, 1, 1, 4, 4, 8, 8)  # tried one after the other, until one is good
DRAWS = 2000  # a trial
GOOD = 0.7  # efficiency from which refitting is not worth its time
CUT = 10  # weights above the tenth largest count as much as that one
WIDER = 1.1  # of the fitted variances: a proposal had better be too wide
TAILS = 2.0  # width of one more component over all of them, for what lies beyond their ends
OVERLAP = 0.5  # of its neighbours' shares that a component is fitted to as well
SMALLEST_SPREAD = 1e-12  # of a correlation matrix: draws in a plane still give a proposal
RUNG = 0.5  # step of a ladder, in the logarithm of the noise
RUNGS = 60  # at most, up or down
FAINT = 12.0  # nats below the best rung, where a ladder ends


@dataclass(frozen=True)
class Proposal:
    """Multivariate Student t's side by side.

    Arguments: centres (c, p); roots (c, p, p), with scale matrices root @ root.T; shares (c,), their
    probabilities, all the same if left out.
    """

    centres: Array
    roots: Array
    shares: Array | None = None

    @cached_property
    def _inverses(self) -> Array:
        return np.asarray(np.linalg.inv(self.roots), dtype=np.float64)

    @cached_property
    def _constants(self) -> Array:
        c, p = self.centres.shape
        one = (
            math.lgamma((FREEDOM + p) / 2) - math.lgamma(FREEDOM / 2) - 0.5 * p * math.log(FREEDOM * math.pi)
        )
        logs = np.full(c, -math.log(c)) if self.shares is None else np.log(self.shares)
        found: Array = one + logs - np.linalg.slogdet(self.roots)[1]
        return found

    def draw(self, n: int, random: np.random.RandomState) -> Array:
        """Draw n vectors, (n, p). The sampler's own kind of generator is asked for, since emcee passes it."""
        c, p = self.centres.shape
        normal = random.standard_normal((n, p)) / np.sqrt(random.chisquare(FREEDOM, n) / FREEDOM)[:, None]
        drawn: Array
        if c == 1:
            drawn = self.centres + normal @ self.roots[0].T
        else:
            which = random.choice(c, size=n, p=self.shares)
            drawn = self.centres[which] + np.einsum("nij,nj->ni", self.roots[which], normal)
        return drawn

    def log_density(self, z: Array) -> Array:
        """Return the log density of a block (n_sets, p) -> (n_sets,)."""
        c, p = self.centres.shape
        power = (FREEDOM + p) / 2
        logs: Array = np.empty((c, len(z)))
        for i in range(c):
            scaled = (z - self.centres[i]) @ self._inverses[i].T
            logs[i] = self._constants[i] - power * np.log1p(np.einsum("ij,ij->i", scaled, scaled) / FREEDOM)
        highest = logs.max(axis=0)
        found: Array = logs[0] if c == 1 else highest + np.log(np.exp(logs - highest).sum(axis=0))
        return found


def from_mode(mode: Mode) -> Proposal:
    """Return the proposal at a posterior's mode with its curvature."""
    return Proposal(mode.z[None], mode.root[None])


def from_draws(draws: Array) -> Proposal:
    """Return the one-component proposal with the mean and covariance of draws (n, p)."""
    return _fit(draws, np.full(len(draws), 1 / len(draws)), 1)


def ladder(log_density: LogDensity, mode: Mode) -> Proposal:
    """Return components along the last unknown, each with the mode and curvature of the others given it.

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); mode, with its curvature.
    """
    best, top = _rung(log_density, mode.z[-1], mode.z[:-1], mode.root[:-1]), float(mode.z[-1])
    rungs = {top: best}
    for step in (RUNG, -RUNG):
        at, last = top, best
        for _ in range(RUNGS):
            at += step
            last = rungs[at] = _rung(log_density, at, last.z, last.root)
            best = max(best, last, key=lambda rung: rung.log_evidence)
            if last.log_evidence < best.log_evidence - FAINT:
                break
    heights = np.array([rung.log_evidence for rung in rungs.values()])
    roots = np.zeros((len(rungs), len(mode.z), len(mode.z)))
    roots[:, :-1, :-1] = [rung.root for rung in rungs.values()]
    roots[:, -1, -1] = RUNG
    centres = np.array([np.append(rung.z, at) for at, rung in rungs.items()])
    shares = np.exp(heights - heights.max())
    return Proposal(centres, roots, shares / shares.sum())


def _rung(log_density: LogDensity, last: float, others: Array, root: Array) -> Mode:
    """Return the mode of the other unknowns, given the last."""

    def given(block: Array) -> Array:
        return log_density(np.column_stack([block, np.full(len(block), last)]))

    return laplace.find_mode(given, others, _root(root @ root.T))


def adapt(
    log_density: LogDensity, proposal: Proposal, random: np.random.RandomState
) -> tuple[Proposal, float]:
    """Return the best of several refitted proposals and its efficiency [1].

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); proposal to start with; random. The
    efficiency is the effective share of draws in importance sampling: 1 where the proposal is the posterior.
    """
    best, highest = proposal, -1.0
    for components in COMPONENTS:
        z = proposal.draw(DRAWS, random)
        ratio = log_density(z) - proposal.log_density(z)
        weights = np.exp(ratio - ratio.max())
        efficiency = float(weights.sum() ** 2 / np.square(weights).sum() / len(z))
        if efficiency > highest:
            best, highest = proposal, efficiency
        if efficiency >= GOOD:
            break
        weights = np.minimum(weights, np.partition(weights, -CUT)[-CUT])
        proposal = _fit(z, weights / weights.sum(), components)
    return best, highest


def _fit(draws: Array, weights: Array, components: int) -> Proposal:
    """Fit components to weighted draws (n, p), cut into equal shares along their longest axis."""
    centre, root = _moments(draws, weights)
    if components == 1:
        return Proposal(centre[None], root[None])
    along = np.linalg.svd(root / np.linalg.norm(root, axis=1)[:, None])[0][:, 0]
    order = np.argsort(((draws - centre) / np.linalg.norm(root, axis=1)) @ along)
    share = np.cumsum(weights[order]) * components
    parts = []
    for i in range(components):
        part = order[(share >= i - OVERLAP) & (share <= i + 1 + OVERLAP)]
        if len(part) > 2 * draws.shape[1]:
            parts.append(_moments(draws[part], weights[part] / weights[part].sum()))
    parts.append((centre, TAILS * root))
    return Proposal(np.array([c for c, _ in parts]), np.array([r for _, r in parts]))


def _moments(draws: Array, weights: Array) -> tuple[Array, Array]:
    """Return mean (p,) and a root (p, p) of the widened covariance of weighted draws."""
    centre = weights @ draws
    away = draws - centre
    return centre, _root(WIDER * (away.T @ (away * weights[:, None])))


def _root(covariance: Array) -> Array:
    """Return a root of a covariance (p, p), be it flat in some direction or of very different scales."""
    scale = np.sqrt(np.maximum(np.diag(covariance), np.finfo(np.float64).tiny))
    spread, axes = np.linalg.eigh(covariance / np.outer(scale, scale))
    found: Array = scale[:, None] * (axes * np.sqrt(np.maximum(spread, SMALLEST_SPREAD)))
    return found
