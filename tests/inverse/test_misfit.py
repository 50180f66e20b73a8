"""Smooth misfit: its covariance, its likelihood against scipy's, when it is looked for and what is said."""

import math
from dataclasses import replace

import numpy as np
import pytest
from rigs import HOLES, Truth, draw, exact_readings, pin_rig
from scipy.stats import multivariate_normal

import finback
from finback import candidates, misfit, optimum, posing, routes
from finback import noise as noises
from finback.noise import Noise
from finback.problem import Candidate, Problem
from finback.quantity import Quantity
from finback.readings import Readings
from finback.sampling import Settings

SMOOTH = Candidate("convective", True, True, misfit=True)
STATED_K = Quantity(167.0, 8.35)
QUICK = Settings(block=50, max_steps=100)
SHARE, SIGMA = 0.02, 0.3


def quiet(_stage: str, _fraction: float) -> None:
    pass


def posed(noise: float | None, calibration: float = 0.2) -> Problem:
    rig = pin_rig(noise=noise, calibration=calibration, position_sd=0.0, conductivity=STATED_K)
    readings, _ = draw(rig, Truth(rise=0.4), np.random.default_rng(1))
    return posing.pose(rig, readings, SMOOTH)


def at(problem: Problem, seed: int = 0) -> np.ndarray:
    """A block of parameter vectors about the truth."""
    true = {
        "h": 45.0,
        "k": 167.0,
        "joint": 5e-5,
        "plate": 353.15,
        "air": 295.15,
        "misfit": SHARE,
        "noise": SIGMA,
    }
    z = [math.log(true[p.name]) if p.transform == "log" else true[p.name] for p in problem.parameters]
    return np.array(z) + 0.2 * np.random.default_rng(seed).standard_normal((40, len(z)))


def smooth_part(problem: Problem) -> np.ndarray:
    """The definition, sensor by sensor: a share of both excess temperatures, alike over 0.3 of the length."""
    sensors, values = problem.measured.sensors, problem.measured.values
    air = values[[s.place for s in sensors].index("air")]
    found = np.zeros((len(sensors), len(sensors)))
    for i, a in enumerate(sensors):
        for j, b in enumerate(sensors):
            if a.place == b.place == "fin":
                apart = (a.position - b.position) / (0.3 * 0.12)
                found[i, j] = (values[i] - air) * (values[j] - air) * math.exp(-(apart**2) / 2)
    return found


def covariance(problem: Problem, share: float, sigma: float) -> np.ndarray:
    plain = posing.pose(problem.rig, problem.readings, replace(SMOOTH, misfit=False))
    return plain.noise.covariance(sigma) + share**2 * smooth_part(problem)


@pytest.mark.parametrize("noise", [0.15, None])
def test_likelihood_is_the_normal_one_with_a_smooth_part(noise: float | None) -> None:
    problem = posed(noise)
    z = at(problem)
    predicted = problem.predict(z)
    found = problem.log_likelihood(z)
    for row, mean, log in zip(z, predicted, found, strict=True):
        share = math.exp(row[problem.names.index("misfit")])
        sigma = math.exp(row[-1]) if noise is None else 0.0
        expected = multivariate_normal.logpdf(
            problem.measured.values, mean, covariance(problem, share, sigma)
        )
        assert log == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize("noise", [0.15, None])
def test_a_reading_given_the_others_is_normal_by_the_same_covariance(noise: float | None) -> None:
    problem = posed(noise)
    z = at(problem)[:1]
    sigma = float(np.exp(z[0, -1])) if noise is None else 0.0
    whole = covariance(problem, float(np.exp(z[0, problem.n_physical])), sigma)
    residuals = problem.measured.values - problem.predict(z)[0]
    for i, log in enumerate(problem.pointwise(z)[0]):
        rest = np.delete(np.arange(len(whole)), i)
        weights = np.linalg.solve(whole[np.ix_(rest, rest)], whole[rest, i])
        variance = whole[i, i] - weights @ whole[rest, i]
        expected = multivariate_normal.logpdf(residuals[i], weights @ residuals[rest], variance)
        assert log == pytest.approx(expected, abs=1e-7)


def built(estimated: bool) -> tuple[Noise, np.ndarray, np.ndarray]:
    marked = np.array([estimated, estimated, False, estimated, False])
    fixed = np.full((5, 5), 0.09) + np.diag([0.01, 0.02, 0.04, 0.01, 0.03])
    smooth = misfit.covariance(np.array([0.01, 0.03, 0.09]), np.array([50.0, 40.0, 30.0]), 0.1, 5)
    return noises.build(fixed, marked, smooth), fixed + SIGMA**2 * np.diag(marked.astype(float)), smooth


@pytest.mark.parametrize("estimated", [True, False])
@pytest.mark.parametrize("share", [1e-6, 0.01, 0.5])
def test_covariance_precision_and_a_held_share_are_one_noise(estimated: bool, share: float) -> None:
    noise, rest, smooth = built(estimated)
    whole = rest + share**2 * smooth
    np.testing.assert_allclose(noise.covariance(SIGMA, share), whole, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(noise.given(share).covariance(SIGMA), whole, rtol=1e-8, atol=1e-8)
    np.testing.assert_allclose(noise.precision(SIGMA, share)[0] @ whole, np.eye(5), atol=1e-6)
    held = noise.given(share)
    log_det = held.log_det + np.log(np.broadcast_to(held.variances(SIGMA), 5)).sum()
    assert log_det == pytest.approx(np.linalg.slogdet(whole)[1], abs=1e-8)


def test_whitening_takes_many_sets_in_pieces(monkeypatch: pytest.MonkeyPatch) -> None:
    noise, _, _ = built(True)
    residuals = np.random.default_rng(1).standard_normal((50, 5))
    shares, sigmas = np.geomspace(1e-3, 0.3, 50), np.geomspace(1e-3, 3, 50)
    whole = noise.whiten(residuals, sigmas, shares)
    monkeypatch.setattr(noises, "PIECE", 200)
    for one, other in zip(whole, noise.whiten(residuals, sigmas, shares), strict=True):
        np.testing.assert_array_equal(one, other)


def test_nearly_no_noise_beside_a_misfit_is_still_a_number() -> None:
    problem = posed(None, calibration=0.0)
    z = at(problem)
    z[:, -1] = math.log(1e-7)  # K, where the smooth part alone would have no inverse
    assert np.isfinite(problem.log_density(z)).all()


@pytest.mark.parametrize("noise", [0.15, None])
def test_evidence_is_the_average_over_held_shares(noise: float | None) -> None:
    # p(y) = integral of p(y | a) p(a) da, by Gauss-Hermite nodes, each an ordinary problem without a misfit
    problem = optimum.fit(posed(noise)).problem
    found = routes.weigh(problem, np.random.SeedSequence(1)).fast.evidence
    prior = next(p.prior for p in problem.parameters if p.name == "misfit")
    nodes, weights = np.polynomial.hermite_e.hermegauss(15)
    logs = []
    for node in nodes:
        held = problem.given(math.exp(prior.mean + prior.sd * node))
        point = optimum.fit(held)
        mode = routes.find_mode(point)
        _, weighted = routes.fit_proposal(held, mode, np.random.SeedSequence(1))
        logs.append(weighted.evidence.log)
    highest = max(logs)
    exact = highest + math.log(weights @ np.exp(np.array(logs) - highest) / weights.sum())
    assert found.log == pytest.approx(exact, abs=0.1 if noise is None else 0.03)


def test_misfits_are_posed_for_what_may_matter() -> None:
    rig = pin_rig(conductivity=STATED_K)
    weighed = candidates.weigh(rig, exact_readings(rig), 1, quiet)
    names = [route.point.problem.candidate.name for route in weighed]
    assert "convective tip, joint, smooth misfit" in names
    assert not [name for name in names if name.endswith("no joint, smooth misfit")]


def test_few_sensors_on_the_fin_get_no_misfit() -> None:
    for count, smooth in ((4, 0), (5, 1)):
        rig = pin_rig(holes=HOLES[:count], tip="convective", places=("air",), conductivity=STATED_K)
        weighed = candidates.weigh(rig, exact_readings(rig, Truth(joint=None)), 1, quiet)
        assert sum(route.point.problem.candidate.misfit for route in weighed) == smooth


@pytest.mark.parametrize("noise", [0.05, None])
def test_the_gain_of_a_misfit_is_judged_well_before_it_is_weighed(noise: float | None) -> None:
    rig = pin_rig(noise=noise, calibration=0.0, position_sd=0.0, tip="convective", conductivity=STATED_K)
    readings, _ = draw(rig, Truth(rise=0.4), np.random.default_rng(3))
    plain, smooth = (
        routes.weigh(posing.pose(rig, readings, replace(SMOOTH, misfit=on)), np.random.SeedSequence(1))
        for on in (False, True)
    )
    gained = smooth.fast.evidence.log - plain.fast.evidence.log
    assert gained > 1
    # it is the best share and noise that it looks for, and not their average
    assert gained - 1.0 < routes.misfit_gain(plain) < gained + 4.0


def test_an_h_that_varies_is_a_misfit_and_widens_the_answer() -> None:
    rig = pin_rig(noise=0.05, calibration=0.0, position_sd=0.0, tip="convective", conductivity=STATED_K)
    readings, _ = draw(rig, Truth(rise=0.4), np.random.default_rng(3))
    estimate = finback.fit(rig, readings, settings=QUICK)
    (finding,) = [f for f in estimate.findings if f.code == "misfit"]
    assert finding.severity == "caution"
    assert "smooth pattern" in finding.message
    assert estimate.candidates[0].name == "convective tip, joint, smooth misfit"
    share = estimate.parameters["misfit"]
    assert 0.001 < share.low95 < share.median < share.high95 < 0.05
    assert share.least_squares is None
    assert "smooth misfit of the model" in [line.source for line in estimate.budget]
    h = estimate.parameters["h"]
    assert h.low95 <= 45.0 <= h.high95
    plain = next(i for i, c in enumerate(estimate.candidates) if "misfit" not in c.name)
    assert estimate.candidates[plain].probability < 0.05
    alone = routes.weigh(posing.pose(rig, readings, replace(SMOOTH, misfit=False)), np.random.SeedSequence(1))
    assert h.sd > float(alone.fast.sd(alone.quantities["h"]))
    assert estimate.derived["h_over_k"].sd > 1.5 * float(alone.fast.sd(alone.quantities["h_over_k"]))
    assert "support the convective tip, joint (" in estimate.comparison
    assert "smooth misfit" in estimate.compared


def test_one_wrong_sensor_is_a_misfit_and_the_finding_thinks_of_it() -> None:
    rig = pin_rig(tip="convective", conductivity=STATED_K)
    exact = exact_readings(rig).values
    wrong = Readings("r", exact | {"T4": exact["T4"] + 6.0})
    estimate = finback.fit(rig, wrong, settings=QUICK, as_read=True)
    assert any("a sensor that is wrong" in f.message for f in estimate.findings if f.code == "misfit")


def test_a_heat_that_no_heater_supplies_is_not_explained_away() -> None:
    rig = pin_rig(places=("plate", "air", "heater"), conductivity=STATED_K, tip="convective")
    readings, _ = draw(rig, Truth(), np.random.default_rng(0), power=2.0)
    estimate = finback.fit(rig, readings, settings=QUICK)
    assert "misfit" in estimate.candidates[0].name  # it would
    assert "heat-balance" in {f.code for f in estimate.findings if f.severity == "fault"}


def test_a_second_ladder_reaches_the_joint_that_a_misfit_leaves_open() -> None:
    # with more of a misfit than is likely the plate's neighbours no longer limit the joint from below
    rig = pin_rig(diameter=Quantity(0.008, 2e-5), conductivity=Quantity(167.0, 8.35), tip="convective")
    readings, _ = draw(rig, Truth(), np.random.default_rng([7, 121]))
    posed = posing.pose(rig, readings, SMOOTH)
    route = routes.weigh(posed, np.random.SeedSequence(1))
    steadied = route.steadied()
    assert steadied.khat < route.khat
    assert steadied.fast.efficiency > route.fast.efficiency
    assert steadied.fast.evidence.log == pytest.approx(route.fast.evidence.log, abs=0.03)
