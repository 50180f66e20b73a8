"""What a correlation gives, and the piecewise power laws that several of them are made of."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.validity import Flag

Values = float | NDArray[np.float64]
Bands = tuple[tuple[float, float, float, float], ...]
"""Rows (low, high, C, n) of a law C x^n, in rising order without gaps."""


@dataclass(frozen=True, slots=True)
class Nusselt:
    """A Nusselt number and what belongs to it.

    Arguments: name of the correlation; value Nu [1], a float or an array; length, what the characteristic
    length is; scatter, the relative standard uncertainty [1] that is usual for a clean flow; flags, the
    ranges that were left.

    The authors state no standard uncertainty. The scatters are common practice: the textbooks' 10 to 25 % for
    such correlations, taken as one standard uncertainty where data scatter most and as two where they agree.
    """

    name: str
    value: Values
    length: str
    scatter: float
    flags: tuple[Flag, ...] = ()

    def __post_init__(self) -> None:
        if np.ndim(self.value) == 0:  # numpy's own scalars print themselves with their type
            object.__setattr__(self, "value", float(self.value))

    def coefficient(self, conductivity: Values, length: Values) -> Values:
        """Return h = Nu k/l [W/(m² K)] from the fluid's conductivity [W/(m K)] and the length [m]."""
        return self.value * conductivity / length


def banded_power(value: Values, bands: Bands) -> Values:
    """Return C x^n with C and n of the band that holds x [1]; outside all bands, of the nearest one.

    A limit between two bands belongs to the lower one, as the books' tables read.

    Examples:
    >>> bands = ((1.0, 10.0, 2.0, 0.5), (10.0, 100.0, 1.0, 1.0))
    >>> float(banded_power(4.0, bands)), banded_power(np.array([0.25, 20.0, 200.0]), bands).tolist()
    (4.0, [1.0, 20.0, 200.0])

    """
    _, highs, factors, powers = np.array(bands, dtype=np.float64).T
    row = np.searchsorted(highs[:-1], np.asarray(value, dtype=np.float64))
    result: Values = (factors[row] * np.asarray(value, dtype=np.float64) ** powers[row])[()]
    return result
