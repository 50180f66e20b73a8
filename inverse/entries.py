"""Entries: what one key of rig.toml may hold.

Each function checks one entry and returns its value in SI units, lengths in [m] and temperatures in [K], or
raises `EntryError`. The sections of `finback.rig_file` say which key takes which.
"""

from collections.abc import Callable
from typing import NamedTuple, NoReturn

from finback import thermocouples
from finback.errors import InputError
from finback.quantity import Dimension, Quantity, is_relative, parse
from finback.thermocouples import ThermocoupleClass
from finback.wording import listed, nearest, quoted

LONGEST_TITLE = 200


class Spread(NamedTuple):
    """A stated noise or calibration uncertainty: K or W, or a fraction of the reading where `relative`.

    Where the calibration is a thermocouple class, that stands in its place, and the amount is 0.
    """

    amount: float
    relative: bool
    thermocouple: ThermocoupleClass | None = None


class EntryError(ValueError):
    """An entry that cannot be taken: what is wrong, what would be right."""

    def __init__(self, problem: str, remedy: str) -> None:
        self.problem, self.remedy = problem, remedy
        super().__init__(f"{problem}; {remedy}")


def quantity(dimension: Dimension) -> Callable[[object], Quantity]:
    """Return the function that reads a quantity of this dimension."""
    return lambda text: _parsed(text, dimension)


def choice(what: str, known: tuple[str, ...]) -> Callable[[object], str]:
    """Return the function that takes one of the known words."""

    def choose(word: object) -> str:
        every = f"write one of {listed(known, len(known))}"
        if not isinstance(word, str):
            raise EntryError(f"this is no {what}", every)
        if word in known:
            return word
        near = nearest(word, known)
        remedy = f"the nearest known one is {quoted(near)}" if near else every
        raise EntryError(f"{quoted(word)} is no {what}", remedy)

    return choose


def later(problem: str, instead: str) -> Callable[[object], NoReturn]:
    """Return the function that refuses what this version does not have yet."""

    def refuse(_: object) -> NoReturn:
        raise EntryError(problem, instead)

    return refuse


def line(what: str, longest: int = LONGEST_TITLE) -> Callable[[object], str]:
    """Return the function that takes one printable line: a title, a name."""

    def take(text: object) -> str:
        fits = isinstance(text, str) and bool(text.strip()) and len(text) <= longest and text.isprintable()
        if not isinstance(text, str) or not fits:
            remedy = f"write one line of 1 to {longest} printable characters in quotes"
            raise EntryError(f"this is no {what}", remedy)
        return text.strip()

    return take


def positive(value: Quantity) -> Quantity:
    """Check that a quantity is above zero."""
    if value.value <= 0:
        raise EntryError(f"{quoted(value.text)} is not above zero", "write a positive value")
    return value


def narrow(value: Quantity) -> Quantity:
    """Check that a quantity is known better than to its own size; zero is known exactly."""
    if value.sd > 0 and value.sd >= value.value:
        problem = f"the uncertainty in {quoted(value.text)} is as large as the value"
        raise EntryError(problem, "write a standard uncertainty smaller than the value")
    return value


def not_negative(value: Quantity) -> Quantity:
    """Check that a quantity is zero or above."""
    if value.value < 0:
        raise EntryError(f"{quoted(value.text)} is negative", "write zero or a positive value")
    return value


def from_base(value: Quantity) -> Quantity:
    """Check a distance from the base."""
    if value.value < 0:
        raise EntryError(
            f"{quoted(value.text)} is negative", "write the distance from the base towards the tip"
        )
    return value


def up_to_saturation(value: Quantity) -> Quantity:
    """Check a relative humidity."""
    if not 0 <= value.value <= 1:
        problem = f"{quoted(value.text)} is no relative humidity"
        raise EntryError(problem, 'write one from 0 % to 100 %, such as "45 %"')
    return value


def above_absolute_zero(value: Quantity) -> Quantity:
    """Check an absolute temperature."""
    if value.value < 0:
        problem = f"{quoted(value.text)} is below absolute zero"
        raise EntryError(problem, 'write a temperature in degC, degF or K, such as "21.3 degC"')
    return value


def uncertainty(value: Quantity) -> Quantity:
    """Check a quantity that is itself a standard uncertainty."""
    if value.value < 0:
        raise EntryError(f"{quoted(value.text)} is negative", "write a standard uncertainty of zero or more")
    if value.states_uncertainty:
        problem = f"{quoted(value.text)} states the uncertainty of an uncertainty"
        raise EntryError(problem, 'leave out the part after "+/-"')
    return value


def spread(text: object, key: str, place: str) -> Spread:
    """Read noise or calibration of a sensor: K or a thermocouple class for temperatures, W or % for heat.

    Arguments: text; key, "noise" or "calibration"; place, what the sensor reads.
    """
    reads_heat = place in ("heat", "heater")
    if isinstance(text, str) and thermocouples.is_meant(text):
        return Spread(0.0, False, _thermocouple(text, key, reads_heat))
    relative = is_relative(text)
    if relative and not reads_heat:
        problem = f"{quoted(text)} is a share of the reading, which means nothing for a temperature"
        raise EntryError(problem, 'write a temperature difference, such as "0.2 K"')
    dimension: Dimension = "relative" if relative else "heat" if reads_heat else "temperature difference"
    found = uncertainty(_parsed(text, dimension))
    if key == "noise" and found.value == 0 and place not in ("plate", "air"):
        problem = "a noise of zero means exactly known, which only plate and air can be"
        raise EntryError(problem, "write how much the sensor scatters, or leave noise out")
    return Spread(found.value, relative)


def _thermocouple(text: str, key: str, reads_heat: bool) -> ThermocoupleClass:
    if reads_heat:
        problem = f"{quoted(text)} is for thermocouples, and this sensor reads heat"
        raise EntryError(problem, 'write a heat flow or a share of the reading, such as "0.2 W" or "2 %"')
    if key == "noise":
        problem = f"{quoted(text)} says nothing of how much readings scatter"
        raise EntryError(problem, 'write it as calibration, and noise in kelvin, such as "0.2 K"')
    try:
        return thermocouples.parse(text)
    except InputError as error:
        raise EntryError(error.problem, error.remedy) from None


def _parsed(text: object, dimension: Dimension) -> Quantity:
    try:
        return parse(text, dimension)
    except InputError as error:
        raise EntryError(error.problem, error.remedy) from None
