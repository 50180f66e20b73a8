"""One run of a campaign: the same numbers and findings as a fit, by the fast route and without its pictures.

Every candidate is weighed; a Markov chain is run only for those that matter and that the weighted draws
cannot be trusted with. Only the draws that the average takes are worked out further, and what no table holds
(leave-one-out scores, least-squares answers, budget, band) is left out.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import candidates, checks, conclusions, expectation, fast, faults, pareto, summaries
from finback.estimate import CandidateScore, ReadingFit, SamplerRecord, Summary
from finback.findings import Finding
from finback.readings import Readings
from finback.rig import Rig
from finback.routes import Outcome, Route
from finback.sampling import Settings
from finback.summaries import Mixture

Array = NDArray[np.float64]

DRAWS = 1000  # a chain of the average, as a candidate has that is not sampled
FOR_A_MEDIAN = 250  # draws a chain of the best candidate without a misfit
SMALLEST_SHARE = 0.005  # probability below which a candidate has no part in an average
SMOOTH_WITHIN = 1.9
"""Nats below the best candidate, by an estimate, from which its smooth misfit is weighed. One that has a
tenth of the probability or less is left out: it would widen intervals by a few per cent at the most, and take
half the time."""
SHARE_THAT_MATTERS = 0.05
"""Probability from which a candidate's k-hats count: a third more or less of the standard deviation of one
that has less moves the average's by less than 2 %."""


@dataclass(frozen=True)
class QuickResult:
    """What one run came to.

    `found`: summaries by name, without least squares; `scores`: candidates that matter, best first;
    `findings`, without those that hold for every run of the rig; `table`: the readings beside the best
    candidate; `sampler`; `mixture`: the averaged draws, SI units.
    """

    status: str
    found: Mapping[str, Summary]
    scores: tuple[CandidateScore, ...]
    findings: tuple[Finding, ...]
    table: tuple[ReadingFit, ...]
    sampler: SamplerRecord
    mixture: Mixture


def estimate(rig: Rig, readings: Readings, seed: int, settings: Settings | None = None) -> QuickResult:
    """Estimate one run by the fast route.

    Arguments: rig; readings; seed; settings of the sampler, where it is needed. The random streams belong to
    seed and run, as in a fit. Raises InputError where the run cannot be fitted to the rig.
    """
    checks.check_run(rig, readings)
    warm = rig.warmed(expectation.mean_temperature(rig, readings), expectation.extremes(rig, readings))
    weighed = candidates.weigh(warm, readings, seed, _silent, SMOOTH_WITHIN)
    wrong: tuple[Finding, ...] = ()
    if faults.is_suspicious(_plain_best(weighed).point):
        looked = faults.search(warm, readings)
        wrong = looked.findings
        if looked.rig is not warm or looked.readings is not readings:
            warm, readings = looked.rig, looked.readings
            weighed = candidates.weigh(warm, readings, seed, _silent, SMOOTH_WITHIN)
    outcomes = _outcomes(_with_a_part(weighed), settings or Settings())
    probabilities = candidates.probabilities(outcomes)
    outcomes = _thinned(outcomes, probabilities)
    scores = tuple(
        candidates.score(outcome, float(probability), leave_out=False)
        for outcome, probability in zip(outcomes, probabilities, strict=True)
    )
    evaluated = [conclusions.quantities(outcome) for outcome in outcomes]
    mixture = summaries.mix(outcomes, probabilities, evaluated, DRAWS)
    found = conclusions.summarise(outcomes, probabilities, evaluated, mixture, least_squares=False)
    sampler = conclusions.sampler_record(outcomes, seed)
    concluded = conclusions.draw(warm, readings, outcomes, scores, evaluated, found, sampler, wrong)
    own = tuple(finding for finding in concluded.findings if not _of_every_run(finding, warm))
    return QuickResult(concluded.status, found, scores, own, concluded.table, sampler, mixture)


def _of_every_run(finding: Finding, rig: Rig) -> bool:
    """Tell whether a finding holds for every run of a rig: what it assumes, and no joint without a plate."""
    if finding.evidence.get("quantity") in summaries.OF_THE_JOINT:
        return not rig.sensors_on("plate")
    return finding in rig.assumed


def _plain_best(weighed: Sequence[Route]) -> Route:
    """Return the most probable route without a misfit, which may explain a wrong reading away."""
    plain = [route for route in weighed if not route.point.problem.candidate.misfit]
    return max(plain, key=lambda route: route.log_weight)


def _silent(_stage: str, _fraction: float) -> None:
    """Take what progress there is: a run of many is over before anyone could look."""


def _shares(weighed: Sequence[Route]) -> Array:
    """Return the probabilities of candidates."""
    logs = np.array([route.log_weight for route in weighed])
    shares: Array = np.exp(logs - logs.max())
    return np.asarray(shares / shares.sum())


def _with_a_part(weighed: Sequence[Route]) -> list[Route]:
    """Return the candidates that have a part in an average: over all, or over those with a joint.

    The best one without a misfit is among them: what heat the readings ask for is told without one.
    """
    shares = _shares(weighed)
    joints = [route for route in weighed if route.point.problem.candidate.joint]
    of_joints = dict(zip(map(id, joints), _shares(joints), strict=True)) if joints else {}
    plain = [route for route in weighed if not route.point.problem.candidate.misfit]
    best_plain = max(plain, key=lambda route: route.log_weight)
    return [
        route
        for route, share in zip(weighed, shares, strict=True)
        if route is best_plain or max(share, of_joints.get(id(route), 0.0)) >= SMALLEST_SHARE
    ]


def _outcomes(weighed: Sequence[Route], settings: Settings) -> list[Outcome]:
    """Return the outcomes, most probable first, by MCMC where the weighted draws cannot be trusted."""
    outcomes = [
        route.sampled(settings, lambda _fraction: None) if doubtful else route.outcome()
        for route, doubtful in zip(weighed, _mistrusted(weighed, _shares(weighed)), strict=True)
    ]
    return sorted(outcomes, key=lambda outcome: -outcome.log_weight)


def _mistrusted(weighed: Sequence[Route], shares: Array) -> list[bool]:
    """Tell of each candidate whether it asks for a Markov chain: where the averages cannot be trusted.

    The weights of a candidate that matters must be sound themselves, as its evidence is theirs.
    """
    found = []
    for route, share in zip(weighed, shares, strict=True):
        doubtful: list[str] = []
        if share >= SHARE_THAT_MATTERS:
            doubtful = [name for name, khat in route.khats.items() if khat > fast.TRUSTED]
        found.append(
            any(name == "z" or _khat_of_average(weighed, shares, name) > fast.TRUSTED for name in doubtful)
        )
    return found


def _khat_of_average(weighed: Sequence[Route], shares: Array, name: str) -> float:
    """Return the k-hat of a quantity averaged over the candidates that have it, from all their draws."""
    having = [
        (route, share)
        for route, share in zip(weighed, shares, strict=True)
        if share >= SHARE_THAT_MATTERS and name in route.quantities
    ]
    values = np.concatenate([route.quantities[name] for route, _ in having])
    weights = np.concatenate(
        [share * np.exp(route.fast.log_ratios - route.fast.evidence.log) for route, share in having]
    )
    away = np.abs(values - weights @ values / weights.sum())
    return max(pareto.shape(weights), pareto.shape(weights * away), pareto.shape(weights * away * away))


def _thinned(outcomes: Sequence[Outcome], probabilities: Array) -> list[Outcome]:
    """Return the outcomes with as many draws as the averages take."""
    counts = summaries.deal(probabilities, DRAWS)
    if any(outcome.problem.candidate.joint for outcome in outcomes):
        counts = np.maximum(counts, summaries.deal(conclusions.given_joint(outcomes, probabilities), DRAWS))
    if outcomes[0].problem.candidate.misfit:
        plain = next(i for i, outcome in enumerate(outcomes) if not outcome.problem.candidate.misfit)
        counts[plain] = max(counts[plain], FOR_A_MEDIAN)
    counts = np.maximum(counts, 1)
    chosen = [
        np.linspace(0, outcome.draws.shape[1] - 1, count).astype(int)
        for outcome, count in zip(outcomes, counts, strict=True)
    ]
    return [replace(o, draws=o.draws[:, at]) for o, at in zip(outcomes, chosen, strict=True)]
