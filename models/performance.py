"""What an engineer asks of a solved fin: efficiency and effectiveness."""

import numpy as np
from numpy.typing import NDArray

from finback.models.ends import ConvectiveTip
from finback.models.fin import Fin
from finback.models.solution import Solution
from finback.models.surface import SurfaceLaw

Array = NDArray[np.float64]
Values = float | Array


def efficiency(fin: Fin, solution: Solution, air: Values) -> Array:
    """Return the fin efficiency [1], shape (n_sets,): base heat over its surface's, all at base temperature.

    Arguments: fin; its solution; air [K]. The base temperature is the fin's own, behind a joint if there is
    one. The tip face counts as surface where it convects with the side's coefficient, and not otherwise: with
    a tip that is held, goes on or has its own coefficient the value is no fraction and may leave 0 to 1.
    nan where the base is at air temperature or nothing convects.

    Examples:
    A pin with an adiabatic tip (Gavhane, Heat Transfer, Example 2.47, prints 0.962):

    >>> from finback.models import AdiabaticTip, BaseTemperature, UniformCoefficient, pin, solve
    >>> fin = Fin(pin(length=0.1, diameter=0.025), 200.0, UniformCoefficient(15.0), AdiabaticTip())
    >>> solution = solve(fin, BaseTemperature(523.0), air=288.0, x=np.array([0.1]))
    >>> round(float(efficiency(fin, solution, air=288.0)[0]), 3)
    0.962

    """
    surface_area = fin.profile.side_area()
    if isinstance(fin.tip, ConvectiveTip) and fin.tip.coefficient is None:
        surface_area += float(fin.profile.area(np.array([fin.profile.length]))[0])
    return _ratio(solution.base_heat, _flux_at_base(fin.surface, solution, air) * surface_area)


def effectiveness(fin: Fin, solution: Solution, air: Values) -> Array:
    """Return the fin effectiveness [1], shape (n_sets,): base heat over the bare base area's.

    Arguments: fin; its solution; air [K]. The bare base is the fin's cross-section at x = 0, at the fin's own
    base temperature and with the side's coefficient. nan where the base is at air temperature or nothing
    convects.
    """
    base_area = float(fin.profile.area(np.zeros(1))[0])
    return _ratio(solution.base_heat, _flux_at_base(fin.surface, solution, air) * base_area)


def _flux_at_base(surface: SurfaceLaw, solution: Solution, air: Values) -> Array:
    return np.asarray(surface.flux(solution.base_temperature, air), dtype=np.float64)


def _ratio(heat: Array, ideal: Array) -> Array:
    return np.divide(heat, ideal, out=np.full_like(heat, np.nan), where=ideal != 0)
