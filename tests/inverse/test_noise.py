"""The noise of readings: its covariance, and the same in independent parts.

Checked against covariances written out by hand from the definition, block by block.
"""

import numpy as np
import pytest

from finback import noise
from finback.noise import REFERENCE_SIGMA

N_FIN = 4
CALIBRATION, RANDOM = 0.3, 0.2  # K


def block_covariance(offset: float, random: float, n: int = N_FIN) -> np.ndarray:
    """The covariance of n sensors with a common offset and noise of their own, by definition."""
    return np.full((n, n), offset**2) + random**2 * np.eye(n)


@pytest.mark.parametrize("sigma", [1e-6, 0.01, REFERENCE_SIGMA, 2.0, 500.0])
def test_covariance_is_the_stated_part_plus_sigma_squared_where_estimated(sigma: float) -> None:
    estimated = np.array([True, True, False, True])
    stated = block_covariance(CALIBRATION, 0.0) + np.diag([0.0, 0.0, RANDOM**2, 0.0])
    built = noise.build(stated, estimated)
    expected = stated + sigma**2 * np.diag(estimated.astype(float))
    np.testing.assert_allclose(built.covariance(sigma), expected, rtol=1e-9, atol=1e-12 * expected.max())


def test_covariance_of_stated_noise_does_not_depend_on_sigma() -> None:
    stated = block_covariance(CALIBRATION, RANDOM)
    built = noise.build(stated, np.zeros(N_FIN, dtype=bool))
    assert not built.estimated
    for sigma in (0.1, 10.0):
        np.testing.assert_allclose(built.covariance(sigma), stated, rtol=1e-12)


@pytest.mark.parametrize("sigma", [1e-3, 0.2, 7.0])
@pytest.mark.parametrize("offset", [0.0, 0.3, 5.0])
def test_parts_are_independent_and_give_determinant_and_square(offset: float, sigma: float) -> None:
    built = noise.build(block_covariance(offset, 0.0), np.ones(N_FIN, dtype=bool))
    covariance = block_covariance(offset, sigma)
    variances = built.variances(sigma)
    parts = built.basis.T @ covariance @ built.basis
    # relative to the part itself: one part holds the offset and may be 1e7 times the others
    scaled = parts / np.sqrt(np.outer(variances, variances))
    np.testing.assert_allclose(scaled, np.eye(N_FIN), atol=1e-9)
    log_det = built.log_det + np.log(variances).sum()
    # the determinant of a constant block plus a diagonal, exactly: n - 1 parts of noise, one with the offset
    exact = 2 * (N_FIN - 1) * np.log(sigma) + np.log(sigma**2 + N_FIN * offset**2)
    assert log_det == pytest.approx(exact, abs=1e-9)
    residuals = np.array([0.3, -0.1, 0.2, 0.5])
    square = float((np.square(residuals @ built.basis) / variances).sum())
    mean, spread = residuals.mean(), residuals - residuals.mean()
    expected = N_FIN * mean**2 / (sigma**2 + N_FIN * offset**2) + spread @ spread / sigma**2
    assert square == pytest.approx(expected, rel=1e-9)


def test_variances_take_a_block_of_sigmas() -> None:
    built = noise.build(block_covariance(CALIBRATION, 0.0), np.ones(N_FIN, dtype=bool))
    sigmas = np.array([0.1, 0.2, 0.4])
    block = built.variances(sigmas[:, None])
    assert block.shape == (3, N_FIN)
    for row, sigma in zip(block, sigmas, strict=True):
        np.testing.assert_array_equal(row, built.variances(float(sigma)))


def test_a_common_offset_stays_when_the_noise_vanishes() -> None:
    built = noise.build(block_covariance(CALIBRATION, 0.0), np.ones(N_FIN, dtype=bool))
    # the mean of readings without noise is wrong by the offset, their differences by nothing
    covariance = built.covariance(1e-9)
    mean = np.full(N_FIN, 1 / N_FIN)
    assert mean @ covariance @ mean == pytest.approx(CALIBRATION**2, rel=1e-9)
    difference = np.array([1.0, -1.0, 0.0, 0.0])
    assert abs(difference @ covariance @ difference) < 1e-12


def test_a_reading_without_any_noise_is_refused() -> None:
    with pytest.raises(ValueError, match="every reading needs a noise"):
        noise.build(np.diag([0.1, 0.0]), np.zeros(2, dtype=bool))
