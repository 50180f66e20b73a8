"""Conclusions: what the candidates' draws say of one run: numbers, fit and findings.

One way to them for a single fit with its report and for the thousands of runs of a campaign, whichever route
the draws came by.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback import concerns, derived, expectation, geometry, summaries
from finback.estimate import (
    CandidateScore,
    FitQuality,
    ReadingFit,
    SamplerRecord,
    Status,
    Summary,
)
from finback.expectation import Expected, ImpliedSpeed
from finback.findings import Finding
from finback.models.constants import ZERO_CELSIUS
from finback.readings import Readings
from finback.rig import Rig
from finback.routes import Outcome

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Conclusions:
    """What one run came to.

    `found`: summaries by name; `fit` and `table`: the best candidate beside the readings; `expected` and
    `implied_speed` of a healthy fin, None where the rig does not tell; `findings`, those of the estimate
    first, gravest before others; `status` that follows from them.
    """

    found: Mapping[str, Summary]
    fit: FitQuality
    table: tuple[ReadingFit, ...]
    expected: Expected | None
    implied_speed: ImpliedSpeed | None
    findings: tuple[Finding, ...]
    status: Status


def draw(
    rig: Rig,
    readings: Readings,
    outcomes: Sequence[Outcome],
    scores: Sequence[CandidateScore],
    evaluated: Sequence[Mapping[str, Array]],
    found: Mapping[str, Summary],
    sampler: SamplerRecord,
    wrong: Sequence[Finding] = (),
) -> Conclusions:
    """Draw the conclusions of a run.

    Arguments: rig, as warm as the run; readings; outcomes, most probable first; scores, with their
    probabilities; evaluated, the quantities of their draws; found, the summaries by `summarise`; sampler, how
    the draws were made; wrong, what was found of readings that are wrong.
    """
    best = outcomes[0]
    table = fitted_readings(best)
    quality = fit_quality(best, table)
    healthy, implied, beyond = _expectation(rig, readings, found)
    heat = concerns.heat_asked_for(found, outcomes, evaluated)
    smooth = concerns.smooth_misfit(outcomes, [score.probability for score in scores])
    heavy = concerns.heavy_tails(outcomes, [score.probability for score in scores])
    findings = (
        *concerns.collect(rig, found, quality, sampler, best, smooth, heat, (*wrong, *heavy)),
        *beyond,
        *concerns.scored(scores),
    )
    worst = {f.severity for f in findings}
    status: Status = "caution" if worst & {"caution", "fault"} else "ok"
    return Conclusions(found, quality, table, healthy, implied, findings, status)


def sampler_record(outcomes: Sequence[Outcome], seed: int) -> SamplerRecord:
    """Return how the draws of the outcomes were made: by MCMC, or weighted where none was sampled."""
    sampled = [o for o in outcomes if o.sampled]
    if not sampled:
        return SamplerRecord("weighted draws", sum(o.n_draws for o in outcomes), None, None, seed, True)
    return SamplerRecord(
        method="emcee, independence and differential-evolution moves, "
        f"{sampled[0].draws.shape[0]} independent ensembles"
        + ("; other candidates by weighted draws" if len(sampled) < len(outcomes) else ""),
        draws=sum(o.n_draws for o in sampled),
        ess_min=min(o.ess_min for o in sampled if o.ess_min is not None),
        rhat_max=_finite(max(o.rhat_max for o in sampled if o.rhat_max is not None)),
        seed=seed,
        converged=all(o.converged for o in sampled),
    )


def quantities(outcome: Outcome) -> dict[str, Array]:
    """Return all quantities of an outcome's draws, flat, uncertain lengths included."""
    z = outcome.draws.reshape(-1, outcome.draws.shape[-1])
    found = derived.evaluate(outcome.problem, z)
    return geometry.spread(outcome.problem, outcome.mode.z, z, found, np.random.default_rng(1))


def _expectation(
    rig: Rig, readings: Readings, found: Mapping[str, Summary]
) -> tuple[Expected | None, ImpliedSpeed | None, tuple[Finding, ...]]:
    """Return what a healthy fin would show, the air speed that h implies, and what to beware of in both."""
    h, air = found["h"], found["air"].median
    if air is not None:
        air += ZERO_CELSIUS
    try:
        expected = expectation.expect(rig, readings, air)
        implied = None
        if h.median is not None:
            implied = expectation.imply(rig, readings, h.median, h.sd or 0.0, air)
    except ValueError as error:
        message = f"What a healthy fin would show cannot be worked out: {error}."
        return None, None, (Finding("out-of-range", "note", message, evidence={"key": "expected"}),)
    return expected, implied, tuple(expectation.findings(expected, implied))


def _finite(value: float) -> float | None:
    """Return a number, or None for what is none: R-hat of ensembles that never moved."""
    return value if np.isfinite(value) else None


def summarise(
    outcomes: Sequence[Outcome],
    probabilities: Array,
    evaluated: Sequence[Mapping[str, Array]],
    mixture: summaries.Mixture,
    *,
    least_squares: bool = True,
) -> dict[str, Summary]:
    """Return the summaries by name; what not all candidates have comes from those that have it.

    `least_squares`: whether the least-squares answers stand beside them.
    """
    best = summaries.judge(outcomes[0], least_squares)
    found = {}
    for name in evaluated[0]:
        if name in summaries.OF_THE_JOINT:
            continue
        draws = mixture.values[name]
        if not all(name in each for each in evaluated):  # the temperature of a tip that is held
            draws = draws[np.isfinite(draws)]
        found[name] = best.summarise(name, draws)
    with_joint = [i for i, o in enumerate(outcomes) if o.problem.candidate.joint]
    if not with_joint:
        for name in summaries.OF_THE_JOINT:
            label, unit = summaries.describe(name)
            found[name] = Summary(name, label, unit, None, None, None, None, None, None, None, "prior")
        return found
    joint_judge = best if with_joint[0] == 0 else summaries.judge(outcomes[with_joint[0]], least_squares)
    joint_mixture = mixture
    if len(with_joint) < len(outcomes):
        joint_mixture = summaries.mix(
            [outcomes[i] for i in with_joint],
            given_joint(outcomes, probabilities)[with_joint],
            [evaluated[i] for i in with_joint],
            mixture.which.shape[1],
        )
    absent = float(probabilities[with_joint].sum()) < 0.5
    for name in summaries.OF_THE_JOINT:
        found[name] = joint_judge.summarise(name, joint_mixture.values[name], absent)
    return found


def given_joint(outcomes: Sequence[Outcome], probabilities: Array) -> Array:
    """Return the probabilities of outcomes given that there is a joint, zero where theirs has none."""
    joint = np.array([outcome.problem.candidate.joint for outcome in outcomes])
    shares: Array = np.where(joint, probabilities + np.finfo(np.float64).tiny, 0.0)
    return np.asarray(shares / shares.sum())


def fitted_readings(best: Outcome) -> tuple[ReadingFit, ...]:
    """Return every reading beside what the best candidate's least-squares fit predicts for it."""
    problem, measured = best.problem, best.problem.measured
    predicted = problem.predict(best.point.z[None])[0]
    variances = np.diag(best.point.noise.covariance(best.point.sigma))
    if problem.shared is not None:
        variances = variances + np.square(problem.shared).sum(axis=1)
    uncertainty = np.sqrt(variances)
    rows = zip(
        measured.sensors + measured.bounds,
        np.concatenate([measured.values, measured.bound_values]),
        predicted,
        np.concatenate([uncertainty, measured.bound_sds]),
        strict=True,
    )
    found = [
        ReadingFit(s.name, s.place, s.position, s.position_sd, float(v), float(p), float(v - p), float(u))
        for s, v, p, u in rows
    ]
    return tuple(found) + _set_aside(best)


def _set_aside(best: Outcome) -> tuple[ReadingFit, ...]:
    """Return the excluded readings, predicted all the same."""
    problem = best.problem
    values = problem.values(best.point.z[None])
    found = []
    for name, reason in problem.readings.excluded.items():
        sensor, measured = problem.rig.sensors[name], problem.readings.values.get(name)
        if measured is None:
            continue
        solution = problem.solve(values, np.array([sensor.position or 0.0]))
        heats = problem.heats(values, problem.build(values)[0], solution)
        predictions = {
            "fin": solution.temperatures[0, 0],
            "heat": heats.fins[0],
            "heater": heats.total[0],
        }
        predicted = float(np.ravel(predictions.get(sensor.place, values.get(sensor.place, np.nan)))[0])
        found.append(
            ReadingFit(
                name, sensor.place, sensor.position, sensor.position_sd, measured, predicted,
                measured - predicted,
                best.point.sigma, reason,
            )
        )  # fmt: skip
    return tuple(found)


def fit_quality(best: Outcome, table: Sequence[ReadingFit]) -> FitQuality:
    """Return residuals and chi-square of the best candidate, whose fitted readings are the table."""
    from scipy.special import gammaincc

    point, estimated = best.point, best.problem.noise.estimated
    freedom = point.degrees_of_freedom
    # where tails are heavy chi-square is not distributed as its name says
    judged = not estimated and freedom > 0 and not best.problem.candidate.heavy_tails
    return FitQuality(
        residuals={row.sensor: row.residual for row in table if row.excluded is None},
        chi_square=point.chi_square,
        degrees_of_freedom=freedom,
        p_value=float(gammaincc(freedom / 2, point.chi_square / 2)) if judged else None,
        noise=point.sigma if estimated else None,
    )
