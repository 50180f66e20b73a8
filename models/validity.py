"""Validity: when the assumptions behind a solution hold. A range that is left is a flag, never silence.

A `Range` is the range of one quantity as code; `Range.check` turns values into flags, each with a sentence
that a result carries to whoever reads it.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = float | NDArray[np.float64]

TRANSVERSE_BIOT_LIMIT = 0.1
"""Above this transverse Biot number the temperature across the fin is no longer uniform.

The limit 0.1 is the textbooks' (for instance Incropera, Fundamentals of Heat and Mass Transfer, section 5.2,
for the lumped capacitance); common practice for fins."""


@dataclass(frozen=True, slots=True)
class Flag:
    """Something about a result that its reader has to know: a range that was left, an assumption that fails.

    Arguments: quantity, what is out of place, such as "Re" or "film temperature"; message, one sentence.
    """

    quantity: str
    message: str

    def __str__(self) -> str:
        return self.message


@dataclass(frozen=True, slots=True)
class Range:
    """The range of one quantity in which something is stated to hold.

    Arguments: quantity, its name or symbol; low and high, its limits, in the unit of the quantity; unit, ""
    for a number without one, and then [1]; open_low and open_high, that the limit itself lies outside.
    """

    quantity: str
    low: float = -np.inf
    high: float = np.inf
    unit: str = ""
    open_low: bool = False
    open_high: bool = False

    def holds(self, value: Values) -> NDArray[np.bool_]:
        """Tell for each value, in the range's unit, whether it lies inside; what is not a number does not."""
        given = np.asarray(value, dtype=np.float64)
        above = given > self.low if self.open_low else given >= self.low
        below = given < self.high if self.open_high else given <= self.high
        return np.asarray(above & below)

    def check(self, value: Values, owner: str) -> tuple[Flag, ...]:
        """Return one flag if any value lies outside, none otherwise.

        Arguments: value, in the range's unit; owner, the subject of the sentence, such as "Hilpert's law".

        Examples:
        >>> [str(flag) for flag in Range("Re", 0.4, 4e5).check(0.1, "Hilpert's law")]
        ["Hilpert's law is stated for Re from 0.4 to 400000; here it is 0.1."]
        >>> [str(flag) for flag in Range("Re Pr", low=0.2).check(np.array([0.05, 0.1, 7.0]), "The fit")]
        ['The fit is stated for Re Pr from 0.2 up; here it is 0.05 to 0.1 (2 of 3 values).']

        """
        inside = self.holds(value)
        if bool(inside.all()):
            return ()
        given = np.asarray(value, dtype=np.float64)
        outside = given[~inside]
        low, high = _plain(float(outside.min())), _plain(float(outside.max()))
        found = low if low == high else f"{low} to {high}"
        unit = f" {self.unit}" if self.unit else ""
        many = "" if outside.size == given.size else f" ({outside.size} of {given.size} values)"
        message = (
            f"{owner} is stated for {self.quantity} {self._limits()}{unit}; here it is {found}{unit}{many}."
        )
        return (Flag(self.quantity, message),)

    def _limits(self) -> str:
        low = f"{'above' if self.open_low else 'from'} {_plain(self.low)}"
        high = f"{'below' if self.open_high else 'up to'} {_plain(self.high)}"
        if np.isneginf(self.low):
            return high
        if np.isposinf(self.high):
            return low if self.open_low else f"{low} up"
        closed = not (self.open_low or self.open_high)
        return f"{low} to {_plain(self.high)}" if closed else f"{low} and {high}"


def _plain(value: float) -> str:
    """Return a number to four digits, with an exponent only where that is shorter to read."""
    if 1e4 <= abs(value) < 1e6:
        return f"{float(f'{value:.4g}'):.0f}"
    return f"{value:.4g}".replace("e+0", "e").replace("e+", "e").replace("e-0", "e-")


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
