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
    """Return the fin efficiency [1], shape (n_sets,): heat over that of the same surface all at base temperature.

    Arguments: fin; its solution; air [K]. The tip face counts as surface where it convects with the side's
    coefficient, and not otherwise. nan where the base is at air temperature.
    """
    surface_area = fin.profile.side_area()
    if isinstance(fin.tip, ConvectiveTip) and fin.tip.coefficient is None:
        surface_area += float(fin.profile.area(np.array([fin.profile.length]))[0])
    return _ratio(solution.base_heat, _flux_at_base(fin.surface, solution, air) * surface_area)


def effectiveness(fin: Fin, solution: Solution, air: Values) -> Array:
    """Return the fin effectiveness [1], shape (n_sets,): heat over that of the bare base area at base temperature.

    Arguments: fin; its solution; air [K]. nan where the base is at air temperature.
    """
    base_area = float(fin.profile.area(np.zeros(1))[0])
    return _ratio(solution.base_heat, _flux_at_base(fin.surface, solution, air) * base_area)


def _flux_at_base(surface: SurfaceLaw, solution: Solution, air: Values) -> Array:
    return np.asarray(surface.flux(solution.base_temperature, air), dtype=np.float64)


def _ratio(heat: Array, ideal: Array) -> Array:
    return np.divide(heat, ideal, out=np.full_like(heat, np.nan), where=ideal != 0)
