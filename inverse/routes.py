"""Two routes to the posterior of one candidate: weighted draws in milliseconds, and a Markov chain.

Both start from the least-squares fit, the posterior's mode and a proposal fitted to it. The fast route weighs
draws of the proposal, with a k-hat for each quantity; the chain takes them as moves. Where both may be
trusted they must agree.
"""

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from finback import derived, evidence, fast, laplace, optimum, parameters, posing, sampling
from finback import proposal as proposals
from finback.evidence import Evidence
from finback.fast import FastPosterior
from finback.laplace import Mode
from finback.optimum import LeastSquares
from finback.problem import Problem
from finback.proposal import Proposal
from finback.sampling import Settings

Array = NDArray[np.float64]

KEPT_DRAWS = 2500  # an ensemble
CHAINS, RESAMPLED = 4, 1000  # of a candidate that is not sampled by MCMC
SAME_MEAN, SAME_SD = 0.1, 0.1  # of its standard deviation, by which two routes may see a quantity differently
FOLLOWS = ("m", "base_heat_flux", "effectiveness", "transverse_biot")
"""Quantities whose tails are those of h/k, of the heat and of the efficiency, or nearly so."""
HOPELESS = 20.0  # nats below another candidate by its mode, where no more of it can be seen
SPARE_FOR_NOISE = (
    10  # readings more than unknowns, that know a noise to a quarter: its posterior is no funnel
)
LADDER_FITS = 0.1  # efficiency below which a ladder has missed its posterior: readings without any error
MISFIT_SPREAD = 0.7  # of the logarithm of its share: about what some ten readings leave
LOOKED_AT = np.array([-2.0, -1.0, 0.0, 1.0, 2.0, 3.0])  # standard deviations beforehand of the same
SECOND_LADDER = 0.3  # share of it, beside a proposal that lets some unknown's tail go
SMALLER = np.array([1.0, 0.5, 0.25])  # noise than least squares estimate where there is no misfit
SMALLEST_NOISE = 1e-3  # K; readings without errors would leave none
SMALLEST_WEIGHT = 1e-10  # of a scaled precision: what rounding leaves of it


@dataclass(frozen=True)
class Outcome:
    """What one candidate made of the readings.

    `problem` with its noise linearised; `point`, its least-squares fit; `mode`; `draws` (chains, n, p);
    `evidence`; how the draws were made: `ess_min`, `rhat_max`, `converged` (None, None, True where they are
    those of the fast route); `disagreeing`, the quantities that both routes were trusted with and see
    differently.
    """

    problem: Problem
    point: LeastSquares
    mode: Mode
    draws: Array
    evidence: Evidence
    ess_min: float | None
    rhat_max: float | None
    converged: bool
    n_draws: int
    disagreeing: tuple[str, ...] = ()

    @property
    def log_weight(self) -> float:
        """Log probability [nats] of its candidate, up to a constant."""
        return self.evidence.log + self.problem.candidate.log_prior

    @property
    def sampled(self) -> bool:
        """Whether the draws come from MCMC."""
        return self.ess_min is not None


@dataclass(frozen=True)
class Route:
    """One candidate by the fast route: fit, mode, proposal, weighted draws."""

    point: LeastSquares
    mode: Mode
    proposal: Proposal
    fast: FastPosterior
    seeds: Sequence[np.random.SeedSequence]

    @cached_property
    def quantities(self) -> Mapping[str, Array]:
        """Every parameter and derived quantity of the weighted draws, but for what is exactly known."""
        found = derived.evaluate(self.point.problem, self.fast.z)
        return {name: q for name, q in found.items() if np.ptp(q) > 0 and np.isfinite(q).all()}

    @cached_property
    def khats(self) -> Mapping[str, float]:
        """The k-hat of each quantity that does not follow another, and "z", that of the weights alone."""
        names = [name for name in self.quantities if name not in FOLLOWS]
        khats = self.fast.khat_of(np.stack([self.quantities[name] for name in names], axis=1))
        return {"z": self.fast.khat, **dict(zip(names, khats.tolist(), strict=True))}

    @property
    def log_weight(self) -> float:
        """Log probability [nats] of its candidate, up to a constant."""
        return self.fast.evidence.log + self.point.problem.candidate.log_prior

    @property
    def khat(self) -> float:
        """The largest k-hat of any quantity."""
        return max(self.khats.values())

    def steadied(self) -> "Route":
        """Return the route with a second ladder in its proposal, or itself where that does not help.

        Along the unknown whose k-hat is largest: a joint that a misfit leaves open, say, which no component
        reaches that follows the misfit alone.
        """
        density, names = self.point.problem.log_density, self.point.problem.names
        worst = max((name for name in names if name in self.khats), key=lambda name: self.khats[name])
        along = names.index(worst)
        spread = self.fast.z - self.fast.mean(self.fast.z)
        covariance = spread.T @ (spread * self.fast.weights[:, None])
        mode = laplace.find_mode(density, self.fast.mean(self.fast.z), proposals.root_of(covariance))
        step = proposals.STRIDE * math.sqrt(covariance[along, along])
        both = proposals.mix(self.proposal, proposals.ladder(density, mode, along, step), SECOND_LADDER)
        weighted = fast.sample(density, both, np.random.default_rng(self.seeds[0].spawn(1)[0]))
        found = replace(self, proposal=both, fast=weighted)
        return found if found.khat < self.khat else self

    def outcome(self) -> Outcome:
        """Return the outcome with draws resampled by their weights, dealt out to chains."""
        random = np.random.default_rng(self.seeds[2])
        chosen = random.permutation(self.fast.resample(CHAINS * RESAMPLED, random))
        draws = self.fast.z[chosen].reshape(CHAINS, RESAMPLED, -1)
        made = len(self.fast.z)
        weighed = self.fast.evidence
        return Outcome(self.point.problem, self.point, self.mode, draws, weighed, None, None, True, made)

    def sampled(self, settings: Settings, progress: Callable[[float], None]) -> Outcome:
        """Return the outcome with draws by MCMC, and how far they bear the fast route out."""
        problem = self.point.problem
        chain = sampling.sample(
            problem.log_density, self.proposal, self.fast.efficiency, self.seeds[1], settings, progress
        )
        found = evidence.bridge(problem.log_density, chain, self.seeds[2])
        if self.khats["z"] <= fast.TRUSTED and self.fast.evidence.error < found.error:
            found = self.fast.evidence
        ensembles, steps, walkers, p = chain.z.shape
        flat = chain.z.reshape(ensembles, steps * walkers, p)
        kept = flat[:, np.linspace(0, steps * walkers - 1, KEPT_DRAWS).astype(int)]
        return Outcome(
            problem, self.point, self.mode, kept, found, chain.ess_min, chain.rhat_max, chain.converged,
            chain.n_draws, self._disagreeing(kept) if chain.converged else (),
        )  # fmt: skip

    def _disagreeing(self, draws: Array) -> tuple[str, ...]:
        """Return the quantities whose mean or sd by the chain is another than by the fast route."""
        by_chain = derived.evaluate(self.point.problem, draws.reshape(-1, draws.shape[-1]))
        found = []
        for name, values in self.quantities.items():
            if self.khats.get(name, 0.0) > fast.TRUSTED:
                continue
            mean, sd = float(self.fast.mean(values)), float(self.fast.sd(values))
            other_mean, other_sd = float(by_chain[name].mean()), float(by_chain[name].std())
            if abs(other_mean - mean) > SAME_MEAN * sd or abs(other_sd - sd) > SAME_SD * sd:
                found.append(name)
        return tuple(found)


def weigh(
    problem: Problem, seed: np.random.SeedSequence, start: Array | None = None, best: float = -math.inf
) -> Route:
    """Fit one candidate and weigh draws of a proposal that is fitted to its posterior.

    Arguments: problem; seed, of three streams: proposal and lattice, chain, bridge or dealing; start (p,) of
    the least-squares fit; best, the log weight of another candidate: one that lies far below it by its mode
    is drawn a few times only.
    """
    seeds = seed.spawn(3)
    point = optimum.fit(problem, start)
    mode = find_mode(point)
    if problem.candidate.misfit:  # how much there is of it, the posterior tells and not least squares
        point = optimum.refit(point, mode.z)
    told = mode.log_evidence + problem.candidate.log_prior
    if told < best - HOPELESS and not is_funnel(problem):
        proposal = proposals.from_mode(mode)
        random = np.random.RandomState(np.random.MT19937(seeds[0]))
        few = fast.glance(point.problem.log_density, proposal, random)
        return Route(point, mode, proposal, few, seeds)
    proposal, weighted = fit_proposal(point.problem, mode, seeds[0])
    return Route(point, mode, proposal, weighted, seeds)


def misfit_gain(route: Route) -> float:
    """Return the log evidence [nats] that a smooth misfit would add to a candidate without, at the most.

    Linear at the fit, where residuals r are normal with covariance C + J S J' + a² K, S being what was known
    beforehand: the largest density of a few a over that of none. Where the noise is estimated, it may be
    smaller than it looks without a misfit.
    """
    point, problem = route.point, route.point.problem
    n, p = len(problem.measured.values), problem.n_physical
    prior = parameters.DEFAULT_PRIORS["misfit"][1]
    shares = np.exp(prior.mean + prior.sd * LOOKED_AT)
    smooth = posing.smooth_covariance(problem, point.z)
    back = np.linalg.inv(point.noise.basis)
    variances = np.broadcast_to(point.noise.variances(point.sigma), n)
    to_readings = back.T * np.sqrt(variances)
    residuals = to_readings @ point.point.residuals[:n]
    spread = (to_readings @ point.point.jacobian[:n]) * problem.prior_sd[:p]
    sigmas = np.maximum(point.sigma, SMALLEST_NOISE) * (SMALLER if problem.noise.estimated else np.ones(1))
    known = [problem.noise.covariance(float(sigma)) + spread @ spread.T for sigma in sigmas]

    def log_density(covariance: Array) -> float:
        lower = np.linalg.cholesky(covariance)
        whitened = np.linalg.solve(lower, residuals)
        return -float(0.5 * np.square(whitened).sum() + np.log(np.diag(lower)).sum())

    found = max(log_density(one + share**2 * smooth) for one in known for share in shares)
    return found - max(map(log_density, known))


def find_mode(point: LeastSquares) -> Mode:
    """Find the posterior's mode from the least-squares optimum; the scale is guessed from its information."""
    problem, n = point.problem, point.problem.n_physical
    stated = np.where(problem.is_stated[:n], 0.0, 1.0)  # stated priors are among the residuals already
    precision = point.point.jacobian.T @ point.point.jacobian + np.diag(stated / problem.prior_sd[:n] ** 2)
    scale = 1 / np.sqrt(np.diag(precision))
    weights, axes = np.linalg.eigh(precision * np.outer(scale, scale))
    root = np.zeros((len(point.z), len(point.z)))
    root[:n, :n] = scale[:, None] * (axes / np.sqrt(np.maximum(weights, SMALLEST_WEIGHT)))
    if problem.candidate.misfit:
        root[n, n] = MISFIT_SPREAD
    if problem.noise.estimated:
        root[-1, -1] = math.sqrt(0.5 / max(point.degrees_of_freedom, 1))
    start = np.clip(
        point.z, problem.prior_mean - 3 * problem.prior_sd, problem.prior_mean + 3 * problem.prior_sd
    )
    return laplace.find_mode(problem.log_density, start, root)


def is_funnel(problem: Problem) -> bool:
    """Tell whether few readings leave a noise open, so that a mode says little of its posterior."""
    spare = len(problem.measured.values) - problem.n_physical
    return problem.noise.estimated and spare < SPARE_FOR_NOISE


def fit_proposal(
    problem: Problem, mode: Mode, seed: np.random.SeedSequence
) -> tuple[Proposal, FastPosterior]:
    """Return a proposal fitted to the posterior, and its weighted draws.

    An estimated noise makes the posterior of few readings a funnel, and its mode may be a spike far down in
    it, where plate and air fit their readings without any noise: a ladder starts from the whole of it. So
    does one along the share of a misfit.
    """
    funnel = is_funnel(problem)
    random = np.random.RandomState(np.random.MT19937(seed)), np.random.default_rng(seed)
    if funnel or problem.candidate.misfit:
        ladder = proposals.ladder(problem.log_density, mode, -1 if funnel else problem.n_physical)
        found = _weigh_fitted(problem, ladder, *random)
        if found[1].efficiency >= LADDER_FITS:
            return found
    start = proposals.straighten(problem.log_density, proposals.from_mode(mode), random[0])
    return _weigh_fitted(problem, start, *random)


def _weigh_fitted(
    problem: Problem, start: Proposal, random: np.random.RandomState, shifts: np.random.Generator
) -> tuple[Proposal, FastPosterior]:
    """Weigh draws of a proposal, and of one refitted to them where they are too few that count."""
    weighted = fast.sample(problem.log_density, start, shifts)
    if weighted.efficiency >= proposals.GOOD:
        return start, weighted
    tried = weighted.z, weighted.log_ratios
    proposal, _ = proposals.adapt(problem.log_density, start, random, tried)
    if proposal is start:
        return start, weighted
    return proposal, fast.sample(problem.log_density, proposal, shifts)
