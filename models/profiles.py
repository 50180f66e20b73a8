"""Profiles: the shape of a fin as its cross-section and perimeter along x, with x = 0 at the base.

A profile is geometry only: anything with the members of `Profile` is one, and a new shape is one new class.
Lengths in m, areas in m².
"""

from dataclasses import dataclass
from typing import Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@runtime_checkable
class Profile(Protocol):
    """The shape of a fin.

    `area` and `perimeter` take positions x [m] of shape (n,) and return the conducting cross-section [m²]
    and the perimeter that loses heat [m] there, shape (n,). `uniform` tells that neither changes along x.
    """

    @property
    def length(self) -> float:
        """Length from base to tip [m]."""

    @property
    def uniform(self) -> bool:
        """Whether area and perimeter are the same at every x."""

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m] -> [m²]."""

    def perimeter(self, x: Array) -> Array:
        """Perimeter that loses heat at x [m] -> [m]."""

    def side_area(self) -> float:
        """Surface of the sides, tip face excluded [m²]."""


@dataclass(frozen=True, slots=True)
class Uniform:
    """A fin of any cross-section that does not change along x.

    Arguments: length [m], section_area [m²], section_perimeter [m]; all positive.
    Raises ValueError for a value that is not positive and finite.
    """

    length: float
    section_area: float
    section_perimeter: float

    def __post_init__(self) -> None:
        for name in ("length", "section_area", "section_perimeter"):
            value = getattr(self, name)
            if not (np.isfinite(value) and value > 0):
                raise ValueError(f"{name} must be positive and finite, got {value!r}")

    @property
    def uniform(self) -> bool:
        """True: that is what the class is for."""
        return True

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m], the same everywhere -> [m²]."""
        return np.full_like(x, self.section_area)

    def perimeter(self, x: Array) -> Array:
        """Perimeter at x [m], the same everywhere -> [m]."""
        return np.full_like(x, self.section_perimeter)

    def side_area(self) -> float:
        """Surface of the sides, tip face excluded [m²]."""
        return self.section_perimeter * self.length


def pin(length: float, diameter: float) -> Uniform:
    """Return the profile of a cylindrical pin.

    Arguments: length [m], diameter [m]. A = pi d²/4, P = pi d.
    """
    return Uniform(length, np.pi * diameter**2 / 4, np.pi * diameter)


def rectangular(length: float, width: float, thickness: float, guarded_edges: bool = False) -> Uniform:
    """Return the profile of a straight fin or bar of rectangular cross-section.

    Arguments: length [m], width [m], thickness [m]; guarded_edges: the two narrow side faces (thickness by
    length) lose no heat, so that P = 2 width; otherwise P = 2 (width + thickness).
    """
    perimeter = 2 * width if guarded_edges else 2 * (width + thickness)
    return Uniform(length, width * thickness, perimeter)
