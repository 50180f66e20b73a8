"""The fast posterior: a few thousand weighted draws of a fitted proposal in place of a Markov chain.

Every number comes with a k-hat that says whether it may be trusted: below 0.7 it is close to what a long
chain gives, above it only the chain knows. The draws are points of a shifted lattice pushed through the
proposal: their means are five times, their limits twice as close as those of as many random numbers.
Source: Vehtari, Simpson, Gelman, Yao, Gabry, J. Machine Learning Research 25 (2024) no. 72.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from finback import lattice, pareto
from finback.evidence import Evidence
from finback.laplace import LogDensity
from finback.proposal import Proposal

Array = NDArray[np.float64]

DRAWS = lattice.POINTS
PIECE = 1024  # of them at a time, that stay in the processor's cache
TAIL = 0.1  # of the draws, to each side, that limits of 95 % are looked for in
FEW = 512
TRUSTED = 0.7  # k-hat up to which a number is close to that of a long chain


@dataclass(frozen=True)
class FastPosterior:
    """A posterior as weighted draws.

    `z` (n, p); `log_ratios` (n,), log density less the proposal's; `log_weights` (n,), the same with a
    smoothed tail, their exponentials adding up to one; `khat` of the ratios; `efficiency`, the effective
    share of draws; `evidence`, with the error of independent draws: the lattice's is several times smaller.
    """

    z: Array
    log_ratios: Array
    log_weights: Array
    khat: float
    efficiency: float
    evidence: Evidence

    @cached_property
    def weights(self) -> Array:
        """Weights of the draws (n,), adding up to one."""
        return np.asarray(np.exp(self.log_weights))

    def mean(self, values: Array) -> Array:
        """Return the means (m,) of quantities (n, m), or that of one (n,)."""
        return np.asarray(self.weights @ values)

    def sd(self, values: Array) -> Array:
        """Return the standard deviations (m,) of quantities (n, m), or that of one (n,)."""
        return np.sqrt(self.weights @ np.square(values - self.mean(values)))

    def quantiles(self, values: Array, probabilities: Sequence[float]) -> Array:
        """Return quantiles (k, m) of quantities (n, m), or (k,) of one (n,), for k probabilities."""
        rows = np.ascontiguousarray(values.reshape(len(values), -1).T)
        found = np.stack([self._quantiles(row, np.asarray(probabilities)) for row in rows], axis=-1)
        return found.reshape(-1, *values.shape[1:])

    def _quantiles(self, values: Array, probabilities: Array) -> Array:
        """Return quantiles (k,) of one quantity (n,); those in its tails need no more than these sorted."""
        n, found = len(values), np.full(len(probabilities), np.nan)
        length = int(TAIL * n)
        if n > 2 * length > 0 and (np.abs(probabilities - 0.5) > 0.5 - TAIL / 2).all():
            order = np.argpartition(values, (length, n - length - 1))
            for side, part in ((1, order[:length]), (-1, order[n - length :])):
                here = (probabilities < 0.5) == (side > 0)
                sign = side * values[part]
                rising = part[np.argsort(sign)]
                weights = self.weights[rising]
                below = np.cumsum(weights) - 0.5 * weights
                wanted = probabilities[here] if side > 0 else 1 - probabilities[here]
                if len(below) and (wanted < below[-1]).all():
                    found[here] = np.interp(wanted, below, values[rising])
        if np.isnan(found).any():
            order = np.argsort(values)
            weights = self.weights[order]
            found = np.interp(probabilities, np.cumsum(weights) - 0.5 * weights, values[order])
        return found

    def khat_of(self, values: Array) -> Array:
        """Return the k-hat (m,) of mean and standard deviation of quantities (n, m), or that of one (n,).

        The largest of three tails: the ratios, and the ratios times distance and squared distance from the
        mean, since a quantity may go far where the ratios alone look harmless.
        """
        ratios = np.exp(self.log_ratios - self.log_ratios.max())
        away = np.abs(values - self.mean(values)).reshape(len(values), -1).T
        once = ratios * away
        tails = pareto.shapes(np.concatenate([once, once * away])).reshape(2, -1).max(axis=0)
        return np.reshape(np.maximum(tails, self.khat), values.shape[1:])

    def resample(self, count: int, random: np.random.Generator) -> NDArray[np.intp]:
        """Return the indices (count,) of draws chosen by weight, so that all count the same.

        Systematic: one random number, the least added scatter. Rising, so shuffle where order matters.
        """
        targets = (random.random() + np.arange(count)) / count
        return np.minimum(np.searchsorted(np.cumsum(self.weights), targets), len(self.weights) - 1)


def sample(
    log_density: LogDensity, proposal: Proposal, random: np.random.Generator, draws: int = DRAWS
) -> FastPosterior:
    """Draw from a fitted proposal and weigh the draws by the posterior.

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); proposal, fitted to it; random, for the
    lattice's shift; draws, rounded up to whole lattices. Raises ValueError where no draw has any density.
    """
    blocks = max(1, -(-draws // lattice.POINTS))
    points = lattice.draw(blocks, proposal.centres.shape[1] + 2, random)
    z = np.concatenate([proposal.place(points[i : i + PIECE]) for i in range(0, len(points), PIECE)])
    return _weighed(log_density, proposal, z)


def glance(log_density: LogDensity, proposal: Proposal, random: np.random.RandomState) -> FastPosterior:
    """Draw a few at random, for a posterior that does not matter but for how little it matters.

    Arguments, errors: as those of `sample`.
    """
    return _weighed(log_density, proposal, proposal.draw(FEW, random))


def _weighed(log_density: LogDensity, proposal: Proposal, z: Array) -> FastPosterior:
    log_ratios = log_density(z) - proposal.log_density(z)
    highest = float(log_ratios.max())
    if not np.isfinite(highest):
        raise ValueError("no draw of the proposal has a finite density")
    raw = np.exp(log_ratios - highest)
    ratios, khat = pareto.smooth(raw)
    n, total = len(ratios), float(ratios.sum())
    error = float(ratios.std()) / (total / n) / np.sqrt(n)
    with np.errstate(divide="ignore"):  # a draw outside the posterior weighs nothing
        log_weights = np.log(ratios / total)
    return FastPosterior(
        z=z,
        log_ratios=log_ratios,
        log_weights=log_weights,
        khat=khat,
        efficiency=float(total**2 / np.square(ratios).sum() / n),
        evidence=Evidence(highest + float(np.log(total / n)), float(error)),
    )
