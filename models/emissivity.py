"""Emissivities of surfaces, with their spread, and the coefficient that radiation adds.

The rows are handbook values of the total hemispherical emissivity unless a note says otherwise. `spread` is a
standard uncertainty [1]: what sources lie apart, and at least a tenth of the value, since the same words on a
drawing cover different surfaces.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.constants import STEFAN_BOLTZMANN
from finback.models.materials import Evidence
from finback.models.names import UnknownNameError, fold, nearest_names

Values = float | NDArray[np.float64]

LEAST_SPREAD = 0.10
"""Smallest spread of a handbook emissivity, relative to its value [1]."""


@dataclass(frozen=True, slots=True)
class Finish:
    """A surface and its emissivity.

    Arguments: name; low and high [1], the values that sources give; temperatures, where; source; evidence;
    note, what to watch for.
    """

    name: str
    low: float
    high: float
    temperatures: str
    source: str
    evidence: Evidence
    note: str = ""

    @property
    def emissivity(self) -> float:
        """The middle of what sources give [1]."""
        return (self.low + self.high) / 2

    @property
    def spread(self) -> float:
        """Standard uncertainty [1]: of an even spread from low to high, at least a tenth of the value."""
        return max((self.high - self.low) / math.sqrt(12), LEAST_SPREAD * self.emissivity)


def find(name: str) -> Finish:
    """Return the surface of a name; case, blanks and hyphens do not count.

    Raises `UnknownNameError`, a ValueError, with the nearest names.

    Examples:
    >>> finish = find("Aluminum, commercial sheet")
    >>> finish.emissivity, round(finish.spread, 3)
    (0.09, 0.009)

    """
    try:
        return _BY_NAME[fold(name)]
    except KeyError:
        raise UnknownNameError("surface", name, nearest(name)) from None


def nearest(name: str, count: int = 3) -> tuple[str, ...]:
    """Return the names of the surfaces that a name resembles most, best first."""
    return nearest_names(name, {each.name: each.name for each in FINISHES}, count)


def radiation_coefficient(emissivity: Values, surface: Values, surroundings: Values) -> Values:
    """Return h_r = eps sigma (T_s² + T_sur²)(T_s + T_sur) [W/(m² K)], the radiation's share of a coefficient.

    Arguments: emissivity [1], of a grey surface that sees large surroundings alone; surface T_s [K];
    surroundings T_sur [K]. The factor is exact: h_r (T_s - T_sur) is the net flux [W/m²], however far apart
    the two are. Fins that see one another radiate less. Raises ValueError for an emissivity outside 0 to 1.

    Examples:
    A black pipe at 70 °C in a room at 20 °C (Cengel, Heat Transfer, 2nd ed., Example 9-1: 553 W from
    1.508 m²):

    >>> round(radiation_coefficient(1.0, 343.0, 293.0) * 1.508 * 50)
    553

    """
    given = np.asarray(emissivity, dtype=np.float64)
    if not bool(np.all((given >= 0) & (given <= 1))):
        raise ValueError(f"an emissivity must lie between 0 and 1, not {emissivity}")
    return emissivity * STEFAN_BOLTZMANN * (surface**2 + surroundings**2) * (surface + surroundings)


_INCROPERA = "Incropera, Fundamentals of Heat and Mass Transfer, 6th ed., Table A.11"
_HOTTEL = "H. C. Hottel, in McAdams, Heat Transmission"
_THOME = "J. R. Thome, EPFL, table of total emissivities"
_CAMERA = "table of a maker of infrared cameras"

FINISHES = (
    Finish(
        "aluminium, highly polished", 0.04, 0.05, "300 to 400 K", f"{_INCROPERA}; {_HOTTEL}", Evidence.CHECKED
    ),
    Finish("aluminium, commercial sheet", 0.09, 0.09, "100 °C", _HOTTEL, Evidence.CHECKED),
    Finish("aluminium, heavily oxidised", 0.2, 0.31, "95 to 500 °C", _HOTTEL, Evidence.CHECKED),
    Finish(
        "aluminium, anodised",
        0.55,
        0.84,
        "300 K",
        f"{_INCROPERA}: 0.82 at 300 K, 0.76 at 400 K",
        Evidence.RECALLED,
        "thin films are far lower: 0.55 at 100 °C was measured on an anodised sheet",
    ),
    Finish(
        "aluminium, black anodised, dull",
        0.95,
        0.95,
        "70 °C",
        _CAMERA,
        Evidence.CHECKED,
        "of the band from 8 to 14 µm, not total",
    ),
    Finish("copper, highly polished", 0.02, 0.03, "300 K", f"{_INCROPERA}; {_CAMERA}", Evidence.CHECKED),
    Finish("copper, stably oxidised", 0.5, 0.58, "600 to 800 K", _INCROPERA, Evidence.RECALLED),
    Finish(
        "copper, oxidised black",
        0.78,
        0.78,
        "300 K",
        f"{_CAMERA}; Cengel, Heat Transfer, Table A-18",
        Evidence.CHECKED,
    ),
    Finish("brass, dull or tarnished", 0.22, 0.22, "20 to 350 °C", _HOTTEL, Evidence.CHECKED),
    Finish("brass, oxidised", 0.46, 0.61, "40 to 260 °C", "public tables", Evidence.CHECKED),
    Finish("stainless steel, cleaned or polished", 0.17, 0.22, "300 K", _INCROPERA, Evidence.RECALLED),
    Finish("stainless steel, highly oxidised", 0.67, 0.76, "800 to 1000 K", _INCROPERA, Evidence.RECALLED),
    Finish("steel, polished", 0.07, 0.1, "40 to 260 °C", _THOME, Evidence.CHECKED),
    Finish("steel, rolled sheet", 0.66, 0.66, "20 °C", _HOTTEL, Evidence.CHECKED),
    Finish("iron, rusted", 0.69, 0.69, "20 °C", _HOTTEL, Evidence.CHECKED),
    Finish(
        "paint, black", 0.9, 0.98, "300 K", f"{_THOME}: 0.90, gloss; {_INCROPERA}: 0.98", Evidence.CHECKED
    ),
    Finish("paint, white", 0.89, 0.97, "40 °C", f"{_THOME}; {_INCROPERA}: 0.90", Evidence.CHECKED),
    Finish("paint, oil, any colour", 0.92, 0.96, "40 to 100 °C", f"{_HOTTEL}; {_THOME}", Evidence.CHECKED),
)
"""The surfaces that `find` knows."""

_BY_NAME = {fold(each.name): each for each in FINISHES}
