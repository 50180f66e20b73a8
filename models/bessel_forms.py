"""Closed forms of tapered and annular fins: a wave that dies away from the base, and its echo from the tip.

With the two solutions of `waves`, every free tip sends back a share r of what arrives there,

    theta(x) ~ down(x) exp(-y) + r up(x) exp(y - 2 y_L),     y = phase(x), y_L = phase(L),
    r = (D_L - H down_L)/(H up_L - U_L),      H = h_tip A_tip/k,

with D and U the falls -A d/dx of the two: r = D_L/(-U_L) for an adiabatic tip, and 0 for a sharp one. A tip
that is held adds the solution that vanishes at the base. No exponent is positive and U is negative, so that
nothing overflows or cancels for m L from 1e-6 to 1e5.

Sources: see `waves`; the form with r is algebra.
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.coupling import (
    Driving,
    HeldFalls,
    driving,
    require_tip,
    rows,
    settle_held,
    tip_strength,
    within,
)
from finback.models.ends import Base, FixedTip
from finback.models.fin import Fin
from finback.models.solution import Solution
from finback.models.surface import UniformCoefficient
from finback.models.waves import Waves, form_of

Array = NDArray[np.float64]
Values = float | Array

SMALLEST_ML, LARGEST_ML = 1e-6, 1e5
"""Range of m L [1] in which every form here keeps ten digits."""


def applies(fin: Fin) -> bool:
    """Tell whether this module can solve the fin: a shape with a closed form, and m L from 1e-6 to 1e5."""
    if not isinstance(fin.surface, UniformCoefficient) or not fin.is_linear:
        return False
    form = form_of(fin.profile)
    if form is None:
        return False
    square = np.asarray(fin.surface.coefficient / fin.constant_conductivity) * (
        form.perimeter_over_area(fin.profile) * fin.profile.length**2
    )
    return bool(square.min() >= SMALLEST_ML**2 and square.max() <= LARGEST_ML**2)


def solve(fin: Fin, base: Base, air: Values, x: Array) -> Solution:
    """Solve a block of tapered or annular fins by the closed form of their shape.

    Arguments: fin; base, its temperature or a joint; air temperature [K]; x, positions [m] of shape (n_x,),
    0 at the base. Returns a `Solution` of n_sets rows, right to ten digits. Raises TypeError for a fin
    without closed form, ValueError for a tip that its shape cannot have or a position outside the fin.
    """
    profile, surface, k = fin.profile, fin.surface, fin.constant_conductivity
    form = form_of(profile)
    if form is None or not isinstance(surface, UniformCoefficient):
        raise TypeError(f"no closed form for {type(profile).__name__} with {type(surface).__name__}")
    ends = np.array([0.0, profile.length])
    base_area, tip_area = profile.area(ends).tolist()
    require_tip(profile, fin.tip)
    h = surface.coefficient
    m = np.sqrt(np.asarray(h / k, dtype=np.float64).reshape(-1, 1) * form.perimeter_over_area(profile))
    waves = form.waves(profile, m, np.concatenate([ends, within(profile, x)]))
    drive = driving(base, air, k, base_area)
    if isinstance(fin.tip, FixedTip):
        return _held(waves, drive, fin.tip.temperature - air, air, k)
    strength = tip_strength(fin.tip, h, k, tip_area)

    shape, at_tip, fall = _free(waves, strength)
    base_excess = drive.excess / (1 + drive.bond * fall)
    base_heat = k * fall * base_excess
    tip_excess = at_tip * base_excess
    return Solution(
        temperatures=shape[:, 2:] * _column(base_excess) + _column(air),
        base_temperature=rows(base_excess + air, base_heat),
        base_heat=base_heat,
        tip_temperature=rows(tip_excess + air, base_heat),
        tip_heat=rows(k * strength * tip_excess, base_heat),
    )


def _free(waves: Waves, strength: Values) -> tuple[Array, Array, Array]:
    """Return theta/theta_b [1] at all positions and at the tip, and the base's fall [m] for one kelvin."""
    y, down, down_fall = waves.phase, waves.down, waves.down_fall
    if waves.up is None or waves.up_fall is None:
        shape = down / down[:, :1] * np.exp(-y)
        return shape, shape[:, 1], down_fall[:, 0] / down[:, 0]
    up, up_fall = waves.up, waves.up_fall
    stiffness = strength * up[:, 1] - up_fall[:, 1]
    r = (down_fall[:, 1] - strength * down[:, 1]) / stiffness
    returned = r * np.exp(-2 * y[:, 1])
    whole = down[:, 0] + returned * up[:, 0]
    # Each wave is divided before the two are added: the echo of a thin tip is a large share of a small wave.
    shape = down / whole[:, None] * np.exp(-y)
    shape = shape + (r / whole)[:, None] * up * np.exp(y - 2 * y[:, 1:2])
    # At the tip the two are nearly opposite where much heat leaves there; their sum, without the difference:
    met = (down_fall[:, 1] * up[:, 1] - up_fall[:, 1] * down[:, 1]) / stiffness
    return shape, met / whole * np.exp(-y[:, 1]), (down_fall[:, 0] + returned * up_fall[:, 0]) / whole


def _held(waves: Waves, drive: Driving, tip_excess: Values, air: Values, k: Values) -> Solution:
    """Return the solution of a fin whose tip is held at an excess temperature [K]."""
    y, down, down_fall = waves.phase, waves.down, waves.down_fall
    up, up_fall = waves.up, waves.up_fall
    assert up is not None
    assert up_fall is not None
    far = np.exp(-y[:, 1])
    whole = up[:, 1] * down[:, 0] - down[:, 1] * up[:, 0] * far**2
    through = (down_fall[:, 0] * up[:, 0] - up_fall[:, 0] * down[:, 0]) * far / whole
    of_base = (down_fall[:, 0] * up[:, 1] - up_fall[:, 0] * down[:, 1] * far**2) / whole
    of_tip = (down_fall[:, 1] * up[:, 0] * far**2 - up_fall[:, 1] * down[:, 0]) / whole
    held = HeldFalls(through, of_base - through, of_tip - through)
    settled = settle_held(drive, held, tip_excess)

    reach = np.exp(y - 2 * y[:, 1:2])
    from_base = (down * np.exp(-y) * up[:, 1:2] - up * reach * down[:, 1:2]) / whole[:, None]
    from_tip = (up * np.exp(y - y[:, 1:2]) * down[:, :1] - down * np.exp(-y - y[:, 1:2]) * up[:, :1]) / whole[
        :, None
    ]
    excess = from_base * _column(settled.base_excess) + from_tip * _column(tip_excess)
    base_heat = np.asarray(k * settled.base_fall)
    return Solution(
        temperatures=excess[:, 2:] + _column(air),
        base_temperature=rows(settled.base_excess + air, base_heat),
        base_heat=base_heat,
        tip_temperature=rows(tip_excess + air, base_heat),
        tip_heat=rows(k * settled.tip_fall, base_heat),
    )


def _column(value: Values) -> Values:
    """Return a value as a column that spreads over positions; a float spreads by itself."""
    return value[:, None] if isinstance(value, np.ndarray) and value.ndim else value
