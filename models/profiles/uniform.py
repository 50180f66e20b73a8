"""Profiles that do not change along x: pins, bars and straight fins of constant thickness."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.profiles.protocol import require_positive

Array = NDArray[np.float64]


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
        require_positive(
            length=self.length, section_area=self.section_area, section_perimeter=self.section_perimeter
        )

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

    Arguments: length [m], diameter [m]; both positive. A = pi d²/4, P = pi d.
    Raises ValueError for a value that is not positive and finite.

    Examples:
    >>> profile = pin(length=0.12, diameter=0.008)
    >>> round(profile.section_area / profile.section_perimeter, 6)  # a quarter of the diameter
    0.002

    """
    require_positive(length=length, diameter=diameter)
    return Uniform(length, np.pi * diameter**2 / 4, np.pi * diameter)


def rectangular(length: float, width: float, thickness: float, guarded_edges: bool = False) -> Uniform:
    """Return the profile of a straight fin or bar of rectangular cross-section.

    Arguments: length [m], width [m], thickness [m], all positive; guarded_edges: the two narrow side faces
    (thickness by length) lose no heat, so that P = 2 width; otherwise P = 2 (width + thickness).
    Raises ValueError for a value that is not positive and finite.

    Examples:
    >>> round(rectangular(length=0.02, width=0.2, thickness=0.002).section_perimeter, 6)
    0.404
    >>> round(rectangular(0.02, 0.2, 0.002, guarded_edges=True).section_perimeter, 6)
    0.4

    """
    require_positive(length=length, width=width, thickness=thickness)
    perimeter = 2 * width if guarded_edges else 2 * (width + thickness)
    return Uniform(length, width * thickness, perimeter)
