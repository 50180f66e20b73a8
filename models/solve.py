"""Solve a fin, choosing the solver that suits it."""

import numpy as np
from numpy.typing import NDArray

from finback.models import bessel_forms, closed_form, general, nonlinear
from finback.models.ends import Base
from finback.models.fin import Fin
from finback.models.solution import Solution

Array = NDArray[np.float64]

FEW_SETS = 4
"""Most sets [1] for which a shape's Bessel functions are taken; a sum of modes is quicker for more."""


def solve(fin: Fin, base: Base, air: float | Array, x: Array) -> Solution:
    """Solve a fin, or a block of fins of one shape.

    Arguments: fin; base, the base's temperature or the joint and plate it hangs on; air temperature [K], a
    float or of shape (n_sets,); x, positions along the fin [m] of shape (n_x,), from 0 at the base to its
    length. Every value of fin, base and air may be a float or of shape (n_sets,).

    A uniform fin is solved by its closed form; any other shape by the closed form in Bessel functions, if it
    has one and the sets are few, or by the general solution, whose modes are found once for a shape. Both
    agree to 1e-9 of the base's excess temperature. Where the conductivity follows a law, or the surface
    another law than one coefficient for all of it, the fin is solved step by step, and says of each set
    whether the steps have ended.

    Returns a `Solution` of n_sets rows. Raises TypeError for what is no profile or no surface law, ValueError
    for a tip that the shape cannot have, for a position outside a fin that is not uniform, for a shape
    whose section is nowhere or whose side is negative, and for a conductivity law that is not positive where
    the fin may be.

    Examples:
    Very long rods of 5 mm diameter, base at 100 degC, air at 25 degC, of copper and of stainless steel
    (Incropera, Fundamentals of Heat and Mass Transfer, Example 3.9, prints 8.3 W and 1.6 W):

    >>> from finback.models import BaseTemperature, InfiniteTip, UniformCoefficient, pin
    >>> rods = Fin(pin(0.3, 0.005), np.array([398.0, 14.0]), UniformCoefficient(100.0), InfiniteTip())
    >>> solution = solve(rods, BaseTemperature(373.15), air=298.15, x=np.array([0.0, 0.1]))
    >>> solution.base_heat.round(1).tolist()
    [8.3, 1.6]
    >>> solution.temperatures.shape
    (2, 2)

    """
    if closed_form.applies(fin):
        return closed_form.solve(fin, base, air, x)
    if _are_few(fin) and bessel_forms.applies(fin):
        return bessel_forms.solve(fin, base, air, x)
    if general.applies(fin):
        return general.solve(fin, base, air, x)
    return nonlinear.solve(fin, base, air, x)


def _are_few(fin: Fin) -> bool:
    if not fin.is_linear:
        return False
    coefficient = getattr(fin.surface, "coefficient", 0.0)
    return max(np.size(coefficient), np.size(fin.constant_conductivity)) <= FEW_SETS
