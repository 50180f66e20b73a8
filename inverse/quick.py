"""One run of a campaign: the same numbers and findings as a fit, by the fast route and without its pictures.

Every candidate is weighed; a Markov chain is run only for those that matter and that the weighted draws
cannot be trusted with. Only the draws that the average takes are worked out further, and what no table holds
(leave-one-out scores, least-squares answers, budget, band) is left out.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import candidates, checks, conclusions, expectation, fast, summaries
from finback.estimate import CandidateScore, SamplerRecord, Summary
from finback.findings import Finding
from finback.readings import Readings
from finback.rig import Rig
from finback.routes import Outcome, Route
from finback.sampling import Settings
from finback.summaries import Mixture

Array = NDArray[np.float64]

DRAWS = 1000  # a chain of the average, as a candidate has that is not sampled
FOR_A_MEDIAN = 250  # draws a chain of the best candidate without a misfit
SHARE_THAT_MATTERS = 0.05
"""Probability from which a candidate's k-hats count: a third more or less of the standard deviation of one
that has less moves the average's by less than 2 %."""


@dataclass(frozen=True)
class QuickResult:
    """What one run came to.

    `found`: summaries by name, without least squares; `scores`: candidates that matter, best first;
    `findings`, without those that hold for every run of the rig; `sampler`; `mixture`: the averaged draws, SI
    units.
    """

    status: str
    found: Mapping[str, Summary]
    scores: tuple[CandidateScore, ...]
    findings: tuple[Finding, ...]
    sampler: SamplerRecord
    mixture: Mixture


def estimate(rig: Rig, readings: Readings, seed: int, settings: Settings | None = None) -> QuickResult:
    """Estimate one run by the fast route.

    Arguments: rig; readings; seed; settings of the sampler, where it is needed. The random streams belong to
    seed and run, as in a fit. Raises InputError where the run cannot be fitted to the rig.
    """
    checks.check_run(rig, readings)
    warm = rig.warmed(expectation.mean_temperature(rig, readings), expectation.extremes(rig, readings))
    weighed = candidates.weigh(warm, readings, seed, _silent)
    outcomes = _outcomes(weighed, settings or Settings())
    probabilities = candidates.probabilities(outcomes)
    outcomes, probabilities = _taken(outcomes, probabilities)
    scores = tuple(
        candidates.score(outcome, float(probability), leave_out=False)
        for outcome, probability in zip(outcomes, probabilities, strict=True)
    )
    evaluated = [conclusions.quantities(outcome) for outcome in outcomes]
    mixture = summaries.mix(outcomes, probabilities, evaluated, DRAWS)
    found = conclusions.summarise(outcomes, probabilities, evaluated, mixture, least_squares=False)
    sampler = conclusions.sampler_record(outcomes, seed)
    concluded = conclusions.draw(warm, readings, outcomes, scores, evaluated, found, sampler)
    own = tuple(finding for finding in concluded.findings if finding not in warm.assumed)
    return QuickResult(concluded.status, found, scores, own, sampler, mixture)


def _silent(_stage: str, _fraction: float) -> None:
    """Take what progress there is: a run of many is over before anyone could look."""


def _outcomes(weighed: Sequence[Route], settings: Settings) -> list[Outcome]:
    """Return the outcomes, most probable first, by MCMC where the weighted draws cannot be trusted."""
    logs = np.array([route.log_weight for route in weighed])
    shares = np.exp(logs - logs.max())
    shares /= shares.sum()
    outcomes = [
        route.sampled(settings, lambda _fraction: None)
        if _mistrusted(route, float(share))
        else route.outcome()
        for route, share in zip(weighed, shares, strict=True)
    ]
    return sorted(outcomes, key=lambda outcome: -outcome.log_weight)


def _mistrusted(route: Route, share: float) -> bool:
    """Tell whether a candidate of this probability asks for a Markov chain."""
    return share >= SHARE_THAT_MATTERS and route.khat > fast.TRUSTED


def _taken(outcomes: Sequence[Outcome], probabilities: Array) -> tuple[list[Outcome], Array]:
    """Return the outcomes that have a part in the averages, with the draws that those take, and shares."""
    counts = summaries.deal(probabilities, DRAWS)
    if any(outcome.problem.candidate.joint for outcome in outcomes):  # the joint's average is over these
        counts = np.maximum(counts, summaries.deal(conclusions.given_joint(outcomes, probabilities), DRAWS))
    if outcomes[0].problem.candidate.misfit:  # what heat the readings ask for is told without one
        plain = next(i for i, outcome in enumerate(outcomes) if not outcome.problem.candidate.misfit)
        counts[plain] = max(counts[plain], FOR_A_MEDIAN)
    taken = np.flatnonzero(counts).tolist()
    kept = []
    for at in taken:
        draws = outcomes[at].draws
        kept.append(
            replace(outcomes[at], draws=draws[:, np.linspace(0, draws.shape[1] - 1, counts[at]).astype(int)])
        )
    return kept, probabilities[taken] / probabilities[taken].sum()
