"""Efficiency and effectiveness: limits, laws, and which area is counted.

Worked examples and exact values stand in test_worked_examples.py and test_exact_solutions.py.
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    ConvectiveTip,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    UniformCoefficient,
    effectiveness,
    efficiency,
    pin,
    solve,
)

PROFILE = pin(length=0.06, diameter=0.006)
K, AIR, BASE = 150.0, 295.0, 370.0
NOWHERE = np.array([])
SIDE = PROFILE.side_area()
FACE = PROFILE.section_area
LENGTHS = st.floats(np.log(1e-6), np.log(1e4)).map(lambda value: float(np.exp(value)))


def coefficient_for(mL):
    return (mL / PROFILE.length) ** 2 * K * FACE / PROFILE.section_perimeter


def performance(h, tip, base=None, air=AIR):
    fin = Fin(PROFILE, K, UniformCoefficient(h), tip)
    solution = solve(fin, base or BaseTemperature(BASE), air, NOWHERE)
    return efficiency(fin, solution, air), effectiveness(fin, solution, air), solution


@given(mL=LENGTHS)
def test_an_insulated_tip_has_the_textbooks_efficiency(mL):
    """tanh(mL)/(mL): Incropera, Fundamentals of Heat and Mass Transfer, Table 3.5."""
    eta, _, _ = performance(coefficient_for(mL), AdiabaticTip())
    assert eta == pytest.approx([np.tanh(mL) / mL], rel=1e-11)


@given(mL=LENGTHS)
def test_effectiveness_is_efficiency_times_the_areas(mL):
    eta, epsilon, _ = performance(coefficient_for(mL), AdiabaticTip())
    assert epsilon == pytest.approx(eta * SIDE / FACE, rel=1e-12)
    eta, epsilon, _ = performance(coefficient_for(mL), ConvectiveTip())
    assert epsilon == pytest.approx(eta * (SIDE + FACE) / FACE, rel=1e-12)


def test_efficiency_falls_from_one_as_the_fin_grows_long():
    for tip in (AdiabaticTip(), ConvectiveTip()):
        eta, _, _ = performance(coefficient_for(np.geomspace(1e-5, 1e3, 60)), tip)
        assert np.all(np.diff(eta) < 0)
        assert eta[0] == pytest.approx(1, abs=1e-9)
        assert 0 < eta[-1] < 2e-3


@pytest.mark.parametrize("h", [1e-290, 1e-30, 1e-20, 1e-12])
def test_efficiency_is_one_however_little_convects(h):
    for tip in (AdiabaticTip(), ConvectiveTip()):
        eta, _, _ = performance(h, tip)
        assert eta == pytest.approx([1.0], rel=1e-11)


def test_a_long_fin_has_the_textbooks_effectiveness():
    """sqrt(k P/(h A)): Incropera, Fundamentals of Heat and Mass Transfer, section 3.6.3."""
    h = coefficient_for(40.0)
    expected = np.sqrt(K * PROFILE.section_perimeter / (h * FACE))
    for tip in (AdiabaticTip(), ConvectiveTip(), InfiniteTip()):
        assert performance(h, tip)[1] == pytest.approx([expected], rel=1e-12)


def test_the_tip_face_counts_where_it_convects_as_the_side_does():
    h = coefficient_for(0.7)
    eta, _, solution = performance(h, ConvectiveTip())
    assert solution.base_heat == pytest.approx(eta * h * (SIDE + FACE) * (BASE - AIR), rel=1e-12)
    for tip in (AdiabaticTip(), ConvectiveTip(h), ConvectiveTip(20 * h), FixedTip(320.0), InfiniteTip()):
        eta, _, solution = performance(h, tip)
        assert solution.base_heat == pytest.approx(eta * h * SIDE * (BASE - AIR), rel=1e-12)


def test_a_cooled_tip_may_take_more_than_the_side_could():
    h = coefficient_for(0.1)
    assert performance(h, FixedTip(AIR))[0] > 1
    assert performance(h, ConvectiveTip(1e4 * h))[0] > 1
    assert performance(h, FixedTip(BASE + 50))[0] < 0


@given(mL=LENGTHS, bond=st.floats(1e-6, 1e2))
def test_a_joint_changes_the_heat_and_not_the_fin(mL, bond):
    h = coefficient_for(mL)
    free = performance(h, ConvectiveTip(), air=0.0, base=BaseTemperature(75.0))
    behind = performance(h, ConvectiveTip(), air=0.0, base=Joint(75.0, bond * PROFILE.length / K))
    assert behind[0] == pytest.approx(free[0], rel=1e-12)
    assert behind[1] == pytest.approx(free[1], rel=1e-12)
    assert behind[2].base_heat <= free[2].base_heat


def test_efficiency_does_not_depend_on_the_temperatures():
    h = coefficient_for(0.7)
    hot, cold = (performance(h, AdiabaticTip(), BaseTemperature(base))[0] for base in (450.0, 200.0))
    assert hot == pytest.approx(cold, rel=1e-12)


def test_nothing_over_nothing_is_not_a_number():
    for h, base in ((40.0, AIR), (0.0, BASE)):
        eta, epsilon, _ = performance(h, AdiabaticTip(), BaseTemperature(base))
        assert np.isnan(eta).all()
        assert np.isnan(epsilon).all()
    fin = Fin(PROFILE, K, UniformCoefficient(np.array([0.0, 40.0])), AdiabaticTip())
    eta = efficiency(fin, solve(fin, BaseTemperature(BASE), AIR, NOWHERE), AIR)
    assert np.isnan(eta).tolist() == [True, False]


def test_one_value_a_set():
    h, air = np.array([20.0, 40.0, 80.0]), np.array([290.0, 295.0, 300.0])
    eta, epsilon, _ = performance(h, ConvectiveTip(), air=air)
    assert eta.shape == epsilon.shape == (3,)
    for row in range(3):
        single = performance(float(h[row]), ConvectiveTip(), air=float(air[row]))
        assert eta[row] == pytest.approx(single[0][0], rel=1e-13)
        assert epsilon[row] == pytest.approx(single[1][0], rel=1e-13)
