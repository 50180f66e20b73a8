"""Quantities: numbers with units and uncertainties, as text and as SI values. The only module that uses pint.

A quantity is written as a number, its unit and, if it is known, its standard uncertainty: "8 mm +/- 0.05 mm",
"167 W/(m K) +/- 5 %", "(8 ± 0.05) mm". The text is split and checked here; pint sees single unit names only,
never a whole expression.
"""

import functools
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal, NamedTuple

from finback.errors import InputError
from finback.wording import quoted

LONGEST = 80
"""Characters of the longest text that is read as a quantity."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """A value with its standard uncertainty, in SI units (K for temperatures).

    Arguments: value; sd, its standard uncertainty, 0 when exactly known; text, as the user wrote it.
    """

    value: float
    sd: float = 0.0
    text: str = ""

    @property
    def states_uncertainty(self) -> bool:
        """Whether the text gives an uncertainty, be it zero."""
        return "+/-" in self.text or "±" in self.text


Dimension = Literal[
    "length",
    "temperature",
    "temperature difference",
    "heat",
    "conductivity",
    "coefficient",
    "resistance",
    "area",
    "speed",
    "pressure",
    "humidity",
    "relative",
    "heat a kelvin",
    "change a kelvin",
    "number",
]


class _Kind(NamedTuple):
    """What a dimension is in SI base units, what to call it in a sentence, and how it is written."""

    unit: Mapping[str, int]
    words: str
    example: str


KINDS: Mapping[Dimension, _Kind] = {
    "length": _Kind({"m": 1}, "a length", "8 mm"),
    "temperature": _Kind({"K": 1}, "a temperature", "21.3 degC"),
    "temperature difference": _Kind({"K": 1}, "a temperature difference", "0.2 K"),
    "heat": _Kind({"W": 1}, "a heat flow", "12 W"),
    "conductivity": _Kind({"W": 1, "m": -1, "K": -1}, "a conductivity", "167 W/(m K)"),
    "coefficient": _Kind({"W": 1, "m": -2, "K": -1}, "a heat transfer coefficient", "45 W/(m^2 K)"),
    "resistance": _Kind({"m": 2, "K": 1, "W": -1}, "an area resistance", "5e-5 m^2 K/W"),
    "area": _Kind({"m": 2}, "an area", "50 mm^2"),
    "speed": _Kind({"m": 1, "s": -1}, "a speed", "2.5 m/s"),
    "pressure": _Kind({"kg": 1, "m": -1, "s": -2}, "a pressure", "98 kPa"),
    "humidity": _Kind({}, "a relative humidity", "45 %"),
    "relative": _Kind({}, "a share of the value", "3 %"),
    "heat a kelvin": _Kind({"W": 1, "K": -1}, "a loss a kelvin", "0.05 W/K"),
    "change a kelvin": _Kind({"K": -1}, "a relative change a kelvin", "-4e-4 1/K"),
    "number": _Kind({}, "a number", "0.25"),
}
PER_CENT = ("humidity", "relative")
"""Dimensions whose unit is %; an uncertainty in per cent of such a value is an amount, no share of it."""

SCALES: Mapping[str, tuple[float, float]] = {
    "K": (1.0, 0.0),
    "degC": (1.0, 273.15),
    "degF": (5 / 9, 459.67 * 5 / 9),
    "degR": (5 / 9, 0.0),
}
"""Temperature scales: T [K] = factor · reading + offset. Exact by the definitions of the scales (NIST SP 811,
appendix B)."""

_SCALE_NAMES = {
    **dict.fromkeys(("K", "kelvin", "Kelvin", "degK"), "K"),
    **dict.fromkeys(("degC", "C", "celsius", "Celsius", "deg_C"), "degC"),
    **dict.fromkeys(("degF", "F", "fahrenheit", "Fahrenheit", "deg_F"), "degF"),
    **dict.fromkeys(("degR", "rankine", "Rankine"), "degR"),
}
_DIFFERENCES = {"K": "kelvin", "degC": "kelvin", "degF": "delta_degF", "degR": "degR"}

_PLAIN = str.maketrans(
    {
        **dict(zip("⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺", "0123456789-+", strict=True)),
        **dict.fromkeys("·⋅∙×", "*"),
        **dict.fromkeys("−‐‑–", "-"),
        **dict.fromkeys("µμ", "u"),
        **dict.fromkeys("\u00a0\u202f\u2009\t", " "),
        "∕": "/",
        "℃": "degC",
        "℉": "degF",
        "°": "deg",
        "±": "+/-",
    }
)
_RAISED = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")
_NUMBER = r"[+-]?(?:[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)(?:[eE][+-]?[0-9]{1,4})?"
_VALUE = re.compile(rf"\s*({_NUMBER})(?![0-9.,])\s*(.*?)\s*", re.DOTALL)
_BRACKETED = re.compile(rf"\s*\(\s*({_NUMBER})\s*\+/-\s*({_NUMBER})\s*\)\s*(.*?)\s*", re.DOTALL)
_GROUPED_THOUSANDS = re.compile(r"[+-]?[1-9][0-9]{0,2},[0-9]{3}")
_TOKEN = re.compile(r"\s*(?:([A-Za-z_]{1,24})(?:\^?(-?[0-9])(?![0-9]))?|([*/()])|(1)(?=\s*/))")


def parse(text: object, dimension: Dimension) -> Quantity:
    """Read a number with its unit and, after "+/-" or "±", its standard uncertainty.

    Arguments: text, such as "8 mm +/- 0.05 mm" or "167 W/(m K) +/- 5 %"; dimension, what it must be. The
    uncertainty of a temperature is a difference: 0.9 degF is 0.5 K. Returns SI values (K for temperatures).
    Raises InputError, without a place, for anything else.
    """
    if dimension == "number":
        return _parse_number(text)
    kind = KINDS[dimension]
    written = f'write {kind.words} with its unit, such as "{kind.example}"'
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        raise InputError(None, None, "this is not a number with a unit", written)
    if not isinstance(text, str):
        raise InputError(None, None, f"the number {quoted(text)[1:-1]} has no unit", written)
    if len(text) > LONGEST:
        raise InputError(None, None, f"{quoted(text)} is longer than {LONGEST} characters", written)
    value_part, sd_part = _halves(text, written)
    value, unit = _number_and_unit(value_part, text, written)
    if not unit:
        raise InputError(None, None, f"{quoted(text)} has no unit", written)
    factor, offset = scale(unit, dimension)
    sd = 0.0 if sd_part is None else _uncertainty(sd_part, value * factor, dimension, text)
    result = value * factor + offset
    if not (math.isfinite(result) and math.isfinite(sd)):
        raise InputError(None, None, f"{quoted(text)} is too large a number", written)
    return Quantity(result, sd, text)


def _parse_number(text: object) -> Quantity:
    """Read a number without a unit, with or without a standard uncertainty: 0.25, "0.25 +/- 0.05"."""
    written = 'write a number, such as 0.25 or "0.25 +/- 0.05"'
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        raise InputError(None, None, "this is not a number", written)
    shown = text if isinstance(text, str) else str(text)
    if len(shown) > LONGEST:
        raise InputError(None, None, f"{quoted(shown)} is longer than {LONGEST} characters", written)
    value_part, sd_part = _halves(shown, written)
    value, unit = _number_and_unit(value_part, shown, written)
    sd, sd_unit = (0.0, "") if sd_part is None else _number_and_unit(sd_part, shown, written)
    if sd_unit == "%":
        sd, sd_unit = abs(value) * sd / 100, ""
    if unit or sd_unit:
        raise InputError(None, None, f"{quoted(shown)} has a unit, and should have none", written)
    if sd < 0:
        raise InputError(None, None, f"{quoted(shown)} has a negative uncertainty", "write a positive one")
    if not (math.isfinite(value) and math.isfinite(sd)):
        raise InputError(None, None, f"{quoted(shown)} is too large a number", written)
    return Quantity(value, sd, shown)


def is_temperature_scale(unit: str) -> bool:
    """Tell whether a unit is that of a thermometer: degC, °F, K and how else they are written."""
    return _plain(unit) in _SCALE_NAMES


def is_relative(text: object) -> bool:
    """Tell whether the text states a share of the value, in per cent, rather than an amount."""
    return isinstance(text, str) and text.rstrip().endswith("%")


def _halves(text: str, written: str) -> tuple[str, str | None]:
    """Return the value's text and the uncertainty's, None when there is none."""
    plain = _plain(text)
    bracketed = _BRACKETED.fullmatch(plain)
    if bracketed:
        number, sd, unit = bracketed.groups()
        return f"{number} {unit}", f"{sd} {unit}"
    parts = plain.split("+/-")
    if len(parts) > 2:
        raise InputError(None, None, f'{quoted(text)} has more than one "+/-"', written)
    return parts[0], parts[1] if len(parts) == 2 else None


def _number_and_unit(part: str, text: str, written: str) -> tuple[float, str]:
    match = _VALUE.fullmatch(part)
    if match is None:
        raise InputError(None, None, f"{quoted(text)} does not begin with a number", written)
    number, unit = match.groups()
    if _GROUPED_THOUSANDS.fullmatch(number):
        point, plain = number.replace(",", "."), number.replace(",", "")
        problem = f"{quoted(text)} can be read as {point} and as {plain}"
        raise InputError(None, None, problem, f'write "{point}" or "{plain}"')
    return float(number.replace(",", ".")), unit


def _uncertainty(part: str, value: float, dimension: Dimension, text: str) -> float:
    """Return the standard uncertainty in SI units; a share in per cent is taken of `value`."""
    example = KINDS[dimension].example
    unit_of_it = example.split(" ", 1)[1]
    if dimension == "temperature":
        dimension, unit_of_it = "temperature difference", "K"
    written = f'write its standard uncertainty with a unit, such as "+/- 0.05 {unit_of_it}"'
    number, unit = _number_and_unit(part, text, written)
    if number < 0:
        raise InputError(None, None, f"{quoted(text)} has a negative uncertainty", "write a positive one")
    if not unit:
        raise InputError(None, None, f"the uncertainty in {quoted(text)} has no unit", written)
    if unit == "%" and dimension == "temperature difference":
        problem = f"{quoted(text)} has an uncertainty in per cent, which means nothing for a temperature"
        raise InputError(None, None, problem, 'write a difference, such as "+/- 0.5 K"')
    if unit == "%" and dimension not in PER_CENT:
        return abs(value) * number / 100
    return number * scale(unit, dimension)[0]


@functools.lru_cache(maxsize=512)
def scale(unit: str, dimension: Dimension) -> tuple[float, float]:
    """Return (factor, offset) of a unit: SI value = factor · number + offset.

    Arguments: unit, such as "mm", "W/(m K)", "degF"; dimension it must have. The offset is 0 except on the
    scales of temperature. Raises InputError, without a place, for an unknown or unfit unit.
    """
    kind = KINDS[dimension]
    written = f'write {kind.words} with its unit, such as "{kind.example}"'
    unfit = InputError(None, None, f"the unit {quoted(unit)} is not that of {kind.words}", written)
    if len(unit) > LONGEST:
        raise unfit
    plain = _plain(unit)
    if dimension == "temperature":
        if plain not in _SCALE_NAMES:
            raise unfit
        return SCALES[_SCALE_NAMES[plain]]
    if dimension in PER_CENT or plain == "%":
        if dimension not in PER_CENT or plain != "%":
            raise unfit
        return 0.01, 0.0
    # "W/m K" is W K/m by the rules and W/(m K) by habit, and "W/mK" is meant so too. Only one reading has
    # the dimension that is asked for, so the habit can be allowed.
    for spelling, all_below in ((plain, False), (plain, True), (re.sub(r"mK\b", "m K", plain), True)):
        factor = _factor(_factors(spelling, all_below, unit, written), kind, written)
        if factor is not None:
            return factor, 0.0
    raise unfit


def _plain(text: str) -> str:
    """Return the text in ASCII: superscripts, dots and signs of degree as they are typed."""
    plain = text.translate(_PLAIN).replace("**", "^").strip()
    return re.sub(r"\bdeg +([CFKR])\b", r"deg\1", plain)


def _factors(unit: str, all_below: bool, text: str, written: str) -> list[tuple[str, int]]:
    """Split a unit into names and exponents; `all_below` puts everything after a "/" below it."""
    unreadable = InputError(None, None, f"the unit {quoted(text)} cannot be read", written)
    factors: list[tuple[str, int]] = []
    signs = [1]  # of each open bracket
    sign, at, ended = 1, 0, False
    while at < len(unit):
        token = _TOKEN.match(unit, at)
        if token is None:
            raise unreadable
        at = token.end()
        name, exponent, mark, one = token.groups()
        if name:
            factors.append((name, sign * int(exponent or 1)))
        elif mark == "(" and len(signs) < 4:
            signs.append(sign)
            continue
        elif mark == ")" and len(signs) > 1 and ended:
            sign = signs.pop()
        elif mark in ("*", "/") and ended:
            sign = -signs[-1] if mark == "/" else (sign if all_below else signs[-1])
            ended = False
            continue
        elif not one:
            raise unreadable
        ended = True
        sign = sign if all_below else signs[-1]
    if not ended or len(signs) > 1:
        raise unreadable
    return factors


def _factor(factors: list[tuple[str, int]], kind: _Kind, written: str) -> float | None:
    """Return how many SI units the product is, or None when it is of another dimension."""
    import pint

    units = _registry()
    product = units.Quantity(1.0)
    target = units.Quantity(1.0)
    for name, exponent in kind.unit.items():
        target = target * units.Quantity(1.0, name) ** exponent
    for name, exponent in factors:
        difference = _DIFFERENCES.get(_SCALE_NAMES.get(name, ""), name)
        try:
            product = product * units.Quantity(1.0, units.parse_units(difference)) ** exponent
        except (pint.PintError, AttributeError, ArithmeticError, ValueError, TypeError):
            raise InputError(None, None, f"the unit {quoted(name)} is unknown", written) from None
    if product.dimensionality != target.dimensionality:
        return None
    return float(product.to(target.units).magnitude)


@functools.cache
def _registry() -> Any:
    import pint

    return pint.UnitRegistry()


def pretty_unit(unit: str) -> str:
    """Return an ASCII unit as it is printed: "W/(m^2 K)" as "W/(m² K)", "degC" as "°C"."""
    raised = re.sub(r"\^(-?[0-9]+)", lambda match: match[1].translate(_RAISED), unit)
    return raised.replace("deg", "°")


def format_number(value: float | None, digits: int = 3) -> str:
    """Return a number with so many significant digits, without a unit; "–" for None or a nan.

    Below 0.001 and from a million on it is written with a power of ten.
    """
    if value is None or not math.isfinite(value):
        return "–"
    if value == 0:
        return "0"
    power = _exponent(value, digits)
    if -3 <= power < 6:
        return _rounded(value, digits - 1 - power)
    return f"{value / 10.0**power:.{digits - 1}f} × {_power_of_ten(power)}"


def format_value(value: float | None, sd: float | None, unit: str = "") -> str:
    """Return a value with its uncertainty, rounded to the same place: "41.3 ± 1.8 W/(m² K)".

    Arguments: value and its standard uncertainty sd in `unit`, an ASCII unit. The uncertainty is shown with
    two significant digits; without one (None or 0) the value is shown with four.
    """
    tail = f" {pretty_unit(unit)}" if unit else ""
    if value is None or not math.isfinite(value):
        return "–"
    if not sd or not math.isfinite(sd):
        return format_number(value, 4) + tail
    places = 1 - _exponent(sd, 2)
    power = _exponent(max(abs(value), abs(sd)), 2)
    if -3 <= power < 6:
        return f"{_rounded(value, places)} ± {_rounded(sd, places)}{tail}"
    pair = " ± ".join(_rounded(number / 10.0**power, places + power) for number in (value, sd))
    return f"({pair}) × {_power_of_ten(power)}{tail}"


def _exponent(value: float, digits: int) -> int:
    """Return the power of ten of the value's first digit, once it is rounded to so many digits."""
    return int(f"{value:.{digits - 1}e}".partition("e")[2])


def _rounded(value: float, places: int) -> str:
    """Return the value rounded to so many decimal places, which may be negative."""
    return f"{round(value, places):.{max(places, 0)}f}"


def _power_of_ten(power: int) -> str:
    return f"10{str(power).translate(_RAISED)}"
