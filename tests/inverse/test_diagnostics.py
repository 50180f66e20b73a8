"""Convergence diagnostics and leave-one-out scores where the right answer is known."""

import numpy as np
import pytest
from scipy.stats import norm, rankdata

from finback import diagnostics

ENSEMBLES, STEPS, WALKERS = 4, 1000, 64


def autoregressive(rng: np.random.Generator, memory: float, shape: tuple[int, ...]) -> np.ndarray:
    """Stationary series of unit variance along axis 1, x_t = memory x_(t-1) + noise."""
    x = rng.standard_normal(shape)
    x[:, 1:] *= np.sqrt(1 - memory**2)
    for t in range(1, shape[1]):
        x[:, t] += memory * x[:, t - 1]
    return x


def ensembles(seed: int, shared: float, memory: float, own_memory: float) -> np.ndarray:
    """Ensembles whose walkers share a component: shared is its part of the variance."""
    rng = np.random.default_rng(seed)
    common = autoregressive(rng, memory, (ENSEMBLES, STEPS, 1, 1))
    own = autoregressive(rng, own_memory, (ENSEMBLES, STEPS, WALKERS, 1))
    return np.sqrt(shared) * common + np.sqrt(1 - shared) * own


def time_of(memory: float) -> float:
    """Integrated autocorrelation time of an autoregressive series, exactly."""
    return (1 + memory) / (1 - memory)


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize(
    ("shared", "memory", "own_memory"), [(0.2, 0.9, 0.5), (0.5, 0.7, 0.0), (0.02, 0.95, 0.9), (0.0, 0.0, 0.8)]
)
def test_walkers_count_as_far_as_they_are_independent(
    seed: int, shared: float, memory: float, own_memory: float
) -> None:
    z = ensembles(seed, shared, memory, own_memory)
    # variance of the mean of all draws, exactly, up to the series' ends
    error = (shared * time_of(memory) + (1 - shared) * time_of(own_memory) / WALKERS) / (ENSEMBLES * STEPS)
    found = diagnostics.ensemble_ess(z)
    # limits are less correlated than the mean and can only be fewer by chance
    assert 0.6 / error < found < 1.4 / error


def test_independent_draws_are_all_effective() -> None:
    z = np.random.default_rng(1).standard_normal((ENSEMBLES, STEPS, WALKERS, 2))
    assert diagnostics.ensemble_ess(z) == pytest.approx(ENSEMBLES * STEPS * WALKERS, rel=0.3)


def test_ensembles_that_disagree_have_few_effective_draws() -> None:
    z = ensembles(1, 0.0, 0.0, 0.3)
    z += 0.2 * np.arange(ENSEMBLES)[:, None, None, None]
    assert diagnostics.ensemble_ess(z) < 200
    assert diagnostics.ensemble_rhat(z) > 1.01


def test_the_worst_unknown_counts() -> None:
    good, bad = ensembles(1, 0.0, 0.0, 0.0), ensembles(2, 0.5, 0.98, 0.0)
    together = np.concatenate([good, bad], axis=-1)
    assert diagnostics.ensemble_ess(together) == diagnostics.ensemble_ess(bad)
    assert diagnostics.ensemble_rhat(together) == diagnostics.ensemble_rhat(bad)


def test_draws_that_never_change_have_no_effective_size() -> None:
    assert diagnostics.ensemble_ess(np.ones((ENSEMBLES, 100, 8, 1))) == 0.0


def split_rhat(chains: np.ndarray) -> float:
    """Rank-normalised split R-hat by its definition (Vehtari et al., Bayesian Analysis 16 (2021) 667)."""
    half = chains.shape[1] // 2
    split = np.concatenate([chains[:, :half], chains[:, -half:]])

    def plain(x: np.ndarray) -> float:
        z = norm.ppf((rankdata(x) - 0.375) / (x.size + 0.25)).reshape(x.shape)
        within = z.var(axis=1, ddof=1).mean()
        between = z.mean(axis=1).var(ddof=1)
        return float(np.sqrt((within * (half - 1) / half + between) / within))

    return max(plain(split), plain(np.abs(split - np.median(split))))


@pytest.mark.parametrize("shift", [0.0, 0.05, 0.3])
def test_rhat_is_that_of_its_definition(shift: float) -> None:
    z = np.random.default_rng(4).standard_normal((4, 500, 1, 1)) + shift * np.arange(4)[:, None, None, None]
    assert diagnostics.ensemble_rhat(z) == pytest.approx(split_rhat(z[:, :, 0, 0]), rel=1e-9)


def test_rhat_sees_a_spread_that_differs_and_a_drift() -> None:
    rng = np.random.default_rng(5)
    wide = rng.standard_normal((4, 250, 16, 1)) * np.array([1.0, 1.0, 1.0, 2.0])[:, None, None, None]
    assert diagnostics.ensemble_rhat(wide) > 1.01
    drifting = rng.standard_normal((4, 250, 16, 1)) + np.linspace(0, 1, 250)[None, :, None, None]
    assert diagnostics.ensemble_rhat(drifting) > 1.01
    assert diagnostics.ensemble_rhat(rng.standard_normal((4, 250, 16, 1))) < 1.01


def conjugate(rng: np.random.Generator, covariance: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, float]:
    """Pointwise densities of y ~ N(mu, covariance), mu ~ N(0, 10²), at exact draws; and the exact score."""
    n = len(y)
    precision = np.linalg.inv(covariance)
    spread = 1 / (precision.sum() + 0.01)
    mu = rng.normal(spread * (precision @ y).sum(), np.sqrt(spread), (4, 2000))
    exact, pointwise = 0.0, np.empty((4, 2000, n))
    for i in range(n):
        rest = np.delete(np.arange(n), i)
        weights = np.linalg.solve(covariance[np.ix_(rest, rest)], covariance[rest, i])
        sd = np.sqrt(covariance[i, i] - weights @ covariance[rest, i])
        pointwise[..., i] = norm.logpdf(y[i], mu + (y[rest] - mu[..., None]) @ weights, sd)
        whole = covariance + 100.0
        weights = np.linalg.solve(whole[np.ix_(rest, rest)], whole[rest, i])
        sd = np.sqrt(whole[i, i] - weights @ whole[rest, i])
        exact += norm.logpdf(y[i], y[rest] @ weights, sd)
    return pointwise, float(exact)


@pytest.mark.parametrize("offset", [0.0, 0.7], ids=["independent", "common offset"])
def test_leave_one_out_of_a_conjugate_model(offset: float) -> None:
    rng = np.random.default_rng(6)
    covariance = np.eye(9) + offset**2
    y = rng.multivariate_normal(np.full(9, 3.0), covariance)
    pointwise, exact = conjugate(rng, covariance, y)
    found, worst = diagnostics.loo(pointwise)
    assert found == pytest.approx(exact, abs=0.03)
    assert worst < 0.7


def test_a_reading_that_decides_alone_has_a_high_k_hat() -> None:
    rng = np.random.default_rng(7)
    y = np.array([0.1, -0.2, 0.3, 30.0])
    pointwise, _ = conjugate(rng, np.eye(4), y)
    assert diagnostics.loo(pointwise)[1] > 0.7
