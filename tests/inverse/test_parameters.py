"""Parameters: coordinates, priors, and how they are said."""

import math

import numpy as np
import pytest

from finback.parameters import DEFAULT_PRIORS, LABELS, PRACTICE, default, reported, stated
from finback.quantity import Quantity


@pytest.mark.parametrize("name", DEFAULT_PRIORS)
def test_every_parameter_has_a_label_a_unit_and_a_wide_prior(name: str) -> None:
    parameter = default(name)
    assert LABELS[name] in parameter.describe()
    assert parameter.unit in parameter.describe() or parameter.unit == "1"
    if name in PRACTICE:
        assert parameter.stated
        assert parameter.prior.sd < parameter.default_prior.sd / 2
        assert "(common practice)" in parameter.describe()
        return
    assert not parameter.stated
    assert "(wide default)" in parameter.describe()
    assert parameter.prior == parameter.default_prior


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [
        ("h", 5.0, 500.0),  # still gas to slow liquid
        ("k", 14.0, 400.0),  # stainless steel to copper
        ("joint", 2e-5, 5e-4),  # handbook tables of contact resistance
        ("air", 200.0, 390.0),
        ("plate", 80.0, 800.0),
        ("noise", 0.02, 2.0),
    ],
)
def test_default_priors_are_wide_where_fins_are(name: str, low: float, high: float) -> None:
    parameter = default(name)
    for value in (low, high):
        z = math.log(value) if parameter.transform == "log" else value
        assert abs(z - parameter.prior.mean) <= 1.05 * parameter.prior.sd


def test_a_stated_quantity_is_its_prior() -> None:
    k = stated("k", Quantity(167.0, 8.35))
    assert k.stated
    assert math.exp(k.prior.mean) == pytest.approx(167.0)
    assert k.prior.sd == pytest.approx(0.05, rel=1e-2)
    assert k.describe() == "conductivity k: 167 W/(m K) ± 5 % (stated)"
    tip = stated("tip_temperature", Quantity(288.15, 2.0))
    assert (tip.prior.mean, tip.prior.sd) == (288.15, 2.0)
    assert tip.describe() == "tip temperature: 15 degC ± 2 K (stated)"


def test_temperatures_are_reported_in_degrees_celsius_and_nothing_else_is() -> None:
    values = np.array([273.15, 373.15])
    np.testing.assert_allclose(reported("air", values), [0.0, 100.0])
    np.testing.assert_array_equal(reported("h", values), values)
    np.testing.assert_array_equal(reported("noise", values), values)
