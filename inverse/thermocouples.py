"""Thermocouple classes: how far a new thermocouple may be off the table of its type, by the standards.

A class is a tolerance: the larger of an amount [K] and a share of the temperature in °C. It bounds the error
and says no more, so that the error counts as evenly spread within it (a rectangular distribution), with the
standard uncertainty tolerance/√3 (JCGM 100, 4.3.7). Wear, drift and the instrument behind it come on top.

The values are recalled from the standards that stand beside them; the tests compare them with the forms in
which other editions print them.
"""

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass

from finback.errors import InputError
from finback.models.constants import ZERO_CELSIUS
from finback.wording import nearest, quoted

IEC = "IEC 60584-1:2013"
ASTM = "ASTM E230/E230M"


@dataclass(frozen=True, slots=True)
class ThermocoupleClass:
    """One class of one type.

    Arguments: name, as a rig writes it; from `low` to `high` [°C] the tolerance is `floor` [K] or `share` [1]
    of |t|, the larger, or, where `above` [°C] is given, the floor and on top of it the share of what t is
    above that; standard that says so.
    """

    name: str
    low: float
    high: float
    floor: float
    share: float
    standard: str
    above: float | None = None

    def tolerance(self, temperature: float) -> float:
        """Return the tolerance [K] at a temperature [K]; outside of the range it goes on as within."""
        celsius = temperature - ZERO_CELSIUS
        if self.above is not None:
            return self.floor + self.share * max(celsius - self.above, 0.0)
        return max(self.floor, self.share * abs(celsius))

    def standard_uncertainty(self, temperature: float) -> float:
        """Return the standard uncertainty [K] at a temperature [K]."""
        return self.tolerance(temperature) / math.sqrt(3)

    def covers(self, temperature: float) -> bool:
        """Tell whether the standard gives a tolerance at a temperature [K]."""
        return self.low <= temperature - ZERO_CELSIUS <= self.high

    @property
    def range(self) -> str:
        """The range as words."""
        return f"{self.low:g} to {self.high:g} °C".replace("-", "−")

    @property
    def words(self) -> str:
        """The tolerance as words."""
        share = f"{100 * self.share:g} %"
        if self.above is not None:
            return f"±({self.floor:g} K + {share} of what is above {self.above:g} °C)"
        if self.floor == 0:
            return f"±{share} of the temperature in °C"
        return f"±{self.floor:g} K or ±{share} of the temperature in °C, the larger"


_TABLE = (
    ThermocoupleClass("K class 1", -40, 1000, 1.5, 0.004, IEC),
    ThermocoupleClass("K class 2", -40, 1200, 2.5, 0.0075, IEC),
    ThermocoupleClass("K class 3", -200, 40, 2.5, 0.015, IEC),
    ThermocoupleClass("K standard", 0, 1260, 2.2, 0.0075, ASTM),
    ThermocoupleClass("K special", 0, 1260, 1.1, 0.004, ASTM),
    ThermocoupleClass("T class 1", -40, 350, 0.5, 0.004, IEC),
    ThermocoupleClass("T class 2", -40, 350, 1.0, 0.0075, IEC),
    ThermocoupleClass("T class 3", -200, 40, 1.0, 0.015, IEC),
    ThermocoupleClass("T standard", 0, 370, 1.0, 0.0075, ASTM),
    ThermocoupleClass("T special", 0, 370, 0.5, 0.004, ASTM),
    ThermocoupleClass("J class 1", -40, 750, 1.5, 0.004, IEC),
    ThermocoupleClass("J class 2", -40, 750, 2.5, 0.0075, IEC),
    ThermocoupleClass("J standard", 0, 760, 2.2, 0.0075, ASTM),
    ThermocoupleClass("J special", 0, 760, 1.1, 0.004, ASTM),
    ThermocoupleClass("E class 1", -40, 800, 1.5, 0.004, IEC),
    ThermocoupleClass("E class 2", -40, 900, 2.5, 0.0075, IEC),
    ThermocoupleClass("E class 3", -200, 40, 2.5, 0.015, IEC),
    ThermocoupleClass("E standard", 0, 870, 1.7, 0.005, ASTM),
    ThermocoupleClass("E special", 0, 870, 1.0, 0.004, ASTM),
    ThermocoupleClass("N class 1", -40, 1000, 1.5, 0.004, IEC),
    ThermocoupleClass("N class 2", -40, 1200, 2.5, 0.0075, IEC),
    ThermocoupleClass("N class 3", -200, 40, 2.5, 0.015, IEC),
    ThermocoupleClass("N standard", 0, 1260, 2.2, 0.0075, ASTM),
    ThermocoupleClass("N special", 0, 1260, 1.1, 0.004, ASTM),
    ThermocoupleClass("R class 1", 0, 1600, 1.0, 0.003, IEC, above=1100),
    ThermocoupleClass("R class 2", 0, 1600, 1.5, 0.0025, IEC),
    ThermocoupleClass("R standard", 0, 1480, 1.5, 0.0025, ASTM),
    ThermocoupleClass("R special", 0, 1480, 0.6, 0.001, ASTM),
    ThermocoupleClass("S class 1", 0, 1600, 1.0, 0.003, IEC, above=1100),
    ThermocoupleClass("S class 2", 0, 1600, 1.5, 0.0025, IEC),
    ThermocoupleClass("S standard", 0, 1480, 1.5, 0.0025, ASTM),
    ThermocoupleClass("S special", 0, 1480, 0.6, 0.001, ASTM),
    ThermocoupleClass("B class 2", 600, 1700, 0.0, 0.0025, IEC),
    ThermocoupleClass("B class 3", 600, 1700, 4.0, 0.005, IEC),
    ThermocoupleClass("B standard", 870, 1700, 0.0, 0.005, ASTM),
    ThermocoupleClass("B special", 870, 1700, 0.0, 0.0025, ASTM),
)
CLASSES: Mapping[str, ThermocoupleClass] = {each.name: each for each in _TABLE}
"""Every known class by its name."""

_BY_WORDS = {name.casefold(): each for name, each in CLASSES.items()}
_LOOKS_LIKE_ONE = re.compile(r"\b(class|standard|special)\b|^\s*type\s|^\s*[a-z]\s+[a-z]", re.IGNORECASE)


def is_meant(text: object) -> bool:
    """Tell whether a text is meant to be a thermocouple class rather than a quantity."""
    return isinstance(text, str) and _LOOKS_LIKE_ONE.search(text) is not None


def parse(text: str) -> ThermocoupleClass:
    """Return the class that a text such as "K class 1", "type K class 1" or "T special" names.

    Raises InputError, without a place, for a type or class that is not known.
    """
    words = " ".join(re.findall(r"[^\W_]+", text.casefold())).removeprefix("type ")
    found = _BY_WORDS.get(words)
    if found is not None:
        return found
    own = [name for name in CLASSES if name.casefold().startswith(words[:2])]
    near = nearest(words, own or CLASSES)
    remedy = f"the nearest known one is {quoted(near)}" if near else 'write one such as "K class 1"'
    raise InputError(None, None, f"{quoted(text)} is no thermocouple class that is known", remedy)
