"""Drawing from a posterior by Markov chain Monte Carlo with emcee.

Several ensembles run independently and count as the chains of the diagnostics (walkers of one ensemble help
each other, so R-hat and ESS over walkers mislead). They take their steps together, so that their densities
are computed in one block, but never see each other: each starts from its own seed, and no move mixes them.
Two moves alternate at random: independent draws from a Student t fitted to the posterior, which forget their
past at once, and differential evolution, which needs no fit and finds what the fit misses. emcee's snooker
move is not used: it is biased in the released version.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from finback.errors import ComputationError
from finback.laplace import LogDensity
from finback.proposal import Proposal

Array = NDArray[np.float64]
Progress = Callable[[float], None]

SHARE_OF_INDEPENDENT = 0.8
SHARE_WHERE_UNFIT = 0.4  # where the proposal fits badly and walkers in its tails would wait for it
FIT = 0.3  # efficiency of a proposal that fits
GROWTH = 1.1  # of the steps that the autocorrelation time asks for: it is still growing when it is judged
WALKERS_FOR_AUTOCORRELATION = 16  # an ensemble: its average needs no more
WINDOW = 5.0  # autocorrelation times after which their sum ends


@dataclass(frozen=True, slots=True)
class Settings:
    """How long to sample.

    `ensembles` and their `walkers`; `warm_up` steps thrown away; `block` steps before the first check and at
    least between checks; `max_steps` a stated end. Sampling stops when every ensemble is 50 autocorrelation
    times long, R-hat <= 1.01 and the effective sample size of means and 95 % limits reaches 1000.
    """

    ensembles: int = 4
    walkers: int = 128
    warm_up: int = 30
    block: int = 100
    max_steps: int = 4000
    autocorrelation_times: float = 50.0
    rhat: float = 1.01
    ess: float = 1000.0


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
    log_density: LogDensity,
    proposal: Proposal,
    efficiency: float,
    seed: np.random.SeedSequence,
    settings: Settings,
    progress: Progress,
) -> Chain:
    """Sample a posterior until it has converged or the stated end is reached.

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); proposal, fitted to it, and its efficiency
    [1]; seed; settings; progress, called with the fraction done. Never raises for a chain that does not
    converge: `Chain.converged` says so.
    """
    share = SHARE_OF_INDEPENDENT if efficiency >= FIT else SHARE_WHERE_UNFIT
    ensembles = _Ensembles(log_density, proposal, share, seed, settings)
    ensembles.run(settings.warm_up)
    ensembles.forget()
    steps, target = 0, settings.block
    while True:
        ensembles.run(target - steps)
        steps = target
        z = ensembles.chain
        found = judge(z, settings)
        wanted = settings.autocorrelation_times * found.autocorrelation
        progress(min(steps / max(wanted, 1.0), 1.0))
        if found.converged or steps >= settings.max_steps:
            return Chain(z, ensembles.log_density, *found)
        target = int(min(max(GROWTH * wanted, steps + settings.block), 2 * steps, settings.max_steps))


class Judgement(NamedTuple):
    """What draws say of themselves: smallest ESS, largest R-hat, longest autocorrelation time [steps]."""

    ess_min: float
    rhat_max: float
    autocorrelation: float
    converged: bool


def judge(z: Array, settings: Settings) -> Judgement:
    """Judge the draws (ensembles, steps, walkers, p) of a chain so far."""
    from finback import diagnostics

    some = z[:, :, :: max(1, z.shape[2] // WALKERS_FOR_AUTOCORRELATION)]
    longest = max(autocorrelation_time(ensemble) for ensemble in some)
    ess, rhat = diagnostics.ensemble_ess(z), diagnostics.ensemble_rhat(z)
    long_enough = z.shape[1] >= settings.autocorrelation_times * longest
    return Judgement(ess, rhat, longest, bool(long_enough and rhat <= settings.rhat and ess >= settings.ess))


def autocorrelation_time(draws: Array) -> float:
    """Return the longest autocorrelation time [steps] of draws (steps, walkers, p) over parameters.

    Taken about the mean of all walkers and not of each its own, so that a walker that never moves counts as
    what it is; the sum ends after five times itself (Sokal, in Functional Integration, Plenum 1997, p. 131).
    """
    steps = len(draws)
    centred = draws - draws.mean(axis=(0, 1))
    spectrum = np.fft.rfft(centred, n=2 * steps, axis=0)
    covariances = np.fft.irfft(np.square(np.abs(spectrum)).sum(axis=1), n=2 * steps, axis=0)[:steps]
    if not (covariances[0] > 0).all():
        return float(steps)
    times = 2 * np.cumsum(covariances / covariances[0], axis=0) - 1
    enough = np.arange(steps)[:, None] >= WINDOW * times
    last = np.where(enough.any(axis=0), enough.argmax(axis=0), steps - 1)
    return float(np.take_along_axis(times, last[None], axis=0).max())


class _Ensembles:
    """Ensembles of emcee side by side, each started from draws of the proposal by a stream of its own."""

    def __init__(
        self,
        log_density: LogDensity,
        proposal: Proposal,
        share: float,
        seed: np.random.SeedSequence,
        settings: Settings,
    ) -> None:
        from emcee import EnsembleSampler, State
        from emcee.moves.mh import MHMove

        def propose(coordinates: Array, generator: np.random.RandomState) -> tuple[Array, Array]:
            proposed = proposal.draw(len(coordinates), generator)
            return proposed, proposal.log_density(coordinates) - proposal.log_density(proposed)

        self._count, p = settings.ensembles, proposal.centres.shape[1]
        walkers = max(settings.walkers, 4 * p)
        walkers += walkers % 2
        randoms = [np.random.RandomState(np.random.MT19937(child)) for child in seed.spawn(self._count + 1)]
        starts = [_finite_start(log_density, proposal, walkers, random) for random in randoms[1:]]
        moves = [(MHMove(propose), share), (_apart(self._count), 1 - share)]
        self._sampler = EnsembleSampler(self._count * walkers, p, log_density, moves=moves, vectorize=True)
        self._state = State(np.concatenate(starts), random_state=randoms[0].get_state())

    def run(self, steps: int) -> None:
        """Take steps."""
        # emcee's own check of the start refuses posteriors that are narrow in one direction
        self._state = self._sampler.run_mcmc(self._state, steps, skip_initial_state_check=True)

    def forget(self) -> None:
        """Throw the draws so far away."""
        self._sampler.reset()

    @property
    def chain(self) -> Array:
        """Draws so far (ensembles, steps, walkers, p)."""
        return self._by_ensemble(np.asarray(self._sampler.get_chain()))

    @property
    def log_density(self) -> Array:
        """Log densities of the draws (ensembles, steps, walkers)."""
        return self._by_ensemble(np.asarray(self._sampler.get_log_prob()))

    def _by_ensemble(self, values: Array) -> Array:
        steps = len(values)
        return np.ascontiguousarray(
            np.moveaxis(values.reshape(steps, self._count, -1, *values.shape[2:]), 1, 0)
        )


def _apart(ensembles: int) -> Any:
    """Return emcee's move of differential evolution for ensembles that must not see each other."""
    from emcee.moves import DEMove

    class Apart(DEMove):  # type: ignore[misc]  # emcee has no types
        def get_proposal(
            self, moved: Array, others: list[Array], random: np.random.RandomState
        ) -> tuple[Array, Array]:
            pairs = zip(np.split(moved, ensembles), np.split(np.concatenate(others), ensembles), strict=True)
            found = [super(Apart, self).get_proposal(own, [rest], random) for own, rest in pairs]
            return np.concatenate([q for q, _ in found]), np.concatenate([factor for _, factor in found])

    # every second walker moves at a time, so that both halves keep the order of the ensembles
    return Apart(randomize_split=False)


def _finite_start(
    log_density: LogDensity, proposal: Proposal, n: int, random: np.random.RandomState
) -> Array:
    """Return n starting points of finite density: emcee says nothing when all start at -inf."""
    found = np.empty((0, proposal.centres.shape[1]))
    for _ in range(50):
        trial = proposal.draw(2 * n, random)
        found = np.concatenate([found, trial[np.isfinite(log_density(trial))]])
        if len(found) >= n:
            return found[:n]
    raise ComputationError(
        "The sampler found no start at which the readings have a finite probability: check the readings and "
        "their uncertainties against the rig."
    )
