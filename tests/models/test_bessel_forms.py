"""Closed forms of tapered and annular fins: Bessel functions of 40 digits, limits, and what is refused.

The general solution is held against them in test_general.py.
"""

from dataclasses import replace
from functools import lru_cache

import mpmath
import numpy as np
import pytest
from fin_shapes import (
    BLUNT,
    CLOSED,
    GUARDED,
    LENGTH,
    OTHER_BLUNT,
    OTHER_SHARP,
    RING,
    ROUND,
    SHARP,
    coefficient,
)

from finback.models import (
    AdiabaticTip,
    Annular,
    BaseTemperature,
    Cone,
    ConvectiveTip,
    Fin,
    FixedTip,
    HyperbolicAnnular,
    InfiniteTip,
    Joint,
    Trapezoidal,
    UniformCoefficient,
    bessel_forms,
    efficiency,
    pin,
    rectangular,
    solve,
)

K, EXCESS = 150.0, 75.0
NOWHERE = np.array([])

# --- 40 digits ------------------------------------------------------------------------------------

ML = (1e-6, 0.3, 3.0, 800.0, 1e4)
X = LENGTH * np.array([0.0, 0.07, 0.5, 0.95, 1.0])
IN_DIGITS = ("trapezoidal", "thin-tipped trapezoidal", "truncated cone", "annular", "hyperbolic annular")
TIPS = {
    "adiabatic": AdiabaticTip(),
    "side's coefficient": ConvectiveTip(),
    "small coefficient": ConvectiveTip(1e-3),
    "large coefficient": ConvectiveTip(1e9),
    "held between": FixedTip(0.3 * EXCESS),
    "held at the air's": FixedTip(0.0),
}


def two_solutions(profile, m):
    """Return the textbooks' two solutions of a shape as functions of x, unscaled.

    Gardner, Trans. ASME 67 (1945) 621; Kraus, Aziz, Welty, Extended Surface Heat Transfer, chapters 1 to 3.
    """
    i, k, root = mpmath.besseli, mpmath.besselk, mpmath.sqrt
    if isinstance(profile, Annular):
        inner = mpmath.mpf(profile.inner_diameter) / 2
        return (lambda x: k(0, m * (inner + x))), (lambda x: i(0, m * (inner + x)))
    if isinstance(profile, HyperbolicAnnular):
        inner, third = mpmath.mpf(profile.inner_diameter) / 2, mpmath.mpf(1) / 3

        def z(x):
            return 2 * m / 3 * root((inner + x) ** 3 / inner)

        return (
            lambda x: root(inner + x) * k(third, z(x)),
            lambda x: root(inner + x) * i(third, z(x)),
        )
    names = ("diameter", "tip_diameter") if isinstance(profile, Cone) else ("thickness", "tip_thickness")
    base, tip = (mpmath.mpf(getattr(profile, name)) for name in names)
    apex = mpmath.mpf(profile.length) * base / (base - tip)

    def y(x):
        return 2 * m * root(apex * (apex - x))

    if isinstance(profile, Cone):
        return (lambda x: i(1, y(x)) / root(apex - x)), (lambda x: k(1, y(x)) / root(apex - x))
    return (lambda x: i(0, y(x))), (lambda x: k(0, y(x)))


@lru_cache
def tabled(shape, h):
    """Return both solutions at X and both slopes at base and tip; the slopes are difference quotients."""
    profile = CLOSED[shape]
    base_ratio = 4 / mpmath.mpf(ROUND["diameter"])
    if not isinstance(profile, Cone):
        base_ratio = 2 / mpmath.mpf(profile.thickness)
    pair = two_solutions(profile, mpmath.sqrt(mpmath.mpf(h) * base_ratio / K))
    places = [mpmath.mpf(0), *map(mpmath.mpf, X[1:-1]), mpmath.mpf(profile.length)]
    values = [[f(x) for x in places] for f in pair]
    return values, [[mpmath.diff(f, x) for x in (places[0], places[-1])] for f in pair]


def by_two_solutions(shape, h, tip, resistance):
    """Return theta at X, base and tip heat at 40 digits: two equations at the ends for two constants."""
    with mpmath.workdps(40):
        k = mpmath.mpf(K)
        (f, g), (df, dg) = tabled(shape, h)
        areas = [mpmath.mpf(area) for area in CLOSED[shape].area(np.array([0.0, LENGTH])).tolist()]
        bond = mpmath.mpf(resistance) * k
        a, b, right = f[0] - bond * df[0], g[0] - bond * dg[0], mpmath.mpf(EXCESS)
        if isinstance(tip, FixedTip):
            c, d, held = f[-1], g[-1], mpmath.mpf(tip.temperature)
        else:
            own = tip.coefficient if isinstance(tip, ConvectiveTip) else 0.0
            strength = mpmath.mpf(h if own is None else own) / k
            c, d, held = df[-1] + strength * f[-1], dg[-1] + strength * g[-1], mpmath.mpf(0)
        determinant = a * d - b * c
        first, second = (right * d - b * held) / determinant, (a * held - c * right) / determinant
        theta = [first * one + second * two for one, two in zip(f, g, strict=True)]
        falls = [-(first * df[end] + second * dg[end]) for end in (0, 1)]
        return np.array([float(value) for value in theta]), *(
            float(k * area * fall) for area, fall in zip(areas, falls, strict=True)
        )


@pytest.mark.parametrize("resistance", [None, 1e-4])
@pytest.mark.parametrize("name", TIPS)
@pytest.mark.parametrize("shape", IN_DIGITS)
def test_agrees_with_40_digits(shape, name, resistance):
    profile, tip = CLOSED[shape], TIPS[name]
    base = BaseTemperature(EXCESS) if resistance is None else Joint(EXCESS, resistance)
    for mL in ML:
        h = float(coefficient(profile, mL, K))
        theta, base_heat, tip_heat = by_two_solutions(shape, h, tip, resistance or 0.0)
        fin = Fin(profile, K, UniformCoefficient(h), tip)
        solution = bessel_forms.solve(fin, base, 0.0, X)
        smallest = 2e-12 * EXCESS if theta[-1] < 1e-3 * theta[-2] else 1e-290  # next to a cold tip
        assert solution.temperatures[0] == pytest.approx(theta, rel=1e-10, abs=smallest), mL
        assert solution.base_temperature[0] == pytest.approx(theta[0], rel=1e-10)
        assert solution.tip_temperature[0] == pytest.approx(theta[-1], rel=1e-10, abs=smallest)
        assert solution.base_heat[0] == pytest.approx(base_heat, rel=1e-10), mL
        assert solution.tip_heat[0] == pytest.approx(tip_heat, rel=1e-10, abs=1e-12 * abs(base_heat)), mL


SHARP_RATIOS = {
    "triangular": lambda mL: mpmath.besseli(1, 2 * mL) / mpmath.besseli(0, 2 * mL),
    "concave parabolic": lambda mL: (mpmath.sqrt(1 + 4 * mL**2) - 1) / (2 * mL),
    "convex parabolic": lambda mL: ratio_of_thirds(4 * mL / 3),
    "cone": lambda mL: mpmath.besseli(2, 2 * mL) / mpmath.besseli(1, 2 * mL),
    "concave pin": lambda mL: (mpmath.sqrt(9 + 4 * mL**2) - 3) / (2 * mL),
    "convex pin": lambda mL: mpmath.besseli(1, 4 * mL / 3) / mpmath.besseli(0, 4 * mL / 3),
}


def ratio_of_thirds(z):
    third = mpmath.mpf(1) / 3
    return mpmath.besseli(2 * third, z) / mpmath.besseli(-third, z)


@pytest.mark.parametrize("mL", ML)
@pytest.mark.parametrize("shape", SHARP)
def test_heat_of_a_sharp_fin_over_that_of_an_endless_one(shape, mL):
    """Efficiencies of Kraus, Aziz, Welty, chapter 1, times m L and the side over P L, at 40 digits."""
    profile = SHARP[shape]
    fin = Fin(profile, K, UniformCoefficient(float(coefficient(profile, mL, K))), AdiabaticTip())
    solution = bessel_forms.solve(fin, BaseTemperature(EXCESS), 0.0, NOWHERE)
    endless = K * float(profile.area(np.zeros(1))[0]) * mL / LENGTH * EXCESS
    with mpmath.workdps(40):
        expected = float(SHARP_RATIOS[shape](mpmath.mpf(mL)))
    assert solution.base_heat[0] / endless == pytest.approx(expected, rel=1e-11)


# --- limits ---------------------------------------------------------------------------------------


def run(profile, tip, mL, base=None, x=NOWHERE):
    fin = Fin(profile, K, UniformCoefficient(coefficient(profile, mL, K)), tip)
    return fin, bessel_forms.solve(fin, base or BaseTemperature(EXCESS), 0.0, x)


@pytest.mark.parametrize(
    "tip", [AdiabaticTip(), ConvectiveTip(), ConvectiveTip(300.0), FixedTip(30.0)], ids=repr
)
def test_a_slight_taper_is_nearly_none(tip):
    slight = 1 - 1.001e-3
    pairs = (
        (Cone(**ROUND, tip_diameter=slight * ROUND["diameter"]), pin(**ROUND)),
        (Trapezoidal(**GUARDED, tip_thickness=slight * GUARDED["thickness"]), rectangular(**GUARDED)),
    )
    for tapered, straight in pairs:
        for mL in (1e-3, 1.0, 12.0):
            fin, solution = run(tapered, tip, mL, x=LENGTH * np.array([0.2, 0.6]))
            same = solve(
                replace(fin, profile=straight), BaseTemperature(EXCESS), 0.0, LENGTH * np.array([0.2, 0.6])
            )
            assert solution.temperatures == pytest.approx(same.temperatures, rel=1e-2)
            assert solution.base_heat == pytest.approx(same.base_heat, rel=3e-3)


@pytest.mark.parametrize(
    ("blunt", "sharp"), [("thin-tipped trapezoidal", "triangular"), ("thin-tipped cone", "cone")]
)
def test_a_thin_tip_is_nearly_sharp(blunt, sharp):
    mL = np.geomspace(1e-3, 100.0, 7)
    x = LENGTH * np.array([0.1, 0.5, 0.9])
    for tip in (AdiabaticTip(), ConvectiveTip()):
        thin, none = (run(CLOSED[name], tip, mL, x=x)[1] for name in (blunt, sharp))
        assert thin.base_heat == pytest.approx(none.base_heat, rel=1.5e-3)
        assert thin.temperatures == pytest.approx(none.temperatures, abs=0.02 * EXCESS)


@pytest.mark.parametrize("shape", CLOSED)
def test_a_short_fin_is_isothermal(shape):
    fin, solution = run(CLOSED[shape], AdiabaticTip(), 2e-6, x=LENGTH * np.array([0.0, 0.5, 0.9]))
    assert solution.temperatures == pytest.approx(EXCESS, rel=1e-10)
    assert efficiency(fin, solution, 0.0) == pytest.approx([1.0], rel=1e-10)


@pytest.mark.parametrize("shape", CLOSED)
def test_a_long_fin_forgets_its_tip(shape):
    for tip in (AdiabaticTip(), ConvectiveTip(), *([FixedTip(30.0)] if shape in BLUNT else [])):
        _, solution = run(CLOSED[shape], tip, np.array([50.0, 1e3, 1e5]), x=LENGTH * np.array([0.0, 0.6]))
        endless = K * float(CLOSED[shape].area(np.zeros(1))[0]) * np.array([50.0, 1e3, 1e5]) / LENGTH * EXCESS
        assert solution.base_heat / endless == pytest.approx(1, abs=0.04 if shape != "wide annular" else 0.5)
        assert solution.base_heat[-1] / endless[-1] == pytest.approx(1, abs=5e-4)
        assert solution.temperatures[1:, 1] == pytest.approx(0, abs=1e-9)


# --- where there is none --------------------------------------------------------------------------


@pytest.mark.parametrize("shape", OTHER_BLUNT | OTHER_SHARP)
def test_a_shape_without_an_exact_form_has_none(shape):
    fin = Fin((OTHER_BLUNT | OTHER_SHARP)[shape], K, UniformCoefficient(40.0), AdiabaticTip())
    assert not bessel_forms.applies(fin)
    with pytest.raises(TypeError, match=r"^no closed form for "):
        bessel_forms.solve(fin, BaseTemperature(EXCESS), 0.0, NOWHERE)


@pytest.mark.parametrize("shape", CLOSED)
def test_every_shape_with_one_is_solved_by_it(shape):
    for mL, inside in ((1e-7, False), (2e-6, True), (9e4, True), (2e5, False)):
        h = coefficient(CLOSED[shape], mL, K)
        assert bessel_forms.applies(Fin(CLOSED[shape], K, UniformCoefficient(h), AdiabaticTip())) is inside


@pytest.mark.parametrize("solver", [solve, bessel_forms.solve], ids=["solve", "closed form"])
def test_a_tip_that_the_shape_cannot_have_is_refused(solver):
    for profile in (CLOSED["annular"], CLOSED["cone"]):
        fin = Fin(profile, K, UniformCoefficient(40.0), InfiniteTip())
        with pytest.raises(
            ValueError, match=r"^an infinite tip needs a Uniform profile: a (Annular|Cone) has"
        ):
            solver(fin, BaseTemperature(EXCESS), 0.0, NOWHERE)
    fin = Fin(CLOSED["triangular"], K, UniformCoefficient(40.0), FixedTip(30.0))
    with pytest.raises(
        ValueError, match=r"^a tip of zero thickness cannot be held: this Triangular ends sharp"
    ):
        solver(fin, BaseTemperature(EXCESS), 0.0, NOWHERE)


@pytest.mark.parametrize("solver", [solve, bessel_forms.solve], ids=["solve", "closed form"])
@pytest.mark.parametrize("place", [-0.001, 0.051, float("nan")])
def test_a_place_outside_the_fin_is_refused(solver, place):
    fin = Fin(CLOSED["annular"], K, UniformCoefficient(40.0), AdiabaticTip())
    with pytest.raises(
        ValueError, match=rf"^positions must lie from 0 to the fin's 0\.05\d* m, got {place} m"
    ):
        solver(fin, BaseTemperature(EXCESS), 0.0, np.array([0.0, place, 0.02]))


def test_rounding_at_the_tip_is_no_place_outside():
    assert RING["inner_diameter"] == 0.03
    fin = Fin(CLOSED["annular"], K, UniformCoefficient(40.0), AdiabaticTip())
    near = np.array([-1e-14, LENGTH * (1 + 1e-12)])
    solution = solve(fin, BaseTemperature(EXCESS), 0.0, near)
    assert solution.temperatures[0, 1] == pytest.approx(solution.tip_temperature[0], rel=1e-14)
