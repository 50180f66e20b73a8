"""The log evidence of a candidate by bridge sampling between posterior draws and a fitted proposal.

Source: Meng and Wong, Statistica Sinica 6 (1996) 831, the optimal bridge found by iteration; error by
Frühwirth-Schnatter, Econometrics Journal 7 (2004) 143, with the autocorrelation of the draws.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback import proposal as proposals
from finback.laplace import LogDensity
from finback.sampling import Chain

Array = NDArray[np.float64]

DRAWS = 6000
TOLERANCE = 1e-10
MAX_ROUNDS = 1000


@dataclass(frozen=True, slots=True)
class Evidence:
    """Log evidence [nats] and its standard error [nats]."""

    log: float
    error: float


def bridge(log_density: LogDensity, chain: Chain, seed: np.random.SeedSequence) -> Evidence:
    """Return the log evidence of the density that the chain was drawn from.

    The proposal is fitted to the first half of the steps and bridged to the second, so that the same draws
    do not serve twice.
    """
    ensembles, steps, walkers, p = chain.z.shape
    half = steps // 2
    proposal = proposals.from_draws(chain.z[:, :half].reshape(-1, p))
    ours, heights = chain.z[:, half:].reshape(-1, p), chain.log_density[:, half:].reshape(-1)
    stride = max(1, len(ours) // DRAWS)
    ours, heights = ours[::stride], heights[::stride]
    theirs = proposal.draw(DRAWS, np.random.RandomState(np.random.MT19937(seed)))
    l_ours = heights - proposal.log_density(ours)
    l_theirs = log_density(theirs) - proposal.log_density(theirs)

    # draws of one step are independent, those of one walker only after the autocorrelation time
    n_ours = max(1.0, min(len(ours), ensembles * walkers * (steps - half) / chain.autocorrelation))
    share = n_ours / (n_ours + DRAWS)
    centre = float(np.median(l_ours))
    a, b = np.exp(l_ours - centre), np.exp(l_theirs - centre)
    ratio = 1.0
    for _ in range(MAX_ROUNDS):
        before = ratio
        numerator = np.mean(b / (share * b + (1 - share) * ratio))
        denominator = np.mean(1 / (share * a + (1 - share) * ratio))
        ratio = float(numerator / denominator)
        if abs(ratio - before) <= TOLERANCE * ratio:
            break
    top = b / (share * b + (1 - share) * ratio)
    bottom = 1 / (share * a + (1 - share) * ratio)
    variance = np.var(top) / np.mean(top) ** 2 / DRAWS + np.var(bottom) / np.mean(bottom) ** 2 / n_ours
    return Evidence(centre + float(np.log(ratio)), float(np.sqrt(variance)))
