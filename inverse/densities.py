"""The exact density of one hypothesis, and weighted draws of it: what its mode and curvature only come near.

With readings A kept and B freed of their thermometers, whose errors have sizes spread over normal
distributions, p(y | z) is N(r_A; C_AA) times the sum over the sizes of w N(u - mean; C_BB|A + sd^2), with
u = r_B - C_BA C_AA^-1 r_A.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import fast
from finback import proposal as proposals
from finback.fast import FastPosterior
from finback.hypotheses import Hypothesis, free_errors, sizes_together
from finback.laplace import LogDensity
from finback.problem import LOG_TWO_PI
from finback.proposal import Proposal
from finback.suspects import Size

Array = NDArray[np.float64]

FAR = 6.0  # standard deviations, from which a size is none that an error may have
FITS = 0.3  # efficiency of a normal distribution about the mode, below which the proposal is fitted again


@dataclass(frozen=True)
class Weighed:
    """A hypothesis by the fast route: with its evidence by the draws, and the draws."""

    hypothesis: Hypothesis
    posterior: FastPosterior


def weigh(hypothesis: Hypothesis, seed: np.random.SeedSequence) -> Weighed:
    """Return a hypothesis with its weight by draws of its exact density, where they can be trusted."""
    density = log_density(hypothesis)
    start = Proposal(hypothesis.mean[None], proposals.root_of(hypothesis.spread)[None])
    random = np.random.default_rng(seed)
    found = fast.sample(density, start, random)
    if found.efficiency < FITS:
        tried = found.z, found.log_ratios
        fitted, _ = proposals.adapt(density, start, np.random.RandomState(np.random.MT19937(seed)), tried)
        found = fast.sample(density, fitted, random)
    if found.khat <= fast.TRUSTED:
        told = hypothesis.log_prior + found.evidence.log
        hypothesis = replace(hypothesis, log_weight=told)
    return Weighed(hypothesis, found)


def log_density(hypothesis: Hypothesis) -> LogDensity:
    """Return ln p(readings, z) of a hypothesis, as a function of a block (n_sets, p) -> (n_sets,)."""
    problem, freed, bounded = hypothesis.base.problem, list(hypothesis.freed), hypothesis.bounded
    n = len(hypothesis.values)
    kept = [at for at in range(n) if at not in freed]
    spreads = np.sqrt(np.diag(hypothesis.error_spread))
    covariance = hypothesis.covariance.copy()
    covariance[freed, freed] -= np.square(free_errors(hypothesis.base))[freed]
    lower = np.linalg.cholesky(covariance[np.ix_(kept, kept)])
    whiten = np.linalg.inv(lower)
    back = np.linalg.solve(covariance[np.ix_(kept, kept)], covariance[np.ix_(kept, freed)])
    left = covariance[np.ix_(freed, freed)] - covariance[np.ix_(freed, kept)] @ back
    constant = -float(np.log(np.diag(lower)).sum()) - 0.5 * len(kept) * LOG_TWO_PI
    means, sds = hypothesis.means, hypothesis.sds
    sizes = [near(*each) for each in zip(hypothesis.sizes, hypothesis.errors, spreads, strict=True)]
    constant -= float(np.log(sds).sum()) + 0.5 * len(sds) * LOG_TWO_PI

    def density(z: Array) -> Array:
        predicted = problem.predict(z)
        residuals = hypothesis.values - predicted[:, :n]
        squares = np.square(residuals[:, kept] @ whiten.T).sum(axis=1)
        squares += np.square((z - means) / sds).sum(axis=1)
        if bounded:
            squares += np.square(problem.bound_residuals(predicted[:, n:])).sum(axis=1)
        found = constant - 0.5 * squares
        if freed:
            found = found + sizes_together(residuals[:, freed] - residuals[:, kept] @ back, left, sizes)
        return np.where(np.isfinite(found), found, -np.inf)

    return density


def near(size: Size, error: float, spread: float) -> Size:
    """Return what of a size may matter to an error that is known to a spread: the rest costs time alone."""
    far = np.abs(size.means - error) > FAR * np.sqrt(np.square(size.sds) + spread**2)
    kept = ~far if not far.all() else np.ones_like(far)
    return Size(size.shares[kept], size.means[kept], size.sds[kept])
