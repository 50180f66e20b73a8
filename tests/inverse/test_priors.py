"""Priors against scipy's distributions."""

import math

import numpy as np
import pytest
from scipy.stats import lognorm, norm

from finback.priors import Normal, log_normal, within_a_factor


@pytest.mark.parametrize("relative", [1e-3, 0.05, 0.3, 2.0])
def test_a_relative_uncertainty_is_that_of_the_value(relative: float) -> None:
    prior = log_normal(167.0, relative)
    value = lognorm(s=prior.sd, scale=math.exp(prior.mean))
    assert value.median() == pytest.approx(167.0)
    assert value.std() / value.mean() == pytest.approx(relative, rel=1e-9)


def test_a_factor_is_one_standard_deviation() -> None:
    prior = within_a_factor(50.0, 10.0)
    inside = norm.cdf(math.log(500.0), prior.mean, prior.sd) - norm.cdf(math.log(5.0), prior.mean, prior.sd)
    assert inside == pytest.approx(0.6827, abs=1e-4)


@pytest.mark.parametrize(("mean", "sd"), [(0.0, 0.0), (0.0, -1.0), (math.nan, 1.0), (0.0, math.inf)])
def test_a_prior_without_a_width_is_refused(mean: float, sd: float) -> None:
    with pytest.raises(ValueError, match="finite mean and a positive width"):
        Normal(mean, sd)


def test_priors_of_numpy_numbers_are_as_good() -> None:
    assert Normal(np.float64(1.0), np.float64(2.0)) == Normal(1.0, 2.0)
