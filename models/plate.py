"""The balance of a plate that carries fins: its heat leaves through them, its bare area, and as a loss.

    Q = N q_fin + A_bare q''(T_plate) + loss

q_fin is the heat into the base of one fin, N like fins share the plate, which is at one temperature, and q''
is the surface law of what is bare of it: with radiation where it is emissive. The loss is what leaves by
another way, through insulation or leads, as far as it is stated. Q is what a heat sensor on the plate shows,
such as heater power: without a stated loss an upper bound of what the plate gives off.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.surface import SurfaceLaw

Array = NDArray[np.float64]
Values = float | Array


@dataclass(frozen=True, slots=True)
class Plate:
    """A plate that carries fins.

    Arguments: fins N [1], how many like fins it carries; bare_area [m²], what of it loses heat and carries
    none; surface, the law of that area, None where it loses nothing; loss [W], what leaves by another way.
    bare_area and loss may be floats or of shape (n_sets,), as the values of the law. Raises ValueError for
    fewer than one fin or a negative area.
    """

    fins: float
    bare_area: Values = 0.0
    surface: SurfaceLaw | None = None
    loss: Values = 0.0

    def __post_init__(self) -> None:
        if not (np.isfinite(self.fins) and self.fins >= 1):
            raise ValueError(f"fins must be one or more, got {self.fins!r}")
        if not bool(np.all(np.isfinite(self.bare_area) & (np.asarray(self.bare_area) >= 0))):
            raise ValueError(f"bare_area must be finite and not negative, got {self.bare_area!r}")


@dataclass(frozen=True, slots=True)
class PlateHeat:
    """Where the heat of a plate goes [W], each of shape (n_sets,).

    fins, all of them together: what a sensor of the heat into the fins shows; bare_convective and
    bare_radiative, from the bare area; loss, as stated; total, their sum: what heats the plate, and what a
    heater's sensor shows.
    """

    fins: Array
    bare_convective: Array
    bare_radiative: Array
    loss: Array
    total: Array


def plate_heat(plate: Plate, fin_heat: Values, plate_temperature: Values, air: Values) -> PlateHeat:
    """Return where the heat of a plate goes.

    Arguments: plate; fin_heat [W], the base heat of one fin; temperatures [K] of plate and air, absolute
    where the plate radiates. Each may be a float or of shape (n_sets,).

    Examples:
    24 fins of 1.2 W each on a plate at 70 degC in air at 20 degC, of which 0.011 m² is bare:

    >>> from finback.models import Radiating, UniformCoefficient
    >>> bare = Radiating(UniformCoefficient(9.0), emissivity=0.1)
    >>> plate = Plate(fins=24, bare_area=0.011, surface=bare, loss=2.5)
    >>> heat = plate_heat(plate, fin_heat=1.2, plate_temperature=343.15, air=293.15)
    >>> heat.fins.round(2).tolist(), heat.bare_convective.round(2).tolist()
    ([28.8], [4.95])
    >>> heat.bare_radiative.round(2).tolist(), heat.total.round(2).tolist()
    ([0.4], [36.65])

    """
    hot = np.atleast_1d(np.asarray(plate_temperature, dtype=np.float64))
    fins, bare, radiative = plate.fins * np.asarray(fin_heat), np.zeros(1), np.zeros(1)
    if plate.surface is not None:
        bare = plate.bare_area * plate.surface.flux(hot, air)
        radiation = getattr(plate.surface, "radiation", None)
        radiative = radiative if radiation is None else plate.bare_area * radiation(hot, air)
    total = fins + bare + plate.loss
    given = (fins, bare - radiative, radiative, plate.loss)
    fins, convective, radiative, loss = (np.array(np.broadcast_to(part, total.shape)) for part in given)
    return PlateHeat(fins, convective, radiative, loss, total)


def heat_of_one_fin(plate: Plate, total: Values, plate_temperature: Values, air: Values) -> Array:
    """Return the heat into one fin [W], shape (n_sets,), that a plate's total heat leaves to it.

    Arguments: plate; total [W], what heats the plate; temperatures [K] of plate and air. An upper bound where
    a loss is not stated.

    Examples:
    >>> plate = Plate(fins=10, loss=3.0)
    >>> heat_of_one_fin(plate, total=25.0, plate_temperature=340.0, air=295.0).tolist()
    [2.2]

    """
    rest = plate_heat(plate, 0.0, plate_temperature, air).total
    return np.asarray((total - rest) / plate.fins)
