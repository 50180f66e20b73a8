"""Candidates: the physical models that a run is compared with, and what the readings say of each.

A rig that states its tip asks for that tip alone; one that leaves it out asks which of the three that a
finite fin can have the readings support (infinite is only taken when stated: on a long fin it is the
limit of the others, on a short one it is nothing that can be built). A sharp tip can be adiabatic only. With
a sensor on the plate each comes with and without a joint. Those that may matter come once more with a smooth
misfit. Before the readings all are equally probable, with a misfit a tenth as much.
"""

import math
import zlib
from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from finback import diagnostics, fast, routes
from finback.estimate import CandidateScore
from finback.misfit import FEWEST_SENSORS
from finback.posing import integrated_log_likelihood, is_read, pose
from finback.problem import LAW_WORDS, ODDS_OF_MISFIT, Candidate, Problem
from finback.readings import Readings
from finback.rig import LawName, Rig, TipName
from finback.routes import Outcome, Route
from finback.sampling import Settings

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

COMPARED_TIPS: tuple[TipName, ...] = ("adiabatic", "convective", "fixed")
SHARP_TIPS: tuple[TipName, ...] = ("adiabatic",)
"""What is left of them for a tip without a face: it loses no heat, whatever its coefficient, and nothing can
hold it at a temperature."""
WORTH_SAMPLING = 5.0  # nats below the best: a candidate further down has a probability below 0.007
WORTH_SMOOTHING = 6.0  # nats below the best, by an estimate: one more, as it may be off
LOO_DRAWS = 500  # an ensemble


def enumerate_candidates(rig: Rig, readings: Readings | None = None) -> tuple[Candidate, ...]:
    """Return the candidates that a fit compares, for one run or for any run that reads every sensor."""
    tips = rig.tips or COMPARED_TIPS if rig.tip is None else (rig.tip,)
    if rig.tip is None and not rig.has_tip_face:
        tips = SHARP_TIPS
    laws = compared_laws(rig)
    named = len(laws) > 1 or laws != ("uniform",)
    reads_plate = any(
        s.place == "plate" and (readings is None or is_read(s, readings)) for s in rig.sensors.values()
    )
    joints = (True, False) if reads_plate else (False,)
    physics = [
        Candidate(tip, joint, reads_plate, law, named) for law in laws for tip in tips for joint in joints
    ]
    return tuple(
        replace(each, heavy_tails=noise == "heavy-tailed") for noise in rig.noise for each in physics
    )


def compared_laws(rig: Rig) -> tuple[LawName, ...]:
    """Return the surface laws that a fit compares: the rig's own, or by what it says of the air."""
    if rig.laws is not None:
        return rig.laws
    free = rig.surroundings.driven is False or rig.exponent is not None
    return ("uniform", "free-convection") if free else ("uniform",)


def why_compared(rig: Rig, left_out: Sequence[str] = (), smooth: bool = False) -> str:
    """Return one sentence on which surface laws and tips a fit compares, and why.

    Arguments: left_out, names of candidates that have more unknowns than a run has readings; smooth, whether
    some are compared with a smooth misfit.
    """
    laws = compared_laws(rig)
    words = " and ".join(LAW_WORDS[law] for law in laws)
    if rig.laws is not None:
        told = f"Surface laws as the rig lists them: {words}"
    elif len(laws) > 1:
        told = f"Surface laws: {words}, since the rig says that the air is still"
    else:
        told = f"Surface law: {words} alone, since the rig does not say that the air is still"
    if rig.emissivity is not None:
        told += "; each radiates with the stated emissivity"
    if rig.tip is not None:
        tips = "the tip is as stated"
    elif not rig.has_tip_face:
        tips = "a sharp tip is adiabatic"
    elif rig.tips is not None:
        tips = "tips as the rig lists them"
    else:
        tips = "the rig leaves the tip open, so all that a finite fin can have are compared"
    noise = ""
    if "heavy-tailed" in rig.noise:
        kinds = "with normal and with heavy-tailed" if "normal" in rig.noise else "with heavy-tailed"
        noise = f"; each {kinds} noise along the fin"
    also = "; what may matter also with a smooth misfit of its profile" if smooth else ""
    few = f"; too few readings for {'; '.join(left_out)}" if left_out else ""
    return f"{told}; {tips}{noise}{also}{few}."


def compare(
    rig: Rig, readings: Readings, seed: int, progress: Progress, settings: Settings | None = None
) -> list[Outcome]:
    """Fit every candidate to one run and return the outcomes, most probable first.

    The fast route weighs all of them; the most probable one is sampled by MCMC as well, and so is any other
    that may matter and whose k-hat the fast route cannot be trusted with.

    Arguments: rig; readings; seed; progress, called with a stage and the fraction done; settings of the
    sampler. The random streams belong to seed, run and candidate, whatever else is computed.
    """
    settings = settings or Settings()
    weighed = weigh(rig, readings, seed, progress)
    best = max(weighed, key=lambda route: route.log_weight)
    worth = [route is best or (matters(route, weighed) and route.khat > fast.TRUSTED) for route in weighed]
    outcomes = []
    for route, sampled in zip(weighed, worth, strict=True):
        if not sampled:
            outcomes.append(route.outcome())
            continue
        done = sum(o.sampled for o in outcomes)

        def report(fraction: float, done: int = done) -> None:
            progress("sampling", 0.3 + 0.6 * (done + fraction) / sum(worth))

        outcomes.append(route.sampled(settings, report))
    return sorted(outcomes, key=lambda o: -o.log_weight)


def weigh(
    rig: Rig, readings: Readings, seed: int, progress: Progress, smooth_within: float = WORTH_SMOOTHING
) -> list[Route]:
    """Weigh every candidate by the fast route, and those that may matter with a smooth misfit as well.

    Arguments: as those of `compare`; smooth_within [nats] below the best, by an estimate, a misfit matters.
    """
    run = zlib.crc32(readings.run.encode())

    def one(problem: Problem, best: float, start: Array | None = None) -> Route:
        number = zlib.crc32(problem.candidate.name.encode())
        return routes.weigh(problem, np.random.SeedSequence([seed, run, number]), start, best)

    chosen = enumerate_candidates(rig, readings)
    problems = affordable([pose(rig, readings, candidate) for candidate in chosen])
    plain: list[Route] = []
    best = -math.inf
    for number, problem in enumerate(problems):
        progress("comparing candidates", 0.2 * number / len(problems))
        plain.append(one(problem, best))
        best = max(best, plain[-1].log_weight)
    smoothed = []
    bent = worth_smoothing(plain, smooth_within)
    for number, route in enumerate(bent):
        progress("comparing candidates", 0.2 + 0.1 * number / len(bent))
        posed = pose(rig, readings, replace(route.point.problem.candidate, misfit=True))
        start = np.insert(route.point.z, posed.n_physical, posed.prior_mean[posed.n_physical])
        smoothed.append(one(posed, best, start))
    weighed = plain + smoothed
    worth = [matters(route, weighed) and route.khat > fast.TRUSTED for route in weighed]
    return [route.steadied() if unsteady else route for route, unsteady in zip(weighed, worth, strict=True)]


def matters(route: Route, weighed: Sequence[Route]) -> bool:
    """Tell whether a candidate has a share in the averages that may be seen."""
    return route.log_weight > max(each.log_weight for each in weighed) - WORTH_SAMPLING


def worth_smoothing(weighed: Sequence[Route], within: float = WORTH_SMOOTHING) -> list[Route]:
    """Return the candidates that may matter with a smooth misfit.

    None where few sensors are on the fin, nor where the noise is estimated: it then holds what a model
    misses, and the readings cannot tell the two apart. How much it would gain is judged by linear algebra at
    the fit.
    """
    weighed = [route for route in weighed if not route.point.problem.candidate.heavy_tails]
    if not weighed:
        return []
    problem = weighed[0].point.problem
    if len(problem.measured.positions) < FEWEST_SENSORS or problem.noise.estimated:
        return []
    odds = math.log(ODDS_OF_MISFIT)
    smoothed = [route.log_weight + routes.misfit_gain(route) + odds for route in weighed]
    best = max(*smoothed, *(route.log_weight for route in weighed))
    return [route for route, log in zip(weighed, smoothed, strict=True) if log > best - within]


def affordable(problems: Sequence[Problem]) -> list[Problem]:
    """Return the problems that have no more unknowns than readings, or those with the fewest of all.

    What is known beforehand is no unknown, and of h and k only one is where nothing parts them.
    """

    def missing(problem: Problem) -> int:
        read = {sensor.place for sensor in problem.measured.sensors}
        unparted = problem.rig.conductivity is None and not any(map(problem.rig.tells_heat, read))
        unknowns = int((~problem.is_stated).sum()) - unparted
        return max(unknowns - len(problem.measured.values), 0)

    fewest = min(map(missing, problems))
    return [problem for problem in problems if missing(problem) <= fewest]


def probabilities(outcomes: Sequence[Outcome]) -> Array:
    """Return the posterior probability of each outcome's candidate."""
    logs = np.array([o.log_weight for o in outcomes])
    weights: Array = np.exp(logs - logs.max())
    shares: Array = weights / weights.sum()
    return shares


def score(outcome: Outcome, probability: float, leave_out: bool = True) -> CandidateScore:
    """Return the scores of one candidate; AICc is None with too few readings for it.

    `leave_out`: whether the leave-one-out score is worked out, which takes longer than all others.
    """
    problem, point = outcome.problem, outcome.point
    n = len(problem.measured.values)
    free = int((~problem.is_stated).sum())
    z = point.z.copy()
    if problem.noise.estimated:  # the likelihood is greatest at the biased estimate of the noise
        z[-1] += 0.5 * math.log(max(point.degrees_of_freedom, 1) / n)
    deviance = -2 * integrated_log_likelihood(problem, z)
    spare = n - free - 1
    return CandidateScore(
        name=problem.candidate.name,
        probability=probability,
        log_evidence=outcome.evidence.log,
        log_evidence_error=outcome.evidence.error,
        loo=_loo(outcome) if leave_out else None,
        aicc=deviance + 2 * free + 2 * free * (free + 1) / spare if spare > 0 else None,
        bic=deviance + free * math.log(n),
    )


def _loo(outcome: Outcome) -> float:
    """Return the leave-one-out score [nats] from some of an outcome's draws."""
    stride = max(1, outcome.draws.shape[1] // LOO_DRAWS)
    thinned = outcome.draws[:, ::stride]
    pointwise = outcome.problem.pointwise(thinned.reshape(-1, thinned.shape[-1]))
    return diagnostics.loo(pointwise.reshape(*thinned.shape[:2], -1))[0]
