"""Candidates: the physical models that a run is compared with, and what the readings say of each.

A rig that states its tip asks for that tip alone; one that leaves it out asks which of the three that a
finite fin can have the readings support (infinite is only taken when stated: on a long fin it is the
limit of the others, on a short one it is nothing that can be built). A sharp tip can be adiabatic only. With
a sensor on the plate each comes with and without a joint. All candidates have the same probability before
the readings.
"""

import math
import zlib
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback import diagnostics, evidence, laplace, optimum, sampling
from finback import proposal as proposals
from finback.estimate import CandidateScore
from finback.evidence import Evidence
from finback.laplace import Mode
from finback.optimum import LeastSquares
from finback.posing import is_read, pose
from finback.problem import LAW_WORDS, Candidate, Problem
from finback.proposal import Proposal
from finback.readings import Readings
from finback.rig import LawName, Rig, TipName
from finback.sampling import Chain, Settings

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

COMPARED_TIPS: tuple[TipName, ...] = ("adiabatic", "convective", "fixed")
SHARP_TIPS: tuple[TipName, ...] = ("adiabatic",)
"""What is left of them for a tip without a face: it loses no heat, whatever its coefficient, and nothing can
hold it at a temperature."""
WORTH_SAMPLING = 5.0  # nats below the best: a candidate further down has a probability below 0.007
KEPT_DRAWS = 2500  # an ensemble
LOO_DRAWS = 500  # an ensemble
LADDER_FITS = 0.1  # efficiency below which a ladder has missed its posterior: readings without any error
SMALLEST_WEIGHT = 1e-10  # of a scaled precision: what rounding leaves of it


@dataclass(frozen=True)
class Outcome:
    """What one candidate made of the readings.

    `problem` with its noise linearised; `point`, its least-squares fit; `mode`; `draws` (chains, n, p);
    `evidence`; how the draws were made: `ess_min`, `rhat_max`, `converged` (None, None, True where the
    candidate was so improbable that its draws are weighted ones).
    """

    problem: Problem
    point: LeastSquares
    mode: Mode
    draws: Array
    evidence: Evidence
    ess_min: float | None
    rhat_max: float | None
    converged: bool
    n_draws: int

    @property
    def sampled(self) -> bool:
        """Whether the draws come from MCMC."""
        return self.ess_min is not None


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
    return tuple(
        Candidate(tip, joint, reads_plate, law, named) for law in laws for tip in tips for joint in joints
    )


def compared_laws(rig: Rig) -> tuple[LawName, ...]:
    """Return the surface laws that a fit compares: the rig's own, or by what it says of the air."""
    if rig.laws is not None:
        return rig.laws
    free = rig.surroundings.driven is False or rig.exponent is not None
    return ("uniform", "free-convection") if free else ("uniform",)


def why_compared(rig: Rig, left_out: Sequence[str] = ()) -> str:
    """Return one sentence on which surface laws and tips a fit compares, and why.

    Argument: left_out, names of candidates that have more unknowns than a run has readings.
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
    few = f"; too few readings for {'; '.join(left_out)}" if left_out else ""
    return f"{told}; {tips}{few}."


def compare(
    rig: Rig, readings: Readings, seed: int, progress: Progress, settings: Settings | None = None
) -> list[Outcome]:
    """Fit every candidate to one run and return the outcomes, most probable first.

    Arguments: rig; readings; seed; progress, called with a stage and the fraction done; settings of the
    sampler. The random streams belong to seed, run and candidate, whatever else is computed.
    """
    settings = settings or Settings()
    run = zlib.crc32(readings.run.encode())
    chosen = enumerate_candidates(rig, readings)
    problems = affordable([pose(rig, readings, candidate) for candidate in chosen])
    prepared = []
    for number, problem in enumerate(problems):
        candidate = problem.candidate
        progress("comparing candidates", 0.1 * number / len(problems))
        seeds = np.random.SeedSequence([seed, run, zlib.crc32(candidate.name.encode())]).spawn(3)
        point = optimum.fit(problem)
        mode = find_mode(point)
        random = np.random.RandomState(np.random.MT19937(seeds[0]))
        fitted = _fit_proposal(point.problem, mode, random)
        quick = evidence.importance(point.problem.log_density, fitted[0], random)
        prepared.append((point, mode, fitted, quick, seeds))
    best = max(quick.evidence.log for *_, quick, _ in prepared)
    worth = [quick.evidence.log > best - WORTH_SAMPLING for *_, quick, _ in prepared]
    outcomes = []
    for (point, mode, fitted, quick, seeds), sampled in zip(prepared, worth, strict=True):
        if not sampled:
            problem = point.problem
            outcomes.append(
                Outcome(
                    problem,
                    point,
                    mode,
                    quick.draws[None],
                    quick.evidence,
                    None,
                    None,
                    True,
                    len(quick.draws),
                )
            )
            continue
        done = sum(o.sampled for o in outcomes)

        def report(fraction: float, done: int = done) -> None:
            progress("sampling", 0.1 + 0.8 * (done + fraction) / sum(worth))

        chain = sampling.sample(point.problem.log_density, *fitted, seeds[1], settings, report)
        outcomes.append(_outcome(point, mode, chain, seeds[2]))
    return sorted(outcomes, key=lambda o: -o.evidence.log)


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


def find_mode(point: LeastSquares) -> Mode:
    """Find the posterior's mode from the least-squares optimum; the scale is guessed from its information."""
    problem, n = point.problem, point.problem.n_physical
    stated = np.where(problem.is_stated[:n], 0.0, 1.0)  # stated priors are among the residuals already
    precision = point.point.jacobian.T @ point.point.jacobian + np.diag(stated / problem.prior_sd[:n] ** 2)
    scale = 1 / np.sqrt(np.diag(precision))
    weights, axes = np.linalg.eigh(precision * np.outer(scale, scale))
    root = np.zeros((len(point.z), len(point.z)))
    root[:n, :n] = scale[:, None] * (axes / np.sqrt(np.maximum(weights, SMALLEST_WEIGHT)))
    if problem.noise.estimated:
        root[n, n] = math.sqrt(0.5 / max(point.degrees_of_freedom, 1))
    start = np.clip(
        point.z, problem.prior_mean - 3 * problem.prior_sd, problem.prior_mean + 3 * problem.prior_sd
    )
    return laplace.find_mode(problem.log_density, start, root)


def _fit_proposal(problem: Problem, mode: Mode, random: np.random.RandomState) -> tuple[Proposal, float]:
    """Return a proposal fitted to the posterior, and its efficiency [1].

    An estimated noise makes the posterior a funnel, and its mode may be a spike far down in it, where plate
    and air fit their readings without any noise: a ladder starts from the whole of it.
    """
    if problem.noise.estimated:
        ladder = proposals.ladder(problem.log_density, mode)
        found = proposals.adapt(problem.log_density, ladder, random)
        if found[1] >= LADDER_FITS:
            return found
    return proposals.adapt(problem.log_density, proposals.from_mode(mode), random)


def _outcome(point: LeastSquares, mode: Mode, chain: Chain, seed: np.random.SeedSequence) -> Outcome:
    """Return the outcome of a sampled candidate, with draws enough for its quantiles."""
    problem = point.problem
    found = evidence.bridge(problem.log_density, chain, seed)
    ensembles, steps, walkers, p = chain.z.shape
    flat = chain.z.reshape(ensembles, steps * walkers, p)
    kept = flat[:, np.linspace(0, steps * walkers - 1, KEPT_DRAWS).astype(int)]
    return Outcome(
        problem, point, mode, kept, found, chain.ess_min, chain.rhat_max, chain.converged, chain.n_draws
    )


def probabilities(outcomes: Sequence[Outcome]) -> Array:
    """Return the posterior probability of each outcome's candidate, equal before the readings."""
    logs = np.array([o.evidence.log for o in outcomes])
    weights: Array = np.exp(logs - logs.max())
    shares: Array = weights / weights.sum()
    return shares


def score(outcome: Outcome, probability: float) -> CandidateScore:
    """Return the scores of one candidate; AICc is None with too few readings for it."""
    problem, point = outcome.problem, outcome.point
    n = len(problem.measured.values)
    free = int((~problem.is_stated).sum())
    z = point.z.copy()
    if problem.noise.estimated:  # the likelihood is greatest at the biased estimate of the noise
        z[-1] += 0.5 * math.log(max(point.degrees_of_freedom, 1) / n)
    deviance = -2 * float(problem.log_likelihood(z[None])[0])
    spare = n - free - 1
    stride = max(1, outcome.draws.shape[1] // LOO_DRAWS)
    thinned = outcome.draws[:, ::stride]
    pointwise = problem.pointwise(thinned.reshape(-1, thinned.shape[-1])).reshape(*thinned.shape[:2], n)
    loo, _ = diagnostics.loo(pointwise)
    return CandidateScore(
        name=problem.candidate.name,
        probability=probability,
        log_evidence=outcome.evidence.log,
        log_evidence_error=outcome.evidence.error,
        loo=loo,
        aicc=deviance + 2 * free + 2 * free * (free + 1) / spare if spare > 0 else None,
        bic=deviance + free * math.log(n),
    )
