"""Candidates: which are compared, their scores against exact ones, whose random numbers are whose."""

import math

import numpy as np
import pytest
from rigs import TRUTH, Truth, draw, exact_readings, pin_rig
from scipy.stats import multivariate_normal

from finback import candidates, diagnostics, fast, optimum, posing, routes
from finback import proposal as proposals
from finback.problem import Candidate
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig
from finback.sampling import Settings

STATED_K = Quantity(167.0, 8.35)
PLAIN = Candidate("convective", joint=False, joint_possible=False)


def quiet(_stage: str, _fraction: float) -> None:
    pass


def names(rig: Rig, readings: Readings | None = None) -> list[str]:
    return [c.name for c in candidates.enumerate_candidates(rig, readings)]


def test_a_stated_tip_asks_for_that_tip_alone() -> None:
    assert names(pin_rig(places=("air",), tip="adiabatic")) == ["adiabatic tip"]
    assert names(pin_rig(places=("air",), tip="infinite")) == ["infinite tip"]


def test_a_plate_sensor_asks_whether_there_is_a_joint() -> None:
    rig = pin_rig(tip="convective")
    assert names(rig) == ["convective tip, joint", "convective tip, no joint"]
    exact = exact_readings(rig).values
    unread = Readings("r", {name: value for name, value in exact.items() if name != "TP"})
    excluded = Readings("r", exact, excluded={"TP": "came off"})
    for readings in (unread, excluded):
        assert names(rig, readings) == ["convective tip"]


def test_an_unstated_tip_is_compared() -> None:
    expected = {
        f"{tip} tip, {joint}"
        for tip in ("adiabatic", "convective", "fixed")
        for joint in ("joint", "no joint")
    }
    assert set(names(pin_rig())) == expected


@pytest.fixture(scope="module")
def outcomes() -> list[routes.Outcome]:
    rig = pin_rig(places=("air",), position_sd=0.0, conductivity=STATED_K)
    readings, _ = draw(rig, Truth(joint=None), np.random.default_rng(8))
    return candidates.compare(rig, readings, 1, quiet)


def test_outcomes_come_most_probable_first(outcomes: list[routes.Outcome]) -> None:
    odds = [0.1 if o.problem.candidate.misfit else 1.0 for o in outcomes]
    logs = [o.evidence.log + math.log(odd) for o, odd in zip(outcomes, odds, strict=True)]
    assert logs == sorted(logs, reverse=True)
    found = candidates.probabilities(outcomes)
    np.testing.assert_allclose(found, np.exp(logs) / np.exp(logs).sum(), rtol=1e-9)
    assert outcomes[0].sampled


def test_scores_follow_their_definitions(outcomes: list[routes.Outcome]) -> None:
    outcome = next(o for o in outcomes if o.problem.candidate.name == "convective tip")
    problem, point = outcome.problem, outcome.point
    found = candidates.score(outcome, 0.5)
    covariance = problem.noise.covariance(0.0)
    predicted = problem.predict(point.z[None])[0]
    likelihood = multivariate_normal.logpdf(problem.measured.values, predicted, covariance)
    n, free = 9, 3  # h, base and air temperature; k is stated
    assert found.aicc == pytest.approx(
        -2 * likelihood + 2 * free + 2 * free * (free + 1) / (n - free - 1), rel=1e-9
    )
    assert found.bic == pytest.approx(-2 * likelihood + free * math.log(n), rel=1e-9)
    assert (found.probability, found.log_evidence) == (0.5, outcome.evidence.log)


def test_leave_one_out_is_the_evidence_that_each_reading_adds(outcomes: list[routes.Outcome]) -> None:
    # p(y_i | the others) = Z / Z without y_i, by importance sampling: exact, with no pointwise density in it
    outcome = next(o for o in outcomes if o.problem.candidate.name == "convective tip")
    rig, readings = outcome.problem.rig, outcome.problem.readings

    def log_evidence(without: str | None) -> float:
        excluded = {} if without is None else {without: "left out"}
        point = optimum.fit(posing.pose(rig, Readings("r", readings.values, excluded=excluded), PLAIN))
        log_density, random = point.problem.log_density, np.random.RandomState(1)
        fitted, _ = proposals.adapt(log_density, proposals.from_mode(routes.find_mode(point)), random)
        return fast.sample(log_density, fitted, np.random.default_rng(1)).evidence.log

    whole = log_evidence(None)
    # without its only sensor the air has another prior; with it, readings along the fin alone are left out
    fin = [s.name for s in outcome.problem.measured.sensors if s.place == "fin"]
    exact = sum(whole - log_evidence(name) for name in fin)
    flat = outcome.draws[:, ::5]
    pointwise = outcome.problem.pointwise(flat.reshape(-1, flat.shape[-1])).reshape(*flat.shape[:2], -1)
    found, worst = diagnostics.loo(pointwise[..., : len(fin)])
    assert worst < 0.9
    assert found == pytest.approx(exact, abs=0.15)
    assert whole == pytest.approx(outcome.evidence.log, abs=0.03)


def test_too_few_readings_have_no_aicc() -> None:
    rig = pin_rig(holes=(0.01, 0.05, 0.1), places=("air",), conductivity=STATED_K, tip="convective")
    (outcome,) = candidates.compare(rig, exact_readings(rig, Truth(joint=None)), 1, quiet)
    assert candidates.score(outcome, 1.0).aicc is None  # four readings, three unknowns
    assert candidates.score(outcome, 1.0).bic is not None


def test_an_improbable_candidate_is_weighed_and_not_sampled() -> None:
    rig = pin_rig(conductivity=STATED_K, tip="convective")
    found = candidates.compare(rig, exact_readings(rig), 1, quiet)
    assert [o.sampled for o in found] == [True, False, False]
    assert candidates.probabilities(found)[2] < 1e-6
    assert found[2].problem.candidate.name == "convective tip, no joint"
    assert found[2].draws.ndim == 3


def test_random_numbers_belong_to_seed_run_and_candidate() -> None:
    both = pin_rig(conductivity=STATED_K)
    one = pin_rig(conductivity=STATED_K, tip="convective")
    readings = exact_readings(both)
    quick = Settings(block=20, max_steps=20)

    def draws(rig: Rig, run: str = "exact", seed: int = 1) -> np.ndarray:
        found = candidates.compare(rig, Readings(run, readings.values), seed, quiet, quick)
        return next(o.draws for o in found if o.problem.candidate.name == "convective tip, joint")

    alone = draws(one)
    np.testing.assert_array_equal(alone, draws(both))  # whatever else is compared
    assert not np.array_equal(alone, draws(one, run="another"))
    assert not np.array_equal(alone, draws(one, seed=2))


def test_the_mode_is_found_where_least_squares_leaves_a_combination_open() -> None:
    rig = pin_rig(places=("plate", "air"))
    point = optimum.fit(posing.pose(rig, exact_readings(rig), Candidate("convective", True, True)))
    assert point.point.rank == point.problem.n_physical - 1
    mode = routes.find_mode(point)
    spread = np.sqrt(np.diag(mode.root @ mode.root.T))
    h, k = (point.problem.names.index(name) for name in ("h", "k"))
    # h/k and R''·k are known well, so that the three priors, factors of 10, 10 and 5, say one thing together
    together = 2 / math.log(10) ** 2 + 1 / math.log(5) ** 2
    assert spread[h] == pytest.approx(together**-0.5, rel=0.02)
    assert mode.z[h] - mode.z[k] == pytest.approx(math.log(TRUTH.h / TRUTH.k), abs=0.1)
