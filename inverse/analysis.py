"""The main job: one run of one rig to an estimate. What `finback fit` does is one call of `fit` here."""

from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from finback import (
    budget,
    candidates,
    checks,
    concerns,
    conclusions,
    derived,
    expectation,
    faults,
    sensitivity,
    summaries,
)
from finback import readings as readings_file
from finback import rig as rig_file
from finback.estimate import Draws, Estimate, ProfileBand, provenance
from finback.findings import Finding
from finback.readings import Readings
from finback.rig import Rig
from finback.routes import Outcome
from finback.sampling import Settings

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

BAND_DRAWS = 1000
BAND_POINTS = 121
PRIOR_DRAWS = 4000
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
    as_read: bool = False,
) -> Estimate:
    """Estimate h, k and the joint of one run, with the model that the readings support.

    Arguments: rig, a `Rig` or the path of a rig.toml; readings, the `Readings` of one run or the path of a
    .csv or .xlsx; run, which one, where the file has several; seed of the random draws: the same seed gives
    the same result; progress, called with a stage and the fraction done; settings of the sampler;
    as_read, whether every reading counts as it stands: readings that are surely wrong are set aside
    otherwise, and that is said.

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
    progress("looking for wrong readings", 0.0)
    looked = faults.search(rig, readings, aside=not as_read)
    rig, readings = looked.rig, looked.readings
    outcomes = candidates.compare(rig, readings, seed, progress, settings)
    progress("summing up", 0.95)
    return _assemble(rig, readings, outcomes, seed, looked.findings)


def _assemble(
    rig: Rig, readings: Readings, outcomes: Sequence[Outcome], seed: int, wrong: Sequence[Finding]
) -> Estimate:
    probabilities = candidates.probabilities(outcomes)
    scores = tuple(candidates.score(o, float(p)) for o, p in zip(outcomes, probabilities, strict=True))
    evaluated = [conclusions.quantities(outcome) for outcome in outcomes]
    mixture = summaries.mix(outcomes, probabilities, evaluated)
    found = conclusions.summarise(outcomes, probabilities, evaluated, mixture)
    origin = budget.collect(outcomes, probabilities, evaluated, found)
    sampler = conclusions.sampler_record(outcomes, seed)
    concluded = conclusions.draw(rig, readings, outcomes, scores, evaluated, found, sampler, wrong)
    return Estimate(
        rig=rig,
        readings=readings,
        status=concluded.status,
        parameters={name: found[name] for name in PARAMETERS if name in found},
        derived={name: found[name] for name in derived.DERIVED if name in found},
        candidates=scores,
        comparison=concerns.compare_in_words(scores, rig.tip is not None),
        compared=candidates.why_compared(
            rig,
            _left_out(rig, readings, outcomes),
            smooth=any(outcome.problem.candidate.misfit for outcome in outcomes),
        ),
        fit=concluded.fit,
        table=concluded.table,
        band=_band(outcomes, mixture),
        draws=_draws(outcomes, mixture),
        sampler=sampler,
        findings=concluded.findings,
        priors=_priors(outcomes[0]),
        provenance=provenance(rig, readings),
        expected=concluded.expected,
        implied_speed=concluded.implied_speed,
        budget=origin.lines,
        expanded=origin.expanded,
        improvement=origin.improvement,
        sensitivity=sensitivity.of_joint(outcomes),
    )


def _left_out(rig: Rig, readings: Readings, outcomes: Sequence[Outcome]) -> list[str]:
    posed = [outcome.problem.candidate for outcome in outcomes]
    return [each.name for each in candidates.enumerate_candidates(rig, readings) if each not in posed]


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
