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
from finback.models.profiles import Uniform
from finback.models.solution import Solution
from finback.models.surface import UniformCoefficient

Array = NDArray[np.float64]
Values = float | Array

SMALLEST_ML = 1e-150
"""Smallest m L that is evaluated [1], so that h = 0 needs no form of its own; its square does not vanish."""


def applies(fin: Fin) -> bool:
    """Tell whether this module can solve the fin: uniform profile, uniform coefficient."""
    return isinstance(fin.profile, Uniform) and fin.is_linear


def solve(fin: Fin, base: Base, air: Values, x: Array) -> Solution:
    """Solve a block of uniform fins.

    Arguments: fin; base, its temperature or a joint; air temperature [K]; x, positions [m] of shape (n_x,),
    0 at the base. Returns a `Solution` of n_sets rows. Right to rounding for m L from 0 to 1e4 and beyond.
    Raises TypeError for a surface law that has no closed form.
    """
    profile, surface, k = fin.profile, fin.surface, fin.constant_conductivity
    if not isinstance(profile, Uniform) or not isinstance(surface, UniformCoefficient):
        raise TypeError(f"no closed form for {type(profile).__name__} with {type(surface).__name__}")
    h, L, A = surface.coefficient, profile.length, profile.section_area
    m = np.maximum(np.sqrt(h * (profile.section_perimeter / A) / k), SMALLEST_ML / L).reshape(-1)
    r, one_plus_r, one_minus_r = _reflection(fin.tip, h, k, m)

    decay = np.expm1(m * (-2 * L))
    whole = one_plus_r + r * decay
    far = np.exp(m * -L)
    base_slope = m * (one_minus_r - r * decay) / whole

    along = x[:, None]  # one row a position, one column a set: what follows runs over many sets at once
    echo = one_plus_r + r * np.expm1((2 * (along - L)) * m)
    shape = np.exp(-along * m) * echo

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
        from_tip = np.exp((along - L) * m) * np.expm1((-2 * along) * m)
        theta = shape * (theta_b / whole) + from_tip * (tip_excess / decay)
        tip_theta: Values = tip_excess
    else:
        theta_b = drive / slack
        base_fall = base_slope * theta_b
        scaled = theta_b / whole
        at_end = far * scaled
        tip_fall = m * one_minus_r * at_end
        theta = shape * scaled
        tip_theta = one_plus_r * at_end

    base_heat = (k * A) * base_fall
    return Solution(
        temperatures=(theta + air).T,
        base_temperature=_rows(theta_b + air, base_heat),
        base_heat=base_heat,
        tip_temperature=_rows(tip_theta + air, base_heat),
        tip_heat=(k * A) * tip_fall,
    )


def _rows(value: Values, like: Array) -> Array:
    """Return a value with a row for each set, also where it does not depend on any array."""
    return value if isinstance(value, np.ndarray) and value.shape == like.shape else np.full_like(like, value)


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
