"""Materials: how well they conduct at a temperature, how far sources disagree, and where a value is from.

The rows are handbook values, not measurements of ours. Each says whether it was checked against a second
source or recalled from the table that it names. `spread` is what an engineer should allow for: how far
sources lie apart for one and the same designation, as a relative standard uncertainty, never below
`LEAST_SPREAD`.
"""

from dataclasses import dataclass
from enum import Enum

import numpy as np
from numpy.typing import NDArray

from finback.models.conductivity import Conductivity, ConstantConductivity, TabulatedConductivity
from finback.models.names import UnknownNameError, fold, nearest_names
from finback.models.validity import Flag

Values = float | NDArray[np.float64]

LEAST_SPREAD = 0.03
"""Smallest relative standard uncertainty of a handbook conductivity [1]: pieces of one designation differ."""


class Evidence(Enum):
    """What stands behind a handbook value."""

    CHECKED = "checked against a second source"
    RECALLED = "recalled from the table it names, not seen again"
    COMPUTED = "computed or inferred from other values"


@dataclass(frozen=True, slots=True)
class Material:
    """What handbooks say about a material.

    Arguments: name; conductivity, its law; spread, relative standard uncertainty [1] of a piece bought under
    this name; source; evidence, what stands behind the value; note, what to watch for; aliases, other names.
    """

    name: str
    conductivity: Conductivity
    spread: float
    source: str
    evidence: Evidence
    note: str = ""
    aliases: tuple[str, ...] = ()

    def at(self, temperature: Values) -> tuple[Values, Values, tuple[Flag, ...]]:
        """Return k [W/(m K)], its standard uncertainty [W/(m K)] and the flags at a temperature [K].

        Examples:
        >>> k, sd, flags = find("Aluminium 2024 T6").at(335.0)
        >>> round(float(k), 1), round(float(sd), 1), flags
        (180.2, 26.5, ())

        """
        k = self.conductivity.at(temperature)
        return k, self.spread * k, self.conductivity.temperatures.check(temperature, f"k of {self.name}")


def find(name: str) -> Material:
    """Return the material of a name.

    Case, blanks, hyphens and slashes do not count, and aluminum is aluminium. Raises `UnknownNameError`, a
    ValueError, with the nearest names.

    Examples:
    >>> find("AISI 304").name
    'stainless AISI 304'
    >>> find("aluminium 6016-T6")
    Traceback (most recent call last):
    finback.models.names.UnknownNameError: no material is called 'aluminium 6016-T6'; the nearest are \
aluminium 6061-T6, aluminium 6063-T6 and aluminium 6063-T5

    """
    try:
        return _BY_NAME[fold(name)]
    except KeyError:
        raise UnknownNameError("material", name, nearest(name)) from None


def nearest(name: str, count: int = 3) -> tuple[str, ...]:
    """Return the names of the materials that a name resembles most, best first."""
    return nearest_names(
        name, {alias: each.name for each in MATERIALS for alias in (each.name, *each.aliases)}, count
    )


_INCROPERA = "Incropera, Fundamentals of Heat and Mass Transfer, 6th ed., Table A.1"
_NIST = "NIST Cryogenic Material Properties database, fitted polynomial"
_ASM = "ASM Metals Handbook vol. 2 and Aluminum Standards and Data, at 25 °C"


def _table(*points: float) -> TabulatedConductivity:
    return TabulatedConductivity(tuple(zip(points[::2], points[1::2], strict=True)))


MATERIALS = (
    Material(
        "aluminium, pure",
        _table(100, 302, 200, 237, 300, 237, 400, 240, 600, 231, 800, 218),
        LEAST_SPREAD,
        _INCROPERA,
        Evidence.CHECKED,
        "commercially pure metal is alloy 1100, 11 % lower",
        ("pure aluminium",),
    ),
    Material(
        "aluminium 1100",
        ConstantConductivity(211.79),
        0.05,
        _NIST + ", at 300 K",
        Evidence.CHECKED,
        "one value, at 300 K",
        ("1100", "AA 1100"),
    ),
    Material(
        "aluminium 6061-T6",
        _table(200, 136.03, 250, 147.24, 290, 153.91, 300, 155.32),
        0.075,
        _NIST,
        Evidence.CHECKED,
        "ASM has 167 W/(m K) at 25 °C, 7.5 % more; held at its 300 K value above",
        ("6061-T6", "6061", "AA 6061-T6", "aluminium 6061"),
    ),
    Material(
        "aluminium 6063-T5",
        _table(200, 198.58, 250, 202.2, 290, 201.27, 300, 200.5),
        0.043,
        _NIST,
        Evidence.CHECKED,
        "ASM has 209 W/(m K) at 25 °C; the last point is 5 K beyond the range of the fit",
        ("6063-T5", "6063", "AA 6063-T5", "aluminium 6063"),
    ),
    Material(
        "aluminium 6063-T6",
        ConstantConductivity(201.0),
        0.05,
        _ASM,
        Evidence.RECALLED,
        "one value, at 25 °C",
        ("6063-T6", "AA 6063-T6"),
    ),
    Material(
        "aluminium 2024-T6",
        _table(100, 65, 200, 163, 300, 177, 400, 186, 600, 186),
        0.147,
        _INCROPERA,
        Evidence.CHECKED,
        "ASM has 151 W/(m K) at 25 °C, 15 % less; temper matters: T3 and T4 have 121",
        ("2024-T6", "AA 2024-T6"),
    ),
    Material(
        "aluminium 2024-T3",
        ConstantConductivity(121.0),
        0.05,
        _ASM,
        Evidence.CHECKED,
        "one value, at 25 °C; also T4",
        ("2024-T3", "2024-T4", "AA 2024-T3", "aluminium 2024-T4"),
    ),
    Material(
        "aluminium 195 casting",
        _table(300, 168, 400, 174, 600, 185),
        0.05,
        _INCROPERA,
        Evidence.RECALLED,
        "castings vary with porosity",
        ("195 casting", "aluminium 195"),
    ),
    Material(
        "copper, pure",
        _table(100, 482, 200, 413, 300, 401, 400, 393, 600, 379, 800, 366),
        LEAST_SPREAD,
        _INCROPERA,
        Evidence.CHECKED,
        "phosphorus-deoxidised tube (DHP) conducts far less",
        ("pure copper", "copper", "OFHC copper", "ETP copper"),
    ),
    Material(
        "brass 70/30 (cartridge)",
        _table(100, 75, 200, 95, 300, 110, 400, 137, 600, 149),
        0.091,
        _INCROPERA,
        Evidence.RECALLED,
        "alloy data for C26000 have 120 W/(m K) at 20 °C, 9 % more",
        ("brass 70/30", "cartridge brass", "brass", "C26000"),
    ),
    Material(
        "bronze, commercial (90 Cu 10 Al)",
        _table(200, 42, 300, 52, 400, 52, 600, 59),
        0.05,
        _INCROPERA,
        Evidence.RECALLED,
        "in trade, bronze can also mean 90 Cu 10 Zn (C22000, about 189 W/(m K)): ask for the alloy",
        ("aluminium bronze", "bronze 90 Cu 10 Al", "commercial bronze"),
    ),
    Material(
        "carbon steel AISI 1010",
        _table(300, 63.9, 400, 58.7, 600, 48.8, 800, 39.2),
        0.053,
        _INCROPERA,
        Evidence.RECALLED,
        "the same table has 60.5 W/(m K) for plain carbon steel",
        ("AISI 1010", "steel 1010", "carbon steel", "mild steel"),
    ),
    Material(
        "stainless AISI 304",
        _table(100, 9.2, 200, 12.6, 300, 14.9, 400, 16.6, 600, 19.8, 800, 22.6),
        LEAST_SPREAD,
        _INCROPERA,
        Evidence.CHECKED,
        "NIST has 15.3 W/(m K) at 300 K, 2.7 % more",
        ("AISI 304", "304", "stainless 304", "stainless steel 304", "1.4301"),
    ),
    Material(
        "stainless AISI 316",
        _table(300, 13.4, 400, 15.2, 600, 18.3, 800, 21.3),
        LEAST_SPREAD,
        _INCROPERA,
        Evidence.CHECKED,
        "",
        ("AISI 316", "316", "stainless 316", "stainless steel 316", "1.4401"),
    ),
    Material(
        "titanium Ti-6Al-4V",
        _table(200, 5.75, 250, 6.59, 300, 7.55),
        0.113,
        _NIST,
        Evidence.RECALLED,
        "ASM has 6.7 W/(m K) at 20 °C, 11 % less; held at its 300 K value above",
        ("Ti-6Al-4V", "titanium grade 5"),
    ),
    Material(
        "titanium, pure",
        _table(100, 30.5, 200, 24.5, 300, 21.9, 400, 20.4, 600, 19.4),
        LEAST_SPREAD,
        _INCROPERA,
        Evidence.CHECKED,
        "",
        ("pure titanium", "titanium"),
    ),
    Material(
        "magnesium, pure",
        _table(100, 169, 200, 159, 300, 156, 400, 153, 600, 149),
        LEAST_SPREAD,
        _INCROPERA,
        Evidence.CHECKED,
        "AZ31B has 77 to 96 W/(m K): not the same",
        ("pure magnesium", "magnesium"),
    ),
    Material(
        "nickel, pure",
        _table(100, 164, 200, 107, 300, 90.7, 400, 80.2, 600, 65.6),
        LEAST_SPREAD,
        _INCROPERA,
        Evidence.CHECKED,
        "",
        ("pure nickel", "nickel"),
    ),
    Material(
        "graphite, synthetic",
        ConstantConductivity(115.0),
        0.176,
        "makers' data sheets in general, 80 to 150 W/(m K) at 300 K by grade",
        Evidence.RECALLED,
        "grade and direction decide; pyrolytic graphite has 1950 W/(m K) along its layers and 5.7 across",
        ("graphite", "isostatic graphite"),
    ),
)
"""The materials that `find` knows."""

_BY_NAME = {fold(alias): each for each in MATERIALS for alias in (each.name, *each.aliases)}
