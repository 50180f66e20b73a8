"""The few nodes that stand for a fin's side: Gauss rules, integrals, and every shape in its linear limit."""

from itertools import product

import numpy as np
import pytest
from fin_shapes import ALL, BLUNT, CLOSED, OTHER_BLUNT, coefficient
from scipy.integrate import quad

from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    ConvectiveTip,
    Fin,
    FixedTip,
    PowerCoefficient,
    Radiating,
    Table,
    UniformCoefficient,
    VaryingCoefficient,
    nonlinear,
    pin,
    solve,
)
from finback.models.gauss import gauss
from finback.models.nodes import PLANS, Plan, nodes
from finback.models.sides import Shape, grid

K, AIR, HOT = 150.0, 295.0, 370.0
HELD = {"pin", *BLUNT, *OTHER_BLUNT}
TIPS = {"adiabatic": AdiabaticTip(), "side": ConvectiveTip(), "held": FixedTip(310.0)}


@pytest.mark.parametrize("n", [1, 5, 16])
def test_a_level_weight_has_the_rule_of_gauss_and_legendre(n):
    fine, weight = np.polynomial.legendre.leggauss(60)
    rule = gauss(3 + 2 * fine, weight, n)
    nodes, weights = np.polynomial.legendre.leggauss(n)
    assert rule.points == pytest.approx(3 + 2 * nodes, rel=1e-12)
    assert rule.roots**2 == pytest.approx(weights, rel=1e-11)
    assert np.einsum("q,qi,qj->ij", weight, rule.functions, rule.functions) == pytest.approx(
        np.eye(n), abs=1e-12
    )


def test_a_weight_of_a_shape_has_a_rule_for_powers():
    """With the weight of a cone's side, x to the power of 2 n - 1 is integrated exactly."""
    fine, weight = np.polynomial.legendre.leggauss(60)
    s = (1 + fine) / 2
    rule = gauss(s, s * weight / 2, 6)
    for power in range(12):
        assert rule.roots**2 @ rule.points**power == pytest.approx(1 / (power + 2), rel=1e-12)


@pytest.mark.parametrize("name", BLUNT | OTHER_BLUNT)
def test_side_and_resistance_of_a_grid(name):
    profile = ALL[name]
    fine = grid(Shape(profile, (), "free"), 28, 1, 0)
    breaks = list(getattr(profile, "breaks", ()))

    def inverse(x):
        return 1 / float(profile.area(np.array([x]))[0])

    whole = quad(inverse, 0, profile.length, points=breaks or None, epsrel=1e-10, limit=500)[0]
    assert fine.side.sum() == pytest.approx(profile.side_area(), rel=1e-12)
    assert fine.resistance.sum() == pytest.approx(whole, rel=1e-9)
    half = quad(inverse, 0, profile.length / 2, points=[b for b in breaks if b < profile.length / 2] or None)[
        0
    ]
    assert fine.fall(fine.even, np.array([0.0, 0.5, 1.0]))[:, 0] == pytest.approx([0, half, whole], rel=1e-9)


@pytest.mark.parametrize("plan", [Plan(4), Plan(16), Plan(24, 4), Plan(24, 1, 3)])
@pytest.mark.parametrize("tip", ["free", "face", "held"])
def test_the_equations_are_symmetric_and_count_the_surface_once(tip, plan):
    profile = ALL["truncated cone"]
    found = nodes(Shape(profile, (), tip), plan)
    face = float(profile.area(np.array([profile.length]))[0]) if tip == "face" else 0.0
    assert np.square(found.roots).sum() == pytest.approx(profile.side_area() + face, rel=1e-12)
    assert found.compliance == pytest.approx(found.compliance.T, rel=1e-12)
    assert np.all(found.rates > 0)
    assert np.all((found.places > 0) & (found.places <= 1))


def test_plans_go_from_coarse_to_fine():
    shape = Shape(ALL["pin"], (), "free")
    reach = [nodes(shape, plan).largest for plan in PLANS if not plan.layers]
    assert np.all(np.diff(reach) > 0)
    plan, more = Plan(4), [Plan(4)]
    while (plan := plan.finer()) is not None:
        more.append(plan)
    assert [each.count * each.pieces for each in more] == [4, 6, 8, 10, 12, 16, 20, 24, 32, 48, 96, 192, 384]


@pytest.mark.parametrize(
    ("name", "tip"), [pair for pair in product(ALL, TIPS) if pair[1] != "held" or pair[0] in HELD]
)
def test_every_shape_has_its_linear_solution_as_limit(name, tip):
    profile = ALL[name]
    h = coefficient(profile, np.array([0.01, 0.3, 1.0, 4.0, 15.0]), K)
    x = profile.length * np.array([0.0, 0.3, 0.7, 0.95])
    base = BaseTemperature(HOT)
    linear = solve(Fin(profile, K, UniformCoefficient(h), TIPS[tip]), base, AIR, x)
    limit = solve(Fin(profile, K, PowerCoefficient(h, 0.0, 30.0), TIPS[tip]), base, AIR, x)
    assert np.all(limit.converged)
    assert limit.base_heat == pytest.approx(linear.base_heat, rel=1e-6)
    assert limit.temperatures == pytest.approx(linear.temperatures, rel=0, abs=1e-6 * (HOT - AIR))


FEW = {"cone", "turned shaft", "convex pin", "annular"}
SHORT_TO_LONG = np.array([1e-6, 1e-4, 1e-2, 0.3, 1.0, 4.0, 15.0, 60.0, 300.0, 1e3, 1e4])


@pytest.mark.parametrize(
    "name", [pytest.param(name, marks=() if name in FEW else pytest.mark.slow) for name in ALL]
)
def test_any_law_on_any_shape_from_short_to_endless(name):
    """Four shapes; the slow suite has all of them: sharp tips, tips thinner than a hair, jumps."""
    profile = ALL[name]
    h, excess = coefficient(profile, SHORT_TO_LONG, K), HOT - AIR
    laws = (
        PowerCoefficient(h, 0.25, excess),
        Radiating(PowerCoefficient(h, 1 / 3, excess), 0.8, AIR),
        VaryingCoefficient(h, 0.5),
        PowerCoefficient(h, 0.0, excess),
    )
    for tip in [AdiabaticTip(), ConvectiveTip(), ConvectiveTip(300.0), *([TIPS["held"]] * (name in HELD))]:
        base, x = BaseTemperature(HOT), np.linspace(0, profile.length, 9)
        linear, *others = (
            solve(Fin(profile, K, law, tip), base, AIR, x) for law in (UniformCoefficient(h), *laws)
        )
        for found in others:
            for value in (found.temperatures, found.base_heat, found.tip_heat, found.tip_temperature):
                assert np.all(np.isfinite(value))
            assert np.all(np.abs(found.temperatures - (HOT + AIR) / 2) <= excess / 2 + 1e-6 * excess)
            assert np.all(found.converged)
        assert others[-1].base_heat == pytest.approx(linear.base_heat, rel=1e-8)
        assert others[-1].temperatures == pytest.approx(linear.temperatures, rel=0, abs=1e-7 * excess)


@pytest.mark.parametrize("name", [name for name in CLOSED if "concave" in name])
def test_heat_does_not_reach_the_tip_of_a_concave_fin(name):
    profile = ALL[name]
    law = Radiating(PowerCoefficient(20.0, 0.25, 40.0), 0.5, AIR)
    found = solve(Fin(profile, K, law, AdiabaticTip()), BaseTemperature(HOT), AIR, np.array([profile.length]))
    assert found.tip_temperature == pytest.approx(AIR, abs=1e-9)
    assert found.temperatures == pytest.approx(AIR, abs=1e-9)
    lossless = solve(
        Fin(profile, K, Radiating(UniformCoefficient(0.0), 0.0), AdiabaticTip()),
        BaseTemperature(HOT),
        AIR,
        np.array([]),
    )
    assert lossless.tip_temperature == pytest.approx(HOT, rel=1e-12)


@pytest.mark.parametrize("name", [name for name in ALL if "concave" in name])
def test_a_cold_tip_is_as_cold_as_the_air_however_long_the_fin_is(name):
    """Temperatures fall from base to tip, to that of the air: rounding near the tip is none of theirs."""
    profile, excess = ALL[name], HOT - AIR
    law = PowerCoefficient(coefficient(profile, np.array([6.0, 60.0, 300.0, 1e3, 1e4]), K), 0.25, excess)
    fin, base = Fin(profile, K, law, AdiabaticTip()), BaseTemperature(HOT)
    x = profile.length * np.array([0.0, 0.3, 0.7, 0.9, 0.97, 0.99, 0.995, 0.998, 0.9985, 0.999])
    found = solve(fin, base, AIR, x)
    assert np.all(found.converged)
    assert found.temperatures.min() >= AIR - 1e-6 * excess
    assert np.diff(found.temperatures, axis=1).max() <= 1e-6 * excess
    assert not np.any(nonlinear.solve(fin, base, AIR, x, steps=2).converged[1:])


def test_a_table_of_many_rows_is_the_shape_it_follows():
    """A pin by a table of 40 rows has kinks at each of them that are none."""
    rows = np.linspace(0, 0.08, 40)
    table = Table(rows, np.full(40, np.pi / 4 * 0.006**2), np.full(40, np.pi * 0.006))
    law, x = PowerCoefficient(30.0, 0.25, 40.0), np.linspace(0, 0.08, 5)
    one, other = (
        solve(Fin(profile, K, law, ConvectiveTip()), BaseTemperature(HOT), AIR, x)
        for profile in (table, pin(0.08, 0.006))
    )
    assert one.temperatures == pytest.approx(other.temperatures, abs=1e-6)
    assert one.base_heat == pytest.approx(other.base_heat, rel=1e-9)
