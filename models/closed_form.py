"""Closed forms of the fin equation, written with decaying exponentials only.

For a uniform fin with a uniform coefficient, m² = h P/(k A), every linear tip reflects the excess
temperature by a factor r = (1 - H)/(1 + H), with H = h_tip/(m k): r = 1 adiabatic, 0 infinite, -1 held at
a temperature. With E(y) = 1 + r exp(-2 m y),

    theta(x)/theta_b = exp(-m x) E(L - x)/E(L),      -theta'(0)/theta_b = m (1 - r exp(-2 m L))/E(L),

and a tip held at theta_t adds theta_t sinh(m x)/sinh(m L), written the same way. No hyperbolic function is
evaluated, so nothing overflows however large m L is; 1 + r and 1 - r are formed from H and exp(y) - 1 by
expm1, so nothing cancels however small it is. The heat of a fin held at both ends is written with the
difference of the two temperatures for the same reason: coth = 1/sinh + tanh(half).

Source: the four tips are those of Incropera, Fundamentals of Heat and Mass Transfer, Table 3.4; the joint
is a resistance in series. The form with r is algebra.
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.ends import AdiabaticTip, Base, FixedTip, InfiniteTip, Joint, Tip
from finback.models.fin import Fin
from finback.models.profiles import Profile
from finback.models.solution import Solution
from finback.models.surface import UniformCoefficient

Array = NDArray[np.float64]
Values = float | Array

SMALLEST_ML = 1e-150
"""Smallest m L that is evaluated [1], so that h = 0 needs no form of its own; its square does not vanish."""


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
    Raises TypeError for a surface law that has no closed form.
    """
    profile, k, L = fin.profile, fin.conductivity, fin.profile.length
    A = float(profile.area(np.zeros(1))[0])
    if not isinstance(fin.surface, UniformCoefficient):
        raise TypeError(f"no closed form for {type(fin.surface).__name__}")
    h = fin.surface.coefficient
    m = np.maximum(fin_parameter(profile, h, k), SMALLEST_ML / L)
    r, one_plus_r, one_minus_r = _reflection(fin.tip, h, k, m)

    decay = np.expm1(-2 * L * m)
    whole = one_plus_r + r * decay
    far = np.exp(-L * m)
    base_slope = m * (one_minus_r - r * decay) / whole

    column = m[:, None]  # one row a set, one column a position
    r_column, plus_column = r, one_plus_r
    if isinstance(r, np.ndarray) and isinstance(one_plus_r, np.ndarray):
        r_column, plus_column = r[:, None], one_plus_r[:, None]
    echo = plus_column + r_column * np.expm1(column * (-2 * (L - x)))
    shape = np.exp(column * -x) * echo / whole[:, None]

    driving = base.plate_temperature if isinstance(base, Joint) else base.temperature
    bond = base.resistance * k if isinstance(base, Joint) else 0.0
    drive = driving - air
    slack = 1 + bond * base_slope
    if isinstance(fin.tip, FixedTip):
        tip_excess = fin.tip.temperature - air
        across = driving - fin.tip.temperature
        through = -2 * m * far / decay  # m/sinh(m L)
        half = m * -np.expm1(-L * m) / (1 + far)  # m tanh(m L/2); base_slope is the sum of the two
        theta_b = (drive + bond * through * tip_excess) / slack
        base_fall = (through * across + half * drive) / slack
        tip_fall = (through * across - half * tip_excess * (1 + bond * (through + base_slope))) / slack
        from_tip = np.exp(column * (x - L)) * np.expm1(column * (-2 * x)) / decay[:, None]
        theta = shape * theta_b[:, None] + from_tip * np.atleast_1d(tip_excess)[:, None]
        tip_theta: Values = tip_excess
    else:
        theta_b = drive / slack
        base_fall = base_slope * theta_b
        tip_fall = m * far * one_minus_r / whole * theta_b
        theta = shape * theta_b[:, None]
        tip_theta = far * one_plus_r / whole * theta_b

    air_column = air[:, None] if isinstance(air, np.ndarray) and air.ndim else air
    base_heat = k * A * base_fall
    rows = np.zeros_like(base_heat)  # what does not depend on an array still has a row for each set
    return Solution(
        temperatures=theta + air_column,
        base_temperature=theta_b + air + rows,
        base_heat=base_heat,
        tip_temperature=tip_theta + air + rows,
        tip_heat=k * A * tip_fall,
    )


def _reflection(tip: Tip, side: Values, k: Values, m: Array) -> tuple[Values, Values, Values]:
    """Return r, 1 + r and 1 - r of the tip, the last two without cancellation."""
    if isinstance(tip, AdiabaticTip):
        return 1.0, 2.0, 0.0
    if isinstance(tip, InfiniteTip):
        return 0.0, 1.0, 1.0
    if isinstance(tip, FixedTip):
        return -1.0, 0.0, 2.0
    H = (side if tip.coefficient is None else tip.coefficient) / (m * k)
    one_plus_r = 2 / (1 + H)
    return one_plus_r - 1, one_plus_r, H * one_plus_r
