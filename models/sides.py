"""Integrals over a fin's side and along it, on a grid that is fine enough for polynomials of a high degree.

What `nodes` needs of a geometry: which part of the side a place stands for, what crosses a section, and the
resistance from the base to a place. Each is an integral of values at Gauss points of elements, which come
from `elements` and are as short as the shape asks for; inside an element its polynomial is integrated
exactly.
"""

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from finback.models.elements import basis, discretise
from finback.models.profiles import Profile

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Shape:
    """A fin's geometry, a profile of its own.

    profile; more_breaks [1], places x/L where the law of the side has a kink or a jump; tip: "free" (its face
    loses nothing), "face" (its face does) or "held"; cells [1], places x/L around a kink that fins of some
    temperatures have.
    """

    profile: Profile
    more_breaks: tuple[float, ...]
    tip: str
    cells: tuple[float, ...] = ()

    @property
    def length(self) -> float:
        """Length [m]."""
        return self.profile.length

    @property
    def breaks(self) -> Array:
        """Positions [m] of kinks and jumps, of the profile and of the law, and of what is around others."""
        own = np.asarray(getattr(self.profile, "breaks", ()), dtype=np.float64).ravel()
        return np.unique(np.concatenate([own, self.ends]))

    @property
    def ends(self) -> Array:
        """Positions [m] at which pieces of the flux have to end whatever the profile is there."""
        return np.array((*self.more_breaks, *self.cells), dtype=np.float64) * self.length

    @property
    def tip_area(self) -> float:
        """Area of the tip's face [m²], zero of a sharp tip."""
        return float(self.profile.area(np.array([self.length]))[0])

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m] -> [m²]."""
        return self.profile.area(x)

    def perimeter(self, x: Array) -> Array:
        """Perimeter at x [m] -> [m]."""
        return self.profile.perimeter(x)

    def side_area(self) -> float:
        """Surface of the sides [m²]."""
        return self.profile.side_area()


@dataclass(frozen=True, slots=True)
class Grid:
    """Points along a fin and what they stand for.

    edges x/L [1] of the elements, (n_elements + 1,); places x/L [1], side [m²] and resistance [1/m], the
    integrals of P dx and of dx/A that belong to a point, all (n_elements, q); reference (q,), the points on
    [-1, 1], their weights (q,), and integrals (q + 1, q): Legendre coefficients of the integral from -1 of
    each point's polynomial; cold_tip, whether the tip is too sharp for heat to reach it.
    """

    edges: Array
    places: Array
    side: Array
    resistance: Array
    reference: Array
    weights: Array
    integrals: Array
    cold_tip: bool

    def beyond(self, parts: Array) -> Array:
        """Add up from each point to the tip what the points stand for: (n_elements, q, n), the same shape."""
        shares = parts / self.weights[:, None]
        before = legendre.legvander(self.reference, len(self.reference)) @ self.integrals
        inside = np.einsum("ij,ejk->eik", self.weights - before, shares)
        whole = parts.sum(axis=1)
        found: Array = inside + (np.cumsum(whole[::-1], axis=0)[::-1] - whole)[:, None]
        return found

    def fall(self, fluxes: Array, places: Array) -> Array:
        """Integrate fluxes/A from the base to places x/L [1]: (n_elements, q, n), (n_x,) -> (n_x, n)."""
        parts = fluxes * self.resistance[:, :, None]
        whole = parts.sum(axis=1)
        element, xi = self._located(places)
        shares = legendre.legvander(xi, len(self.reference)) @ self.integrals / self.weights
        before = np.cumsum(whole, axis=0) - whole
        found: Array = before[element] + _mixed(shares, parts, element)
        return found

    def at(self, functions: Array, places: Array) -> Array:
        """Return functions at places x/L [1]: (n_elements, q, n), (n_x,) -> (n_x, n)."""
        element, xi = self._located(places)
        degree = len(self.reference) - 1
        shares = legendre.legvander(xi, degree) @ np.linalg.inv(legendre.legvander(self.reference, degree))
        return _mixed(shares, functions, element)

    def _located(self, places: Array) -> tuple[NDArray[np.intp], Array]:
        """Return the elements that places x/L [1] lie in, and where, from -1 to 1."""
        element = np.clip(np.searchsorted(self.edges, places, side="right") - 1, 0, len(self.edges) - 2)
        start, end = self.edges[element], self.edges[element + 1]
        return element, 2 * (places - start) / (end - start) - 1

    @property
    def even(self) -> Array:
        """One at every point [1], shape (n_elements, q, 1): a flux that crosses every section alike."""
        return np.ones((*self.side.shape, 1))


def _mixed(shares: Array, parts: Array, element: NDArray[np.intp]) -> Array:
    """Add up each place's shares (n_x, q) of the parts of its element: (n_elements, q, n) -> (n_x, n)."""
    found = np.empty((len(element), parts.shape[2]))
    for each in np.unique(element):
        there = element == each
        found[there] = shares[there] @ parts[each]
    return found


@lru_cache(maxsize=64)
def grid(shape: Shape, degree: int, pieces: int, layers: int) -> Grid:
    """Return a grid for polynomials of a degree.

    Arguments: shape; degree; pieces of equal length, at whose ends elements end; layers, how often elements
    are quartered towards the base, and towards a tip that is driven.
    """
    shortest = shape.length / 4.0**layers
    equal = tuple((np.arange(1, pieces) / pieces).tolist())
    elements = discretise(
        replace(shape, more_breaks=(*shape.more_breaks, *equal)),
        base_layer=shortest,
        tip_layer=None if shape.tip == "free" else shortest,
        tip_loss=0.0,
        degree=degree,
    )
    polynomials = basis(degree)
    reference = polynomials.points
    half = np.diff(elements.edges)[:, None] / 2
    side = elements.loss.copy()
    side[-1, -1] += elements.tip_loss
    values = np.linalg.inv(legendre.legvander(reference, len(reference) - 1))
    return Grid(
        elements.edges / shape.length,
        places=(elements.edges[:-1, None] + half * (1 + reference)) / shape.length,
        side=side,
        resistance=polynomials.weights**2 / elements.conduction,
        reference=reference,
        weights=polynomials.weights,
        integrals=legendre.legint(values, lbnd=-1),
        cold_tip=elements.cold,
    )
