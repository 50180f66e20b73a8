"""Non-linear fins against a boundary-value solver, integrals that are known, the heat balance, limits."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_bvp

from finback.models import (
    AdiabaticTip,
    Annular,
    BaseTemperature,
    Cone,
    ConstantConductivity,
    ConvectiveTip,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    LinearConductivity,
    PowerCoefficient,
    Radiating,
    TabledCoefficient,
    TabulatedConductivity,
    Trapezoidal,
    Uniform,
    UniformCoefficient,
    VaryingCoefficient,
    efficiency,
    nonlinear,
    pin,
    solve,
)
from finback.models.constants import STEFAN_BOLTZMANN

FIELDS = ("temperatures", "base_temperature", "base_heat", "tip_temperature", "tip_heat")
PROFILES = {
    "pin": pin(length=0.08, diameter=0.006),
    "trapezoidal": Trapezoidal(length=0.06, width=0.1, thickness=0.004, tip_thickness=0.001),
    "cone": Cone(length=0.07, diameter=0.008, tip_diameter=0.002),
    "annular": Annular(inner_diameter=0.025, outer_diameter=0.06, thickness=0.001),
}
PIN = PROFILES["pin"]
AIR, HOT = 295.0, 380.0


def coefficient(profile, mL, k):
    """Return the coefficient [W/(m² K)] that makes m L at the base what is asked for."""
    zero = np.zeros(1)
    return (mL / profile.length) ** 2 * k * float(profile.area(zero)[0] / profile.perimeter(zero)[0])


# --- fins drawn at random --------------------------------------------------------------------------------


@st.composite
def fins(draw):
    """Draw a fin, its base and the air: k(T), a power law or a place, radiation, any tip that ends."""
    profile = draw(st.sampled_from(sorted(PROFILES)).map(PROFILES.get))
    k, air = draw(st.floats(10.0, 400.0)), draw(st.floats(260.0, 320.0))
    driving = air + draw(st.sampled_from((-1.0, 1.0))) * draw(st.floats(10.0, 200.0))
    h = coefficient(profile, float(np.exp(draw(st.floats(np.log(0.05), np.log(6.0))))), k)
    convection = {
        "uniform": lambda: UniformCoefficient(h),
        "power": lambda: PowerCoefficient(h, draw(st.floats(0.0, 2.0)), abs(driving - air)),
        "line": lambda: VaryingCoefficient(h, draw(st.floats(-2.0, 2.0))),
    }[draw(st.sampled_from(("uniform", "power", "power", "line")))]()
    surface = Radiating(convection, draw(st.floats(0.0, 1.0)), draw(st.floats(200.0, 400.0)))
    conductivity = {
        "number": lambda: k,
        "line": lambda: LinearConductivity(k, 300.0, draw(st.floats(-1.5e-3, 3e-3))),
        "table": lambda: TabulatedConductivity(((200.0, 0.9 * k), (300.0, k), (400.0, 1.05 * k))),
    }[draw(st.sampled_from(("number", "line", "line", "table")))]()
    tip = {
        "adiabatic": lambda: AdiabaticTip(),
        "side": lambda: ConvectiveTip(),
        "own": lambda: ConvectiveTip(draw(st.floats(0.0, 5.0)) * h),
        "held": lambda: FixedTip(draw(st.floats(250.0, 450.0))),
    }[draw(st.sampled_from(("adiabatic", "side", "own", "held")))]()
    joint = Joint(driving, draw(st.floats(1e-3, 1.0)) * profile.length / k)
    law = draw(st.sampled_from((surface, convection)))
    return Fin(profile, conductivity, law, tip), draw(st.sampled_from((BaseTemperature(driving), joint))), air


def conductivity_at(fin, temperature):
    return fin.conductivity if isinstance(fin.conductivity, float) else fin.conductivity.at(temperature)


def driving_temperature(base):
    return base.plate_temperature if isinstance(base, Joint) else base.temperature


def extremes(fin, base, air):
    """Return the lowest and the highest temperature of all that heats and cools a fin."""
    held = (fin.tip.temperature,) if isinstance(fin.tip, FixedTip) else ()
    drawn = (air, driving_temperature(base), *held, *fin.surface.sinks(air))
    return min(drawn), max(drawn)


def by_boundary_values(fin, base, air, x, scale):
    """Return temperatures at x and the heats at both ends from scipy's collocation solver, to 1e-8.

    y: temperature over 100 K and heat over a scale. It sets out from the solution that is tested, which costs
    nothing in rigour: it ends only where its own residual is small.
    """
    profile, length = fin.profile, fin.profile.length
    (base_area, tip_area), side = profile.area(np.array([0.0, length])), fin.surface

    def slopes(x, y):
        temperature, heat = 100 * y[0], scale * y[1]
        fall = heat / (conductivity_at(fin, temperature) * profile.area(x))
        loss = profile.perimeter(x) * side.flux(temperature, air, x / length)
        return np.stack([-fall / 100, -loss / scale])

    def tip(temperature, heat):
        if isinstance(fin.tip, FixedTip):
            return temperature - fin.tip.temperature / 100
        if isinstance(fin.tip, AdiabaticTip):
            return heat
        own = fin.tip.coefficient
        law = side if own is None else UniformCoefficient(own)
        return heat - tip_area * float(law.flux(np.array([100 * temperature]), air, 1.0)[0]) / scale

    def ends(ya, yb):
        drop = base.resistance * scale * ya[1] / base_area if isinstance(base, Joint) else 0.0
        return np.array([ya[0] - (driving_temperature(base) - drop) / 100, tip(yb[0], yb[1])])

    mesh = np.linspace(0, length, 33)
    guess = solve(fin, base, air, mesh)
    heats = np.linspace(guess.base_heat[0], guess.tip_heat[0], mesh.size)
    start = np.stack([guess.temperatures[0] / 100, heats / scale])
    found = solve_bvp(slopes, ends, mesh, start, tol=1e-8, bc_tol=1e-10, max_nodes=50_000)
    assert found.success, found.message
    return 100 * found.sol(x)[0], scale * found.sol(0.0)[1], scale * found.sol(length)[1]


def check_against_boundary_values(case):
    fin, base, air = case
    x = np.linspace(0, fin.profile.length, 9)
    solution = solve(fin, base, air, x)
    assert np.all(solution.converged)
    low, high = extremes(*case)
    ideal = fin.profile.side_area() * max(abs(fin.surface.flux(np.array([low, high]), air)))
    scale = max(abs(solution.base_heat[0]), abs(solution.tip_heat[0]), 1e-3 * ideal)
    temperatures, base_heat, tip_heat = by_boundary_values(fin, base, air, x, scale)
    assert solution.temperatures[0] == pytest.approx(temperatures, rel=0, abs=1e-6 * (high - low))
    assert solution.base_temperature[0] == pytest.approx(temperatures[0], rel=0, abs=1e-6 * (high - low))
    assert solution.tip_temperature[0] == pytest.approx(temperatures[-1], rel=0, abs=1e-6 * (high - low))
    assert solution.base_heat[0] == pytest.approx(base_heat, rel=0, abs=1e-6 * scale)
    assert solution.tip_heat[0] == pytest.approx(tip_heat, rel=0, abs=1e-6 * scale)


@settings(max_examples=40, derandomize=True)
@given(fins())
def test_agrees_with_a_boundary_value_solver(case):
    """40 fins; 300 of them in the slow suite."""
    check_against_boundary_values(case)


@pytest.mark.slow
@settings(max_examples=300, derandomize=True)
@given(fins())
def test_300_fins_agree_with_a_boundary_value_solver(case):
    check_against_boundary_values(case)


# --- what goes in comes out --------------------------------------------------------------------------


def quadrature(fin):
    """Return positions [m] and weights [m²] over the side, close together towards both ends."""
    length = fin.profile.length
    halves = length * 0.5 ** np.arange(1, 25)
    breaks = length * np.array(getattr(fin.surface, "breaks", ()))
    edges = np.unique(
        np.concatenate([[0.0, length], halves, length - halves, breaks, np.linspace(0, length, 101)])
    )
    nodes, weights = np.polynomial.legendre.leggauss(12)
    half = np.diff(edges)[:, None] / 2
    x = (edges[:-1, None] + half * (1 + nodes)).ravel()
    return x, (half * weights).ravel() * fin.profile.perimeter(x)


def imbalance(fin, base, air):
    """Return base heat less tip heat less what the side loses, over the largest of them; both at all sets."""
    x, weights = quadrature(fin)
    solution = solve(fin, base, air, x)
    assert np.all(solution.converged)
    flux = fin.surface.flux(solution.temperatures.T, air, x[:, None] / fin.profile.length)
    largest = np.max([np.abs(solution.base_heat), np.abs(solution.tip_heat), weights @ np.abs(flux)], axis=0)
    return (solution.base_heat - solution.tip_heat - weights @ flux) / largest


def has_kink(case):
    """Tell whether the flux may have a kink: a power law at no excess, or a table's point on the way."""
    fin, _, air = case
    low, high = extremes(*case)
    convection = getattr(fin.surface, "convection", fin.surface)
    at_tip = isinstance(fin.tip, FixedTip) and fin.tip.temperature == air
    signs = isinstance(convection, PowerCoefficient) and (low < air < high or at_tip)
    points = fin.conductivity.points if isinstance(fin.conductivity, TabulatedConductivity) else ()
    return signs or any(low < temperature < high for temperature, _ in points)


@settings(max_examples=60, derandomize=True)
@given(fins().filter(lambda case: not has_kink(case)))
def test_base_heat_is_side_loss_and_tip_heat(case):
    assert np.abs(imbalance(*case)) < 1e-8


@settings(max_examples=30, derandomize=True)
@given(fins().filter(has_kink))
def test_base_heat_is_side_loss_and_tip_heat_across_a_kink(case):
    assert np.abs(imbalance(*case)) < 1e-8


@pytest.mark.slow
@settings(max_examples=300, derandomize=True)
@given(fins())
def test_300_fins_give_off_what_they_take_in(case):
    """The two tests above, over as many fins as are compared with the boundary-value solver."""
    assert np.abs(imbalance(*case)) < 1e-8


@settings(max_examples=60, derandomize=True)
@given(fins())
def test_heat_through_the_joint_and_the_tip_face(case):
    fin, base, air = case
    solution = solve(fin, base, air, np.array([]))
    base_area, tip_area = fin.profile.area(np.array([0.0, fin.profile.length]))
    if isinstance(base, Joint):
        drop = base.plate_temperature - solution.base_temperature[0]
        assert solution.base_heat[0] * base.resistance / base_area == pytest.approx(drop, rel=1e-8, abs=1e-9)
    if isinstance(fin.tip, ConvectiveTip):
        own = fin.tip.coefficient
        law = fin.surface if own is None else UniformCoefficient(own)
        given_off = tip_area * law.flux(solution.tip_temperature, air, 1.0)[0]
        assert solution.tip_heat[0] == pytest.approx(given_off, rel=1e-8, abs=1e-12)


# --- integrals that are known ----------------------------------------------------------------------------


def test_conductivity_that_rises_with_temperature():
    """A pin with k = k0 (1 + beta theta), by two routes at high precision that agree to 24 digits.

    A Taylor series from the tip, and shooting in the potential; a problem of Aziz, Huq, J. Heat Transfer 97
    (1975) 300.
    """
    k = LinearConductivity(150.0, AIR, 0.002)
    fin = Fin(pin(0.06, 0.006), k, UniformCoefficient(60.0), AdiabaticTip())
    solution = solve(fin, BaseTemperature(AIR + 75.0), AIR, 0.06 * np.array([0.4, 0.8, 1.0]))
    expected = [0.79552518402911, 0.69799547044472, 0.68602775808135]
    assert ((solution.temperatures[0] - AIR) / 75.0).tolist() == pytest.approx(expected, rel=1e-11)
    assert solution.base_heat[0] == pytest.approx(4.0137027804106, rel=1e-12)
    assert efficiency(fin, solution, AIR)[0] == pytest.approx(0.78864276247411, rel=1e-12)


@pytest.mark.parametrize("n", [0.0, 0.25, 1 / 3, 1.0, 2.0])
def test_an_endless_fin_in_free_convection(n):
    """Integrate theta'' = c theta^(1+n): theta'² = 2 c theta^(2+n)/(2+n), and once more."""
    h, reference, k, excess = 12.0, 40.0, 60.0, 85.0
    c = h * reference**-n * PIN.section_perimeter / (k * PIN.section_area)
    fin = Fin(PIN, k, PowerCoefficient(h, n, reference), InfiniteTip())
    x = np.linspace(0, PIN.length, 6)
    solution = solve(fin, BaseTemperature(AIR + excess), AIR, x)
    slope = np.sqrt(2 * c / (2 + n)) * excess ** (1 + n / 2)
    decay = slope / excess
    theta = excess * (np.exp(-decay * x) if n == 0 else (1 + n / 2 * decay * x) ** (-2 / n))
    assert solution.base_heat[0] == pytest.approx(k * PIN.section_area * slope, rel=1e-9)
    assert solution.temperatures[0] - AIR == pytest.approx(theta, rel=0, abs=1e-7 * excess)
    assert solution.tip_heat[0] == pytest.approx(
        k * PIN.section_area * slope * (theta[-1] / excess) ** (1 + n / 2), rel=1e-7
    )


def test_an_endless_fin_that_radiates_into_the_cold():
    """T'' = c T⁴ with c = eps sigma P/(k A): T'² = 2 c T⁵/5, T = T_b (1 + 3/2 s x)^(-2/3), s = -T_b'/T_b."""
    k, emissivity, hot, cold = 200.0, 0.85, 900.0, 1e-2
    c = emissivity * STEFAN_BOLTZMANN * PIN.section_perimeter / (k * PIN.section_area)
    fin = Fin(PIN, k, Radiating(UniformCoefficient(0.0), emissivity, cold), InfiniteTip())
    x = np.linspace(0, PIN.length, 6)
    solution = solve(fin, BaseTemperature(hot), cold, x)
    s = np.sqrt(2 * c * hot**3 / 5)
    assert solution.base_heat[0] == pytest.approx(k * PIN.section_area * s * hot, rel=1e-9)
    assert solution.temperatures[0] == pytest.approx(hot * (1 + 1.5 * s * x) ** (-2 / 3), rel=1e-8)


@pytest.mark.parametrize("b", [-2e-3, 0.0, 4e-3])
def test_a_bar_without_side_loss_conducts_by_its_mean_conductivity(b):
    """Between ends at T1 and T2 the heat is A (T1 - T2)/L times the k at their mean, if k(T) is a line."""
    k = LinearConductivity(90.0, 300.0, b)
    fin = Fin(PIN, k, UniformCoefficient(0.0), FixedTip(320.0))
    solution = solve(fin, BaseTemperature(480.0), AIR, np.array([PIN.length / 2]))
    heat = PIN.section_area / PIN.length * 160.0 * k.at(400.0)
    assert solution.base_heat == pytest.approx(heat, rel=1e-12)
    assert solution.tip_heat == pytest.approx(heat, rel=1e-12)
    middle = solution.temperatures[0, 0]
    halves = [k.at((480.0 + middle) / 2) * (480.0 - middle), k.at((middle + 320.0) / 2) * (middle - 320.0)]
    assert halves[0] == pytest.approx(halves[1], rel=1e-12)


def test_a_table_of_the_place_parts_the_fin_into_two():
    """A fin whose coefficient is h on its inner half and falls to zero at its very middle and beyond.

    The outer half loses nothing, so that the inner one ends in an adiabatic tip, but for the line between.
    """
    h, k, thin = 40.0, 120.0, 1e-6
    law = TabledCoefficient(h, ((0.0, 1.0), (0.5 - thin, 1.0), (0.5, 0.0), (1.0, 0.0)))
    base, x = BaseTemperature(HOT), PIN.length * np.array([0.1, 0.3, 0.499, 0.7, 1.0])
    whole = solve(Fin(PIN, k, law, AdiabaticTip()), base, AIR, x)
    half = replace(PIN, length=PIN.length / 2)
    inner = solve(Fin(half, k, UniformCoefficient(h), AdiabaticTip()), base, AIR, x[:3])
    assert np.all(whole.converged)
    assert whole.base_heat == pytest.approx(inner.base_heat, rel=2 * thin)
    assert whole.temperatures[0, :3] == pytest.approx(inner.temperatures[0], abs=thin * (HOT - AIR))
    assert whole.temperatures[0, 3:] == pytest.approx(inner.tip_temperature[0], abs=thin * (HOT - AIR))


# --- limits ----------------------------------------------------------------------------------------------

K, H = 120.0, 45.0
TIPS = {
    "adiabatic": AdiabaticTip(),
    "side": ConvectiveTip(),
    "own": ConvectiveTip(300.0),
    "held": FixedTip(310.0),
    "infinite": InfiniteTip(),
}
BASES = {"temperature": BaseTemperature(HOT), "joint": Joint(HOT, 2e-4)}
ALIKE = {
    "power": (K, PowerCoefficient(H, 0.0, 30.0)),
    "radiation": (K, Radiating(UniformCoefficient(H), 0.0, 400.0)),
    "rise": (K, VaryingCoefficient(H, 0.0)),
    "places": (K, TabledCoefficient(H / 2, ((0.2, 2.0), (0.6, 2.0)))),
    "slope": (LinearConductivity(K, 300.0, 0.0), UniformCoefficient(H)),
    "table": (TabulatedConductivity(((280.0, K), (320.0, K))), UniformCoefficient(H)),
    "law": (ConstantConductivity(K), UniformCoefficient(H)),
}
every_tip = pytest.mark.parametrize("tip", TIPS.values(), ids=TIPS)
every_base = pytest.mark.parametrize("base", BASES.values(), ids=BASES)


@every_base
@every_tip
@pytest.mark.parametrize("kind", ALIKE)
def test_every_law_has_the_linear_fin_as_its_limit(kind, tip, base):
    conductivity, law = ALIKE[kind]
    profiles = [PIN] if tip == TIPS["infinite"] else [PIN, PROFILES["trapezoidal"], PROFILES["annular"]]
    for profile in profiles:
        x = np.linspace(0, profile.length, 7)
        linear = solve(Fin(profile, K, UniformCoefficient(H), tip), base, AIR, x)
        limit = solve(Fin(profile, conductivity, law, tip), base, AIR, x)
        assert np.all(limit.converged)
        for name in ("base_heat", "tip_heat"):
            assert getattr(limit, name) == pytest.approx(getattr(linear, name), rel=1e-9, abs=1e-14), name
        for name in ("temperatures", "base_temperature", "tip_temperature"):
            assert getattr(limit, name) == pytest.approx(getattr(linear, name), rel=0, abs=1e-7 * (HOT - AIR))


def test_radiation_of_a_slightly_warmer_fin_is_a_coefficient():
    """Eps sigma (T⁴ - T_air⁴) is 4 eps sigma T_air³ theta (1 + 3/2 theta/T_air + ...)."""
    emissivity, tip = 0.9, ConvectiveTip()
    h_r = 4 * emissivity * STEFAN_BOLTZMANN * AIR**3
    short = []
    for excess in (1.0, 0.1):
        base = BaseTemperature(AIR + excess)
        linear = solve(Fin(PIN, K, UniformCoefficient(5.0 + h_r), tip), base, AIR, np.array([]))
        law = Radiating(UniformCoefficient(5.0), emissivity)
        radiating = solve(Fin(PIN, K, law, tip), base, AIR, np.array([]))
        short.append(radiating.base_heat[0] / linear.base_heat[0] - 1)
    most = h_r / (5.0 + h_r) * 1.5 * 0.1 / AIR
    assert 0.7 * most < short[1] < most
    assert short[0] / short[1] == pytest.approx(10.0, rel=0.01)


@pytest.mark.parametrize(
    ("conductivity", "law"),
    [
        (K, Radiating(PowerCoefficient(H, 0.3, 50.0), 0.8, 330.0)),
        (LinearConductivity(K, 300.0, 2e-3), Radiating(UniformCoefficient(H), 0.8)),
    ],
    ids=["warm surroundings", "k(T)"],
)
def test_an_endless_fin_is_the_beginning_of_a_long_one(conductivity, law):
    x = np.linspace(0, PIN.length, 5)
    endless = solve(Fin(PIN, conductivity, law, InfiniteTip()), BaseTemperature(HOT), AIR, x)
    long = replace(PIN, length=20 * PIN.length)
    longer = solve(Fin(long, conductivity, law, AdiabaticTip()), BaseTemperature(HOT), AIR, x)
    assert endless.base_heat == pytest.approx(longer.base_heat, rel=1e-6)
    assert endless.temperatures == pytest.approx(longer.temperatures, rel=0, abs=1e-6 * (HOT - AIR))


# --- symmetry, order, blocks -----------------------------------------------------------------------------


@every_base
@every_tip
@pytest.mark.parametrize("n", [0.25, 1.0, 1.6])
def test_a_cold_fin_mirrors_a_hot_one(n, tip, base):
    cold_tip = FixedTip(2 * AIR - tip.temperature) if isinstance(tip, FixedTip) else tip
    mirrored = 2 * AIR - HOT
    cold_base = Joint(mirrored, base.resistance) if isinstance(base, Joint) else BaseTemperature(mirrored)
    law, x = PowerCoefficient(H, n, 40.0), np.linspace(0, PIN.length, 5)
    hot = solve(Fin(PIN, K, law, tip), base, AIR, x)
    cold = solve(Fin(PIN, K, law, cold_tip), cold_base, AIR, x)
    assert cold.temperatures - AIR == pytest.approx(AIR - hot.temperatures, abs=1e-9)
    assert cold.base_heat == pytest.approx(-hot.base_heat, rel=1e-11)
    assert cold.tip_heat == pytest.approx(-hot.tip_heat, rel=1e-11)


@pytest.mark.parametrize("held", [320.0, 270.0], ids=["above the air", "below the air"])
def test_a_fin_held_at_both_ends_can_be_turned_round(held):
    law = Radiating(PowerCoefficient(H, 0.25, 40.0), 0.5, 300.0)
    k, x = LinearConductivity(K, 300.0, 1e-3), np.linspace(0, PIN.length, 7)
    there = solve(Fin(PIN, k, law, FixedTip(held)), BaseTemperature(HOT), AIR, x)
    back = solve(Fin(PIN, k, law, FixedTip(HOT)), BaseTemperature(held), AIR, x)
    assert np.all(there.converged & back.converged)
    assert back.temperatures[0, ::-1] == pytest.approx(there.temperatures[0], abs=1e-6 * (HOT - held))
    assert back.base_heat == pytest.approx(-there.tip_heat, rel=1e-6)
    assert back.tip_heat == pytest.approx(-there.base_heat, rel=1e-6)


def test_surroundings_warmer_than_the_air_heat_a_fin_beyond_its_base():
    law = Radiating(UniformCoefficient(2.0), 0.9, 600.0)
    solution = solve(Fin(PIN, 15.0, law, ConvectiveTip()), BaseTemperature(310.0), AIR, np.array([0.04]))
    assert 310.0 < solution.temperatures[0, 0] < 600.0
    assert solution.base_heat[0] < 0
    assert solution.radiated_heat[0] < 0


def block_of(n):
    rng = np.random.default_rng(20240711)
    law = Radiating(
        PowerCoefficient(rng.uniform(2, 400, n), rng.uniform(0, 2, n), rng.uniform(20, 60, n)),
        rng.uniform(0, 1, n),
        rng.uniform(280, 350, n),
    )
    k = LinearConductivity(rng.uniform(50, 300, n), 300.0, rng.uniform(-1e-3, 2e-3, n))
    return law, k, rng.uniform(330, 420, n), rng.uniform(0, 1e-3, n), rng.uniform(285, 300, n)


@pytest.mark.parametrize("kind", TIPS)
def test_a_block_is_its_sets_one_by_one(kind):
    n = 9
    law, k, driving, resistance, air = block_of(n)
    x = np.linspace(0, PIN.length, 4)
    block = solve(Fin(PIN, k, law, TIPS[kind]), Joint(driving, resistance), air, x)
    assert block.temperatures.shape == (n, x.size)
    assert np.all(block.converged)
    for row in range(n):
        own_law, own_k = (nonlinear.take(part, np.array([row])) for part in (law, k))
        single = solve(
            Fin(PIN, own_k, own_law, TIPS[kind]),
            Joint(float(driving[row]), float(resistance[row])),
            float(air[row]),
            x,
        )
        for name in (*FIELDS, "radiated_heat"):
            one = getattr(single, name)[0]
            assert getattr(block, name)[row] == pytest.approx(one, rel=1e-8, abs=1e-12), name


@pytest.mark.parametrize("n_x", [0, 1, 4])
def test_shapes(n_x):
    x, law = np.linspace(0, PIN.length, n_x), PowerCoefficient(10, 0.25, 30)
    for air in (295, np.array([290.0, 295.0])):
        solution = solve(Fin(PIN, 120, law, ConvectiveTip()), BaseTemperature(350), air, x)
        n = np.size(air)
        assert solution.temperatures.shape == (n, n_x)
        assert {getattr(solution, name).shape for name in (*FIELDS[1:], "radiated_heat")} == {(n,)}
        assert solution.converged.dtype == np.bool_


def test_solving_changes_nothing_it_was_given():
    law, k, driving, resistance, air = block_of(5)
    arrays = [law.emissivity, law.convection.exponent, k.value, driving, resistance, air]
    before = [array.copy() for array in arrays]
    solve(Fin(PIN, k, law, InfiniteTip()), Joint(driving, resistance), air, np.array([0.01]))
    assert all(np.array_equal(one, other) for one, other in zip(arrays, before, strict=True))


# --- hard cases ------------------------------------------------------------------------------------------


@every_tip
@pytest.mark.parametrize("n", [0.0, 0.25, 2.0])
def test_every_value_is_finite_between_what_heats_and_cools_it(n, tip):
    mL = np.array([1e-6, 1e-3, 0.1, 1.0, 5.0, 30.0, 200.0, 1e3, 1e4])
    law = Radiating(PowerCoefficient(coefficient(PIN, 1.0, K) * mL**2, n, HOT - AIR), 0.9, 330.0)
    for base in (BaseTemperature(HOT), Joint(HOT, 1e-3)):
        solution = solve(Fin(PIN, K, law, tip), base, AIR, np.linspace(0, PIN.length, 9))
        assert np.all(solution.converged)
        for name in FIELDS:
            assert np.all(np.isfinite(getattr(solution, name))), name
        slack = 1e-5 * (HOT - AIR)
        assert np.all(np.abs(solution.temperatures - (HOT + AIR) / 2) <= (HOT - AIR) / 2 + slack)


def test_a_long_fin_forgets_its_tip():
    law = PowerCoefficient(coefficient(PIN, 1e4, K), 0.25, HOT - AIR)
    heats = [
        solve(Fin(PIN, K, law, tip), BaseTemperature(HOT), AIR, np.array([])).base_heat[0]
        for tip in (AdiabaticTip(), ConvectiveTip(), FixedTip(330.0), InfiniteTip())
    ]
    assert heats == pytest.approx([heats[-1]] * 4, rel=1e-6)


def test_a_set_whose_steps_are_used_up_is_flagged():
    exponents = np.array([0.0, 2.0])
    law = PowerCoefficient(coefficient(PIN, np.array([1.0, 20.0]), K), exponents, HOT - AIR)
    fin, base = Fin(PIN, K, law, ConvectiveTip()), BaseTemperature(HOT)
    one = nonlinear.solve(fin, base, AIR, np.array([0.04]), steps=1)
    assert not one.converged[1]
    assert np.all(np.isfinite(one.temperatures))
    assert solve(fin, base, AIR, np.array([0.04])).converged.tolist() == [True, True]
    assert (
        solve(Fin(PIN, K, UniformCoefficient(H), AdiabaticTip()), base, AIR, np.array([])).converged is True
    )


def test_a_set_that_is_no_number_spoils_no_other():
    law = PowerCoefficient(np.array([H, np.nan, H]), 0.25, 40.0)
    solution = solve(Fin(PIN, K, law, ConvectiveTip()), BaseTemperature(HOT), AIR, np.array([0.04]))
    assert solution.converged.tolist() == [True, False, True]
    assert solution.base_heat[0] == solution.base_heat[2] > 0


# --- what is refused -------------------------------------------------------------------------------------


def test_a_conductivity_that_falls_to_nothing_is_refused():
    k = LinearConductivity(100.0, 300.0, -0.02)
    with pytest.raises(
        ValueError, match=r"^the conductivity must be positive wherever the fin may be, got -60"
    ):
        solve(Fin(PIN, k, UniformCoefficient(H), AdiabaticTip()), BaseTemperature(HOT), AIR, np.array([]))


def test_radiation_asks_for_absolute_temperatures():
    fin = Fin(PIN, K, Radiating(UniformCoefficient(H), 0.5), AdiabaticTip())
    with pytest.raises(ValueError, match=r"^temperatures must be absolute where a fin radiates, got -5.0 K$"):
        solve(fin, BaseTemperature(80.0), -5.0, np.array([]))


def test_a_position_outside_the_fin_is_refused():
    fin = Fin(PIN, K, PowerCoefficient(H, 0.25, 40.0), AdiabaticTip())
    with pytest.raises(ValueError, match=r"^positions must lie from 0 to the fin's 0\.08 m, got 0\.09 m$"):
        solve(fin, BaseTemperature(HOT), AIR, np.array([0.09]))


def test_what_is_no_conductivity_is_refused_by_name():
    with pytest.raises(TypeError, match=r"^str is no conductivity: it needs at, potential and temperature$"):
        solve(
            Fin(PIN, "copper", UniformCoefficient(H), AdiabaticTip()), BaseTemperature(HOT), AIR, np.array([])
        )


def test_an_infinite_tip_needs_a_uniform_profile():
    fin = Fin(PROFILES["cone"], K, PowerCoefficient(H, 0.25, 40.0), InfiniteTip())
    with pytest.raises(ValueError, match=r"^an infinite tip needs a Uniform profile"):
        solve(fin, BaseTemperature(HOT), AIR, np.array([]))


def test_an_annular_efficiency_counts_a_coefficient_at_its_places():
    """A fin that conducts without limit is at base temperature all over: its efficiency is one."""
    laws = [
        VaryingCoefficient(H, 1.5),
        Radiating(TabledCoefficient(H, ((0.0, 2.0), (0.3, 0.5), (1.0, 1.0))), 0.7, 280.0),
        PowerCoefficient(H, 0.25, 40.0),
    ]
    for profile in PROFILES.values():
        assert isinstance(profile, Uniform | Annular | Cone | Trapezoidal)
        for law in laws:
            for tip in (AdiabaticTip(), ConvectiveTip()):
                fin = Fin(profile, 1e12, law, tip)
                solution = solve(fin, BaseTemperature(HOT), AIR, np.array([]))
                assert efficiency(fin, solution, AIR)[0] == pytest.approx(1.0, rel=1e-8)
