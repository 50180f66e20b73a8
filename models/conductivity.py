"""Conductivity laws: how a solid's conductivity follows its temperature, and where that is known.

Each law knows its Kirchhoff potential Phi(T), the integral of k dT from a reference temperature, and the way
back: in Phi, conduction is linear whatever the law. Shapes: temperatures and potentials are floats,
(n_sets,), or (n_places, n_sets); each value of a law is a float or of shape (n_sets,).

Source: Kirchhoff, Vorlesungen über die Theorie der Wärme, 1894; Özisik, Heat Conduction, Wiley 1993, chapter
10.
"""

from dataclasses import dataclass
from functools import lru_cache
from typing import Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

from finback.models.validity import Range

Array = NDArray[np.float64]
Values = float | Array

NUMBERS = (float, np.ndarray, int, np.number)


@runtime_checkable
class Conductivity(Protocol):
    """A conductivity law: `at(temperature)` [K] -> k [W/(m K)]; `temperatures` [K], where it is known.

    A frozen dataclass: an array among its fields holds one value a set, and a solver takes rows of it. A law
    may have `kinks`, a tuple of the temperatures [K] at which it has one.
    """

    @property
    def temperatures(self) -> Range:
        """Where the law is known [K]."""

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K]."""

    def potential(self, temperature: Values, reference: Values) -> Values:
        """Potential [W/m] of a temperature [K]: the integral of k from the reference [K] to it."""

    def temperature(self, potential: Values, reference: Values) -> Values:
        """Temperature [K] that has a potential [W/m] above the reference [K]."""


@dataclass(frozen=True, slots=True)
class ConstantConductivity:
    """One conductivity at every temperature.

    Argument: value k [W/(m K)], positive, a float or of shape (n_sets,). It claims no range of its own.
    """

    value: Values

    @property
    def temperatures(self) -> Range:
        """Everywhere [K]."""
        return Range("temperature", 0.0, np.inf, "K")

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K], always the same."""
        return (np.zeros_like(np.asarray(temperature, dtype=np.float64)) + self.value)[()]

    def potential(self, temperature: Values, reference: Values) -> Values:
        """Potential [W/m] of a temperature [K] above the reference [K]."""
        return self.value * (temperature - reference)

    def temperature(self, potential: Values, reference: Values) -> Values:
        """Temperature [K] that has a potential [W/m] above the reference [K]."""
        return reference + potential / self.value


def constant(conductivity: Values | Conductivity) -> Values | None:
    """Return a conductivity [W/(m K)] that is the same at every temperature, None of one that is not."""
    if isinstance(conductivity, NUMBERS):
        return conductivity
    return conductivity.value if isinstance(conductivity, ConstantConductivity) else None


@dataclass(frozen=True, slots=True)
class LinearConductivity:
    """k(T) = k0 (1 + b (T - T0)).

    Arguments: value k0 [W/(m K)] at reference T0 [K]; coefficient b [1/K]; each a float or of shape
    (n_sets,); low and high [K], where it is known.
    """

    value: Values
    reference: Values
    coefficient: Values
    low: float = 0.0
    high: float = np.inf

    @property
    def temperatures(self) -> Range:
        """Where the law is known [K]."""
        return Range("temperature", self.low, self.high, "K")

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K]; goes on along the line outside its range."""
        return self.value * (1 + self.coefficient * (temperature - self.reference))

    def potential(self, temperature: Values, reference: Values) -> Values:
        """Potential [W/m] of a temperature [K] above the reference [K]."""
        return self.at((temperature + reference) / 2) * (temperature - reference)

    def temperature(self, potential: Values, reference: Values) -> Values:
        """Temperature [K] that has a potential [W/m] above the reference [K]; of the branch where k > 0.

        Where the line would have to fall below zero for it, the temperature is the one at which it ends.
        """
        k = self.at(reference)
        slope = self.value * self.coefficient / k
        rise = potential / k  # u (1 + slope u/2) = rise, solved without cancellation
        return reference + 2 * rise / (1 + np.sqrt(np.maximum(1 + 2 * slope * rise, 0.0)))


@dataclass(frozen=True, slots=True)
class TabulatedConductivity:
    """Conductivity between the points of a table, by straight lines; beyond its ends, the value at the end.

    Arguments: points, pairs of temperature [K] and conductivity [W/(m K)] in rising order of temperature;
    factor [1] on all conductivities, a float or of shape (n_sets,). Raises ValueError for fewer than two
    points, temperatures that do not rise or values that are not positive.

    Examples:
    >>> law = TabulatedConductivity(((300.0, 200.0), (400.0, 180.0)), factor=1.1)
    >>> float(law.potential(400.0, 300.0)), round(float(law.temperature(20900.0, 300.0)), 6)
    (20900.0, 400.0)

    """

    points: tuple[tuple[float, float], ...]
    factor: Values = 1.0

    def __post_init__(self) -> None:
        temperatures, values = np.array(self.points, dtype=np.float64).reshape(-1, 2).T
        if temperatures.size < 2 or not bool(np.all(np.diff(temperatures) > 0)):
            raise ValueError("a conductivity table needs two points or more, in rising order of temperature")
        if not bool(np.all(np.isfinite(values) & (values > 0) & (temperatures > 0))):
            raise ValueError("temperatures and conductivities of a table must be positive and finite")

    @property
    def kinks(self) -> tuple[float, ...]:
        """Temperatures [K] of the points, at which the law has a kink."""
        return tuple(temperature for temperature, _ in self.points)

    @property
    def temperatures(self) -> Range:
        """From the first to the last point [K]."""
        return Range("temperature", self.points[0][0], self.points[-1][0], "K")

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K]."""
        temperatures, values, _, _ = _lines(self.points)
        k: Values = self.factor * np.interp(temperature, temperatures, values[1:])
        return k

    def potential(self, temperature: Values, reference: Values) -> Values:
        """Potential [W/m] of a temperature [K] above the reference [K]."""
        return self.factor * (self._heights(temperature) - self._heights(reference))

    def temperature(self, potential: Values, reference: Values) -> Values:
        """Temperature [K] that has a potential [W/m] above the reference [K]."""
        temperatures, values, heights, slopes = _lines(self.points)
        above = np.asarray(potential / self.factor + self._heights(reference))
        row = np.searchsorted(heights, above, side="right")
        rise = (above - heights[np.maximum(row - 1, 0)]) / values[row]
        found = temperatures[np.maximum(row - 1, 0)] + 2 * rise / (
            1 + np.sqrt(1 + 2 * slopes[row] / values[row] * rise)
        )
        temperature: Values = found[()]
        return temperature

    def _heights(self, temperature: Values) -> Values:
        """Potential [W/m] above the first point, of factor one."""
        temperatures, values, heights, slopes = _lines(self.points)
        row = np.searchsorted(temperatures, temperature, side="right")
        start = np.maximum(row - 1, 0)
        rise = temperature - temperatures[start]
        return heights[start] + rise * (values[row] + slopes[row] / 2 * rise)


@lru_cache(maxsize=64)
def _lines(points: tuple[tuple[float, float], ...]) -> tuple[Array, Array, Array, Array]:
    """Return where lines of a table start: temperature, k there, potential there; and k's slope of each line.

    Line 0 lies below the first point and the last one above the last point, both level.
    """
    temperatures, values = np.array(points, dtype=np.float64).T
    rises = np.diff(temperatures)
    heights = np.concatenate([[0.0], np.cumsum(rises * (values[1:] + values[:-1]) / 2)])
    slopes = np.concatenate([[0.0], np.diff(values) / rises, [0.0]])
    return temperatures, np.concatenate([values[:1], values]), heights, slopes
