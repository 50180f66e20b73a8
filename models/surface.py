"""Surface laws: the heat flux that leaves the side of a fin as a function of its excess temperature.

Only the uniform film coefficient so far. A law that is linear in the excess temperature says so with
`linear`, and `solve` may then use a closed form; a law that is not (free convection, radiation) is one new
class here and one new solver.
"""

from dataclasses import dataclass
from typing import Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

Values = float | NDArray[np.float64]


@runtime_checkable
class SurfaceLaw(Protocol):
    """Heat flux from the side: `flux(surface, air)` [K, K] -> [W/m²]."""

    @property
    def linear(self) -> bool:
        """Whether the flux is proportional to the excess temperature, by the same factor all along."""

    def flux(self, surface: NDArray[np.float64], air: Values) -> NDArray[np.float64]:
        """Heat flux [W/m²] at surface temperatures [K] in air at `air` [K]."""


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

    def flux(self, surface: NDArray[np.float64], air: Values) -> NDArray[np.float64]:
        """Heat flux [W/m²]; `surface` [K] of shape (n_sets, n) or broadcastable against h."""
        return self.coefficient * (surface - air)
