"""Diagnosis: why a fin does less than it should, what each cause costs, and what to measure next.

What the readings say is held against what a healthy fin should show. Nothing wrong, each single cause in the
fin, each fault of the measurement and pairs of them are weighed against each other by their evidence
(`hypotheses`, `densities`); what each costs follows from the draws of those that hold it (`restoring`), and
what to measure next from what they predict (`next_measurements`).
"""

import math
import zlib
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from finback import (
    candidates,
    causes,
    checks,
    concerns,
    densities,
    derived,
    expectation,
    faults,
    healthy,
    hypotheses,
    optimum,
    posing,
    restoring,
)
from finback import next_measurements as planning
from finback import readings as readings_file
from finback import rig as rig_file
from finback.causes import SHOWN, UNSEEN_JOINT, Cause, Cost, Together
from finback.densities import Weighed
from finback.estimate import Provenance, provenance, rounded
from finback.faults import Suspicion
from finback.findings import Finding
from finback.healthy import Healthy
from finback.hypotheses import Base, Hypothesis
from finback.next_measurements import NextMeasurement
from finback.problem import Candidate
from finback.readings import Readings
from finback.rig import Rig, TipName
from finback.suspects import ODDS, Suspect

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

WORTH_DRAWS = 0.01  # probability from which a hypothesis is weighed by draws of its exact density
PROFILE_POINTS = 121
MOST_DRAWN = 12  # hypotheses, the likeliest ones
TIPS: tuple[TipName, ...] = ("adiabatic", "convective", "fixed")


@dataclass(frozen=True)
class Diagnosis:
    """What a run says of its fin.

    `healthy_probability`: that nothing is wrong, with the fin or its readings; `fin_healthy_probability`,
    that nothing is wrong with the fin, None where nothing of that could be judged; `doubt` [bits], what is
    open about what is wrong. `causes`, likeliest first, "healthy" among them; `together`, pairs;
    `costs`; `measurement_faults`; `next_measurements`, best first; `cannot_tell`, sentences on what is not
    told apart; `missing`, on what cannot be judged and which line would change that; `findings`, everything
    else to know; `profile`, places along the fin [m] and temperatures there [K] by the likeliest of all
    hypotheses; `seed`; `provenance`.
    """

    rig: Rig
    readings: Readings
    healthy_probability: float
    fin_healthy_probability: float | None
    doubt: float
    causes: tuple[Cause, ...]
    together: tuple[Together, ...]
    costs: tuple[Cost, ...]
    measurement_faults: tuple[Finding, ...]
    next_measurements: tuple[NextMeasurement, ...]
    cannot_tell: tuple[str, ...]
    missing: tuple[str, ...]
    findings: tuple[Finding, ...]
    profile: tuple[Array, Array]
    seed: int
    provenance: Provenance

    def to_dict(self) -> dict[str, Any]:
        """Return the contents of diagnosis.json, in its key order."""
        return {
            "finback": self.provenance.finback,
            "rig": self.rig.title,
            "run": self.readings.run,
            "healthy_probability": rounded(self.healthy_probability),
            "fin_healthy_probability": rounded(self.fin_healthy_probability),
            "doubt": rounded(self.doubt),
            "causes": [_plain(cause) for cause in self.causes],
            "together": [_plain(pair) for pair in self.together],
            "costs": [_plain(cost) for cost in self.costs],
            "measurement_faults": [_of_finding(finding) for finding in self.measurement_faults],
            "next_measurements": [_plain(each) for each in self.next_measurements],
            "cannot_tell": list(self.cannot_tell),
            "missing": list(self.missing),
            "findings": [_of_finding(finding) for finding in self.findings],
            "seed": self.seed,
            "provenance": _plain(self.provenance),
        }


def diagnose(
    rig: Rig | Path | str,
    readings: Readings | Path | str,
    *,
    run: str | None = None,
    seed: int = 1,
    progress: Progress | None = None,
) -> Diagnosis:
    """Tell why a fin does less than it should, what that costs and what to measure next.

    Arguments: rig, a `Rig` or the path of a rig.toml; readings, the `Readings` of one run or the path of a
    table; run, which one, where there are several; seed of the random draws; progress, called with a stage
    and the fraction done. Raises InputError, with a sentence for the user, when the input is wrong.
    """
    if not isinstance(rig, Rig):
        rig = rig_file.read(Path(rig))
    if not isinstance(readings, Readings):
        readings = readings_file.read(Path(readings), rig).pick(run)
    checks.check_run(rig, readings)
    progress = progress or (lambda _stage, _fraction: None)
    warm = rig.warmed(expectation.mean_temperature(rig, readings), expectation.extremes(rig, readings))
    reads_plate = any(posing.is_read(sensor, readings) for sensor in warm.sensors_on("plate"))
    known = _expected(warm, readings, reads_plate)
    progress("weighing causes", 0.1)
    found = [
        each for base in _bases(known, readings) for each in hypotheses.weigh(base, _states(known, base))
    ]
    progress("drawing", 0.5)
    weighed = _drawn(found, np.random.SeedSequence([seed, zlib.crc32(readings.run.encode())]))
    every = [one.hypothesis for one in weighed.values()]
    every += [each for each in found if id(each) not in weighed]
    if not reads_plate:
        every += list(_unseen(every))
    suspicions = faults.suspicions_of(every)
    progress("what it costs", 0.7)
    return _assemble(warm, readings, known, every, list(weighed.values()), suspicions, seed)


def _expected(rig: Rig, readings: Readings, reads_plate: bool) -> Healthy:
    """Return what a healthy fin should have, without h where no correlation holds."""
    try:
        return healthy.expect(rig, readings, reads_plate)
    except ValueError as error:
        around = replace(rig.surroundings, speed=None, correlation=None)
        known = healthy.expect(replace(rig, surroundings=around), readings, reads_plate)
        message = f"What a healthy fin would show cannot be worked out: {error}."
        finding = Finding("out-of-range", "note", message, evidence={"key": "expected"})
        return replace(known, findings=(*known.findings, finding))


def _bases(known: Healthy, readings: Readings) -> list[Base]:
    """Return the candidates that causes are weighed on: as the rig draws its fin, and with another tip."""
    rig = replace(known.rig, noise=("normal",))  # a wrong reading is a cause of its own here
    chosen = list(candidates.enumerate_candidates(rig, readings))
    if "joint" in known.priors:  # a healthy fin has the one that is expected
        chosen = [each for each in chosen if each.joint]
    problems = candidates.affordable([posing.pose(rig, readings, each) for each in chosen])
    drawn = [problem.candidate for problem in problems]
    found = [hypotheses.base(optimum.fit(problem)) for problem in problems]
    if rig.tip in TIPS and rig.has_tip_face:
        others = [tip for tip in TIPS if tip != rig.tip]
        for tip in others:
            suspect = Suspect("tip", ODDS["tip"] / len(others), other=tip)
            for each in drawn:
                posed = _with_tip(rig, readings, each, tip, suspect)
                found += [] if posed is None else [posed]
    return found


def _with_tip(rig: Rig, readings: Readings, drawn: Candidate, tip: TipName, suspect: Suspect) -> Base | None:
    """Return a candidate with another tip than drawn, None where the readings are too few for it."""
    other = replace(drawn, tip=tip)
    open_rig = replace(rig, tip=tip, tip_temperature=None)
    problems = [posing.pose(rig, readings, drawn), posing.pose(open_rig, readings, other)]
    if len(candidates.affordable(problems)) < len(problems):
        return None
    return hypotheses.base(optimum.fit(problems[1]), suspect)


def _states(known: Healthy, base: Base) -> list[hypotheses.State]:
    """Return the states of the fin for one candidate: one cause at a time where its tip is a suspect."""
    names = set(base.problem.names)
    found = [state for state in known.states() if names.issuperset(state.priors or {})]
    return found[:1] if base.tip is not None else found


def _drawn(found: Sequence[Hypothesis], seed: np.random.SeedSequence) -> Mapping[int, Weighed]:
    """Return those that matter, weighed by draws of their exact densities, by the identity of the first."""
    shares = faults.probabilities(found)
    order = np.argsort(-shares)[:MOST_DRAWN]
    chosen = [found[at] for at in order if shares[at] > WORTH_DRAWS]
    return {
        id(each): densities.weigh(each, own)
        for each, own in zip(chosen, seed.spawn(len(chosen)), strict=True)
    }


def _unseen(found: Sequence[Hypothesis]) -> Iterator[Hypothesis]:
    """Yield each hypothesis once more with a bad joint, which nothing reads: it stays as likely as it was."""
    for each in found:
        if len(each.suspects) < 2:
            odds = math.log(UNSEEN_JOINT.odds)
            yield replace(
                each,
                suspects=(*each.suspects, UNSEEN_JOINT),
                log_weight=each.log_weight + odds,
                log_prior=each.log_prior + odds,
            )


def _assemble(
    rig: Rig,
    readings: Readings,
    known: Healthy,
    every: Sequence[Hypothesis],
    weighed: Sequence[Weighed],
    suspicions: Sequence[Suspicion],
    seed: int,
) -> Diagnosis:
    shares = faults.probabilities(every)
    pairs = list(zip(shares.tolist(), every, strict=True))
    none = sum(share for share, each in pairs if not each.suspects)
    sound = sum(share for share, each in pairs if not any(s.of_the_fin for s in each.suspects))
    of_the_fin = {suspect for each in every for suspect in each.suspects if suspect.of_the_fin}
    judged = bool(of_the_fin - {UNSEEN_JOINT})
    random = np.random.default_rng(seed)
    tip = rig.tip
    parts = [
        (float(p), one, restoring.effects(one, known.priors, tip, random))
        for p, one in zip(shares, weighed, strict=False)
    ]
    listed = [causes.healthy_cause(none, known)]
    for suspicion in suspicions:
        if suspicion.probability >= SHOWN or suspicion is suspicions[0]:
            cause = causes.cause_of(suspicion, known, parts)
            listed += [] if cause is None else [cause]
    listed.sort(key=lambda cause: -cause.probability)
    likeliest = max(every, key=lambda each: each.log_weight)
    biot = derived.evaluate(likeliest.base.problem, likeliest.mean[None])["transverse_biot"]
    return Diagnosis(
        rig=rig,
        readings=readings,
        healthy_probability=min(none, 1.0),
        fin_healthy_probability=min(sound, 1.0) if judged else None,
        doubt=planning.doubt(every),
        causes=tuple(listed),
        together=tuple(causes.together(every, shares)),
        costs=tuple(causes.costs(parts, suspicions)),
        measurement_faults=tuple(faults.findings(suspicions, {}, heaters=True)),
        next_measurements=planning.rank(rig, every, np.random.SeedSequence(seed)),
        cannot_tell=tuple(causes.cannot_tell(listed)),
        missing=known.missing,
        findings=(
            *causes.unjudged_joint(known, parts),
            *concerns.thick_fin(float(biot[0])),
            *known.findings,
            *rig.assumed,
        ),
        profile=_profile(likeliest),
        seed=seed,
        provenance=provenance(rig, readings),
    )


def _profile(hypothesis: Hypothesis) -> tuple[Array, Array]:
    problem = hypothesis.base.problem
    x = np.linspace(0.0, problem.rig.length, PROFILE_POINTS)
    return x, problem.solve(problem.values(hypothesis.mean[None]), x).temperatures[0]


def _plain(value: Any) -> Any:
    return rounded(asdict(value))


def _of_finding(finding: Finding) -> dict[str, Any]:
    return {
        "code": finding.code,
        "severity": finding.severity,
        "sensor": finding.sensor,
        "message": finding.message,
    }
