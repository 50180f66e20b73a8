"""The solver against other ways there: a boundary-value solver, a heat balance, 40-digit arithmetic."""

from dataclasses import replace

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_bvp

from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    ConvectiveTip,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    Uniform,
    UniformCoefficient,
    solve,
)

TIPS = ("adiabatic", "side", "own", "fixed", "infinite")


def log_uniform(low, high):
    return st.floats(np.log(low), np.log(high)).map(lambda value: float(np.exp(value)))


@st.composite
def fins(draw, smallest, largest):
    """Draw a fin of m L between two values, the end its base hangs on and the air temperature."""
    profile = Uniform(
        draw(log_uniform(5e-3, 1.0)), draw(log_uniform(1e-6, 1e-2)), draw(log_uniform(4e-3, 2.0))
    )
    length, k = profile.length, draw(log_uniform(0.1, 500.0))
    m = draw(log_uniform(smallest, largest)) / length
    h = m**2 * k * profile.section_area / profile.section_perimeter
    air = draw(st.floats(250.0, 400.0))
    driving = air + draw(st.sampled_from((-1.0, 1.0))) * draw(log_uniform(1.0, 300.0))
    tip = {
        "adiabatic": lambda: AdiabaticTip(),
        "side": lambda: ConvectiveTip(),
        "own": lambda: ConvectiveTip(draw(log_uniform(1e-3, 1e3)) * k / length),
        "fixed": lambda: FixedTip(draw(st.one_of(st.just(driving), st.floats(200.0, 600.0)))),
        "infinite": lambda: InfiniteTip(),
    }[draw(st.sampled_from(TIPS))]()
    joint = Joint(driving, draw(log_uniform(1e-3, 1e3)) * length / k)
    base = draw(st.sampled_from((BaseTemperature(driving), joint)))
    return Fin(profile, k, UniformCoefficient(h), tip), base, air


def parameter(fin):
    profile = fin.profile
    ratio = profile.section_perimeter / profile.section_area
    return np.sqrt(fin.surface.coefficient * ratio / fin.conductivity)


def driving_temperature(base):
    return base.plate_temperature if isinstance(base, Joint) else base.temperature


# --- scipy's boundary-value solver ----------------------------------------------------------------


def by_boundary_values(fin, base, air, x):
    """Return excess temperatures at x and -dT/dx at the base from scipy's collocation solver.

    Dimensionless: x over the length, excess over its largest value; y = (theta, theta').
    """
    length, k = fin.profile.length, fin.conductivity
    mL = parameter(fin) * length
    drive = driving_temperature(base) - air
    held = fin.tip.temperature - air if isinstance(fin.tip, FixedTip) else 0.0
    scale = max(abs(drive), abs(held))
    bond = base.resistance * k / length if isinstance(base, Joint) else 0.0
    if isinstance(fin.tip, FixedTip):
        far = np.array([1.0, 0.0, -held / scale])
    elif isinstance(fin.tip, InfiniteTip):
        far = np.array([mL, 1.0, 0.0])
    elif isinstance(fin.tip, AdiabaticTip):
        far = np.array([0.0, 1.0, 0.0])
    else:
        own = fin.tip.coefficient
        coefficient = fin.surface.coefficient if own is None else own
        far = np.array([coefficient * length / k, 1.0, 0.0])
    far /= np.abs(far).max()

    def ends(ya, yb):
        return np.array(
            [(ya[0] - bond * ya[1] - drive / scale) / (1 + bond), far[0] * yb[0] + far[1] * yb[1] + far[2]]
        )

    def slopes(_, y):
        return np.stack([y[1], mL**2 * y[0]])

    def jacobian(_, y):
        matrix = np.array([[0.0, 1.0], [mL**2, 0.0]])
        return np.repeat(matrix[:, :, None], y.shape[1], axis=2)

    mesh = np.linspace(0, 1, 101)
    found = solve_bvp(
        slopes,
        ends,
        mesh,
        np.zeros((2, mesh.size)),
        fun_jac=jacobian,
        tol=1e-9,
        bc_tol=1e-10,
        max_nodes=20_000,
    )
    assert found.success, found.message
    return scale * found.sol(x / length)[0], -scale * found.sol(0.0)[1] / length, scale


@settings(deadline=None, max_examples=100)
@given(fins(1e-3, 15.0))
def test_agrees_with_a_boundary_value_solver(case):
    fin, base, air = case
    x = np.linspace(0, fin.profile.length, 9)
    excess, slope, scale = by_boundary_values(fin, base, air, x)
    solution = solve(fin, base, air, x)
    steepest = scale * max(1.0, parameter(fin) * fin.profile.length) / fin.profile.length
    assert solution.temperatures[0] - air == pytest.approx(excess, rel=0, abs=1e-6 * scale)
    assert solution.base_temperature[0] - air == pytest.approx(excess[0], rel=0, abs=1e-6 * scale)
    assert solution.tip_temperature[0] - air == pytest.approx(excess[-1], rel=0, abs=1e-6 * scale)
    flux = solution.base_heat[0] / (fin.conductivity * fin.profile.section_area)
    assert flux == pytest.approx(slope, rel=0, abs=1e-6 * steepest)


# --- what goes in comes out -----------------------------------------------------------------------


def counted_from_air(case):
    """Take the air's temperature off all others, so that no digit of a small excess is lost to it."""
    fin, base, air = case
    if isinstance(fin.tip, FixedTip):
        fin = replace(fin, tip=FixedTip(fin.tip.temperature - air))
    if isinstance(base, Joint):
        return fin, Joint(base.plate_temperature - air, base.resistance)
    return fin, BaseTemperature(base.temperature - air)


def side_loss(fin, base):
    """Integrate h P theta by Gauss-Legendre over panels that shrink by halves towards both ends."""
    length = fin.profile.length
    halves = 0.5 ** np.arange(1, 22)[::-1]
    edges = length * np.concatenate([[0.0], halves, 1 - halves[-2::-1], [1.0]])
    nodes, weights = np.polynomial.legendre.leggauss(32)
    half = np.diff(edges)[:, None] / 2
    x = edges[:-1, None] + half * (1 + nodes)
    excess = solve(fin, base, 0.0, x.ravel()).temperatures[0].reshape(x.shape)
    return fin.surface.coefficient * fin.profile.section_perimeter * float(np.sum(half * weights * excess))


@settings(deadline=None, max_examples=200)
@given(fins(1e-6, 1e4).map(counted_from_air))
def test_base_heat_is_side_loss_and_tip_heat(case):
    fin, base = case
    solution = solve(fin, base, 0.0, np.array([]))
    into, out = float(solution.base_heat[0]), float(solution.tip_heat[0])
    side = side_loss(fin, base)
    largest = max(abs(into), abs(out), abs(side))
    assert into - out == pytest.approx(side, rel=0, abs=1e-9 * largest)


@settings(deadline=None, max_examples=100)
@given(fins(1e-6, 1e4).map(counted_from_air))
def test_heat_through_the_joint_and_the_tip_face(case):
    fin, base = case
    solution = solve(fin, base, 0.0, np.array([]))
    area = fin.profile.section_area
    if isinstance(base, Joint):
        drop = base.plate_temperature - solution.base_temperature[0]
        rounding = 1e-14 * (abs(base.plate_temperature) + abs(solution.base_temperature[0]))
        assert solution.base_heat[0] * base.resistance / area == pytest.approx(drop, rel=1e-9, abs=rounding)
    if isinstance(fin.tip, ConvectiveTip):
        own = fin.tip.coefficient
        coefficient = fin.surface.coefficient if own is None else own
        given_off = coefficient * area * solution.tip_temperature[0]
        assert solution.tip_heat[0] == pytest.approx(given_off, rel=1e-9, abs=1e-290)


# --- 40 digits ------------------------------------------------------------------------------------

ML = (1e-8, 1e-5, 1e-3, 0.1, 1.0, 3.0, 18.0, 100.0, 709.0, 711.0, 1e3, 1e4)
LENGTH, AREA, PERIMETER, K = 0.1, 2e-5, 0.02, 150.0
EXCESS = 75.0


X = LENGTH * np.array([0.0, 1e-6, 0.01, 0.07, 0.3, 0.5, 0.9, 1 - 1e-6, 1.0])
TIPS_AT_40_DIGITS = {
    "adiabatic": AdiabaticTip(),
    "side's coefficient": ConvectiveTip(),
    "no coefficient": ConvectiveTip(0.0),
    "small coefficient": ConvectiveTip(1e-3),
    "large coefficient": ConvectiveTip(1e9),
    "held at the base's": FixedTip(EXCESS),
    "held between": FixedTip(0.3 * EXCESS),
    "held at the air's": FixedTip(0.0),
    "infinite": InfiniteTip(),
}


def by_hyperbolic_functions(h, tip, resistance):
    """Return theta at X, base and tip heat from the textbooks' forms (Incropera, Table 3.4) at 40 digits."""
    with mpmath.workdps(40):
        length, area, perimeter, k, h = (mpmath.mpf(v) for v in (LENGTH, AREA, PERIMETER, K, h))
        m = mpmath.sqrt(h * perimeter / (k * area))
        held = mpmath.mpf(tip.temperature) if isinstance(tip, FixedTip) else mpmath.mpf(0)
        cosh, sinh = mpmath.cosh(m * length), mpmath.sinh(m * length)
        if isinstance(tip, InfiniteTip):
            slope, pull = m, mpmath.mpf(0)
            shape = [mpmath.exp(-m * mpmath.mpf(x)) for x in X]
            from_tip = [mpmath.mpf(0)] * len(X)
        elif isinstance(tip, FixedTip):
            slope, pull = m * cosh / sinh, m / sinh
            shape = [mpmath.sinh(m * (length - mpmath.mpf(x))) / sinh for x in X]
            from_tip = [mpmath.sinh(m * mpmath.mpf(x)) / sinh for x in X]
        else:
            own = tip.coefficient if isinstance(tip, ConvectiveTip) else 0.0
            H = (h if own is None else mpmath.mpf(own)) / (m * k)
            whole = cosh + H * sinh
            slope, pull = m * (sinh + H * cosh) / whole, mpmath.mpf(0)
            shape = [
                (mpmath.cosh(m * (length - mpmath.mpf(x))) + H * mpmath.sinh(m * (length - mpmath.mpf(x))))
                / whole
                for x in X
            ]
            from_tip = [mpmath.mpf(0)] * len(X)
        bond = mpmath.mpf(resistance) * k
        base = (mpmath.mpf(EXCESS) + bond * pull * held) / (1 + bond * slope)
        theta = [a * base + b * held for a, b in zip(shape, from_tip, strict=True)]
        if isinstance(tip, FixedTip):
            tip_slope = pull * base - slope * held
        elif isinstance(tip, InfiniteTip):
            tip_slope = m * theta[-1]
        else:
            tip_slope = H * m * theta[-1]
        return (
            np.array([float(value) for value in theta]),
            float(k * area * (slope * base - pull * held)),
            float(k * area * tip_slope),
        )


@pytest.mark.parametrize("resistance", [None, 1e-9, 1e-4, 1e3])
@pytest.mark.parametrize("name", TIPS_AT_40_DIGITS)
@pytest.mark.parametrize("mL", ML)
def test_agrees_with_40_digits(mL, name, resistance):
    tip = TIPS_AT_40_DIGITS[name]
    h = (mL / LENGTH) ** 2 * K * AREA / PERIMETER
    theta, base_heat, tip_heat = by_hyperbolic_functions(h, tip, resistance or 0.0)
    base = BaseTemperature(EXCESS) if resistance is None else Joint(EXCESS, resistance)
    fin = Fin(Uniform(LENGTH, AREA, PERIMETER), K, UniformCoefficient(h), tip)
    solution = solve(fin, base, 0.0, X)  # temperatures counted from the air's, so that none is lost to it
    smallest = 1e-290  # below it a double has fewer digits
    assert solution.temperatures[0] == pytest.approx(theta, rel=1e-12, abs=smallest)
    assert solution.base_temperature[0] == pytest.approx(theta[0], rel=1e-12, abs=smallest)
    assert solution.tip_temperature[0] == pytest.approx(theta[-1], rel=1e-12, abs=smallest)
    assert solution.base_heat[0] == pytest.approx(base_heat, rel=1e-12, abs=smallest)
    assert solution.tip_heat[0] == pytest.approx(tip_heat, rel=1e-12, abs=smallest)
