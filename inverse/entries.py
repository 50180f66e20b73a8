"""Entries: what one key of rig.toml may hold.

Each function checks one entry and returns its value in SI units, lengths in [m] and temperatures in [K], or
raises `EntryError`. The sections of `finback.rig_file` say which key takes which.
"""

from collections.abc import Callable
from typing import NamedTuple

from finback import thermocouples
from finback.errors import InputError
from finback.quantity import Dimension, Quantity, is_relative, parse
from finback.thermocouples import ThermocoupleClass
from finback.wording import listed, nearest, quoted

LONGEST_TITLE = 200
MOST_FINS = 100_000


class Spread(NamedTuple):
    """A stated noise or calibration uncertainty: K or W, or a fraction of the reading where `relative`.

    Where the calibration is a thermocouple class, that stands in its place, and the amount is 0.
    """

    amount: float
    relative: bool
    thermocouple: ThermocoupleClass | None = None


class Losses(NamedTuple):
    """Stated losses of a plate [W], or, where `per_kelvin`, of each kelvin that it is above the air [W/K]."""

    amount: Quantity
    per_kelvin: bool


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


def several(what: str, known: tuple[str, ...]) -> Callable[[object], tuple[str, ...]]:
    """Return the function that takes a list of the known words, each once."""
    choose = choice(what, known)

    def take(words: object) -> tuple[str, ...]:
        if not isinstance(words, list | tuple) or not words:
            remedy = f'write a list in brackets, such as ["{known[0]}", "{known[1]}"]'
            raise EntryError(f"this is no list of {what}s", remedy)
        taken = tuple(choose(word) for word in words)
        twice = next((word for word in taken if taken.count(word) > 1), None)
        if twice is not None:
            raise EntryError(f"{quoted(twice)} is given twice", "name each once")
        return taken

    return take


def count(number: object) -> int:
    """Read a number of fins."""
    if isinstance(number, bool) or not isinstance(number, int) or not 1 <= number <= MOST_FINS:
        raise EntryError(
            "this is no number of fins", f"write a whole number from 1 to {MOST_FINS}, such as 24"
        )
    return number


def losses(text: object) -> Losses:
    """Read the losses of a plate: an amount [W], or one that grows with the plate's excess [W/K]."""
    try:
        return Losses(not_negative(parse(text, "heat a kelvin")), True)
    except InputError:
        return Losses(not_negative(_parsed(text, "heat")), False)


def emissivity(text: object) -> Quantity:
    """Read an emissivity: a number, or the name of a surface in the handbook."""
    if isinstance(text, str) and text[:1].isalpha():
        return _finish(text)
    found = _parsed(text, "number")
    if not 0 <= found.value <= 1:
        problem = f"{quoted(found.text)} is no emissivity"
        raise EntryError(problem, 'write one from 0 to 1, such as "0.08 +/- 0.03"')
    return found


def _finish(name: str) -> Quantity:
    from finback.models import emissivity as finishes
    from finback.models.names import UnknownNameError

    try:
        finish = finishes.find(name)
    except UnknownNameError as error:
        near = ", ".join(map(quoted, error.nearest))
        problem = f"{quoted(name)} is no surface that the handbook knows"
        raise EntryError(
            problem, f'the nearest are {near}; or write a number, such as "0.08 +/- 0.03"'
        ) from None
    text = f"{finish.emissivity:.3g} +/- {finish.spread:.2g} ({finish.name})"
    return Quantity(finish.emissivity, finish.spread, text)


def exponent(value: Quantity) -> Quantity:
    """Check the exponent of free convection."""
    if not 0 < value.value < 2:
        problem = f"{quoted(value.text)} is no exponent of free convection"
        raise EntryError(problem, 'write one above 0 and below 2, such as 0.25 or "0.25 +/- 0.05"')
    return value


def exact(value: Quantity) -> Quantity:
    """Check that a quantity states no uncertainty, since none of it is used."""
    if value.sd > 0:
        problem = f"the uncertainty in {quoted(value.text)} is not used"
        raise EntryError(problem, "leave it out")
    return value


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
