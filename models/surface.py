"""Surface laws: the heat flux that leaves the side of a fin, by its temperature and the place along the fin.

A convective law is a film coefficient h: uniform, following the excess temperature as free convection does,
or following the place. `Radiating` adds grey radiation to any of them. A law whose flux is proportional to
the excess temperature says so with `linear`, one that is the same all along with `uniform`; a closed form
needs both.

Shapes: temperatures are (n_sets,), or (n_places, n_sets) for several places of each fin; each value of a law
is a float or of shape (n_sets,). A place is a share of the length, x/L [1]: 0 at the base, 1 at the tip.

Sources: power laws of free convection, Kraus, Aziz, Welty, Extended Surface Heat Transfer, Wiley 2001;
radiation between a small grey body and large surroundings, Incropera, Fundamentals of Heat and Mass Transfer,
eq. 1.7.
"""

from dataclasses import dataclass
from typing import Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

from finback.models.constants import STEFAN_BOLTZMANN

Array = NDArray[np.float64]
Values = float | Array


@runtime_checkable
class SurfaceLaw(Protocol):
    """Heat flux from the side: `flux(surface, air, place)` [K, K, 1] -> [W/m²], rising with the first.

    A law is a frozen dataclass: an array among its fields holds one value a set, and a solver takes rows of
    it. A law with a kink or a jump along the fin may have `breaks`, a tuple of the places where they are:
    solutions are more exact where they know them. One whose flux has a kink at some temperature may have
    `kinks(air)`, those temperatures [K].
    """

    @property
    def linear(self) -> bool:
        """Whether the flux is proportional to the excess temperature."""

    @property
    def uniform(self) -> bool:
        """Whether the law is the same all along."""

    def flux(self, surface: Array, air: Values, place: Values = 0.0, /) -> Array:
        """Heat flux [W/m²] at surface temperatures [K], in air at `air` [K], at places [1]."""

    def response(self, surface: Array, air: Values, place: Values = 0.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative by the surface temperature [W/(m² K)]."""

    def sinks(self, air: Values, /) -> tuple[Values, ...]:
        """Temperatures [K] that draw the side: a side that loses nothing lies between them."""


@dataclass(frozen=True, slots=True)
class UniformCoefficient:
    """One film coefficient all along the fin: q'' = h (T - T_air), Newton's law of cooling.

    Argument: coefficient h [W/(m² K)], not negative, a float or of shape (n_sets,).
    """

    coefficient: Values

    @property
    def linear(self) -> bool:
        """True: the flux is proportional to the excess temperature."""
        return True

    @property
    def uniform(self) -> bool:
        """True: the law is the same all along."""
        return True

    def flux(self, surface: Array, air: Values, _place: Values = 0.0, /) -> Array:
        """Heat flux [W/m²] at surface temperatures [K], in air at `air` [K]."""
        return self.coefficient * (surface - air)

    def response(self, surface: Array, air: Values, _place: Values = 0.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative [W/(m² K)]."""
        return _proportional(self.coefficient, surface - air)

    def sinks(self, air: Values, /) -> tuple[Values, ...]:
        """Return the air's temperature [K] alone."""
        return (air,)


@dataclass(frozen=True, slots=True)
class PowerCoefficient:
    """A coefficient that follows the excess temperature: h = h_ref (|theta|/theta_ref)^n, q'' = h theta.

    Arguments: coefficient h_ref [W/(m² K)], not negative, at an excess of `reference` theta_ref [K], above
    zero; exponent n [1], from 0 to 2: 1/4 for laminar free convection, 1/3 for turbulent, near 2 for nucleate
    boiling. Raises ValueError for an exponent or a reference outside.

    Examples:
    >>> law = PowerCoefficient(coefficient=8.0, exponent=0.25, reference=40.0)
    >>> law.flux(np.array([335.0, 297.5]), 295.0).tolist()
    [320.0, 10.0]

    """

    coefficient: Values
    exponent: Values
    reference: Values

    def __post_init__(self) -> None:
        _require_within("exponent", self.exponent, 0.0, 2.0)
        if not np.all(np.asarray(self.reference) > 0):
            raise ValueError(f"reference must be above zero, got {self.reference!r}")

    @property
    def linear(self) -> bool:
        """False, also where the exponent is zero."""
        return False

    @property
    def uniform(self) -> bool:
        """True: the law is the same all along."""
        return True

    def flux(self, surface: Array, air: Values, _place: Values = 0.0, /) -> Array:
        """Heat flux [W/m²] at surface temperatures [K], in air at `air` [K]."""
        theta = surface - air
        return self._local(theta) * theta

    def response(self, surface: Array, air: Values, _place: Values = 0.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative [W/(m² K)]."""
        theta = surface - air
        h = self._local(theta)
        return h * theta, h * (1 + self.exponent)

    def sinks(self, air: Values, /) -> tuple[Values, ...]:
        """Return the air's temperature [K] alone."""
        return (air,)

    def kinks(self, air: Values) -> tuple[Values, ...]:
        """Return the air's temperature [K]: beyond it the flux is another power."""
        return (air,)

    def _local(self, theta: Array) -> Array:
        return self.coefficient * (np.abs(theta) / self.reference) ** self.exponent


@dataclass(frozen=True, slots=True)
class VaryingCoefficient:
    """A coefficient that follows a straight line from base to tip: h = h_mean (1 + rise (x/L - 1/2)).

    Arguments: mean h_mean [W/(m² K)], not negative, the mean along the length; rise [1], from -2 to 2: what
    the coefficient of the tip lies above that of the base, over the mean. Raises ValueError for a rise
    outside.

    Examples:
    >>> law = VaryingCoefficient(mean=30.0, rise=-0.4)
    >>> law.flux(np.array([[311.0], [311.0]]), 310.0, np.array([[0.0], [1.0]])).ravel().tolist()
    [36.0, 24.0]

    """

    mean: Values
    rise: Values

    def __post_init__(self) -> None:
        _require_within("rise", self.rise, -2.0, 2.0)

    @property
    def linear(self) -> bool:
        """True: the flux is proportional to the excess temperature."""
        return True

    @property
    def uniform(self) -> bool:
        """False: the law follows the place."""
        return False

    def flux(self, surface: Array, air: Values, place: Values = 0.0, /) -> Array:
        """Heat flux [W/m²] at surface temperatures [K], in air at `air` [K], at places [1]."""
        return self._local(place) * (surface - air)

    def response(self, surface: Array, air: Values, place: Values = 0.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative [W/(m² K)]."""
        return _proportional(self._local(place), surface - air)

    def sinks(self, air: Values, /) -> tuple[Values, ...]:
        """Return the air's temperature [K] alone."""
        return (air,)

    def _local(self, place: Values) -> Values:
        return self.mean * (1 + self.rise * (place - 0.5))


@dataclass(frozen=True, slots=True)
class TabledCoefficient:
    """A coefficient that follows the place by a table: h = h_ref f(x/L).

    Arguments: coefficient h_ref [W/(m² K)], not negative; points, pairs of place x/L [1] and factor f [1], in
    rising order of place: straight lines between them, and beyond the first and last the factor there.
    Raises ValueError for fewer than two points, places that do not rise or leave 0 to 1, or negative factors.
    """

    coefficient: Values
    points: tuple[tuple[float, float], ...]

    def __post_init__(self) -> None:
        places, factors = np.array(self.points, dtype=np.float64).reshape(-1, 2).T
        if places.size < 2 or not bool(np.all(np.diff(places) > 0)):
            raise ValueError("a table of the coefficient needs two points or more, in rising order of place")
        _require_within("places of a table of the coefficient", places, 0.0, 1.0)
        if not bool(np.all(np.isfinite(factors) & (factors >= 0))):
            raise ValueError("factors of a table of the coefficient must be finite and not negative")

    @property
    def breaks(self) -> tuple[float, ...]:
        """Places [1] of the points, at which the law has a kink."""
        return tuple(place for place, _ in self.points)

    @property
    def linear(self) -> bool:
        """True: the flux is proportional to the excess temperature."""
        return True

    @property
    def uniform(self) -> bool:
        """False: the law follows the place."""
        return False

    def flux(self, surface: Array, air: Values, place: Values = 0.0, /) -> Array:
        """Heat flux [W/m²] at surface temperatures [K], in air at `air` [K], at places [1]."""
        return self._local(place) * (surface - air)

    def response(self, surface: Array, air: Values, place: Values = 0.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative [W/(m² K)]."""
        return _proportional(self._local(place), surface - air)

    def sinks(self, air: Values, /) -> tuple[Values, ...]:
        """Return the air's temperature [K] alone."""
        return (air,)

    def _local(self, place: Values) -> Values:
        places, factors = np.array(self.points, dtype=np.float64).T
        local: Values = self.coefficient * np.interp(place, places, factors)
        return local


@dataclass(frozen=True, slots=True)
class Radiating:
    """A convective law and grey radiation beside it: q'' = q''_convection + eps sigma (T⁴ - T_s⁴).

    Arguments: convection, the law of what the air takes; emissivity eps [1], from 0 to 1; surroundings T_s
    [K], the air's temperature where they are None. All temperatures are absolute. The side is small against
    its surroundings: neighbours that see each other exchange nothing here. Raises ValueError for an
    emissivity outside.

    Examples:
    >>> law = Radiating(UniformCoefficient(6.0), emissivity=0.9, surroundings=290.0)
    >>> hot = np.array([400.0])
    >>> law.convection.flux(hot, 300.0).round(1).tolist(), law.radiation(hot, 300.0).round(1).tolist()
    ([600.0], [945.5])

    """

    convection: SurfaceLaw
    emissivity: Values
    surroundings: Values | None = None

    def __post_init__(self) -> None:
        _require_within("emissivity", self.emissivity, 0.0, 1.0)

    @property
    def breaks(self) -> tuple[float, ...]:
        """Places [1] of kinks and jumps of the convective law."""
        return tuple(getattr(self.convection, "breaks", ()))

    def kinks(self, air: Values) -> tuple[Values, ...]:
        """Return the temperatures [K] at which the convective law has a kink."""
        own = getattr(self.convection, "kinks", None)
        return () if own is None else tuple(own(air))

    @property
    def linear(self) -> bool:
        """False, also where nothing is radiated."""
        return False

    @property
    def uniform(self) -> bool:
        """Whether the convective law is the same all along."""
        return self.convection.uniform

    def radiation(self, surface: Array, air: Values) -> Array:
        """Radiated part of the heat flux [W/m²] at surface temperatures [K]."""
        surroundings = air if self.surroundings is None else self.surroundings
        # A temperature below zero is met by a solver on its way alone: the flux goes on falling there.
        fourth = np.square(surface) * surface * np.abs(surface) - np.square(np.square(surroundings))
        return self.emissivity * STEFAN_BOLTZMANN * fourth

    def flux(self, surface: Array, air: Values, place: Values = 0.0, /) -> Array:
        """Heat flux [W/m²] at surface temperatures [K], in air at `air` [K], at places [1]."""
        return self.convection.flux(surface, air, place) + self.radiation(surface, air)

    def response(self, surface: Array, air: Values, place: Values = 0.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative [W/(m² K)]."""
        flux, slope = self.convection.response(surface, air, place)
        radiated = self.emissivity * (4 * STEFAN_BOLTZMANN) * np.square(surface) * np.abs(surface)
        return flux + self.radiation(surface, air), slope + radiated

    def sinks(self, air: Values, /) -> tuple[Values, ...]:
        """Return the temperatures [K] of the convective law's sinks and of the surroundings."""
        drawn = self.convection.sinks(air)
        return drawn if self.surroundings is None else (*drawn, self.surroundings)


def _proportional(coefficient: Values, theta: Array) -> tuple[Array, Array]:
    """Return flux and derivative of a law that is proportional to the excess temperature, of one shape."""
    flux = coefficient * theta
    return flux, np.zeros_like(flux) + coefficient


def _require_within(name: str, value: Values, low: float, high: float) -> None:
    given = np.asarray(value, dtype=np.float64)
    if not bool(np.all((given >= low) & (given <= high))):
        raise ValueError(f"{name} must be from {low:g} to {high:g}, got {value!r}")
