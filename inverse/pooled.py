"""Pooled estimation: what does not change from run to run is one unknown for a whole campaign.

k and the joint, say, are the same in every run, and so are the errors of the thermometers and the places of
the holes; h is each run's own. All runs together tell of the shared unknowns what none tells alone.
"""

import math
import zlib
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from finback import fast, lattice, pareto, pooled_conclusions, pooled_model, pooled_runs, proposal
from finback.candidates import enumerate_candidates
from finback.errors import ComputationError
from finback.evidence import Evidence
from finback.fast import FastPosterior
from finback.pooled_conclusions import STRANGE, Member, Pooled, chance
from finback.pooled_fit import Fitted, fit
from finback.pooled_runs import Pool
from finback.problem import Candidate

Array = NDArray[np.float64]

PAIRS, SLOW_PAIRS = 1_000_000, 100_000
"""Draws times runs that are looked at: of fins that are quick to solve, and of others."""
FEWEST_DRAWS, MOST_DRAWS = 256, 2048
POOR = 0.5  # efficiency below which a proposal is fitted again
SMALLEST_SHARE = 0.005  # probability below which a candidate has no part in the averages
AT_A_TIME = 0.05  # share of the runs that are left out in one round, at the most
MOST_LEFT_OUT = 0.2  # share of the runs beyond which it is not the runs that are wrong


def estimate(pool: Pool, seed: int) -> Pooled:
    """Estimate what the runs of a pool share, and h of each.

    Arguments: pool, as `pooled_runs.gather` returns it; seed of the draws. Raises ComputationError where no
    candidate can be fitted.
    """
    candidates = _candidates(pool)
    fitted = _fit_all(pool, candidates)
    pool, strange = _without_strange(pool, fitted[0])
    if strange:
        fitted = _fit_all(pool, candidates)
    logs = np.array([each.log_evidence for each in fitted])
    shares = np.exp(logs - logs.max()) / np.exp(logs - logs.max()).sum()
    taken = [each for each, share in zip(fitted, shares, strict=True) if share >= SMALLEST_SHARE]
    members = [Member(each, _sample(each, seed, len(taken))) for each in taken]
    members.sort(key=lambda member: -member.log_evidence)
    others = [each for each, share in zip(fitted, shares, strict=True) if share < SMALLEST_SHARE]
    return pooled_conclusions.conclude(pool, members, others, strange, seed)


def _candidates(pool: Pool) -> list[Candidate]:
    """Return the candidates: those of a fit, with normal noise and without a misfit."""
    read = any(
        sensor.name in row.readings.values
        for row in pool.used("run")
        for sensor in pool.rig.sensors_on("plate")
    )
    plain = [replace(each, heavy_tails=False) for each in enumerate_candidates(pool.rig)]
    if not read:
        plain = [replace(each, joint=False, joint_possible=False) for each in plain]
    return list(dict.fromkeys(plain))


def _fit_all(pool: Pool, candidates: Sequence[Candidate]) -> list[Fitted]:
    """Fit the candidates that can be, most probable first."""
    found = [each for each in (_fit_one(pool, candidate) for candidate in candidates) if each is not None]
    if not found:
        raise ComputationError("the pooled estimate: no candidate can be fitted to these runs.")
    return sorted(found, key=lambda each: -each.log_evidence)


def _fit_one(pool: Pool, candidate: Candidate) -> Fitted | None:
    try:
        with np.errstate(all="ignore"):
            found = fit(pooled_model.pose(pool, candidate))
    except np.linalg.LinAlgError:
        return None
    return found if math.isfinite(found.log_evidence) else None


def _without_strange(pool: Pool, fitted: Fitted) -> tuple[Pool, list[str]]:
    """Leave out runs whose readings no h of their own explains, the worst first, each time fitting again."""
    count = sum(group.size for group in fitted.model.groups)
    most = math.floor(MOST_LEFT_OUT * count)
    start, strange = pool, list[str]()
    while True:
        chances = np.full(len(pool.rows), 1.0)
        ratios = np.zeros(len(pool.rows))
        for group, square, freedom in zip(
            fitted.model.groups, fitted.solved.squares, fitted.solved.freedom, strict=True
        ):
            chances[group.runs] = chance(square, freedom)
            ratios[group.runs] = square / np.maximum(freedom, 1.0)
        wrong = np.flatnonzero(chances < STRANGE / count)
        if not len(wrong):
            return pool, strange
        worst = wrong[np.argsort(-ratios[wrong])][: max(1, math.floor(AT_A_TIME * count))]
        strange += [pool.rows[at].name for at in worst]
        left = len(pool.used("run")) - sum(pool.rows[at].use == "run" for at in worst)
        if len(strange) > most or left < pooled_runs.FEWEST_RUNS:
            return start, []
        reason = "its readings do not agree with those of the other runs, whatever its h"
        pool = pooled_runs.without(pool, dict.fromkeys(strange, reason))
        again = _fit_one(pool, fitted.model.candidate)
        if again is None:
            return start, []
        fitted = again


def _sample(fitted: Fitted, seed: int, members: int) -> FastPosterior | None:
    """Weigh draws of the shared unknowns, one candidate being one of so many; None where there are none."""
    if fitted.mode is None:
        return None
    model = fitted.model
    runs = sum(group.size for group in model.groups)
    wanted = (PAIRS if model.is_linear else SLOW_PAIRS) // (runs * members)
    stride = 1
    while lattice.POINTS // stride > min(max(wanted, FEWEST_DRAWS), MOST_DRAWS):
        stride *= 2
    number = zlib.crc32(model.candidate.name.encode())
    random = np.random.default_rng([seed, number])
    first = proposal.from_mode(fitted.mode)
    found = _weigh(fitted, first, random, stride)
    if found.khat <= fast.TRUSTED and found.efficiency >= POOR:
        return found
    adapted, _ = proposal.adapt(fitted.density, first, np.random.RandomState(random.integers(2**31)))
    again = _weigh(fitted, adapted, random, stride)
    return again if again.efficiency > found.efficiency else found


def _weigh(
    fitted: Fitted, drawn_from: proposal.Proposal, random: np.random.Generator, stride: int
) -> FastPosterior:
    """Weigh every so-manyth point of a lattice, which is one itself, as `fast.sample` does all."""
    points = lattice.draw(1, len(fitted.z) + 2, random)[::stride]
    z = drawn_from.place(points)
    log_ratios = fitted.density(z) - drawn_from.log_density(z)
    highest = float(log_ratios.max())
    if not math.isfinite(highest):
        raise ComputationError("the pooled estimate: no draw of the shared unknowns has any probability.")
    ratios, khat = pareto.smooth(np.exp(log_ratios - highest))
    n, total = len(ratios), float(ratios.sum())
    with np.errstate(divide="ignore"):  # a draw outside the posterior weighs nothing
        log_weights = np.log(ratios / total)
    error = float(ratios.std()) / (total / n) / math.sqrt(n)
    return FastPosterior(
        z=z,
        log_ratios=log_ratios,
        log_weights=log_weights,
        khat=khat,
        efficiency=float(total**2 / np.square(ratios).sum() / n),
        evidence=Evidence(highest + math.log(total / n), error),
    )
