"""Faults of the measurement: which readings of a run are wrong, by the evidence of the readings themselves.

Every fit looks for them. A temperature that is surely wrong is set aside, two readings that are surely
exchanged are put back, and both are said; what is only likely is said and nothing more.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import candidates, checks, hypotheses, optimum, posing
from finback.errors import InputError
from finback.findings import Finding, Severity
from finback.hypotheses import Base, Hypothesis, State
from finback.models.constants import ZERO_CELSIUS
from finback.optimum import LeastSquares
from finback.quantity import format_number
from finback.readings import Readings
from finback.rig import Rig
from finback.suspects import Suspect

Array = NDArray[np.float64]
Key = tuple[str, str | None, str | None]

SURE = 0.9  # probability from which a reading is set aside
LIKELY = 0.5  # and above which it is said that it is wrong
ALSO = 0.1  # share of that, from which another kind of error is named beside the likeliest
SCATTER = ""  # stands for all sensors along the fin
WORTH_A_LOOK = 3.0  # nats that one fault would have to gain at the fit, by linear algebra
RARE = 4.5  # the same, for what is wrong with one of many sensors, and so less likely of each


@dataclass(frozen=True, slots=True)
class Suspicion:
    """How probable it is that something is wrong, alone or with another thing.

    `suspect`; `probability`; `error` [K, W] of its reading and the standard uncertainty `sd` of that, both 0
    where it has none; `best`, the likeliest hypothesis with it.
    """

    suspect: Suspect
    probability: float
    error: float
    sd: float
    best: Hypothesis

    @property
    def base(self) -> Base:
        """The likeliest candidate with it."""
        return self.best.base

    @property
    def shift(self) -> float | None:
        """How far [m] beyond its place the hole must lie for that, None where the fin has no such place."""
        if self.suspect.sensor is None or self.suspect.kind not in ("offset", "shift"):
            return None
        names = [sensor.name for sensor in self.base.problem.measured.sensors]
        at = names.index(self.suspect.sensor)
        slope, place = float(self.base.slopes[at]), self.base.problem.measured.sensors[at].position
        shift = self.error / slope if slope != 0 else math.inf
        there = place is not None and 0 <= place + shift <= self.base.problem.rig.length
        return shift if there else None


@dataclass(frozen=True)
class Search:
    """What was found: `suspicions`, likeliest first; `rig` and `readings` to go on with; `findings`."""

    suspicions: tuple[Suspicion, ...]
    rig: Rig
    readings: Readings
    findings: tuple[Finding, ...]


def search(rig: Rig, readings: Readings, *, aside: bool = True) -> Search:
    """Look for wrong readings in a run, and return the readings without those that are surely wrong.

    Arguments: rig; readings, checked against it; aside, whether any are to be set aside. What is set aside
    keeps its reason. Nothing is where too few readings would be left, where the whole profile departs from
    every model, so that no reading stands out from anything known, or where the rig asks for noise with heavy
    tails, which makes little of a wrong reading by itself. Where the best fit gives no cause for suspicion
    nothing is weighed.
    """
    chosen = candidates.enumerate_candidates(replace(rig, noise=("normal",)), readings)
    problems = candidates.affordable([posing.pose(rig, readings, each) for each in chosen])
    points = [optimum.fit(problem) for problem in problems]
    if not is_suspicious(min(points, key=_deviance)):
        return Search((), rig, readings, ())
    found = [each for point in points for each in hypotheses.weigh(hypotheses.base(point), [State()])]
    suspicions = tuple(suspicions_of(found))
    clean: Readings = readings
    changed: Mapping[str, str] = {}
    bent = sum(each.probability for each in suspicions if each.suspect.kind == "misfit") > LIKELY
    if aside and not bent and "heavy-tailed" not in rig.noise:
        clean, changed = _without(rig, readings, suspicions)
        scattered = [each for each in suspicions if each.suspect.kind == "scatter"]
        if scattered and scattered[0].probability >= SURE:
            rig = _noise_unstated(rig)
            changed = {**changed, SCATTER: "the noise is estimated from them instead"}
    return Search(suspicions, rig, clean, tuple(findings(suspicions, changed)))


def _noise_unstated(rig: Rig) -> Rig:
    """Return a rig whose thermometers along the fin scatter as they do, and not as is stated."""
    return replace(
        rig,
        sensors={
            name: replace(sensor, noise=None, noise_relative=None) if sensor.place == "fin" else sensor
            for name, sensor in rig.sensors.items()
        },
    )


def _deviance(point: LeastSquares) -> float:
    """Return how badly a fit does, as BIC counts it: up to a constant, and its unknowns against it."""
    problem = point.problem
    return problem.n_physical * math.log(len(problem.measured.values)) - 2 * float(
        problem.log_likelihood(point.z[None])[0]
    )


def is_suspicious(point: LeastSquares) -> bool:
    """Tell whether one wrong reading or swap could explain a run much better than a fit does.

    By linear algebra at the fit, where P = C^-1 - C^-1 J (J' C^-1 J)^-1 J' C^-1 weighs the readings: freeing
    reading i gains (P r)_i^2 / (2 P_ii), and adding d to them loses d' P r + d' P d / 2.
    """
    problem, n = point.problem, len(point.problem.measured.values)
    variances = np.broadcast_to(point.noise.variances(point.sigma), n)
    whiten = (point.noise.basis / np.sqrt(variances)).T  # rows: whitened readings
    axes = np.linalg.qr(point.point.jacobian)[0][:n]
    weights = whiten.T @ (np.eye(n) - axes @ axes.T) @ whiten
    pulls = whiten.T @ point.point.residuals[:n]
    diagonal = np.diag(weights)
    told = diagonal > 1e-9 * diagonal.max()
    gains = 0.5 * np.square(pulls[told]) / diagonal[told]
    fin = len(problem.measured.positions)
    along = problem.measured.values[:fin]
    apart = along - along[:, None]
    steps = pulls[:fin, None] - pulls[:fin]
    bends = diagonal[:fin, None] + diagonal[:fin] - 2 * weights[:fin, :fin]
    swaps = -(apart * steps + 0.5 * np.square(apart) * bends)
    needed = np.array(
        [RARE if s.place in ("fin", "plate") else WORTH_A_LOOK for s in problem.measured.sensors]
    )
    return bool((gains > needed[told]).any() or swaps.max(initial=0.0) > RARE)


def probabilities(found: Sequence[Hypothesis]) -> Array:
    """Return the probability of each hypothesis."""
    logs = np.array([each.log_weight for each in found])
    weights = np.exp(logs - logs.max())
    return np.asarray(weights / weights.sum())


def key(suspect: Suspect) -> Key:
    """Return what tells one suspect from another, whatever the candidate."""
    return suspect.kind, suspect.sensor, suspect.other


def suspicions_of(found: Sequence[Hypothesis]) -> list[Suspicion]:
    """Return each suspect with the probability of all hypotheses that it is part of, likeliest first."""
    shares = probabilities(found)
    with_it: dict[Key, list[tuple[float, Suspect, float, float, Hypothesis]]] = {}
    for each, share in zip(found, shares.tolist(), strict=True):
        names = [sensor.name for sensor in each.base.problem.measured.sensors]
        errors = dict(zip([names[at] for at in each.freed], range(len(each.freed)), strict=True))
        for suspect in each.suspects:
            at = errors.get(suspect.sensor or "") if suspect.kind != "swap" else None
            error = 0.0 if at is None else float(each.errors[at])
            variance = 0.0 if at is None else float(each.error_spread[at, at])
            with_it.setdefault(key(suspect), []).append((share, suspect, error, variance, each))
    suspicions = []
    for parts in with_it.values():
        weights = np.array([part[0] for part in parts])
        total = float(weights.sum())
        if total <= 0:
            continue
        errors_, variances = (np.array([part[i] for part in parts]) for i in (2, 3))
        mean = float(weights @ errors_ / total)
        sd = math.sqrt(float(weights @ (variances + np.square(errors_ - mean)) / total))
        likeliest = parts[int(np.argmax(weights))]
        suspicions.append(Suspicion(likeliest[1], min(total, 1.0), mean, sd, likeliest[4]))
    return sorted(suspicions, key=lambda each: -each.probability)


def _of_sensors(suspicions: Sequence[Suspicion]) -> Mapping[str, list[Suspicion]]:
    """Return what is suspected of each reading by itself, by sensor, likeliest kind first."""
    found: dict[str, list[Suspicion]] = {}
    for each in suspicions:
        if each.suspect.kind in ("offset", "shift", "air", "heat") and each.suspect.sensor is not None:
            found.setdefault(each.suspect.sensor, []).append(each)
    return found


def _without(
    rig: Rig, readings: Readings, suspicions: Sequence[Suspicion]
) -> tuple[Readings, Mapping[str, str]]:
    """Return the readings without those that are surely wrong, and what was done, by sensor."""
    values, excluded, done = dict(readings.values), dict(readings.excluded), {}
    for name, own in _of_sensors(suspicions).items():
        probability = sum(each.probability for each in own)
        if probability >= SURE and rig.sensors[name].reads_temperature:
            excluded[name] = f"wrong with probability {_shown(probability)}, by the other readings"
            done[name] = "it is set aside"
    for each in suspicions:
        first, other = each.suspect.sensor, each.suspect.other
        if each.suspect.kind == "swap" and each.probability >= SURE and first and other:
            values[first], values[other] = values[other], values[first]
            done[first] = "they are put back"
    if not done:
        return readings, done
    clean = replace(readings, values=values, excluded=excluded)
    try:
        checks.check_run(rig, clean)
    except InputError:  # too few readings would be left
        return readings, {}
    return clean, done


def findings(
    suspicions: Sequence[Suspicion], done: Mapping[str, str], heaters: bool = False
) -> list[Finding]:
    """Return the findings of what is likely wrong.

    Arguments: suspicions; done, by sensor, what was done about it; heaters, whether those that limit the heat
    are spoken of: a fit has a finding of its own for them.
    """
    found = []
    for name, own in _of_sensors(suspicions).items():
        total = sum(each.probability for each in own)
        limits = any(name == sensor.name for sensor in own[0].base.problem.measured.bounds)
        if total > LIKELY and (heaters or not limits):
            found += _of_reading(name, own, total, done.get(name))
    for each in suspicions:
        if each.suspect.kind == "swap" and each.probability > LIKELY:
            found.append(_of_swap(each, done.get(each.suspect.sensor or "")))
        elif each.suspect.kind == "scatter" and each.probability > LIKELY:
            found.append(_of_scatter(each, done.get(SCATTER)))
    return found


def _of_reading(name: str, own: Sequence[Suspicion], total: float, done: str | None) -> list[Finding]:
    """Return the finding of a reading that is likely wrong, and one for another way in which it may be."""
    first = own[0]
    ending = f"; {done}" if done else ""
    message = f"{in_words(first)} (probability {_shown(total)})"
    evidence = {"probability": total, "error": first.error, "sd": first.sd}
    also = [each for each in own[1:] if each.probability > ALSO * total]
    if also:
        message += f"; the readings cannot tell that from this: {_named(also[0])}"
    found = [Finding(first.suspect.code, _severity(total), f"{message}{ending}.", name, evidence)]
    for each in also:
        message = f"{in_words(each)} (probability {_shown(each.probability)})."
        evidence = {"probability": each.probability, "error": each.error, "sd": each.sd}
        found.append(Finding(each.suspect.code, "note", message, name, evidence))
    return found


def in_words(each: Suspicion) -> str:
    """Return what is wrong with a reading, how far it is off and what else would do the same."""
    name, error = each.suspect.sensor, f"{abs(each.error):.2g} ± {each.sd:.1g} K"
    if each.suspect.kind == "swap":
        return f"{name} and {each.suspect.other} are swapped: each reads what the other should"
    if each.suspect.kind == "scatter" and each.base.scatter is not None:
        stated = math.sqrt(float(np.trace(each.base.scatter)) / len(each.base.problem.measured.positions))
        return (
            f"The thermometers along the fin scatter by {_scatter(each):.2g} K about every model, where "
            f"{stated:.2g} K is stated of them and their holes"
        )
    higher = "higher" if each.error > 0 else "lower"
    if each.suspect.kind == "offset":
        return f"{name} reads {error} {higher} than the other readings say{_as_a_shift(each)}"
    if each.suspect.kind == "shift":
        return f"{name} lies {_as_place(each)} its place, or else it reads {error} {higher} than it should"
    if each.suspect.kind == "air":
        measured = each.base.problem.measured
        read = next(v for s, v in zip(measured.sensors, measured.values, strict=True) if s.name == name)
        profile = float(read) - each.error - ZERO_CELSIUS
        return (
            f"The profile speaks of air at {profile:.1f} ± {each.sd:.1g} °C, and {name} reads "
            f"{abs(each.error):.2g} K {'more' if each.error > 0 else 'less'}"
        )
    if any(name == sensor.name for sensor in each.base.problem.measured.bounds):
        return f"More heat flows than {name} supplies: it is not all that heats the fin, or reads too little"
    more = "more" if each.error > 0 else "less"
    return f"{name} reads {format_number(abs(each.error))} ± {each.sd:.1g} W {more} than flows into the fin"


def _as_a_shift(each: Suspicion) -> str:
    shift = each.shift
    if shift is None:
        return ""
    return f", as if its hole were {format_number(1e3 * abs(shift), 2)} mm {_side(shift)} the base"


def _as_place(each: Suspicion) -> str:
    shift = each.shift
    if shift is None:
        return "off"
    return f"{format_number(1e3 * abs(shift), 2)} mm {'beyond' if shift > 0 else 'short of'}"


def _side(shift: float) -> str:
    return "further from" if shift > 0 else "nearer to"


def _named(each: Suspicion) -> str:
    shift = each.shift
    if each.suspect.kind == "shift" and shift is not None:
        return f"its hole lies {format_number(1e3 * abs(shift), 2)} mm {_side(shift)} the base than stated"
    return f"its thermometer is {abs(each.error):.2g} K off"


def _of_swap(each: Suspicion, done: str | None) -> Finding:
    message = f"{in_words(each)} (probability {_shown(each.probability)}){f'; {done}' if done else ''}."
    evidence: dict[str, float | str] = {"probability": each.probability, "other": str(each.suspect.other)}
    return Finding(each.suspect.code, _severity(each.probability), message, each.suspect.sensor, evidence)


def _of_scatter(each: Suspicion, done: str | None) -> Finding:
    message = f"{in_words(each)} (probability {_shown(each.probability)}){f'; {done}' if done else ''}."
    evidence = {"probability": each.probability, "scatter": _scatter(each)}
    return Finding(each.suspect.code, "caution", message, evidence=evidence)


def _scatter(each: Suspicion) -> float:
    """Return how far the readings along the fin scatter about the likeliest model [K]."""
    best, fin = each.best, len(each.base.problem.measured.positions)
    predicted = best.base.problem.predict(best.mean[None])[0, : len(best.values)]
    return float(np.sqrt(np.mean(np.square(best.values - predicted)[:fin])))


def _severity(probability: float) -> Severity:
    return "fault" if probability >= SURE else "caution"


def _shown(probability: float) -> str:
    """Return a probability with two digits, never as 1: nothing is that sure."""
    return "above 0.99" if probability > 0.99 else f"{probability:.2f}"
