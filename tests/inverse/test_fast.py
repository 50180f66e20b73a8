"""The fast posterior against exact moments, long chains, quadrature, and where it must warn."""

import time
from functools import cache, partial

import numpy as np
import pytest
from densities import (
    CORRELATED,
    SCALES,
    LogDensity,
    gaussian,
    log_gamma,
    log_gamma_mode,
    log_gamma_moments,
)
from evidences import fin_problem, gauss_hermite
from rigs import Truth, draw, pin_rig
from scipy.stats import chi2, norm

from finback import candidates, fast, optimum, posing, readings, rig, routes, sampling
from finback import proposal as proposals
from finback.datasets import path
from finback.evidence import Evidence
from finback.fast import FastPosterior
from finback.laplace import Mode
from finback.optimum import LeastSquares
from finback.problem import Candidate
from finback.proposal import FREEDOM, Proposal
from finback.quantity import Quantity
from finback.sampling import Settings

LIMITS = (0.025, 0.5, 0.975)
SHAPES = np.array([0.7, 2.0, 9.0])


def posterior(log_density: LogDensity, mode: Mode, seed: int = 1, draws: int = fast.DRAWS) -> FastPosterior:
    fitted, _ = proposals.adapt(log_density, proposals.from_mode(mode), np.random.RandomState(seed))
    return fast.sample(log_density, fitted, np.random.default_rng(seed), draws)


def share_of_sd(khat: np.ndarray) -> np.ndarray:
    """What a number may be off, as a share of an sd, by its k-hat."""
    return np.where(khat <= 0.5, 0.02, np.where(khat <= fast.TRUSTED, 0.05, np.inf))


# draws


def test_placed_points_are_draws_of_the_proposal() -> None:
    centres, roots = np.array([[0.0, 0.0], [3.0, -1.0]]), np.array([np.eye(2), [[2.0, 0.0], [1.0, 0.5]]])
    shares = np.array([0.3, 0.7])
    mixture = Proposal(centres, roots, shares)
    z = fast.sample(mixture.log_density, mixture, np.random.default_rng(1), 20_000).z
    spread = FREEDOM / (FREEDOM - 2)
    mean = shares @ centres
    within = spread * np.einsum("c,cij,ckj->ik", shares, roots, roots)
    between = np.einsum("c,ci,cj->ij", shares, centres - mean, centres - mean)
    np.testing.assert_allclose(z.mean(axis=0), mean, atol=0.01)
    np.testing.assert_allclose(np.cov(z.T), within + between, rtol=0.02)


def test_a_placed_radius_is_that_of_chi_square() -> None:
    u = np.array([1e-9, 1e-4, 0.2, 0.5, 0.9, 0.9999, 1 - 1e-9])
    points = np.column_stack([np.full(7, 0.5), np.full(7, norm.cdf(1.0)), u])
    z = Proposal(np.zeros((1, 1)), np.ones((1, 1, 1))).place(points)[:, 0]
    np.testing.assert_allclose(z, np.sqrt(FREEDOM / chi2.ppf(u, FREEDOM)), rtol=2e-5)


# exact answers


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_gaussian(seed: int) -> None:
    mean, covariance = np.arange(6.0), CORRELATED * np.outer(SCALES, SCALES)
    found = posterior(gaussian(mean, covariance), Mode(mean, 0.0, np.linalg.cholesky(covariance)), seed)
    assert found.evidence.log == pytest.approx(0.0, abs=0.005)
    assert np.abs((found.mean(found.z) - mean) / SCALES).max() < 0.02
    np.testing.assert_allclose(found.sd(found.z), SCALES, rtol=0.02)
    limits = (found.quantiles(found.z, LIMITS) - mean) / SCALES
    np.testing.assert_allclose(limits, np.tile(norm.ppf(LIMITS)[:, None], 6), atol=0.08)
    assert found.khat < 0.5
    assert (found.khat_of(found.z) < 0.5).all()


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_skewed_density(seed: int) -> None:
    found = posterior(log_gamma(SHAPES), log_gamma_mode(SHAPES), seed)
    mean, sd = log_gamma_moments(SHAPES)
    assert found.evidence.log == pytest.approx(0.0, abs=0.015)
    # the middle one's left tail is heavier than the proposal's, and its k-hat says so
    allowed = share_of_sd(found.khat_of(found.z))
    assert np.isfinite(allowed[[0, 2]]).all()
    assert (np.abs(found.mean(found.z) - mean) / sd < allowed).all()
    assert (np.abs(found.sd(found.z) / sd - 1) < allowed).all()


@pytest.mark.parametrize("noise", [0.15, None], ids=["stated", "estimated"])
def test_the_evidence_of_a_fin_against_quadrature(noise: float | None) -> None:
    problem, mode = fin_problem(noise)
    exact = partial(gauss_hermite, problem.log_density, mode)(20)
    found = posterior(problem.log_density, mode)
    assert found.evidence.log == pytest.approx(exact, abs=0.01)
    assert abs(found.evidence.log - exact) < 4 * found.evidence.error


def test_more_draws_are_closer() -> None:
    mean, sd = log_gamma_moments(SHAPES)
    errors = []
    for draws in (4096, 32 * 4096):
        found = posterior(log_gamma(SHAPES), log_gamma_mode(SHAPES), draws=draws)
        assert len(found.z) == draws
        errors.append(np.abs((found.mean(found.z) - mean) / sd).mean())
    assert errors[1] < errors[0]


# k-hat


def test_too_narrow_a_proposal_is_told_by_its_khat() -> None:
    narrow = Proposal(np.zeros((1, 2)), 0.1 * np.eye(2)[None])
    found = fast.sample(gaussian(np.zeros(2), np.eye(2)), narrow, np.random.default_rng(1))
    assert found.khat > fast.TRUSTED
    assert (found.khat_of(found.z) >= found.khat).all()


def test_a_quantity_with_a_heavy_tail_has_a_khat_of_its_own() -> None:
    same = Proposal(np.zeros((1, 2)), np.eye(2)[None])
    found = fast.sample(same.log_density, same, np.random.default_rng(1))
    harmless, heavy = found.z[:, 0], np.exp(2.5 * found.z[:, 1])
    assert found.khat < 0.5
    assert found.khat_of(harmless) < 0.5
    assert found.khat_of(heavy) > fast.TRUSTED
    both = found.khat_of(np.column_stack([harmless, heavy]))
    np.testing.assert_allclose(both, [found.khat_of(harmless), found.khat_of(heavy)], rtol=1e-6)


# long chains


def long_chain(point: LeastSquares, fitted: tuple[Proposal, float]) -> np.ndarray:
    settings = Settings(ess=40_000.0)
    seed = np.random.SeedSequence(5)
    chain = sampling.sample(point.problem.log_density, *fitted, seed, settings, lambda _: None)
    assert chain.converged
    return chain.z.reshape(-1, chain.z.shape[-1])


def fitted(point: LeastSquares) -> tuple[Proposal, float]:
    mode = routes.find_mode(point)
    proposal, weighted = routes.fit_proposal(point.problem, mode, np.random.SeedSequence(1))
    return proposal, weighted.efficiency


def assert_agreement(found: FastPosterior, chain: np.ndarray) -> None:
    """Means and sds within 2 % of an sd where k-hat is at most 0.5, 5 % up to 0.7; the chain adds 0.5 %."""
    allowed = share_of_sd(found.khat_of(found.z)) + 0.005
    sd = chain.std(axis=0)
    assert np.isfinite(allowed).all()
    assert (np.abs((found.mean(found.z) - chain.mean(axis=0)) / sd) < allowed).all()
    assert (np.abs(found.sd(found.z) / sd - 1) < allowed).all()
    limits = np.quantile(chain, (0.025, 0.975), axis=0)
    assert (np.abs(found.quantiles(found.z, (0.025, 0.975)) - limits) / sd < 0.12).all()


@pytest.mark.parametrize("name", ["aluminium-rod", "bench-pin", "bench-pin-loose-joint", "copper-pin"])
def test_bundled_rigs_agree_with_a_long_chain(name: str) -> None:
    point = bundled(name)
    proposal = fitted(point)
    found = fast.sample(point.problem.log_density, proposal[0], np.random.default_rng(1))
    assert found.efficiency > 0.7
    assert_agreement(found, long_chain(point, proposal))


@cache
def bundled(name: str) -> LeastSquares:
    described = rig.read(path(name) / "rig.toml")
    run = readings.read(path(name) / "readings.csv", described).pick(None)
    return optimum.fit(posing.pose(described, run, candidates.enumerate_candidates(described, run)[0]))


@cache
def unresolved() -> LeastSquares:
    """An invented rig whose joint is so good that its readings only limit it from above."""
    described = pin_rig(places=("plate", "air"), conductivity=Quantity(167.0, 8.0))
    run, _ = draw(described, Truth(joint=1e-7), np.random.default_rng(2))
    return optimum.fit(posing.pose(described, run, Candidate("convective", True, True)))


def test_an_unresolved_joint_is_caught_where_only_its_mode_is_known() -> None:
    problem = unresolved().problem
    naive = proposals.from_mode(routes.find_mode(unresolved()))
    for seed in range(5):
        found = fast.sample(problem.log_density, naive, np.random.default_rng(seed))
        khats = dict(zip(problem.names, found.khat_of(found.z), strict=True))
        assert found.khat < fast.TRUSTED  # the plain weights look harmless
        assert khats["joint"] > fast.TRUSTED
        assert khats["joint"] == max(khats.values())


def test_an_unresolved_joint_is_right_with_a_fitted_proposal() -> None:
    point = unresolved()
    proposal = fitted(point)
    found = fast.sample(point.problem.log_density, proposal[0], np.random.default_rng(1))
    assert found.efficiency > 0.7
    assert_agreement(found, long_chain(point, proposal))


# summaries


def test_summaries_weigh_the_draws() -> None:
    found = posterior(log_gamma(SHAPES), log_gamma_mode(SHAPES))
    assert np.exp(found.log_weights).sum() == pytest.approx(1.0)
    one = found.z[:, 1]
    assert found.mean(one) == pytest.approx(np.average(one, weights=found.weights))
    assert found.quantiles(one, LIMITS).shape == (3,)
    assert found.quantiles(found.z, LIMITS).shape == (3, 3)
    np.testing.assert_array_equal(found.quantiles(found.z, LIMITS)[:, 1], found.quantiles(one, LIMITS))
    np.testing.assert_allclose(
        [found.weights[one <= q].sum() for q in found.quantiles(one, LIMITS)], LIMITS, atol=1e-3
    )


def test_resampled_draws_count_the_same() -> None:
    found = posterior(log_gamma(SHAPES), log_gamma_mode(SHAPES))
    chosen = found.resample(10_000, np.random.default_rng(1))
    counts = np.bincount(chosen, minlength=len(found.z))
    assert np.abs(counts - 10_000 * found.weights).max() <= 1 + 1e-9
    mean, sd = log_gamma_moments(SHAPES)
    assert np.abs((found.z[chosen].mean(axis=0) - mean) / sd).max() < 0.03


def test_one_seed_gives_one_result() -> None:
    first, again, other = (posterior(log_gamma(SHAPES), log_gamma_mode(SHAPES), s) for s in (1, 1, 2))
    np.testing.assert_array_equal(first.z, again.z)
    assert (first.z != other.z).any()


def test_draws_outside_the_posterior_weigh_nothing() -> None:
    half = Proposal(np.zeros((1, 2)), np.eye(2)[None])

    def cut(z: np.ndarray) -> np.ndarray:
        return np.where(z[:, 0] > 0, -0.5 * np.square(z).sum(axis=1) - np.log(np.pi), -np.inf)

    found = fast.sample(cut, half, np.random.default_rng(1))
    assert found.mean(found.z)[0] == pytest.approx(np.sqrt(2 / np.pi), abs=0.01)
    assert found.evidence.log == pytest.approx(0.0, abs=0.01)
    assert np.isfinite(found.khat_of(found.z)).all()


def test_no_density_anywhere_is_an_error() -> None:
    with pytest.raises(ValueError, match="finite density"):
        fast.sample(
            lambda z: np.full(len(z), -np.inf),
            Proposal(np.zeros((1, 2)), np.eye(2)[None]),
            np.random.default_rng(1),
        )


@pytest.mark.benchmark
def test_a_fast_posterior_costs_little_more_than_its_densities() -> None:
    point = bundled("bench-pin")
    proposal, _ = fitted(point)

    def whole() -> FastPosterior:
        found = fast.sample(point.problem.log_density, proposal, np.random.default_rng(1))
        found.mean(found.z), found.sd(found.z), found.quantiles(found.z, LIMITS)
        return found

    def fastest(function: object) -> float:
        times = []
        for _ in range(30):
            begin = time.perf_counter()
            function()
            times.append(time.perf_counter() - begin)
        return min(times)

    z = whole().z
    assert fastest(whole) < 5 * fastest(lambda: point.problem.log_density(z))


@pytest.mark.parametrize("spread", [0.1, 3.0])
def test_limits_are_the_same_whatever_is_sorted_for_them(spread: float) -> None:
    # weights far from even: those of the tails may not reach into what is looked at first
    random = np.random.default_rng(3)
    values, logs = random.normal(size=(500, 3)), spread * random.normal(size=500)
    weights = np.exp(logs - np.log(np.exp(logs).sum()))
    found = FastPosterior(values, logs, np.log(weights), 0.0, 1.0, Evidence(0.0, 0.0))
    limits = found.quantiles(values, (0.025, 0.975))
    assert limits == pytest.approx(found.quantiles(values, (0.025, 0.5, 0.975))[[0, 2]], abs=1e-12)
