"""Drawing from a posterior by Markov chain Monte Carlo with emcee.

Several ensembles run independently, each from its own seed, and count as the chains of the diagnostics
(walkers of one ensemble help each other, so R-hat and ESS over walkers mislead). Two moves alternate at
random: independent draws from a Student t fitted to the posterior, which forget their past at once, and
differential evolution, which needs no fit and finds what the fit misses. Where independent draws are seldom
accepted the t is fitted again to what the ensembles have found. emcee's snooker move is not used: it is
biased in the released version.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback import proposal as proposals
from finback.laplace import LogDensity, Mode
from finback.proposal import Proposal

Array = NDArray[np.float64]
Progress = Callable[[float], None]

SHARE_OF_INDEPENDENT = 0.8
WALKERS_FOR_AUTOCORRELATION = 16  # an ensemble: its average needs no more


@dataclass(frozen=True, slots=True)
class Settings:
    """How long to sample.

    `ensembles` and their `walkers`; `warm_up` steps thrown away; `block` steps between checks; `max_steps` a
    stated end. Sampling stops when every ensemble is 50 autocorrelation times long, R-hat <= 1.01 and the
    effective sample size of means and 95 % limits reaches 1000.
    """

    ensembles: int = 4
    walkers: int = 128
    warm_up: int = 30
    block: int = 100
    max_steps: int = 6000
    pilot: int = 300
    autocorrelation_times: float = 50.0
    rhat: float = 1.01
    ess: float = 1000.0
    acceptance: float = 0.15


@dataclass(frozen=True, slots=True)
class Chain:
    """Draws of one posterior: `z` (ensembles, steps, walkers, p), `log_density` (ensembles, steps, walkers).

    `ess_min` and `rhat_max` over parameters (means and limits); `autocorrelation` [steps]; `converged`.
    """

    z: Array
    log_density: Array
    ess_min: float
    rhat_max: float
    autocorrelation: float
    converged: bool

    @property
    def n_draws(self) -> int:
        """Number of draws in all."""
        return int(np.prod(self.z.shape[:3]))


def sample(
    log_density: LogDensity, mode: Mode, seed: np.random.SeedSequence, settings: Settings, progress: Progress
) -> Chain:
    """Sample a posterior from its mode until it has converged or the stated end is reached.

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); mode; seed; settings; progress, called with
    the fraction done. Never raises for a chain that does not converge: `Chain.converged` says so.
    """
    randoms = [np.random.RandomState(np.random.MT19937(child)) for child in seed.spawn(settings.ensembles)]
    proposal = proposals.from_mode(mode)
    ensembles = [_Ensemble(log_density, proposal, random, settings) for random in randoms]
    for ensemble in ensembles:
        ensemble.run(settings.warm_up)
    if np.mean([e.acceptance for e in ensembles]) < settings.acceptance:
        ensembles = _refit(ensembles, settings)
    steps = 0
    while True:
        for ensemble in ensembles:
            ensemble.run(settings.block)
        steps += settings.block
        z = np.stack([e.chain for e in ensembles])
        ess, rhat, autocorrelation = _judge(z)
        long_enough = steps >= settings.autocorrelation_times * autocorrelation
        converged = bool(long_enough and rhat <= settings.rhat and ess >= settings.ess)
        progress(min(steps / (settings.autocorrelation_times * max(autocorrelation, 1.0)), 1.0))
        if converged or steps >= settings.max_steps:
            heights = np.stack([e.log_density for e in ensembles])
            return Chain(z, heights, ess, rhat, autocorrelation, converged)


def _judge(z: Array) -> tuple[float, float, float]:
    """Return smallest ESS, largest R-hat, longest autocorrelation time [steps] of draws (e, steps, w, p)."""
    from emcee.autocorr import integrated_time

    from finback import diagnostics

    some = z[:, :, :: max(1, z.shape[2] // WALKERS_FOR_AUTOCORRELATION)]
    times = [integrated_time(ensemble, tol=0, quiet=True, has_walkers=True).max() for ensemble in some]
    return diagnostics.ensemble_ess(z), diagnostics.ensemble_rhat(z), float(np.nanmax(times))


class _Ensemble:
    """One emcee ensemble with its own random stream, started from draws of the proposal."""

    def __init__(
        self, log_density: LogDensity, proposal: Proposal, random: np.random.RandomState, settings: Settings
    ) -> None:
        p = len(proposal.centre)
        self._target, self._random, self._settings = log_density, random, settings
        self.walkers = max(settings.walkers, 4 * p)
        self._start = _finite_start(log_density, proposal, self.walkers, random)
        self._set_proposal(proposal)

    def _set_proposal(self, proposal: Proposal) -> None:
        from emcee import EnsembleSampler
        from emcee.moves import DEMove
        from emcee.moves.mh import MHMove

        def propose(coordinates: Array, random: np.random.RandomState) -> tuple[Array, Array]:
            proposed = proposal.draw(len(coordinates), random)
            return proposed, proposal.log_density(coordinates) - proposal.log_density(proposed)

        moves = [(MHMove(propose), SHARE_OF_INDEPENDENT), (DEMove(), 1 - SHARE_OF_INDEPENDENT)]
        p = self._start.shape[1]
        self._sampler = EnsembleSampler(self.walkers, p, self._target, moves=moves, vectorize=True)
        self._state: object = None

    def run(self, steps: int) -> None:
        """Take steps; the first call is the warm-up, whose draws are forgotten."""
        from emcee import State

        if self._state is None:
            begin = State(self._start, random_state=self._random.get_state())
            self._state = self._sampler.run_mcmc(begin, steps)
            self.acceptance = float(np.mean(self._sampler.acceptance_fraction))
            self._sampler.reset()
        else:
            self._state = self._sampler.run_mcmc(self._state, steps)

    def explore(self, steps: int) -> Array:
        """Take steps by differential evolution alone and return the second half's draws, flat (n, p)."""
        from emcee import EnsembleSampler, State
        from emcee.moves import DEMove

        p = self._start.shape[1]
        sampler = EnsembleSampler(self.walkers, p, self._target, moves=DEMove(), vectorize=True)
        state = sampler.run_mcmc(State(self._start, random_state=self._random.get_state()), steps)
        self._random.set_state(state.random_state)
        self._start = np.array(state.coords)
        return np.asarray(sampler.get_chain(flat=True, discard=steps // 2))

    def continue_with(self, proposal: Proposal) -> None:
        """Go on from the present walkers with another proposal."""
        self._set_proposal(proposal)

    @property
    def chain(self) -> Array:
        """Draws so far (steps, walkers, p)."""
        return np.asarray(self._sampler.get_chain())

    @property
    def log_density(self) -> Array:
        """Log densities of the draws (steps, walkers)."""
        return np.asarray(self._sampler.get_log_prob())


def _refit(ensembles: Sequence[_Ensemble], settings: Settings) -> list[_Ensemble]:
    """Explore by differential evolution, fit the proposal to what was found, and warm up again."""
    found = np.concatenate([e.explore(settings.pilot) for e in ensembles])
    proposal = proposals.from_draws(found)
    for ensemble in ensembles:
        ensemble.continue_with(proposal)
        ensemble.run(settings.warm_up)
    return list(ensembles)


def _finite_start(
    log_density: LogDensity, proposal: Proposal, n: int, random: np.random.RandomState
) -> Array:
    """Return n starting points of finite density: emcee says nothing when all start at -inf."""
    found = np.empty((0, len(proposal.centre)))
    for _ in range(50):
        trial = proposal.draw(2 * n, random)
        found = np.concatenate([found, trial[np.isfinite(log_density(trial))]])
        if len(found) >= n:
            return found[:n]
    raise ValueError("no finite density found around the mode")
