"""What enters a fin that goes on without end, by the temperature of the section at which it begins.

Multiplied by dPhi/dx, the equation A d²Phi/dx² = P q of a uniform fin integrates once. From far out, where
the side has settled at the temperature T_0 at which it loses nothing,

    q_x² = 2 (P/A) integral of q k dT from T_0 to T,          dq_x/dT = (P/A) q k/q_x.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.conductivity import Conductivity
from finback.models.surface import SurfaceLaw

Array = NDArray[np.float64]
Values = float | Array

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(20)
_SHARES = ((1 + _NODES) / 2)[:, None] ** 2
HALVINGS = 60
"""Halvings of a range of temperatures [1] that leave one known to rounding."""


@dataclass(frozen=True, slots=True)
class EndlessFin:
    """Heat flux [W/m²] into a uniform fin without end through the section at which it begins.

    Arguments: side, the law of its side, which all along is that of the place x/L = 1; conductivity, its law;
    rest, the temperature T_0 [K] far out; ratio P/A [1/m].
    """

    side: SurfaceLaw
    conductivity: Conductivity
    rest: Values
    ratio: float

    @property
    def linear(self) -> bool:
        """Whether the flux is proportional to the excess temperature: where the side's is."""
        return self.side.linear

    def response(self, surface: Array, air: Values, _place: Values = 1.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative by the temperature of the section [W/(m² K)]."""
        rise = surface - self.rest
        # T - T_0 goes up by squares, so that a power of the excess temperature is smooth in their root.
        along = self.rest + _SHARES * rise
        lost = self.side.flux(along, air, 1.0) * self.conductivity.at(along)
        work = rise * (_WEIGHTS @ (np.sqrt(_SHARES) * lost))
        flux = np.sign(rise) * np.sqrt(2 * self.ratio * np.maximum(work, 0.0))
        here, slope = self.side.response(surface, air, 1.0)
        k = self.conductivity.at(surface)
        slope = np.sqrt(self.ratio * k * slope)  # where nothing flows
        np.divide(self.ratio * k * here, flux, out=slope, where=flux != 0)
        return flux, slope


def settled(side: SurfaceLaw, air: Values, n_sets: int, place: float = 1.0) -> Array:
    """Return the temperature [K] at which a side loses nothing at a place x/L [1], shape (n_sets,)."""
    sinks = np.stack([np.broadcast_to(sink, n_sets) for sink in side.sinks(air)])
    low, high = sinks.min(axis=0), sinks.max(axis=0)
    if bool(np.all(low == high)):
        return np.asarray(low)
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        hot = side.flux(middle, air, place) > 0
        low, high = np.where(hot, low, middle), np.where(hot, middle, high)
    return np.asarray((low + high) / 2)
