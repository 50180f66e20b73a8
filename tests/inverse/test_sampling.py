"""Sampling: right on known densities with every move, and honest where it has not converged."""

import ast
from pathlib import Path

import numpy as np
import pytest
from densities import CORRELATED, SCALES, LogDensity, gaussian, log_gamma, log_gamma_mode, log_gamma_moments
from emcee.autocorr import integrated_time

import finback
from finback import proposal as proposals
from finback import sampling
from finback.errors import ComputationError
from finback.laplace import Mode
from finback.sampling import Chain, Settings, autocorrelation_time, sample

LONG = Settings(ess=8000)
WELL_FITTED = 1.0  # efficiency that is claimed for a proposal
BATCHES = 8  # an ensemble, for the Monte Carlo error


def draw(
    log_density: LogDensity, mode: Mode, seed: int = 1, settings: Settings = LONG, adapted: bool = False
) -> Chain:
    proposal, efficiency = proposals.from_mode(mode), WELL_FITTED
    if adapted:
        proposal, efficiency = proposals.adapt(log_density, proposal, np.random.RandomState(seed))
    return sample(log_density, proposal, efficiency, np.random.SeedSequence(seed), settings, lambda _: None)


def monte_carlo_errors(chain: Chain) -> np.ndarray:
    """Standard errors of the means by batches of steps: no diagnostic of the package is asked."""
    steps = chain.z.shape[1] // BATCHES * BATCHES
    batches = chain.z[:, :steps].mean(axis=2).reshape(chain.z.shape[0], BATCHES, -1, chain.z.shape[-1])
    means = batches.mean(axis=2).reshape(-1, chain.z.shape[-1])
    return means.std(axis=0, ddof=1) / np.sqrt(len(means))


def assert_moments(chain: Chain, mean: np.ndarray, sd: np.ndarray) -> None:
    assert chain.converged
    flat = chain.z.reshape(-1, chain.z.shape[-1])
    assert np.abs((flat.mean(axis=0) - mean) / monte_carlo_errors(chain)).max() < 4
    np.testing.assert_allclose(flat.std(axis=0), sd, rtol=0.03)


SIX = {
    "independent": (np.zeros(6), np.eye(6)),
    "correlated": (np.arange(6.0), CORRELATED * np.outer(SCALES, SCALES)),
}


@pytest.mark.parametrize("name", SIX)
@pytest.mark.parametrize("seed", [1, pytest.param(2, marks=pytest.mark.slow)])
def test_six_normal_unknowns(name: str, seed: int) -> None:
    mean, covariance = SIX[name]
    mode = Mode(mean, 0.0, np.linalg.cholesky(covariance))
    assert_moments(draw(gaussian(mean, covariance), mode, seed), mean, np.sqrt(np.diag(covariance)))


@pytest.mark.parametrize("name", [pytest.param("independent", marks=pytest.mark.slow), "correlated"])
def test_six_normal_unknowns_by_differential_evolution_alone(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(sampling, "SHARE_OF_INDEPENDENT", 0.0)
    mean, covariance = SIX[name]
    mode = Mode(mean, 0.0, np.linalg.cholesky(covariance))
    settings = Settings(ess=5000, autocorrelation_times=20)
    chain = draw(gaussian(mean, covariance), mode, settings=settings)
    assert_moments(chain, mean, np.sqrt(np.diag(covariance)))
    assert chain.autocorrelation > 5  # else the independent move was still there


@pytest.mark.parametrize("factor", [0.2, 5.0])
def test_a_wrong_guess_of_the_scale_costs_time_and_not_truth(factor: float) -> None:
    mean, covariance = SIX["correlated"]
    mode = Mode(mean + 0.5 * SCALES, 0.0, np.diag(factor * SCALES))
    assert_moments(draw(gaussian(mean, covariance), mode, adapted=True), mean, SCALES)


def test_a_skewed_density() -> None:
    shapes = np.array([0.7, 2.0, 9.0])
    chain = draw(log_gamma(shapes), log_gamma_mode(shapes))
    assert_moments(chain, *log_gamma_moments(shapes))


def test_a_density_that_ends_abruptly() -> None:
    def half(z: np.ndarray) -> np.ndarray:  # normal, cut at zero in its first unknown
        return np.where(z[:, 0] > 0, -0.5 * np.square(z).sum(axis=1), -np.inf)

    chain = draw(half, Mode(np.array([0.5, 0.0]), 0.0, np.eye(2)))
    assert (chain.z[..., 0] > 0).all()
    assert np.isfinite(chain.log_density).all()
    mean = np.sqrt(2 / np.pi)  # of a half-normal variable
    assert_moments(chain, np.array([mean, 0.0]), np.array([np.sqrt(1 - mean**2), 1.0]))


def test_the_seed_alone_decides_the_draws() -> None:
    shapes = np.array([2.0, 3.0])
    np.random.seed(99)  # noqa: NPY002  the global generator must not matter
    quick = Settings(max_steps=100)
    chains = [draw(log_gamma(shapes), log_gamma_mode(shapes), seed, quick) for seed in (5, 5, 6)]
    np.testing.assert_array_equal(chains[0].z, chains[1].z)
    assert not np.array_equal(chains[0].z[:, 0], chains[2].z[:, 0])
    first = chains[0].z[:, -1, 0]
    assert len(np.unique(first, axis=0)) == len(first)  # each ensemble has a stream of its own


def test_draws_come_with_their_density() -> None:
    shapes = np.array([2.0, 3.0])
    chain = draw(log_gamma(shapes), log_gamma_mode(shapes), settings=Settings())
    assert chain.log_density.shape == chain.z.shape[:3]
    assert chain.n_draws == chain.log_density.size
    flat = chain.z.reshape(-1, 2)[::97]
    np.testing.assert_allclose(chain.log_density.ravel()[::97], log_gamma(shapes)(flat), rtol=1e-12)


def test_two_far_modes_are_not_called_converged() -> None:
    def two(z: np.ndarray) -> np.ndarray:  # no move finds its way from one to the other
        far = np.array([1.0, -1.0, 1.0]) * 100.0
        near = [-0.5 * np.square((z - side * far) / 0.05).sum(axis=1) for side in (-1, 1)]
        return np.maximum(np.logaddexp(*near), -1e4)  # finite everywhere, so that walkers can start

    chain = draw(two, Mode(np.zeros(3), 0.0, 60 * np.eye(3)), settings=Settings(max_steps=400))
    assert not chain.converged


@pytest.mark.parametrize(
    "width", [0.3, pytest.param(0.05, marks=pytest.mark.slow), pytest.param(1.0, marks=pytest.mark.slow)]
)
def test_two_modes_are_weighed_rightly_or_not_called_converged(width: float) -> None:
    def two(z: np.ndarray) -> np.ndarray:  # the right one has three quarters of the probability
        left, right = (-0.5 * np.square((z - centre) / width).sum(axis=1) for centre in (-8.0, 8.0))
        return np.logaddexp(left, right + np.log(3))

    chain = draw(two, Mode(np.zeros(2), 0.0, 4 * np.eye(2)), settings=Settings(max_steps=1000))
    assert not chain.converged or abs((chain.z[..., 0] > 0).mean() - 0.75) < 0.05


def test_ensembles_that_see_one_mode_each_are_not_called_converged() -> None:
    asked = 0

    def two(z: np.ndarray) -> np.ndarray:  # the first ensemble's starts are refused on the left, and so on
        nonlocal asked
        side = z[:, 0] > 0
        asked += 1
        heights = -0.5 * np.square((np.abs(z) - 30.0) / 0.5).sum(axis=1)
        return np.where(side == (asked % 2 == 0), heights, -np.inf) if asked <= 4 else heights

    chain = draw(two, Mode(np.zeros(1), 0.0, 30 * np.eye(1)), settings=Settings(max_steps=300))
    fractions = (chain.z[..., 0] > 0).mean(axis=(1, 2))
    assert not chain.converged or np.ptp(fractions) < 0.1


def test_walkers_that_cannot_move_are_not_called_converged() -> None:
    known: set[bytes] = set()
    asked = 0

    def only_where_asked_first(z: np.ndarray) -> np.ndarray:
        nonlocal asked
        asked += 1
        if asked <= Settings().ensembles:  # each ensemble asks once for a start
            known.update(row.tobytes() for row in z)
        return np.array([0.0 if row.tobytes() in known else -np.inf for row in z])

    chain = draw(only_where_asked_first, Mode(np.zeros(2), 0.0, np.eye(2)), settings=Settings(max_steps=200))
    assert (chain.z == chain.z[:, :1]).all()
    assert not chain.converged
    assert chain.ess_min < 1000
    assert np.isfinite([chain.ess_min, chain.rhat_max, chain.autocorrelation]).all()


def test_one_walker_that_never_moves_shows_in_the_autocorrelation_time() -> None:
    z = np.random.default_rng(1).standard_normal((500, 16, 2))
    assert autocorrelation_time(z) == pytest.approx(1.0, abs=0.2)
    z[:, 3, 1] = 2.5
    assert autocorrelation_time(z) > 20


@pytest.mark.parametrize("memory", [0.5, 0.9])
def test_autocorrelation_time_of_an_autoregressive_series(memory: float) -> None:
    rng = np.random.default_rng(2)
    z = rng.standard_normal((4000, 16, 1))
    z[1:] *= np.sqrt(1 - memory**2)
    for t in range(1, len(z)):
        z[t] += memory * z[t - 1]
    assert autocorrelation_time(z) == pytest.approx((1 + memory) / (1 - memory), rel=0.1)
    assert autocorrelation_time(z) == pytest.approx(float(integrated_time(z, quiet=True)[0]), rel=0.05)


def test_too_few_steps_are_not_called_converged() -> None:
    mean, covariance = SIX["correlated"]
    mode = Mode(mean, 0.0, np.linalg.cholesky(covariance))
    short = Settings(block=10, max_steps=10)
    chain = draw(gaussian(mean, covariance), mode, settings=short)
    assert not chain.converged
    assert chain.z.shape[1] == 10


def test_a_density_that_is_nowhere_finite_is_refused() -> None:
    with pytest.raises(ComputationError, match="no start at which the readings have a finite probability"):
        draw(lambda z: np.full(len(z), -np.inf), Mode(np.zeros(2), 0.0, np.eye(2)))


def test_progress_ends_at_the_whole() -> None:
    shapes = np.array([2.0, 3.0])
    fractions: list[float] = []
    proposal, seed = proposals.from_mode(log_gamma_mode(shapes)), np.random.SeedSequence(1)
    sample(log_gamma(shapes), proposal, WELL_FITTED, seed, Settings(), fractions.append)
    assert fractions == sorted(fractions)
    assert fractions[-1] == 1.0


def test_the_snooker_move_is_nowhere_used() -> None:
    # of emcee 3.1.6 it gives sd 0.82 instead of 1 on six independent normal unknowns
    for path in Path(finback.__file__).parent.rglob("*.py"):
        tree = ast.parse(path.read_text(encoding="utf-8"))
        names = {node.id for node in ast.walk(tree) if isinstance(node, ast.Name)}
        names |= {node.attr for node in ast.walk(tree) if isinstance(node, ast.Attribute)}
        names |= {a.name for node in ast.walk(tree) if isinstance(node, ast.ImportFrom) for a in node.names}
        assert not any("snooker" in name.lower() for name in names), path
