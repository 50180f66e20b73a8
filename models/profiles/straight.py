"""Straight fins whose thickness falls from base to tip, symmetric about their middle plane.

With s = L - x, the distance from the tip, and t_b the thickness at the base:

    trapezoidal       t = t_tip + (t_b - t_tip) s/L
    triangular        t = t_b s/L
    concave parabolic t = t_b (s/L)²
    convex parabolic  t = t_b (s/L)^(1/2)

Section w t; perimeter 2 w, and 2 t more where the edges (the two narrow side faces) are exposed. That is the
projected surface, the textbooks' convention; the slant one multiplies the broad faces' share 2 w by
(1 + (t'/2)²)^(1/2), t' the slope of the thickness.

Source of the shapes: Gardner, Efficiency of extended surface, Trans. ASME 67 (1945) 621; Kraus, Aziz, Welty,
Extended Surface Heat Transfer, Wiley 2001.
"""

from abc import ABC, abstractmethod
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from finback.models.profiles.protocol import require_not_negative, require_positive

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class StraightFin(ABC):
    """What the straight fins below have in common: width, faces and edges.

    Arguments: length [m], width [m] and thickness [m] at the base, all positive; guarded_edges: the two
    narrow side faces lose no heat; slant_surface: the broad faces count with their own area, not with the one
    they project onto the middle plane.
    Raises ValueError for a value that is not positive and finite.
    """

    length: float
    width: float
    thickness: float
    guarded_edges: bool = field(default=False, kw_only=True)
    slant_surface: bool = field(default=False, kw_only=True)

    def __post_init__(self) -> None:
        require_positive(length=self.length, width=self.width, thickness=self.thickness)

    @abstractmethod
    def thickness_at(self, x: Array) -> Array:
        """Thickness at x [m] -> [m]."""

    @abstractmethod
    def slope_at(self, x: Array) -> Array:
        """Slope of the thickness at x [m], its fall counted positive -> [1]."""

    @property
    @abstractmethod
    def mean_thickness(self) -> float:
        """Mean thickness between base and tip [m]."""

    @property
    @abstractmethod
    def face_length(self) -> float:
        """Length of the line from base to tip along a broad face [m]."""

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m] -> [m²]."""
        return self.width * self.thickness_at(x)

    def perimeter(self, x: Array) -> Array:
        """Perimeter that loses heat at x [m] -> [m]."""
        faces = 2 * self.width * np.ones_like(x)
        if self.slant_surface:
            faces *= np.hypot(1, self.slope_at(x) / 2)
        return faces if self.guarded_edges else faces + 2 * self.thickness_at(x)

    def side_area(self) -> float:
        """Surface of the sides, tip face excluded [m²]."""
        faces = 2 * self.width * (self.face_length if self.slant_surface else self.length)
        return faces if self.guarded_edges else faces + 2 * self.mean_thickness * self.length


@dataclass(frozen=True, slots=True)
class Trapezoidal(StraightFin):
    """A straight fin with plane faces that ends in a blunt tip.

    Arguments: those of `StraightFin`, and tip_thickness [m], zero or more; it may exceed the base's.
    Raises ValueError for a value that is out of its range.

    Examples:
    >>> fin = Trapezoidal(length=0.03, width=0.1, thickness=0.002, tip_thickness=0.001)
    >>> fin.area(np.array([0.0, 0.015, 0.03])).round(6).tolist()
    [0.0002, 0.00015, 0.0001]

    """

    tip_thickness: float

    def __post_init__(self) -> None:
        require_positive(length=self.length, width=self.width, thickness=self.thickness)
        require_not_negative(tip_thickness=self.tip_thickness)

    def thickness_at(self, x: Array) -> Array:
        """Thickness at x [m] -> [m]."""
        return self.tip_thickness + (self.thickness - self.tip_thickness) * ((self.length - x) / self.length)

    def slope_at(self, x: Array) -> Array:
        """Slope of the thickness at x [m], the same everywhere -> [1]."""
        return np.full_like(x, (self.thickness - self.tip_thickness) / self.length)

    @property
    def mean_thickness(self) -> float:
        """Mean thickness between base and tip [m]."""
        return (self.thickness + self.tip_thickness) / 2

    @property
    def face_length(self) -> float:
        """Length of the line from base to tip along a broad face [m]."""
        return float(np.hypot(self.length, (self.thickness - self.tip_thickness) / 2))


@dataclass(frozen=True, slots=True)
class Triangular(StraightFin):
    """A straight fin with plane faces that meet in a sharp tip. Arguments: those of `StraightFin`, in m."""

    def thickness_at(self, x: Array) -> Array:
        """Thickness at x [m] -> [m]."""
        return self.thickness * ((self.length - x) / self.length)

    def slope_at(self, x: Array) -> Array:
        """Slope of the thickness at x [m], the same everywhere -> [1]."""
        return np.full_like(x, self.thickness / self.length)

    @property
    def mean_thickness(self) -> float:
        """Mean thickness between base and tip [m]."""
        return self.thickness / 2

    @property
    def face_length(self) -> float:
        """Length of the line from base to tip along a broad face [m]."""
        return float(np.hypot(self.length, self.thickness / 2))


@dataclass(frozen=True, slots=True)
class ConcaveParabolic(StraightFin):
    """A straight fin whose faces are parabolas touching at the tip.

    Arguments: those of `StraightFin`, in m.
    """

    def thickness_at(self, x: Array) -> Array:
        """Thickness at x [m] -> [m]."""
        return self.thickness * ((self.length - x) / self.length) ** 2

    def slope_at(self, x: Array) -> Array:
        """Slope of the thickness at x [m] -> [1]."""
        return 2 * self.thickness / self.length * ((self.length - x) / self.length)

    @property
    def mean_thickness(self) -> float:
        """Mean thickness between base and tip [m]."""
        return self.thickness / 3

    @property
    def face_length(self) -> float:
        """Length of the line from base to tip along a broad face [m]."""
        return _parabola(self.length, self.thickness / 2)


@dataclass(frozen=True, slots=True)
class ConvexParabolic(StraightFin):
    """A straight fin whose section is one parabola with its vertex at the tip.

    Arguments: those of `StraightFin`, in m.
    """

    def thickness_at(self, x: Array) -> Array:
        """Thickness at x [m] -> [m]."""
        return self.thickness * np.sqrt((self.length - x) / self.length)

    def slope_at(self, x: Array) -> Array:
        """Slope of the thickness at x [m]; beyond all bounds at the tip, where it is kept finite -> [1]."""
        share = np.maximum((self.length - x) / self.length, np.finfo(np.float64).tiny)
        return self.thickness / (2 * self.length) / np.sqrt(share)

    @property
    def mean_thickness(self) -> float:
        """Mean thickness between base and tip [m]."""
        return self.thickness * 2 / 3

    @property
    def face_length(self) -> float:
        """Length of the line from base to tip along a broad face [m]."""
        return _parabola(self.thickness / 2, self.length)


def _parabola(along: float, across: float) -> float:
    """Return the length of the parabola y = across (z/along)² from its vertex to z = along."""
    steepness = 2 * across / along
    return float(along / 2 * (np.hypot(1, steepness) + np.arcsinh(steepness) / steepness))
