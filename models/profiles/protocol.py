"""What every profile has, and how its lengths are checked. Lengths in m, areas in m²."""

from typing import Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@runtime_checkable
class Profile(Protocol):
    """The shape of a fin.

    `area` and `perimeter` take positions x [m] of shape (n,) and return the conducting cross-section [m²]
    and the perimeter that loses heat [m] there, shape (n,). A profile is hashable and does not change once it
    is made: what is computed for it is kept. It may also have `breaks`, an array of the positions [m] between
    base and tip at which either jumps or has a kink: the general solution is more exact where it knows them.
    """

    @property
    def length(self) -> float:
        """Length from base to tip [m]."""

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m] -> [m²]."""

    def perimeter(self, x: Array) -> Array:
        """Perimeter that loses heat at x [m] -> [m]."""

    def side_area(self) -> float:
        """Surface of the sides, tip face excluded [m²]."""

    def __hash__(self) -> int:
        """Return the same number for the same shape."""


def require_positive(**lengths: float) -> None:
    """Refuse a length [m] or an area [m²] that is not positive and finite, by its giver's name for it."""
    for name, value in lengths.items():
        if not (np.isfinite(value) and value > 0):
            raise ValueError(f"{name} must be positive and finite, got {value!r}")


def require_not_negative(**lengths: float) -> None:
    """Refuse a length [m] that is negative or not finite, by its giver's name for it."""
    for name, value in lengths.items():
        if not (np.isfinite(value) and value >= 0):
            raise ValueError(f"{name} must be finite and not negative, got {value!r}")
