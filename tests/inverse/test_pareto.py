"""The fit of a tail against samples of known distributions and arviz's smoothing of importance weights."""

import arviz
import numpy as np
import pytest
from scipy.stats import genpareto

from finback import pareto


@pytest.mark.parametrize("k", [-0.5, -0.1, 0.0, 0.3, 0.7, 1.2])
@pytest.mark.parametrize("scale", [1e-6, 3.0])
def test_known_samples_give_back_shape_and_scale(k: float, scale: float) -> None:
    n = 4000
    draws = genpareto.rvs(k, scale=scale, size=(20, n), random_state=7)
    found = np.array([pareto.fit(np.sort(each)) for each in draws])
    # the asymptotic errors of maximum likelihood: Smith, Biometrika 72 (1985) 67
    expected = np.array([(1 + k) / np.sqrt(n), np.sqrt(2 * (1 + k) / n)])
    errors = (found - [k, scale]) / [1.0, scale]
    assert (np.abs(errors.mean(axis=0)) < 4 * expected / np.sqrt(20) + 1e-3).all()
    assert (errors.std(axis=0) < 1.6 * expected).all()


@pytest.mark.parametrize("k", [0.2, 0.5, 0.9])
def test_the_tail_of_a_power_law_has_its_exponent(k: float) -> None:
    values = np.random.default_rng(3).random(20_000) ** -k
    assert pareto.shape(values) == pytest.approx(k, abs=0.15)
    assert pareto.smooth(values)[1] == pytest.approx(pareto.shape(values))


@pytest.mark.parametrize(("n", "k"), [(400, 0.3), (4096, 0.1), (4096, 0.6), (10_000, 1.1)])
def test_smoothing_is_arvizs(n: int, k: float) -> None:
    if not arviz.__version__.startswith("0."):
        pytest.skip("psislw has another form in arviz 1.x")
    log_ratios = -k * np.log(np.random.default_rng(n).random(n))
    theirs, khat = arviz.psislw(log_ratios)
    found, own = pareto.smooth(np.exp(log_ratios - log_ratios.max()))
    assert own == pytest.approx(float(khat), abs=1e-9)
    np.testing.assert_allclose(found / found.sum(), np.exp(theirs), rtol=1e-6)


def test_smoothing_keeps_the_order_and_the_largest() -> None:
    ratios = np.random.default_rng(1).random(4096) ** -0.8
    found, _ = pareto.smooth(ratios)
    assert found.max() <= ratios.max()
    order = np.argsort(ratios)
    assert (np.diff(found[order]) >= 0).all()
    np.testing.assert_array_equal(found[order[:3800]], ratios[order[:3800]])


@pytest.mark.parametrize("values", [np.ones(1000), np.zeros(1000), np.repeat([0.0, 1.0], [999, 1])])
def test_what_has_no_tail_is_left_alone(values: np.ndarray) -> None:
    found, k = pareto.smooth(values)
    np.testing.assert_array_equal(found, values)
    assert k == -np.inf
