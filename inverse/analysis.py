"""The main job: one run of one rig to an estimate. What `finback fit` does is one call of `fit` here."""

import sys
from collections.abc import Callable, Mapping, Sequence
from importlib.metadata import version
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import finback
from finback import (
    budget,
    candidates,
    checks,
    concerns,
    derived,
    expectation,
    geometry,
    sensitivity,
    summaries,
)
from finback import readings as readings_file
from finback import rig as rig_file
from finback.estimate import (
    Draws,
    Estimate,
    FitQuality,
    ProfileBand,
    Provenance,
    ReadingFit,
    SamplerRecord,
    Summary,
)
from finback.expectation import Expected, ImpliedSpeed
from finback.findings import Finding
from finback.models.constants import ZERO_CELSIUS
from finback.readings import Readings
from finback.rig import Rig
from finback.routes import Outcome
from finback.sampling import Settings

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

BAND_DRAWS = 1000
BAND_POINTS = 121
PRIOR_DRAWS = 4000
PACKAGES = ("numpy", "scipy", "emcee", "arviz", "pandas", "matplotlib")
PARAMETERS = (
    *("h", "k", "joint", "plate", "air", "tip_temperature", "exponent", "rise", "emissivity", "surroundings"),
    *("bare_area", "loss", "loss_coefficient", "misfit", "noise"),
)


def fit(
    rig: Rig | Path | str,
    readings: Readings | Path | str,
    *,
    run: str | None = None,
    seed: int = 1,
    progress: Progress | None = None,
    settings: Settings | None = None,
) -> Estimate:
    """Estimate h, k and the joint of one run, with the model that the readings support.

    Arguments: rig, a `Rig` or the path of a rig.toml; readings, the `Readings` of one run or the path of a
    .csv or .xlsx; run, which one, where the file has several; seed of the random draws: the same seed gives
    the same result; progress, called with a stage and the fraction done; settings of the sampler.

    Returns an `Estimate`. Raises InputError, with a sentence for the user, when the input is wrong. A sampler
    that does not converge is a finding of the result, not an error.
    """
    if not isinstance(rig, Rig):
        rig = rig_file.read(Path(rig))
    if not isinstance(readings, Readings):
        readings = readings_file.read(Path(readings), rig).pick(run)
    checks.check_run(rig, readings)
    rig = rig.warmed(expectation.mean_temperature(rig, readings), expectation.extremes(rig, readings))
    progress = progress or (lambda _stage, _fraction: None)
    outcomes = candidates.compare(rig, readings, seed, progress, settings)
    progress("summing up", 0.95)
    return _assemble(rig, readings, outcomes, seed)


def _assemble(rig: Rig, readings: Readings, outcomes: Sequence[Outcome], seed: int) -> Estimate:
    probabilities = candidates.probabilities(outcomes)
    scores = tuple(candidates.score(o, float(p)) for o, p in zip(outcomes, probabilities, strict=True))
    evaluated = [_quantities(outcome) for outcome in outcomes]
    mixture = summaries.mix(outcomes, probabilities, evaluated)
    found = _summaries(outcomes, probabilities, evaluated, mixture)
    origin = budget.collect(outcomes, probabilities, evaluated, found)
    best = outcomes[0]
    table = _table(best)
    quality = _quality(best, table)
    sampled = [o for o in outcomes if o.sampled]
    sampler = SamplerRecord(
        method="emcee, independence and differential-evolution moves, "
        f"{best.draws.shape[0]} independent ensembles"
        + ("; other candidates by weighted draws" if len(sampled) < len(outcomes) else ""),
        draws=sum(o.n_draws for o in sampled),
        ess_min=min(o.ess_min for o in sampled if o.ess_min is not None),
        rhat_max=_finite(max(o.rhat_max for o in sampled if o.rhat_max is not None)),
        seed=seed,
        converged=all(o.converged for o in sampled),
    )
    healthy, implied, beyond = _expectation(rig, readings, found)
    heat = concerns.heat_asked_for(found, outcomes, evaluated)
    smooth = concerns.smooth_misfit(outcomes, probabilities.tolist())
    found_concerns = (
        concerns.collect(rig, found, quality, sampler, best, smooth, heat) + beyond + concerns.scored(scores)
    )
    worst = {f.severity for f in found_concerns}
    return Estimate(
        rig=rig,
        readings=readings,
        status="caution" if worst & {"caution", "fault"} else "ok",
        parameters={name: found[name] for name in PARAMETERS if name in found},
        derived={name: found[name] for name in derived.DERIVED if name in found},
        candidates=scores,
        comparison=concerns.compare_in_words(scores, rig.tip is not None),
        compared=candidates.why_compared(
            rig,
            _left_out(rig, readings, outcomes),
            smooth=any(outcome.problem.candidate.misfit for outcome in outcomes),
        ),
        fit=quality,
        table=table,
        band=_band(outcomes, mixture),
        draws=_draws(outcomes, mixture),
        sampler=sampler,
        findings=found_concerns,
        priors=_priors(best),
        provenance=_provenance(rig, readings),
        expected=healthy,
        implied_speed=implied,
        budget=origin.lines,
        expanded=origin.expanded,
        improvement=origin.improvement,
        sensitivity=sensitivity.of_joint(outcomes),
    )


def _left_out(rig: Rig, readings: Readings, outcomes: Sequence[Outcome]) -> list[str]:
    posed = [outcome.problem.candidate for outcome in outcomes]
    return [each.name for each in candidates.enumerate_candidates(rig, readings) if each not in posed]


def _quantities(outcome: Outcome) -> dict[str, Array]:
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


def _summaries(
    outcomes: Sequence[Outcome],
    probabilities: Array,
    evaluated: Sequence[Mapping[str, Array]],
    mixture: summaries.Mixture,
) -> dict[str, Summary]:
    """Return the summaries by name; what not all candidates have comes from those that have it."""
    best = summaries.judge(outcomes[0])
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
    joint_judge = summaries.judge(outcomes[with_joint[0]])
    weights = probabilities[with_joint] + np.finfo(np.float64).tiny
    joint_mixture = summaries.mix(
        [outcomes[i] for i in with_joint], weights / weights.sum(), [evaluated[i] for i in with_joint]
    )
    absent = float(probabilities[with_joint].sum()) < 0.5
    for name in summaries.OF_THE_JOINT:
        found[name] = joint_judge.summarise(name, joint_mixture.values[name], absent)
    return found


def _table(best: Outcome) -> tuple[ReadingFit, ...]:
    """Return every reading beside what the best candidate's least-squares fit predicts for it."""
    problem, measured = best.problem, best.problem.measured
    predicted = problem.predict(best.point.z[None])[0]
    uncertainty = np.sqrt(np.diag(best.point.noise.covariance(best.point.sigma)))
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


def _quality(best: Outcome, table: Sequence[ReadingFit]) -> FitQuality:
    from scipy.special import gammaincc

    point, estimated = best.point, best.problem.noise.estimated
    freedom = point.degrees_of_freedom
    judged = not estimated and freedom > 0
    return FitQuality(
        residuals={row.sensor: row.residual for row in table if row.excluded is None},
        chi_square=point.chi_square,
        degrees_of_freedom=freedom,
        p_value=float(gammaincc(freedom / 2, point.chi_square / 2)) if judged else None,
        noise=point.sigma if estimated else None,
    )


def _band(outcomes: Sequence[Outcome], mixture: summaries.Mixture) -> ProfileBand:
    """Return the temperature along the fin with its 95 % band, averaged over candidates."""
    x = np.linspace(0.0, outcomes[0].problem.rig.profile().length, BAND_POINTS)
    which, index = mixture.which.ravel(), mixture.index.ravel()
    picked = np.linspace(0, len(which) - 1, min(BAND_DRAWS, len(which))).astype(int)
    profiles = []
    for number, outcome in enumerate(outcomes):
        rows = index[picked[which[picked] == number]]
        if len(rows):
            z = outcome.draws.reshape(-1, outcome.draws.shape[-1])[rows]
            profiles.append(outcome.problem.solve(outcome.problem.values(z), x).temperatures)
    low, median, high = np.quantile(np.concatenate(profiles), (0.025, 0.5, 0.975), axis=0)
    return ProfileBand(x, median, low, high)


def _draws(outcomes: Sequence[Outcome], mixture: summaries.Mixture) -> Draws:
    """Return the averaged draws in reported units, with each parameter's prior and the log likelihoods."""
    names = tuple(name for name in (*PARAMETERS, *derived.DERIVED) if name in mixture.values)
    random = np.random.default_rng(0)
    prior = np.full((PRIOR_DRAWS, len(names)), np.nan)
    known = {p.name: p for outcome in reversed(outcomes) for p in outcome.problem.parameters}
    for column, name in enumerate(names):
        if name in known:
            z = random.normal(known[name].prior.mean, known[name].prior.sd, PRIOR_DRAWS)
            prior[:, column] = summaries.to_reported(name, known[name].values(z))
    shape = mixture.which.shape
    likelihoods = np.empty((*shape, len(outcomes[0].problem.measured.values)))
    for number, outcome in enumerate(outcomes):
        here = mixture.which == number
        if here.any():
            z = outcome.draws.reshape(-1, outcome.draws.shape[-1])[mixture.index[here]]
            likelihoods[here] = outcome.problem.pointwise(z)
    return Draws(
        names=names,
        units=tuple(summaries.describe(name)[1] for name in names),
        values=np.stack([summaries.to_reported(name, mixture.values[name]) for name in names], axis=-1),
        prior=prior,
        candidate=np.array(mixture.which),
        pointwise=likelihoods,
        sensors=tuple(s.name for s in outcomes[0].problem.measured.sensors),
    )


def _priors(best: Outcome) -> tuple[str, ...]:
    exact = best.problem.fixed
    lines = [p.describe() for p in best.problem.parameters]
    for name in exact:
        label, unit = summaries.describe(name)
        value = float(summaries.to_reported(name, np.array([exact[name]]))[0])
        source = "by the readings" if name == "reference_excess" else "exactly (stated)"
        lines.append(f"{label}: {value:.6g} {unit} {source}")
    return tuple(lines)


def _provenance(rig: Rig, readings: Readings) -> Provenance:
    files = [(rig.source, rig.sha256), (readings.source, readings.sha256)]
    if rig.shape_file is not None:
        files.append((rig.shape_file.source, rig.shape_file.sha256))
    inputs = {source.name: digest for source, digest in files if source is not None and digest is not None}
    versions = {"python": ".".join(map(str, sys.version_info[:3]))} | {
        name: version(name) for name in PACKAGES
    }
    return Provenance(finback.__version__, versions, inputs)
