"""Least squares against numpy's linear solver and scipy's curve_fit; test_nist.py has certified values."""

import numpy as np
import pytest
from scipy.optimize import curve_fit

from finback import least_squares


def test_a_linear_problem_is_solved_exactly() -> None:
    rng = np.random.default_rng(1)
    design, y = rng.normal(size=(20, 4)), rng.normal(size=20)
    found = least_squares.fit(lambda block: y - block @ design.T, np.zeros(4))
    expected, (square,), _, _ = np.linalg.lstsq(design, y, rcond=None)
    np.testing.assert_allclose(found.values, expected, rtol=1e-8)
    np.testing.assert_allclose(found.covariance, np.linalg.inv(design.T @ design), rtol=1e-7)
    np.testing.assert_allclose(found.jacobian, -design, rtol=1e-8)
    assert found.chi_square == pytest.approx(square, rel=1e-12)


def test_a_nonlinear_problem_as_scipy_fits_it() -> None:
    rng = np.random.default_rng(2)
    x = np.linspace(0.0, 4.0, 30)

    def decay(x: np.ndarray, high: float, rate: float, low: float) -> np.ndarray:
        return high * np.exp(-rate * x) + low

    sd = np.linspace(0.05, 0.2, 30)
    y = decay(x, 5.0, 0.8, 1.5) + sd * rng.standard_normal(30)
    start = np.array([4.0, 1.0, 1.0])
    tight = {"ftol": 1e-14, "xtol": 1e-14}
    expected, covariance = curve_fit(decay, x, y, p0=start, sigma=sd, absolute_sigma=True, **tight)
    found = least_squares.fit(lambda b: np.array([(y - decay(x, *row)) / sd for row in b]), start)
    np.testing.assert_allclose(found.values, expected, rtol=1e-6)
    np.testing.assert_allclose(found.covariance, covariance, rtol=1e-5)


def bent_valley(block: np.ndarray) -> np.ndarray:
    """Rosenbrock's: from (-1.2, 1) the iteration takes 20 to 30 steps to (1, 1)."""
    return np.stack([10 * (block[:, 1] - block[:, 0] ** 2), 1 - block[:, 0]], axis=1)


def test_a_valley_that_the_iteration_does_not_leave_is_left_to_the_trust_region(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(least_squares, "MAX_ITERATIONS", 15)
    found = least_squares.fit(bent_valley, np.array([-1.2, 1.0]))
    assert found.converged
    np.testing.assert_allclose(found.values, 1.0, rtol=1e-9)


def test_what_neither_solves_is_not_called_converged(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(least_squares, "MAX_ITERATIONS", 3)
    monkeypatch.setattr(least_squares, "MAX_TRUST_REGION", 3)
    found = least_squares.fit(bent_valley, np.array([-1.2, 1.0]))
    assert not found.converged
    assert np.isfinite(found.values).all()


def test_two_unknowns_that_enter_as_a_ratio_leave_their_product_open() -> None:
    x = np.linspace(0.1, 2.0, 12)

    # exp(z0 - z1) only: in logarithms, as h and k enter temperatures along a fin
    def residuals(block: np.ndarray) -> np.ndarray:
        return np.exp(-2 * x) - np.exp(-np.exp(block[:, :1] - block[:, 1:]) * x)

    found = least_squares.fit(residuals, np.array([0.3, 0.1]))
    assert found.rank == 1
    assert found.null_space.shape == (2, 1)
    direction = found.null_space[:, 0] / np.abs(found.null_space).max()
    np.testing.assert_allclose(np.abs(direction), [1.0, 1.0], rtol=1e-6)
    assert direction[0] * direction[1] > 0
    ratio = np.array([1.0, -1.0])
    assert np.abs(ratio @ found.null_space).max() < 1e-6 * np.abs(found.null_space).max()
    assert found.values[0] - found.values[1] == pytest.approx(np.log(2.0), abs=1e-7)


def test_an_unknown_that_enters_nothing_is_the_null_space() -> None:
    found = least_squares.fit(lambda b: b[:, :1] - np.array([1.0, 2.0, 3.0]), np.array([0.0, 5.0]))
    assert found.rank == 1
    np.testing.assert_allclose(found.null_space, [[0.0], [1.0]], atol=1e-9)
    assert found.values[0] == pytest.approx(2.0)
    assert found.covariance[0, 0] == pytest.approx(1 / 3)


def test_fewer_readings_than_unknowns() -> None:
    design = np.array([[1.0, 2.0, 3.0]])
    covariance, rank, null_space = least_squares.invert_information(design)
    assert rank == 1
    assert null_space.shape == (3, 2)
    np.testing.assert_allclose(design @ null_space, 0.0, atol=1e-12)
    np.testing.assert_allclose(design @ covariance @ design.T, 1.0, rtol=1e-12)


@pytest.mark.parametrize("scale", [1e-8, 1.0, 1e8])
def test_the_rank_does_not_depend_on_the_units(scale: float) -> None:
    rng = np.random.default_rng(3)
    design = rng.normal(size=(10, 3)) * [1.0, scale, 1.0]
    covariance, rank, _ = least_squares.invert_information(design)
    assert rank == 3
    expected = np.linalg.inv((design / [1, scale, 1]).T @ (design / [1, scale, 1]))
    np.testing.assert_allclose(covariance * np.outer([1, scale, 1], [1, scale, 1]), expected, rtol=1e-9)


def test_the_jacobian_is_good_to_nine_digits() -> None:
    x = np.linspace(0.0, 2.0, 7)
    z = np.array([0.4, -0.7])
    found = least_squares.jacobian(lambda b: np.exp(b[:, :1] + b[:, 1:] * x), z)
    exact = np.exp(z[0] + z[1] * x)[:, None] * np.stack([np.ones_like(x), x], axis=1)
    np.testing.assert_allclose(found, exact, rtol=1e-9, atol=1e-10)


def test_rescaling_residuals_rescales_all_that_hangs_on_them() -> None:
    design = np.array([[1.0, 0.0], [1.0, 1.0], [1.0, 2.0]])
    y = np.array([0.0, 1.0, 1.0])
    plain = least_squares.fit(lambda b: y - b @ design.T, np.zeros(2))
    scaled = least_squares.fit(lambda b: 3 * (y - b @ design.T), np.zeros(2))
    rescaled = plain.rescaled(3.0)
    np.testing.assert_allclose(rescaled.covariance, scaled.covariance, rtol=1e-9)
    np.testing.assert_allclose(rescaled.jacobian, scaled.jacobian, rtol=1e-9)
    assert rescaled.chi_square == pytest.approx(scaled.chi_square, rel=1e-9)
