"""The mode of a density and its curvature there, on densities whose mode and curvature are known exactly."""

import math

import numpy as np
import pytest

from finback.laplace import find_mode


def gaussian(mean: np.ndarray, covariance: np.ndarray) -> object:
    precision = np.linalg.inv(covariance)
    constant = -0.5 * (len(mean) * math.log(2 * math.pi) + np.linalg.slogdet(covariance)[1])
    return lambda z: constant - 0.5 * np.einsum("ij,jk,ik->i", z - mean, precision, z - mean)


@pytest.mark.parametrize("p", range(1, 9))
@pytest.mark.parametrize("start_at", [0.0, 30.0])
def test_a_gaussian_gives_back_its_mean_and_covariance_and_holds_all_its_evidence(
    p: int, start_at: float
) -> None:
    rng = np.random.default_rng(p)
    mean = rng.normal(size=p)
    root = rng.normal(size=(p, p)) * 10.0 ** rng.uniform(-3, 1, size=(p, 1))
    covariance = root @ root.T + 1e-9 * np.eye(p)
    sds = np.sqrt(np.diag(covariance))
    guess = np.diag(sds * 10.0 ** rng.uniform(-0.7, 0.7, size=p))
    found = find_mode(gaussian(mean, covariance), mean + start_at * sds * rng.choice([-1, 1], size=p), guess)
    assert np.abs((found.z - mean) / sds).max() < 0.01
    np.testing.assert_allclose(
        found.root @ found.root.T / np.outer(sds, sds), covariance / np.outer(sds, sds), atol=1e-3
    )
    assert found.log_evidence == pytest.approx(0.0, abs=1e-3)


@pytest.mark.parametrize("shape", [0.5, 2.0, 20.0])
def test_a_skewed_density_the_logarithm_of_a_gamma_variable(shape: float) -> None:
    # density of z = ln(x), x ~ Gamma(shape): shape z - e^z - ln Gamma(shape); mode ln(shape), curvature shape
    def log_density(z: np.ndarray) -> np.ndarray:
        return (shape * z - np.exp(z)).sum(axis=1) - 2 * math.lgamma(shape)

    found = find_mode(log_density, np.array([-2.0, 2.5]), np.eye(2))
    np.testing.assert_allclose(found.z, math.log(shape), atol=0.01 / math.sqrt(shape))
    np.testing.assert_allclose(found.root @ found.root.T, np.eye(2) / shape, atol=0.01 / shape)
    # Laplace's evidence is Stirling's formula here, short by 1/(12 shape) for each variable
    assert found.log_evidence == pytest.approx(-2 / (12 * shape), abs=0.1 * 2 / (12 * shape) + 1e-4)


def test_the_mode_is_found_from_where_the_curvature_is_not_positive() -> None:
    def cauchy(z: np.ndarray) -> np.ndarray:  # convex beyond one
        return -np.log1p(np.square(z)).sum(axis=1)

    found = find_mode(cauchy, np.array([6.0, -15.0]), np.eye(2))
    np.testing.assert_allclose(found.z, 0.0, atol=0.01)
    np.testing.assert_allclose(found.root @ found.root.T, np.eye(2) / 2, atol=0.01)


def test_one_of_two_modes_is_found_from_the_saddle_between_them() -> None:
    def two(z: np.ndarray) -> np.ndarray:
        return np.logaddexp(-0.5 * np.square(z[:, 0] - 3), -0.5 * np.square(z[:, 0] + 3)) - 0.5 * np.square(
            z[:, 1]
        )

    found = find_mode(two, np.array([0.05, 1.0]), np.eye(2))
    np.testing.assert_allclose(np.abs(found.z), [3.0, 0.0], atol=0.02)
    np.testing.assert_allclose(found.root @ found.root.T, np.eye(2), atol=0.02)


def test_a_direction_without_curvature_keeps_a_finite_scale() -> None:
    found = find_mode(lambda z: -0.5 * np.square(z[:, 0] - 1.0), np.zeros(2), np.eye(2))
    assert found.z[0] == pytest.approx(1.0, abs=0.01)
    assert np.isfinite(found.root).all()
    assert np.linalg.slogdet(found.root)[0] != 0


def test_steps_into_a_region_without_density_are_shortened() -> None:
    def cut(z: np.ndarray) -> np.ndarray:  # a normal of mean 0.5 that ends at zero
        inside = z[:, 0] > 0
        return np.where(inside, -0.5 * np.square((z[:, 0] - 0.5) / 0.1), -np.inf)

    found = find_mode(cut, np.array([0.9]), np.array([[2.0]]))
    assert found.z[0] == pytest.approx(0.5, abs=0.01)


def test_a_mode_at_an_edge_ends_the_search_beside_it() -> None:
    def half(z: np.ndarray) -> np.ndarray:
        return np.where(z[:, 0] > 0, -0.5 * np.square(z).sum(axis=1), -np.inf)

    found = find_mode(half, np.array([0.3, 1.0]), np.eye(2))
    assert 0 < found.z[0] < 0.3
    assert np.isfinite(found.root).all()


def test_a_loose_tolerance_stops_early() -> None:
    calls = []

    def counted(z: np.ndarray) -> np.ndarray:
        calls.append(len(z))
        return z[:, 0] - np.exp(z[:, 0])

    exact = find_mode(counted, np.array([1.5]), np.eye(1))
    needed = len(calls)
    near = find_mode(counted, np.array([1.5]), np.eye(1), tolerance=0.1)
    assert len(calls) - needed < needed
    assert exact.z[0] == pytest.approx(0.0, abs=0.01)
    assert near.z[0] == pytest.approx(0.0, abs=0.5)
