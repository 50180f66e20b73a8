"""Validity: when the assumptions behind a solution hold. A range that is left is a flag, never silence."""

import numpy as np
from numpy.typing import NDArray

Values = float | NDArray[np.float64]

TRANSVERSE_BIOT_LIMIT = 0.1
"""Above this transverse Biot number the temperature across the fin is no longer uniform.

The limit 0.1 is the textbooks' (for instance Incropera, Fundamentals of Heat and Mass Transfer, section 5.2,
for the lumped capacitance); common practice for fins."""


def transverse_biot(coefficient: Values, area: float, perimeter: float, conductivity: Values) -> Values:
    """Return the transverse Biot number h (A/P)/k of a fin.

    Arguments: coefficient h [W/(m² K)]; area A [m²]; perimeter P [m]; conductivity k [W/(m K)]. For a pin
    A/P = d/4, for a wide plate fin half its thickness.

    Examples:
    A pin of 10 mm with h = 5000 W/(m² K) (Sachdeva, Fundamentals of Engineering Heat and Mass Transfer,
    Example 3.34) is no one-dimensional fin:

    >>> biot = transverse_biot(5000.0, area=np.pi * 0.01**2 / 4, perimeter=np.pi * 0.01, conductivity=16.0)
    >>> round(biot, 2), is_one_dimensional(biot)
    (0.78, False)

    """
    return coefficient * (area / perimeter) / conductivity


def is_one_dimensional(biot: Values) -> bool:
    """Tell whether the one-dimensional fin equation holds at every given transverse Biot number [1]."""
    return bool(np.all(np.asarray(biot) <= TRANSVERSE_BIOT_LIMIT))
