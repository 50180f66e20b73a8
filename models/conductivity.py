"""Conductivity laws: how a solid's conductivity follows its temperature, and where that is known."""

from dataclasses import dataclass
from typing import Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

from finback.models.validity import Range

Values = float | NDArray[np.float64]


@runtime_checkable
class Conductivity(Protocol):
    """A conductivity law: `at(temperature)` [K] -> k [W/(m K)]; `temperatures` [K], where it is known."""

    @property
    def temperatures(self) -> Range:
        """Where the law is known [K]."""

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K]."""


@dataclass(frozen=True, slots=True)
class ConstantConductivity:
    """One conductivity at every temperature.

    Argument: value k [W/(m K)], positive. It claims no range of its own.
    """

    value: float

    @property
    def temperatures(self) -> Range:
        """Everywhere [K]."""
        return Range("temperature", 0.0, np.inf, "K")

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K], always the same."""
        return np.full_like(np.asarray(temperature, dtype=np.float64), self.value)[()]


@dataclass(frozen=True, slots=True)
class LinearConductivity:
    """k(T) = k0 (1 + b (T - T0)).

    Arguments: value k0 [W/(m K)] at reference T0 [K]; coefficient b [1/K]; low and high [K], where it is
    known.
    """

    value: float
    reference: float
    coefficient: float
    low: float = 0.0
    high: float = np.inf

    @property
    def temperatures(self) -> Range:
        """Where the law is known [K]."""
        return Range("temperature", self.low, self.high, "K")

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K]; goes on along the line outside its range."""
        return self.value * (1 + self.coefficient * (temperature - self.reference))


@dataclass(frozen=True, slots=True)
class TabulatedConductivity:
    """Conductivity between the points of a table, by straight lines; beyond its ends, the value at the end.

    Argument: points, pairs of temperature [K] and conductivity [W/(m K)] in rising order of temperature.
    Raises ValueError for fewer than two points, temperatures that do not rise or values that are not
    positive.
    """

    points: tuple[tuple[float, float], ...]

    def __post_init__(self) -> None:
        temperatures, values = np.array(self.points, dtype=np.float64).reshape(-1, 2).T
        if temperatures.size < 2 or not bool(np.all(np.diff(temperatures) > 0)):
            raise ValueError("a conductivity table needs two points or more, in rising order of temperature")
        if not bool(np.all(np.isfinite(values) & (values > 0) & (temperatures > 0))):
            raise ValueError("temperatures and conductivities of a table must be positive and finite")

    @property
    def temperatures(self) -> Range:
        """From the first to the last point [K]."""
        return Range("temperature", self.points[0][0], self.points[-1][0], "K")

    def at(self, temperature: Values) -> Values:
        """Conductivity [W/(m K)] at a temperature [K]."""
        temperatures, values = np.array(self.points, dtype=np.float64).T
        k: Values = np.interp(temperature, temperatures, values)
        return k
