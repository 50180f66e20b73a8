"""Diagnosis: why a fin does less than it should, what each cause costs, and what to measure next.

What the readings say is held against what a healthy fin should show. Nothing wrong, each single cause in the
fin, each fault of the measurement and pairs of them are weighed against each other by their evidence
(`hypotheses`, `densities`); what each costs follows from the draws of those that hold it (`restoring`), and
what to measure next from what they predict (`next_measurements`).
"""

import math
import zlib
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from finback import (
    candidates,
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
from finback.densities import Weighed
from finback.estimate import Provenance, provenance, rounded
from finback.faults import Suspicion
from finback.findings import Finding
from finback.healthy import Healthy
from finback.hypotheses import Base, Hypothesis
from finback.next_measurements import NextMeasurement
from finback.problem import Candidate
from finback.quantity import format_number, pretty_unit
from finback.readings import Readings
from finback.restoring import Effects, Interval
from finback.rig import Rig, TipName
from finback.suspects import ODDS, Suspect

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

WORTH_DRAWS = 0.01  # probability from which a hypothesis is weighed by draws of its exact density
MOST_DRAWN = 12  # hypotheses, the likeliest ones
SHOWN = 0.02  # probability from which a cause is listed
COSTED = 0.05  # and from which what it costs is shown
OPEN = 0.15  # probability from which a cause is among those that cannot be told apart
CLEAR = 0.8  # and from which nothing is left to tell
UNSEEN_JOINT = Suspect("joint", ODDS["joint"])
TIPS: tuple[TipName, ...] = ("adiabatic", "convective", "fixed")
HEALTHY = "healthy"


@dataclass(frozen=True, slots=True)
class Cause:
    """One answer to why the fin does less than it should, or reads as if it did.

    `code` of its finding; `name` in words; `sensor` it concerns, if any; `probability` that it is so, alone
    or with another; `message`; `heat_recovered` and `base_temperature_change`, what putting it right brings,
    None where nothing tells.
    """

    code: str
    name: str
    sensor: str | None
    probability: float
    message: str
    heat_recovered: Interval | None
    base_temperature_change: Interval | None


@dataclass(frozen=True, slots=True)
class Cost:
    """One line of the table of costs: `what`, with the heat into the fin and the base temperature."""

    what: str
    heat: Interval
    base_temperature: Interval


@dataclass(frozen=True, slots=True)
class Together:
    """Two things that are wrong at once: the names of the causes, and how probable that is."""

    names: tuple[str, ...]
    probability: float


@dataclass(frozen=True)
class Diagnosis:
    """What a run says of its fin.

    `healthy_probability`: that nothing is wrong, with the fin or its readings; `fin_healthy_probability`,
    that nothing is wrong with the fin. `causes`, likeliest first, "healthy" among them; `together`, pairs;
    `costs`; `measurement_faults`; `next_measurements`, best first; `cannot_tell`, sentences on what is not
    told apart; `missing`, on what cannot be judged and which line would change that; `findings`, everything
    else to know; `provenance`.
    """

    rig: Rig
    readings: Readings
    healthy_probability: float
    fin_healthy_probability: float
    causes: tuple[Cause, ...]
    together: tuple[Together, ...]
    costs: tuple[Cost, ...]
    measurement_faults: tuple[Finding, ...]
    next_measurements: tuple[NextMeasurement, ...]
    cannot_tell: tuple[str, ...]
    missing: tuple[str, ...]
    findings: tuple[Finding, ...]
    provenance: Provenance

    def to_dict(self) -> dict[str, Any]:
        """Return the contents of diagnosis.json, in its key order."""
        return {
            "finback": self.provenance.finback,
            "rig": self.rig.title,
            "run": self.readings.run,
            "healthy_probability": rounded(self.healthy_probability),
            "fin_healthy_probability": rounded(self.fin_healthy_probability),
            "causes": [_plain(cause) for cause in self.causes],
            "together": [_plain(pair) for pair in self.together],
            "costs": [_plain(cost) for cost in self.costs],
            "measurement_faults": [_of_finding(finding) for finding in self.measurement_faults],
            "next_measurements": [_plain(each) for each in self.next_measurements],
            "cannot_tell": list(self.cannot_tell),
            "missing": list(self.missing),
            "findings": [_of_finding(finding) for finding in self.findings],
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
    rig = known.rig
    chosen = [each for each in candidates.enumerate_candidates(rig, readings) if not each.heavy_tails]
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
    found = [state for state in known.states() if all(suspect.kind in names for suspect in state.causes)]
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
    none = float(sum(p for p, each in zip(shares, every, strict=True) if not each.suspects))
    sound = float(
        sum(p for p, each in zip(shares, every, strict=True) if not any(s.of_the_fin for s in each.suspects))
    )
    random = np.random.default_rng(seed)
    tip = rig.tip
    parts = [
        (float(p), one, restoring.effects(one, known.priors, tip, random))
        for p, one in zip(shares, weighed, strict=False)
    ]
    causes = [_healthy(none, known)]
    for suspicion in suspicions:
        if suspicion.probability >= SHOWN or suspicion is suspicions[0]:
            cause = _cause(suspicion, known, parts)
            causes += [] if cause is None else [cause]
    causes.sort(key=lambda cause: -cause.probability)
    likeliest = max(every, key=lambda each: each.log_weight)
    biot = derived.evaluate(likeliest.base.problem, likeliest.mean[None])["transverse_biot"]
    return Diagnosis(
        rig=rig,
        readings=readings,
        healthy_probability=none,
        fin_healthy_probability=sound,
        causes=tuple(causes),
        together=tuple(_together(every, shares)),
        costs=tuple(_costs(parts, suspicions)),
        measurement_faults=tuple(faults.findings(suspicions, {}, heaters=True)),
        next_measurements=planning.rank(rig, every, np.random.SeedSequence(seed)),
        cannot_tell=tuple(_cannot_tell(causes)),
        missing=known.missing,
        findings=(*concerns.thick_fin(float(biot[0])), *known.findings, *rig.assumed),
        provenance=provenance(rig, readings),
    )


Parts = Sequence[tuple[float, Weighed, Effects]]


def _with(suspicion: Suspicion, parts: Parts) -> list[tuple[float, Weighed, Effects]]:
    wanted = faults.key(suspicion.suspect)
    return [part for part in parts if wanted in part[2].restored]


def _cause(suspicion: Suspicion, known: Healthy, parts: Parts) -> Cause | None:
    """Return a cause with what putting it right brings, None where no hypothesis with it was drawn."""
    own = _with(suspicion, parts)
    if suspicion.suspect is UNSEEN_JOINT:
        message = "Nothing reads the plate, so the joint stays as likely to be bad as on any such rig."
        return Cause("joint", NAMES["joint"], None, suspicion.probability, message, None, None)
    if not own:
        return None
    wanted = faults.key(suspicion.suspect)
    changes = [(share, effects.restored[wanted] - effects.now) for share, _, effects in own]
    heat, base = restoring.of_heat(changes), restoring.of_base(changes, "K")
    told = _told(suspicion, known, own)
    message = f"{told}{_brings(heat, base) if suspicion.suspect.of_the_fin else ''}."
    suspect = suspicion.suspect
    name = NAMES[suspect.kind] if suspect.sensor is None else f"{NAMES[suspect.kind]} ({_sensors(suspect)})"
    return Cause(suspect.code, name, suspect.sensor, suspicion.probability, message, heat, base)


def _sensors(suspect: Suspect) -> str:
    return f"{suspect.sensor} and {suspect.other}" if suspect.kind == "swap" else str(suspect.sensor)


def _healthy(probability: float, known: Healthy) -> Cause:
    nothing = Interval(0.0, 0.0, 0.0, "W")
    told = [SAID[name] for name in known.priors if name in SAID]
    what = f"{', '.join(told)} and all readings" if told else "all readings"
    message = f"Nothing is wrong that these readings could show: {what} are as they should be."
    return Cause(HEALTHY, "nothing wrong", None, probability, message, nothing, replace(nothing, unit="K"))


def _told(suspicion: Suspicion, known: Healthy, parts: Parts) -> str:
    """Return what a cause is in words, with its number."""
    suspect = suspicion.suspect
    if suspect.kind in known.priors:
        values = [(share, effects.values[suspect.kind]) for share, _, effects in parts]
        found = restoring.pooled(values, UNITS[suspect.kind])
        right = float(_natural(suspect.kind, known))
        number = f"{format_number(found.median)} {pretty_unit(found.unit)}".rstrip()
        between = f"95 %: {format_number(found.low95)} to {format_number(found.high95)}"
        should = f"{format_number(right)} {pretty_unit(found.unit)}".rstrip()
        name = SAID[suspect.kind]
        return f"{name[0].upper()}{name[1:]} {number} ({between}), {_ratio(found.median / right)} {should}"
    if suspect.kind == "tip":
        return f"The tip is {WORDS_OF_TIPS[suspect.other or '']} and not as drawn"
    if suspect.kind == "misfit":
        return (
            "The profile departs from every model in a smooth pattern: h that changes along the fin, or leads"
        )
    return faults.in_words(suspicion)


def _natural(name: str, known: Healthy) -> float:
    from finback.parameters import Parameter

    prior = known.priors[name]
    return float(Parameter(name, prior).values(np.array([prior.mean]))[0])


def _ratio(ratio: float) -> str:
    if ratio > 1.5:
        return f"{ratio:.2g} times the healthy"
    change = 100 * abs(ratio - 1)
    return f"{change:.0f} % {'above' if ratio > 1 else 'below'} the healthy"


def _brings(heat: Interval, base: Interval) -> str:
    side = "hotter" if base.median > 0 else "cooler"
    return (
        f"; put right, {format_number(heat.median)} W ({format_number(heat.low95)} to "
        f"{format_number(heat.high95)}) more would flow, with a base "
        f"{format_number(abs(base.median), 2)} K {side}"
    )


def _costs(parts: Parts, suspicions: Sequence[Suspicion]) -> list[Cost]:
    """Return the table of costs: now, with each cause in the fin put right, with all of them."""

    def line(what: str, effects: Sequence[tuple[float, Array]]) -> Cost:
        return Cost(what, restoring.of_heat(effects), restoring.of_base(effects))

    found = [line("now", [(share, effects.now) for share, _, effects in parts])]
    for suspicion in suspicions:
        own = _with(suspicion, parts)
        kind = suspicion.suspect.kind
        moves = suspicion.suspect.of_the_fin or kind == "air"
        if moves and suspicion.probability >= COSTED and own:
            wanted = faults.key(suspicion.suspect)
            words = f"with {PUT_RIGHT[kind]}"
            found.append(line(words, [(share, effects.restored[wanted]) for share, _, effects in own]))
    found.append(line("healthy", [(share, effects.healthy) for share, _, effects in parts]))
    return found


def _together(every: Sequence[Hypothesis], shares: Array) -> list[Together]:
    """Return the pairs of causes that are likely, likeliest first."""
    found: dict[tuple[str, ...], float] = {}
    for each, share in zip(every, shares.tolist(), strict=True):
        if len(each.suspects) > 1:
            names = tuple(
                NAMES[s.kind] if s.sensor is None else f"{NAMES[s.kind]} ({_sensors(s)})"
                for s in each.suspects
            )
            found[names] = found.get(names, 0.0) + share
    likely = [Together(names, share) for names, share in found.items() if share >= SHOWN]
    return sorted(likely, key=lambda each: -each.probability)


def _cannot_tell(causes: Sequence[Cause]) -> list[str]:
    """Return a sentence where several causes remain that the readings do not tell apart."""
    found = []
    if any(cause.code == "joint" and cause.heat_recovered is None for cause in causes):
        found.append("Nothing reads the plate, so a bad joint cannot be told from a healthy one.")
    rivals = [cause for cause in causes if cause.probability >= OPEN]
    if causes[0].probability < CLEAR and len(rivals) > 1:
        named = " and ".join(f"{cause.name} ({cause.probability:.2f})" for cause in rivals)
        found.append(f"These readings cannot tell apart: {named}.")
    return found


def _plain(value: Any) -> Any:
    from dataclasses import asdict

    return rounded(asdict(value))


def _of_finding(finding: Finding) -> dict[str, Any]:
    return {
        "code": finding.code,
        "severity": finding.severity,
        "sensor": finding.sensor,
        "message": finding.message,
    }


NAMES: Mapping[str, str] = {
    "joint": "bad joint",
    "k": "low conductivity",
    "h": "low convection",
    "emissivity": "lost radiation",
    "tip": "tip not as drawn",
    "air": "air not as read",
    "heat": "heat not as read",
    "offset": "wrong thermometer",
    "shift": "hole at another place",
    "swap": "swapped sensors",
    "misfit": "smooth misfit",
    "scatter": "thermometers that scatter",
}
SAID: Mapping[str, str] = {
    "h": "film coefficient",
    "k": "conductivity",
    "joint": "joint resistance",
    "emissivity": "emissivity",
}
UNITS: Mapping[str, str] = {"h": "W/(m^2 K)", "k": "W/(m K)", "joint": "m^2 K/W", "emissivity": "1"}
PUT_RIGHT: Mapping[str, str] = {
    "joint": "a healthy joint",
    "k": "the stated conductivity",
    "h": "the film coefficient of a healthy fin",
    "emissivity": "the stated emissivity",
    "tip": "the tip as drawn",
    "air": "the air as read",
}
WORDS_OF_TIPS: Mapping[str, str] = {
    "adiabatic": "covered or insulated",
    "convective": "free and loses heat",
    "fixed": "held at a temperature of its own",
}
