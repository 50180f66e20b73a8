"""Closed forms of the fin equation, written with decaying exponentials only.

For a uniform fin with a uniform coefficient, m² = h P/(k A), every linear tip reflects the excess
temperature by a factor r = (1 - H)/(1 + H), with H = h_tip/(m k): r = 1 adiabatic, 0 infinite, -1 held at
a temperature. With E(y) = 1 + r exp(-2 m y),

    theta(x)/theta_b = exp(-m x) E(L - x)/E(L),      -theta'(0)/theta_b = m (1 - r exp(-2 m L))/E(L),

and a tip held at theta_t adds theta_t sinh(m x)/sinh(m L), written the same way. No hyperbolic function is
evaluated, so nothing overflows however large m L is; 1 + r and 1 - r are formed from H and exp(y) - 1 by
expm1, so nothing cancels however small it is.

Source: the four tips are those of Incropera, Fundamentals of Heat and Mass Transfer, Table 3.4; the joint
is a resistance in series. The form with r is algebra.
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.ends import AdiabaticTip, Base, ConvectiveTip, FixedTip, InfiniteTip, Joint
from finback.models.fin import Fin
from finback.models.profiles import Profile
from finback.models.solution import Solution
from finback.models.surface import UniformCoefficient

Array = NDArray[np.float64]
Values = float | Array

SMALLEST_ML = 1e-12
"""Smallest m L that is evaluated [1]: a fin without side loss differs from it by 1e-24 of its heat."""


def applies(fin: Fin) -> bool:
    """Tell whether this module can solve the fin: uniform profile, uniform coefficient."""
    return fin.profile.uniform and isinstance(fin.surface, UniformCoefficient)


def fin_parameter(profile: Profile, coefficient: Values, conductivity: Values) -> Array:
    """Return m = sqrt(h P/(k A)) of a uniform fin [1/m].

    Arguments: profile; coefficient h [W/(m² K)] and conductivity k [W/(m K)], floats or of shape (n_sets,).
    """
    base = np.zeros(1)
    ratio = float(profile.perimeter(base)[0] / profile.area(base)[0])
    return np.sqrt(np.atleast_1d(np.asarray(coefficient * ratio / conductivity, dtype=np.float64)))


def solve(fin: Fin, base: Base, air: Values, x: Array) -> Solution:
    """Solve a block of uniform fins.

    Arguments: fin; base, its temperature or a joint; air temperature [K]; x, positions [m] of shape (n_x,),
    0 at the base. Returns a `Solution` of n_sets rows. Right to rounding for m L from 0 to 1e4 and beyond.
    """
    profile, k, L = fin.profile, fin.conductivity, fin.profile.length
    A = float(profile.area(np.zeros(1))[0])
    assert isinstance(fin.surface, UniformCoefficient)
    h = fin.surface.coefficient
    m = np.maximum(fin_parameter(profile, h, k), SMALLEST_ML / L)
    r, one_plus_r, one_minus_r = _reflection(fin, m)

    decay = np.expm1(-2 * L * m)
    whole = one_plus_r + r * decay
    far = np.exp(-L * m)
    base_slope = m * (one_minus_r - r * decay) / whole

    column = m[:, None]
    r_column, plus_column = (r[:, None], one_plus_r[:, None]) if isinstance(r, np.ndarray) else (r, one_plus_r)
    echo = plus_column + r_column * np.expm1(column * (-2 * (L - x)))
    shape = np.exp(column * -x) * echo / whole[:, None]

    held: Values = 0.0  # slope at the base that the held tip alone would cause
    tip_excess: Values = 0.0
    if isinstance(fin.tip, FixedTip):
        tip_excess = fin.tip.temperature - air
        held = 2 * m * far / decay * tip_excess
    if isinstance(base, Joint):
        bond = base.resistance * k
        theta_b = (base.plate_temperature - air - bond * held) / (1 + bond * base_slope)
    else:
        theta_b = (base.temperature - air) + np.zeros_like(m)
    theta = shape * theta_b[:, None]
    tip_theta = far * one_plus_r / whole * theta_b
    tip_slope = m * far * one_minus_r / whole * theta_b
    if isinstance(fin.tip, FixedTip):
        from_tip = np.exp(column * (x - L)) * np.expm1(column * (-2 * x)) / decay[:, None]
        theta = theta + from_tip * (np.atleast_1d(tip_excess)[:, None])
        tip_theta = tip_excess + np.zeros_like(m)
        tip_slope = tip_slope + m * (2 + decay) / decay * tip_excess

    air_column = air[:, None] if isinstance(air, np.ndarray) and air.ndim else air
    return Solution(
        temperatures=theta + air_column,
        base_temperature=theta_b + air,
        base_heat=k * A * (base_slope * theta_b + held),
        tip_temperature=tip_theta + air,
        tip_heat=k * A * tip_slope,
    )


def _reflection(fin: Fin, m: Array) -> tuple[Values, Values, Values]:
    """Return r, 1 + r and 1 - r of the tip, the last two without cancellation."""
    tip = fin.tip
    if isinstance(tip, AdiabaticTip):
        return 1.0, 2.0, 0.0
    if isinstance(tip, InfiniteTip):
        return 0.0, 1.0, 1.0
    if isinstance(tip, FixedTip):
        return -1.0, 0.0, 2.0
    assert isinstance(tip, ConvectiveTip)
    assert isinstance(fin.surface, UniformCoefficient)
    coefficient = fin.surface.coefficient if tip.coefficient is None else tip.coefficient
    H = coefficient / (m * fin.conductivity)
    one_plus_r = 2 / (1 + H)
    return one_plus_r - 1, one_plus_r, H * one_plus_r
