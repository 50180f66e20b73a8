"""The fast route beside millions of plain draws; hard posteriors: right, or flagged and then right by MCMC.

Rigs are invented, but for the bundled ones, whose sources stand beside them.
"""

from collections.abc import Iterator

import numpy as np
import pytest
from rigs import Truth, draw, pin_rig

from finback import candidates, fast, posing, readings, rig, routes
from finback.datasets import path
from finback.problem import Candidate, Problem
from finback.proposal import Proposal
from finback.quantity import Quantity
from finback.sampling import Settings

BLOCK = 100_000
BATCHES = 40
REFERENCE, HARD = 4_000_000, 1_000_000  # plain draws
KNOWN = Quantity(167.0, 8.35)
THREE = {"holes": (0.01, 0.05, 0.1), "places": ("air",), "conductivity": KNOWN}
HARD_CASES = {
    "no heat, k hardly known": (
        {"places": ("plate", "air"), "conductivity": Quantity(167.0, 80.0)},
        Truth(),
    ),
    "an unresolved joint": ({"conductivity": KNOWN}, Truth(joint=1e-6)),
    "a joint of nothing": ({"conductivity": KNOWN}, Truth(joint=0.0)),
    "three thermocouples": (THREE, Truth(joint=None)),
    "three, and an unstated noise": (THREE | {"noise": None, "calibration": 0.0}, Truth(joint=None)),
}


def bundled(name: str) -> Problem:
    described = rig.read(path(name) / "rig.toml")
    run = readings.read(path(name) / "readings.csv", described).pick(None)
    tip = described.tip or "convective"
    chosen = next(c for c in candidates.enumerate_candidates(described, run) if c.tip == tip)
    return posing.pose(described, run, chosen)


def weigh(problem: Problem) -> routes.Route:
    return routes.weigh(problem, np.random.SeedSequence(51))


def blocks(problem: Problem, proposal: Proposal, draws: int) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Yield plain pseudo-random draws of a proposal and their log ratios."""
    random = np.random.RandomState(52)
    for _ in range(draws // BLOCK):
        z = proposal.draw(BLOCK, random)
        yield z, problem.log_density(z) - proposal.log_density(z)


def reference(problem: Problem, proposal: Proposal, draws: int) -> tuple[np.ndarray, np.ndarray]:
    """Means and standard deviations by plain draws, their weights neither smoothed nor cut."""
    highest, total, first, second = -np.inf, 0.0, 0.0, 0.0
    for z, ratios in blocks(problem, proposal, draws):
        top = max(highest, float(ratios.max()))
        weights, shrunk = np.exp(ratios - top), np.exp(highest - top)
        total = total * shrunk + weights.sum()
        first = first * shrunk + weights @ z
        second = second * shrunk + weights @ np.square(z)
        highest = top
    mean = first / total
    return mean, np.sqrt(second / total - np.square(mean))


def widened(proposal: Proposal, factor: float) -> Proposal:
    """A wider proposal than the route's own, so that a tail that it lacks would show."""
    return Proposal(proposal.centres, factor * proposal.roots, proposal.shares)


@pytest.mark.slow
@pytest.mark.parametrize("name", ["aluminium-rod", "bench-pin", "copper-pin"])
def test_the_fast_route_agrees_with_four_million_draws(name: str) -> None:
    route = weigh(bundled(name))
    mean, sd = reference(route.point.problem, widened(route.proposal, 1.2), REFERENCE)
    assert np.all(np.abs(route.fast.mean(route.fast.z) - mean) < 0.02 * sd)
    assert route.fast.sd(route.fast.z) == pytest.approx(sd, rel=0.02)


@pytest.mark.slow
@pytest.mark.parametrize("name", HARD_CASES)
def test_a_hard_posterior_is_right_or_flagged_and_then_right_by_mcmc(name: str) -> None:
    changes, true = HARD_CASES[name]
    described = pin_rig(**changes)
    run, _ = draw(described, true, np.random.default_rng(53))
    plate = true.joint is not None
    route = weigh(posing.pose(described, run, Candidate("convective", plate, plate)))
    mean, sd = reference(route.point.problem, widened(route.proposal, 1.3), HARD)
    found_mean, found_sd = route.fast.mean(route.fast.z), route.fast.sd(route.fast.z)
    trusted = np.maximum(route.fast.khat_of(route.fast.z), route.fast.khat) <= fast.TRUSTED
    assert np.all(np.abs(found_mean - mean)[trusted] < 0.05 * sd[trusted])
    assert found_sd[trusted] == pytest.approx(sd[trusted], rel=0.05)
    outcome = route.sampled(Settings(), lambda _: None)
    batches = outcome.draws.reshape(BATCHES, -1, outcome.draws.shape[-1])
    assert outcome.converged
    squares = np.square(batches - mean).mean(axis=1)  # whose scatter tells how well a heavy tail is known
    wanted = ((batches.mean(axis=1), mean, 0.1 * sd), (squares, np.square(sd), 0.3 * np.square(sd)))
    for found, expected, largest in wanted:
        scatter = found.std(axis=0, ddof=1) / np.sqrt(BATCHES)
        assert np.all(np.abs(found.mean(axis=0) - expected) < 4 * scatter)
        assert np.all(scatter < largest)  # or nothing would be told: three readings leave a heavy tail
