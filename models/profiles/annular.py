"""Annular (radial, circumferential) fins around a tube.

x = r - r1, with r1 and r2 the inner and outer radius; section 2 pi r t, perimeter 4 pi r (two faces). The
thickness is t everywhere, or falls as the radius grows, t = t_b r1/r: the hyperbolic fin, whose section is
the same everywhere. Its projected surface is the textbooks' convention; the slant one multiplies the
perimeter by (1 + (t'/2)²)^(1/2), t' the slope of the thickness.

Source of the shapes: Gardner, Efficiency of extended surface, Trans. ASME 67 (1945) 621; Kraus, Aziz, Welty,
Extended Surface Heat Transfer, Wiley 2001.
"""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from finback.models.profiles.protocol import require_positive

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Annular:
    """An annular fin of constant thickness.

    Arguments: inner_diameter [m], that of the tube, outer_diameter [m], larger, and thickness [m].
    Raises ValueError for a value that is not positive and finite, and for diameters in the wrong order.

    Examples:
    >>> round(Annular(inner_diameter=0.025, outer_diameter=0.055, thickness=0.001).length, 6)
    0.015

    """

    inner_diameter: float
    outer_diameter: float
    thickness: float

    def __post_init__(self) -> None:
        _check(self.inner_diameter, self.outer_diameter, self.thickness)

    @property
    def length(self) -> float:
        """Length from base to tip [m], the difference of the radii."""
        return (self.outer_diameter - self.inner_diameter) / 2

    def radius(self, x: Array) -> Array:
        """Radius at x [m] -> [m]."""
        return self.inner_diameter / 2 + x

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m] -> [m²]."""
        return 2 * np.pi * self.thickness * self.radius(x)

    def perimeter(self, x: Array) -> Array:
        """Perimeter that loses heat at x [m], both faces -> [m]."""
        return 4 * np.pi * self.radius(x)

    def side_area(self) -> float:
        """Surface of both faces, rim excluded [m²]."""
        return np.pi / 2 * (self.outer_diameter**2 - self.inner_diameter**2)


@dataclass(frozen=True, slots=True)
class HyperbolicAnnular:
    """An annular fin whose thickness falls as one over the radius.

    Arguments: inner_diameter [m], outer_diameter [m], larger, thickness [m] at the inner diameter;
    slant_surface: the faces count with their own area, not with the one they project onto the middle plane.
    Raises ValueError for a value that is not positive and finite, and for diameters in the wrong order.
    """

    inner_diameter: float
    outer_diameter: float
    thickness: float
    slant_surface: bool = field(default=False, kw_only=True)

    def __post_init__(self) -> None:
        _check(self.inner_diameter, self.outer_diameter, self.thickness)

    @property
    def length(self) -> float:
        """Length from base to tip [m], the difference of the radii."""
        return (self.outer_diameter - self.inner_diameter) / 2

    def radius(self, x: Array) -> Array:
        """Radius at x [m] -> [m]."""
        return self.inner_diameter / 2 + x

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m], the same everywhere -> [m²]."""
        return np.full_like(x, np.pi * self.inner_diameter * self.thickness)

    def perimeter(self, x: Array) -> Array:
        """Perimeter that loses heat at x [m], both faces -> [m]."""
        r = self.radius(x)
        if self.slant_surface:
            return 4 * np.pi * np.hypot(r, self._bend / r)
        return 4 * np.pi * r

    def side_area(self) -> float:
        """Surface of both faces, rim excluded [m²]."""
        inner, outer = self.inner_diameter**2 / 4, self.outer_diameter**2 / 4
        if not self.slant_surface:
            return 2 * np.pi * (outer - inner)
        return 2 * np.pi * (self._unbent(outer) - self._unbent(inner))

    @property
    def _bend(self) -> float:
        """Half the slope of the thickness times the square of the radius [m²]."""
        return self.thickness * self.inner_diameter / 4

    def _unbent(self, square: float) -> float:
        """Return the integral of (u² + c²)^(1/2)/u to u, the square of the radius [m²]."""
        return float(np.hypot(square, self._bend) - self._bend * np.arcsinh(self._bend / square))


def _check(inner_diameter: float, outer_diameter: float, thickness: float) -> None:
    require_positive(inner_diameter=inner_diameter, outer_diameter=outer_diameter, thickness=thickness)
    if not outer_diameter > inner_diameter:
        both = f"{outer_diameter!r} and {inner_diameter!r}"
        raise ValueError(f"outer_diameter must be larger than inner_diameter, got {both}")
