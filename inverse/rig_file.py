"""The shape of rig.toml: which tables and keys there are, and what each may hold.

A checked file becomes a `RigSection`: every number a `Quantity` in SI units, nothing unknown let through.
What the numbers mean together (a sensor beyond the fin, a joint without a plate sensor) is said in
`finback.rig`, the only module that imports this one: pydantic is loaded when a rig is read, not before.
"""

import re
import tomllib
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Annotated, Any, Literal, NamedTuple

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, ValidationError
from pydantic import ValidationInfo, field_validator
from pydantic_core import ErrorDetails, PydanticCustomError

from finback.errors import InputError
from finback.quantity import KINDS, Dimension, Quantity, is_relative, parse
from finback.wording import listed, nearest, quoted

LONGEST_TITLE = 200


class Spread(NamedTuple):
    """A stated noise or calibration uncertainty: K or W, or a fraction of the reading where `relative`."""

    amount: float
    relative: bool


def _refuse(problem: str, remedy: str) -> PydanticCustomError:
    """Return the error by which a check in this module travels through pydantic."""
    return PydanticCustomError("refused", "{problem}; {remedy}", {"problem": problem, "remedy": remedy})


def _parsed(text: object, dimension: Dimension) -> Quantity:
    try:
        return parse(text, dimension)
    except InputError as error:
        raise _refuse(error.problem, error.remedy) from None


def _quantity(dimension: Dimension) -> BeforeValidator:
    """Return the validator that reads a quantity of this dimension."""
    return BeforeValidator(lambda text: _parsed(text, dimension))


def _positive(quantity: Quantity) -> Quantity:
    if quantity.value <= 0:
        raise _refuse(f"{quoted(quantity.text)} is not above zero", "write a positive value")
    return quantity


def _narrow(quantity: Quantity) -> Quantity:
    if quantity.sd >= quantity.value:
        problem = f"the uncertainty in {quoted(quantity.text)} is as large as the value"
        raise _refuse(problem, "write a standard uncertainty smaller than the value")
    return quantity


def _on_the_fin(quantity: Quantity) -> Quantity:
    if quantity.value < 0:
        raise _refuse(f"{quoted(quantity.text)} is before the base", "write the distance from the base")
    return quantity


def _above_absolute_zero(quantity: Quantity) -> Quantity:
    if quantity.value < 0:
        problem = f"{quoted(quantity.text)} is below absolute zero"
        raise _refuse(problem, 'write a temperature in degC, degF or K, such as "21.3 degC"')
    return quantity


def _own_uncertainty(quantity: Quantity) -> Quantity:
    """Check a quantity that is itself an uncertainty."""
    if quantity.value < 0:
        raise _refuse(f"{quoted(quantity.text)} is negative", "write a standard uncertainty, zero or more")
    if quantity.sd:
        problem = f"{quoted(quantity.text)} states an uncertainty of an uncertainty"
        raise _refuse(problem, 'leave out the part after "+/-"')
    return quantity


def _spread(text: object, key: str, place: str) -> Spread:
    """Read noise or calibration of a sensor: K for temperatures, W or per cent for heat."""
    if isinstance(text, str) and "class" in text:
        problem = f"this version does not know thermocouple classes such as {quoted(text)} yet"
        raise _refuse(problem, 'write their standard uncertainty as a difference, such as "0.3 K"')
    heat = place in ("heat", "heater")
    relative = is_relative(text)
    if relative and not heat:
        problem = f"{quoted(text)} is a share, and a share of a temperature means nothing"
        raise _refuse(problem, 'write a difference, such as "0.2 K"')
    dimension: Dimension = "relative" if relative else "heat" if heat else "temperature difference"
    quantity = _own_uncertainty(_parsed(text, dimension))
    if key == "noise" and quantity.value == 0 and place not in ("plate", "air"):
        problem = "a noise of zero would make this reading exactly known"
        raise _refuse(problem, "write what the sensor scatters, or leave noise out")
    return Spread(quantity.value, relative)


def _title(text: object) -> str:
    if not isinstance(text, str) or not text.strip() or len(text) > LONGEST_TITLE or not text.isprintable():
        raise _refuse("this is not a title", f"write one line of 1 to {LONGEST_TITLE} characters in quotes")
    return text.strip()


def _choice(what: str, known: tuple[str, ...], later: tuple[str, ...] = ()) -> BeforeValidator:
    """Return the validator that takes one of the known words."""

    def choose(word: object) -> str:
        if not isinstance(word, str):
            raise _refuse(f"this is not a {what}", f"write one of {listed(known)}")
        if word in known:
            return word
        if word in later:
            problem = f"this version does not have the {what} {quoted(word)} yet"
            raise _refuse(problem, f"it has {listed(known)}")
        near = nearest(word, known)
        remedy = f"the nearest known one is {quoted(near)}" if near else f"write one of {listed(known)}"
        raise _refuse(f"{quoted(word)} is no {what}", remedy)

    return BeforeValidator(choose)


def _later(what: str, instead: str) -> BeforeValidator:
    """Return the validator that refuses what this version does not have yet."""

    def refuse(_: object) -> None:
        raise _refuse(f"this version does not have {what} yet", instead)

    return BeforeValidator(refuse)


_SHAPES = "it has the profiles pin and rectangular"
Length = Annotated[
    Quantity, AfterValidator(_narrow), AfterValidator(_positive), _quantity("length")
]
LaterShape = Annotated[None, _later("fins that need this key", _SHAPES)]


class _Section(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class FinSection(_Section):
    """[fin]: its shape and its tip."""

    profile: Annotated[
        Literal["pin", "rectangular"],
        _choice(
            "profile",
            ("pin", "rectangular"),
            ("trapezoidal", "triangular", "concave-parabolic", "convex-parabolic", "cone", "concave-pin")
            + ("convex-pin", "annular", "hyperbolic-annular", "table"),
        ),
    ]
    length: Length
    diameter: Length | None = None
    width: Length | None = None
    thickness: Length | None = None
    edges: Annotated[Literal["exposed", "guarded"], _choice("word for edges", ("exposed", "guarded"))] | None = None
    tip: Annotated[
        Literal["adiabatic", "convective", "fixed", "infinite"],
        _choice("tip", ("adiabatic", "convective", "fixed", "infinite")),
    ] | None = None
    tip_temperature: Annotated[
        Quantity, AfterValidator(_above_absolute_zero), _quantity("temperature")
    ] | None = None
    tip_thickness: LaterShape = None
    tip_diameter: LaterShape = None
    inner_diameter: LaterShape = None
    outer_diameter: LaterShape = None
    file: LaterShape = None
    surface: LaterShape = None


class MaterialSection(_Section):
    """[material]: what conducts."""

    conductivity: Annotated[
        Quantity, AfterValidator(_narrow), AfterValidator(_positive), _quantity("conductivity")
    ] | None = None
    name: Annotated[
        None, _later("materials by name", 'write the conductivity, such as "167 W/(m K) +/- 5 %"')
    ] = None
    emissivity: Annotated[
        None, _later("radiation apart from convection", "leave emissivity out: h is then the total coefficient")
    ] = None


class JointSection(_Section):
    """[joint]: what a healthy joint should have."""

    expected: Annotated[Quantity, AfterValidator(_positive), _quantity("resistance")] | None = None


class AirSection(_Section):
    """[air]: what a healthy fin should see."""

    expected_h: Annotated[Quantity, AfterValidator(_positive), _quantity("coefficient")] | None = None
    speed: Annotated[
        None, _later("correlations", 'write expected_h instead, such as "45 W/(m^2 K) +/- 20 %"')
    ] = None
    correlation: Annotated[
        None, _later("correlations", 'write expected_h instead, such as "45 W/(m^2 K) +/- 20 %"')
    ] = None


class DefaultsSection(_Section):
    """[sensors.defaults]: what holds for every temperature sensor that does not say otherwise."""

    noise: Spread | None = None
    calibration: Spread | None = None
    position: Annotated[Quantity, AfterValidator(_own_uncertainty), _quantity("length")] | None = None

    @field_validator("noise", "calibration", mode="before")
    @classmethod
    def _read_spread(cls, text: object, info: ValidationInfo) -> Spread:
        return _spread(text, str(info.field_name), "fin")


class SensorSection(_Section):
    """One sensor: where it sits and how well it reads."""

    at: Annotated[Quantity, AfterValidator(_on_the_fin), _quantity("length")] | None = None
    on: Annotated[
        Literal["plate", "air", "heat", "heater"],
        _choice('place for "on"', ("plate", "air", "heat", "heater")),
    ] | None = None
    noise: Spread | None = None
    calibration: Spread | None = None
    position: Annotated[Quantity, AfterValidator(_own_uncertainty), _quantity("length")] | None = None

    @field_validator("noise", "calibration", mode="before")
    @classmethod
    def _read_spread(cls, text: object, info: ValidationInfo) -> Spread:
        return _spread(text, str(info.field_name), info.data.get("on") or "fin")


class SensorsSection(BaseModel):
    """[sensors]: one key a sensor, and the defaults."""

    model_config = ConfigDict(extra="allow", frozen=True)
    __pydantic_extra__: dict[str, SensorSection] = Field(init=False)
    defaults: DefaultsSection = DefaultsSection()


class RigSection(_Section):
    """The whole of rig.toml."""

    title: Annotated[str, BeforeValidator(_title)] = "untitled rig"
    fin: FinSection
    material: MaterialSection = MaterialSection()
    joint: JointSection | None = None
    plate: Annotated[
        None, _later("[plate] with several fins", "leave it out and state the heat of one fin")
    ] = None
    air: AirSection = AirSection()
    sensors: SensorsSection


def decode(content: bytes, source: Path | None) -> dict[str, Any]:
    """Read TOML. Raises InputError for what is not TOML, naming the line."""
    try:
        return tomllib.loads(content.decode("utf-8-sig"))
    except UnicodeDecodeError:
        raise InputError(source, None, "this is not a text in UTF-8", "save the file as UTF-8 text") from None
    except tomllib.TOMLDecodeError as error:
        message, _, place = str(error).partition(" (at ")
        where = place.rstrip(")") or None
        shown = quoted(message)[1:-1]
        raise InputError(source, where, f"this is not TOML ({shown})", 'write lines such as key = "value"') from None
    except RecursionError:
        problem = "brackets are nested too deeply"
        raise InputError(source, None, problem, 'write lines such as key = "value"') from None


def check(document: Mapping[str, Any], source: Path | None) -> RigSection:
    """Check a rig given as nested tables. Raises InputError for the first thing that is wrong."""
    try:
        return RigSection.model_validate(document)
    except ValidationError as error:
        raise _sentence(error.errors(include_url=False, include_input=False), source) from None


_SECTIONS: Mapping[str, type[BaseModel]] = {
    "fin": FinSection,
    "material": MaterialSection,
    "joint": JointSection,
    "air": AirSection,
}


def _sentence(errors: list[ErrorDetails], source: Path | None) -> InputError:
    """Return the first error as a sentence; a misspelt key comes before the key that is missing for it."""
    first = next((error for error in errors if error["type"] == "extra_forbidden"), errors[0])
    path = [str(part) for part in first["loc"]]
    kind = first["type"]
    if kind == "refused":
        return InputError(source, place(path), first["ctx"]["problem"], first["ctx"]["remedy"])
    if kind == "extra_forbidden":
        return _unknown_key(path, source)
    if kind == "missing":
        return _missing_key(path, source)
    return InputError(source, place(path), "this is not a table of keys", "write the table as in the manual")


def place(path: list[str]) -> str:
    """Return where in a rig file a path of keys leads: "[fin] length", "[sensors] T1 at"."""
    if len(path) > 1 and path[:2] == ["sensors", "defaults"]:
        return " ".join(["[sensors.defaults]", *path[2:]])
    shown = [part if part.isidentifier() and len(part) < 65 else quoted(part) for part in path]
    if path[0] in RigSection.model_fields and path[0] != "title":
        shown[0] = f"[{path[0]}]"
    return " ".join(shown)


def _unknown_key(path: list[str], source: Path | None) -> InputError:
    *table, key = path
    model: type[BaseModel] = RigSection
    if table[:1] == ["sensors"]:
        model = DefaultsSection if table[1] == "defaults" else SensorSection
    elif table:
        model = _SECTIONS[table[0]]
    known = list(model.model_fields)
    near = nearest(key, known)
    remedy = f"the nearest known key is {quoted(near)}" if near else f"the known keys are {', '.join(known)}"
    return InputError(source, place(table) if table else None, f"the key {quoted(key)} is unknown", remedy)


def _missing_key(path: list[str], source: Path | None) -> InputError:
    *table, key = path
    if not table:
        return InputError(source, None, f"the table [{key}] is missing", "add it as the manual shows")
    return InputError(source, place(table), f"the key {quoted(key)} is missing", "add it")
