"""Round pins whose diameter falls from base to tip.

With s = L - x, the distance from the tip, and d_b the diameter at the base:

    cone              d = d_tip + (d_b - d_tip) s/L
    concave parabolic d = d_b (s/L)²
    convex parabolic  d = d_b (s/L)^(1/2)

Section pi d²/4, perimeter pi d. That is the projected surface, the textbooks' convention; the slant one
multiplies it by (1 + (d'/2)²)^(1/2), d' the slope of the diameter.

Source of the shapes: Gardner, Efficiency of extended surface, Trans. ASME 67 (1945) 621; Kraus, Aziz, Welty,
Extended Surface Heat Transfer, Wiley 2001.
"""

from abc import ABC, abstractmethod
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from finback.models.profiles.protocol import require_not_negative, require_positive

Array = NDArray[np.float64]

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(64)


@dataclass(frozen=True, slots=True)
class TaperedPin(ABC):
    """What the pins below have in common: a round section.

    Arguments: length [m] and diameter [m] at the base, both positive; slant_surface: the side counts with its
    own area, not with the one it projects onto a cylinder.
    Raises ValueError for a value that is not positive and finite.
    """

    length: float
    diameter: float
    slant_surface: bool = field(default=False, kw_only=True)

    def __post_init__(self) -> None:
        require_positive(length=self.length, diameter=self.diameter)

    @abstractmethod
    def diameter_at(self, x: Array) -> Array:
        """Diameter at x [m] -> [m]."""

    @abstractmethod
    def diameter_times_slope(self, x: Array) -> Array:
        """Diameter times its slope at x [m], a fall positive -> [m]; finite where the slope is not."""

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m] -> [m²]."""
        return np.pi / 4 * self.diameter_at(x) ** 2

    def perimeter(self, x: Array) -> Array:
        """Perimeter that loses heat at x [m] -> [m]."""
        if self.slant_surface:
            return np.pi * np.hypot(self.diameter_at(x), self.diameter_times_slope(x) / 2)
        return np.pi * self.diameter_at(x)

    def side_area(self) -> float:
        """Surface of the side, tip face excluded [m²].

        By Gauss-Legendre quadrature in (s/L)^(1/2), in which each perimeter above is smooth.
        """
        root = (1 + _NODES) / 2
        x = self.length * (1 - root**2)
        return float(self.length * np.sum(_WEIGHTS * root * self.perimeter(x)))


@dataclass(frozen=True, slots=True)
class Cone(TaperedPin):
    """A conical pin, sharp or truncated.

    Arguments: those of `TaperedPin`, and tip_diameter [m], zero (sharp) or more; it may exceed the base's.
    Raises ValueError for a value that is out of its range.

    Examples:
    >>> cone = Cone(length=0.06, diameter=0.006)
    >>> round(cone.side_area() / (np.pi * 0.006 * 0.06 / 2), 12)
    1.0

    """

    tip_diameter: float = 0.0

    def __post_init__(self) -> None:
        require_positive(length=self.length, diameter=self.diameter)
        require_not_negative(tip_diameter=self.tip_diameter)

    def diameter_at(self, x: Array) -> Array:
        """Diameter at x [m] -> [m]."""
        return self.tip_diameter + (self.diameter - self.tip_diameter) * ((self.length - x) / self.length)

    def diameter_times_slope(self, x: Array) -> Array:
        """Diameter times its slope at x [m], a fall positive -> [m]."""
        return self.diameter_at(x) * ((self.diameter - self.tip_diameter) / self.length)


@dataclass(frozen=True, slots=True)
class ConcavePin(TaperedPin):
    """A pin whose outline is a parabola touching its axis at the tip.

    Arguments: those of `TaperedPin`, in m.
    """

    def diameter_at(self, x: Array) -> Array:
        """Diameter at x [m] -> [m]."""
        return self.diameter * ((self.length - x) / self.length) ** 2

    def diameter_times_slope(self, x: Array) -> Array:
        """Diameter times its slope at x [m], a fall positive -> [m]."""
        return 2 * self.diameter**2 / self.length * ((self.length - x) / self.length) ** 3


@dataclass(frozen=True, slots=True)
class ConvexPin(TaperedPin):
    """A pin whose outline is a parabola with its vertex at the tip.

    Arguments: those of `TaperedPin`, in m.
    """

    def diameter_at(self, x: Array) -> Array:
        """Diameter at x [m] -> [m]."""
        return self.diameter * np.sqrt((self.length - x) / self.length)

    def diameter_times_slope(self, x: Array) -> Array:
        """Diameter times its slope at x [m], the same everywhere -> [m]."""
        return np.full_like(x, self.diameter**2 / (2 * self.length))
