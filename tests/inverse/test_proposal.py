"""The proposal against scipy's multivariate t, and its fit to skewed, bent and cut-off posteriors."""

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
from scipy.linalg import eigh
from scipy.stats import multivariate_t

from finback import laplace
from finback import proposal as proposals
from finback.laplace import Mode
from finback.proposal import FREEDOM, Proposal

COVARIANCE = CORRELATED * np.outer(SCALES, SCALES)
CENTRE = np.arange(6.0)
SINGLE = proposals.from_mode(Mode(CENTRE, 0.0, np.linalg.cholesky(COVARIANCE)))


def test_density_is_scipys() -> None:
    z = CENTRE + 3 * np.random.default_rng(1).standard_normal((20, 6)) * SCALES
    expected = multivariate_t.logpdf(z, CENTRE, COVARIANCE, df=FREEDOM)
    np.testing.assert_allclose(SINGLE.log_density(z), expected, rtol=1e-9)


def test_density_of_several_components_is_their_mean() -> None:
    centres = np.array([[0.0, 0.0], [3.0, -1.0], [50.0, 0.0]])
    roots = np.array([np.eye(2), [[2.0, 0.0], [1.0, 0.5]], 0.1 * np.eye(2)])
    mixture = Proposal(centres, roots)
    z = np.array([[0.2, -0.3], [2.0, 0.0], [50.0, 0.1], [-400.0, 900.0]])
    each = [multivariate_t.pdf(z, c, r @ r.T, df=FREEDOM) for c, r in zip(centres, roots, strict=True)]
    np.testing.assert_allclose(mixture.log_density(z), np.log(np.mean(each, axis=0)), rtol=1e-9)


def test_draws_have_the_moments_of_the_density() -> None:
    centres, roots = np.array([[0.0, 0.0], [3.0, -1.0]]), np.array([np.eye(2), [[2.0, 0.0], [1.0, 0.5]]])
    z = Proposal(centres, roots).draw(400_000, np.random.RandomState(1))
    spread = FREEDOM / (FREEDOM - 2)
    mean = centres.mean(axis=0)
    within = spread * np.mean([r @ r.T for r in roots], axis=0)
    between = np.mean([np.outer(c - mean, c - mean) for c in centres], axis=0)
    np.testing.assert_allclose(z.mean(axis=0), mean, atol=0.02)
    np.testing.assert_allclose(np.cov(z.T), within + between, rtol=0.03)


def test_a_proposal_of_draws_is_a_little_wider_than_they_are() -> None:
    draws = np.random.default_rng(2).multivariate_normal(CENTRE, COVARIANCE, 20_000)
    found = proposals.from_draws(draws)
    np.testing.assert_allclose(found.centres[0], draws.mean(axis=0))
    # in every direction, by a tenth of the variance
    ratios = eigh(found.roots[0] @ found.roots[0].T, np.cov(draws.T), eigvals_only=True)
    np.testing.assert_allclose(ratios, 1.1, rtol=1e-3)


def test_draws_in_a_plane_still_give_a_proposal() -> None:
    draws = np.random.default_rng(3).standard_normal((500, 1)) * np.array([1.0, 2.0])
    found = proposals.from_draws(draws)
    assert np.isfinite(found.log_density(draws)).all()


@pytest.mark.parametrize("factor", [0.2, 1.0, 5.0])
def test_a_wrong_scale_is_mended(factor: float) -> None:
    start = proposals.from_mode(Mode(CENTRE + SCALES, 0.0, factor * np.diag(SCALES)))
    found, efficiency = proposals.adapt(gaussian(CENTRE, COVARIANCE), start, np.random.RandomState(4))
    assert efficiency > 0.6
    spread = found.draw(20_000, np.random.RandomState(5)).std(axis=0) / SCALES
    assert spread.min() > 1.0
    assert spread.max() < 1.8


def largest_weight(density: LogDensity, proposal: Proposal, n: int = 20_000) -> float:
    """The largest importance weight over their mean: how long a walker may wait for a better place."""
    z = proposal.draw(n, np.random.RandomState(99))
    weights = np.exp(density(z) - proposal.log_density(z))
    return float(weights.max() / weights.mean())


def test_a_skewed_posterior_is_followed_into_its_tail() -> None:
    shapes = np.array([0.7, 2.0, 9.0])
    start = proposals.from_mode(log_gamma_mode(shapes))
    found, efficiency = proposals.adapt(log_gamma(shapes), start, np.random.RandomState(5))
    mean, sd = log_gamma_moments(shapes)
    assert efficiency > 0.7
    assert largest_weight(log_gamma(shapes), found) < 0.2 * largest_weight(log_gamma(shapes), start)
    drawn = found.draw(100_000, np.random.RandomState(6))
    assert np.abs((drawn.mean(axis=0) - mean) / sd).max() < 0.4


def bent(z: np.ndarray) -> np.ndarray:
    """A bow: the second unknown follows the square of the first; any others are normal."""
    bow = np.square((z[:, 1] - 0.5 * np.square(z[:, 0])) / 0.2) + np.square(z[:, 2:]).sum(axis=1)
    return -0.5 * np.square(z[:, 0] / 2) - 0.5 * bow


def cut(z: np.ndarray) -> np.ndarray:
    """A normal distribution with its lower half missing."""
    return np.where(z[:, 0] > 0, -0.5 * np.square(z).sum(axis=1), -np.inf)


@pytest.mark.parametrize(("density", "least"), [(bent, 0.7), (cut, 0.3)])
def test_bent_and_cut_off_posteriors_are_covered(density: object, least: float) -> None:
    start = proposals.from_mode(Mode(np.array([0.3, 0.0]), 0.0, np.diag([1.0, 0.2])))
    _, before = proposals.adapt(density, start, np.random.RandomState(6))
    assert before > least


def winding(z: np.ndarray) -> np.ndarray:
    """A narrow S: what h and an emissivity between 0 and 1 make of a coefficient that is known in all."""
    share = 1 / (1 + np.exp(-z[:, 0]))
    return -0.5 * np.square(z[:, 0] / 1.5) - 0.5 * np.square((z[:, 1] + share) / 0.02) - 0.5 * z[:, 2] ** 2


@pytest.mark.parametrize("density", [bent, winding])
def test_a_ladder_follows_a_bend(density: LogDensity) -> None:
    mode = laplace.find_mode(density, np.zeros(3), np.diag([1.0, 0.2, 1.0]))
    start = proposals.from_mode(mode)
    found, efficiency = proposals.adapt(density, start, np.random.RandomState(8))
    assert efficiency > 0.7
    assert largest_weight(density, start) > 100
    assert largest_weight(density, found) < 10


def test_a_normal_posterior_needs_no_ladder() -> None:
    density = gaussian(CENTRE, COVARIANCE)
    found, _ = proposals.adapt(density, SINGLE, np.random.RandomState(9))
    assert found is SINGLE


def test_efficiency_is_one_for_the_proposal_itself() -> None:
    found, efficiency = proposals.adapt(SINGLE.log_density, SINGLE, np.random.RandomState(7))
    assert efficiency == pytest.approx(1.0)
    assert found is SINGLE


WIDTHS = np.array([1.0, 5.0, 0.1])
DEPTH = 1.5  # standard deviation of the last unknown


def funnel(z: np.ndarray) -> np.ndarray:
    """A normal last unknown, and others that are normal given it, as wide as its exponential; normalised."""
    last, others = z[:, -1], z[:, :-1] / WIDTHS
    constant = -0.5 * 4 * np.log(2 * np.pi) - np.log(DEPTH) - np.log(WIDTHS).sum()
    given = -0.5 * np.square(others).sum(axis=1) * np.exp(-2 * last) - 3 * last
    return constant + given - 0.5 * np.square(last / DEPTH)


FUNNEL_MODE = np.array([0.0, 0.0, 0.0, -3 * DEPTH**2])


def test_a_ladder_follows_a_funnel_that_its_mode_hides() -> None:
    # the mode is a spike, four and a half standard deviations down
    mode = Mode(FUNNEL_MODE, 0.0, np.diag([*(WIDTHS * np.exp(FUNNEL_MODE[-1])), DEPTH]))
    rungs = proposals.ladder(funnel, mode)
    z = rungs.draw(100_000, np.random.RandomState(1))
    weights = np.exp(funnel(z) - rungs.log_density(z))
    assert weights.mean() == pytest.approx(1.0, abs=0.02)
    assert weights.mean() ** 2 / np.square(weights).mean() > 0.4
    last = z[:, -1]
    mean = (weights * last).mean()
    assert mean == pytest.approx(0.0, abs=0.03)
    assert np.sqrt((weights * np.square(last)).mean()) == pytest.approx(DEPTH, rel=0.02)
    _, without = proposals.adapt(funnel, proposals.from_mode(mode), np.random.RandomState(2))
    assert without < 0.4


def test_shares_weigh_components() -> None:
    centres, roots = np.array([[-10.0], [10.0]]), np.ones((2, 1, 1))
    uneven = Proposal(centres, roots, np.array([0.2, 0.8]))
    z = uneven.draw(20_000, np.random.RandomState(1))
    assert (z > 0).mean() == pytest.approx(0.8, abs=0.01)
    expected = 0.8 * multivariate_t.pdf(10.0, 10.0, 1.0, df=FREEDOM)
    assert np.exp(uneven.log_density(np.array([[10.0]])))[0] == pytest.approx(expected, rel=1e-6)
