"""How far the candidates' probabilities hang on a prior that is a choice of ours: that of the joint.

No new sampling: with the prior pi of the coordinate z made wider, pi_w, the evidence changes by the average
of pi_w/pi over the posterior's draws. Far below what the readings see, where that ratio grows without bound
and draws are few, a joint is as good as none: there the likelihood is the evidence of the same candidate
without a joint, and the wider prior's mass is added with that.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from finback.estimate import Sensitivity
from finback.priors import Normal
from finback.problem import Candidate
from finback.routes import Outcome

Array = NDArray[np.float64]

TIMES_WIDER = 3.0
LEFT_TO_THE_TWIN = 0.005  # of the draws: the smallest joints


def of_joint(outcomes: Sequence[Outcome]) -> Sensitivity | None:
    """Return the probabilities with a joint's prior three times as wide; None where none is compared."""
    logs = {outcome.problem.candidate: outcome.evidence.log for outcome in outcomes}
    if len({candidate.joint for candidate in logs}) < 2:
        return None
    widened = {}
    for outcome in outcomes:
        candidate = outcome.problem.candidate
        change = _change(outcome, logs.get(_without(candidate))) if candidate.joint else 0.0
        widened[candidate] = outcome.log_weight + change
    highest = max(widened.values())
    weights = {candidate: float(np.exp(log - highest)) for candidate, log in widened.items()}
    whole = sum(weights.values())
    return Sensitivity("joint", TIMES_WIDER, {c.name: weight / whole for c, weight in weights.items()})


def _change(outcome: Outcome, log_of_twin: float | None) -> float:
    column = outcome.problem.names.index("joint")
    twin = None if log_of_twin is None else float(np.exp(log_of_twin - outcome.evidence.log))
    return log_change(outcome.draws[..., column].ravel(), outcome.problem.parameters[column].prior, twin)


def log_change(z: Array, prior: Normal, twin: float | None, times: float = TIMES_WIDER) -> float:
    """Return by how much the log evidence changes when a prior gets wider.

    Arguments: z (n,), draws of the coordinate from the posterior; prior that they were drawn with; twin, the
    evidence of the candidate that z -> -inf leads to, over this one's, or None if there is none; times, how
    much wider.
    """
    from scipy.special import ndtr

    t = (z - prior.mean) / prior.sd
    lowest = -np.inf if twin is None else float(np.quantile(t, LEFT_TO_THE_TWIN))
    ratio = np.exp(0.5 * np.square(t) * (1 - times**-2)) / times
    seen = float(np.where(t >= lowest, ratio, 0.0).mean())
    return float(np.log(seen + (0.0 if twin is None else twin * float(ndtr(lowest / times)))))


def _without(candidate: Candidate) -> Candidate:
    return replace(candidate, joint=False)
