"""The shape of rig.toml: which tables and keys there are, and what each may hold.

A checked file becomes a `RigSection`: every number a `Quantity` in SI units, nothing unknown let through.
What the entries mean together (a sensor beyond the fin, a joint without a plate sensor) is said in
`finback.rig`, which imports this module when a rig is read, and not before: pydantic takes its time.
"""

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    ValidationError,
    ValidationInfo,
    field_validator,
)
from pydantic_core import ErrorDetails

from finback import entries
from finback.entries import EntryError, Losses, Spread
from finback.errors import InputError
from finback.quantity import Quantity
from finback.wording import nearest, plain, quoted

PROFILES = (
    *("pin", "rectangular", "trapezoidal", "triangular", "concave-parabolic", "convex-parabolic"),
    *("cone", "concave-pin", "convex-pin", "annular", "hyperbolic-annular", "table"),
)
TIPS = ("adiabatic", "convective", "fixed", "infinite")
EDGES = ("exposed", "guarded")
SURFACES = ("projected", "slant")
ORIENTATIONS = ("vertical", "horizontal")
PLACES = ("plate", "air", "heat", "heater")
LAWS = ("uniform", "free-convection", "varying", "radiating")
NOISES = ("normal", "heavy-tailed")

# The validators before a value run from right to left, those after it from left to right.
_KNOWN_BETTER = (AfterValidator(entries.positive), AfterValidator(entries.narrow))
Length = Annotated[Quantity, *_KNOWN_BETTER, BeforeValidator(entries.quantity("length"))]
Conductivity = Annotated[Quantity, *_KNOWN_BETTER, BeforeValidator(entries.quantity("conductivity"))]
Position = Annotated[Quantity, AfterValidator(entries.from_base), BeforeValidator(entries.quantity("length"))]
Uncertainty = Annotated[
    Quantity, AfterValidator(entries.uncertainty), BeforeValidator(entries.quantity("length"))
]
Temperature = Annotated[
    Quantity, AfterValidator(entries.above_absolute_zero), BeforeValidator(entries.quantity("temperature"))
]
ExactTemperature = Annotated[
    Quantity,
    AfterValidator(entries.exact),
    AfterValidator(entries.above_absolute_zero),
    BeforeValidator(entries.quantity("temperature")),
]
Resistance = Annotated[
    Quantity, AfterValidator(entries.positive), BeforeValidator(entries.quantity("resistance"))
]
Coefficient = Annotated[
    Quantity, AfterValidator(entries.positive), BeforeValidator(entries.quantity("coefficient"))
]
ThinEnd = Annotated[
    Quantity,
    AfterValidator(entries.not_negative),
    AfterValidator(entries.narrow),
    BeforeValidator(entries.quantity("length")),
]
Speed = Annotated[
    Quantity,
    AfterValidator(entries.not_negative),
    AfterValidator(entries.narrow),
    BeforeValidator(entries.quantity("speed")),
]
Pressure = Annotated[Quantity, *_KNOWN_BETTER, BeforeValidator(entries.quantity("pressure"))]
Humidity = Annotated[
    Quantity, AfterValidator(entries.up_to_saturation), BeforeValidator(entries.quantity("humidity"))
]
Emissivity = Annotated[Quantity, BeforeValidator(entries.emissivity)]
Exponent = Annotated[
    Quantity,
    AfterValidator(entries.exponent),
    BeforeValidator(entries.quantity("number")),
]
Change = Annotated[
    Quantity, AfterValidator(entries.exact), BeforeValidator(entries.quantity("change a kelvin"))
]
Area = Annotated[Quantity, *_KNOWN_BETTER, BeforeValidator(entries.quantity("area"))]
PlateLosses = Annotated[Losses, BeforeValidator(entries.losses)]
Laws = Annotated[tuple[str, ...], BeforeValidator(entries.several("surface law", LAWS))]
Noises = Annotated[tuple[str, ...], BeforeValidator(entries.several("noise", NOISES))]
Tips = Annotated[tuple[str, ...], BeforeValidator(entries.several("tip", TIPS))]
ProfileName = Annotated[str, BeforeValidator(entries.choice("profile", PROFILES))]
TipName = Annotated[
    Literal["adiabatic", "convective", "fixed", "infinite"], BeforeValidator(entries.choice("tip", TIPS))
]
Edges = Annotated[Literal["exposed", "guarded"], BeforeValidator(entries.choice("kind of edges", EDGES))]
Surface = Annotated[
    Literal["projected", "slant"], BeforeValidator(entries.choice("kind of surface", SURFACES))
]
Orientation = Annotated[
    Literal["vertical", "horizontal"], BeforeValidator(entries.choice("orientation", ORIENTATIONS))
]
Place = Annotated[
    Literal["plate", "air", "heat", "heater"], BeforeValidator(entries.choice("place of a sensor", PLACES))
]


class Section(BaseModel):
    """A table of rig.toml with known keys only."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class FinSection(Section):
    """[fin]: its shape, its tip, and how it stands."""

    profile: ProfileName
    length: Length | None = None
    width: Length | None = None
    thickness: Length | None = None
    tip_thickness: ThinEnd | None = None
    diameter: Length | None = None
    tip_diameter: ThinEnd | None = None
    inner_diameter: Length | None = None
    outer_diameter: Length | None = None
    file: Annotated[str, BeforeValidator(entries.line("name of a file"))] | None = None
    edges: Edges | None = None
    surface: Surface | None = None
    orientation: Orientation | None = None
    tip: TipName | None = None
    tip_temperature: Temperature | None = None


class MaterialSection(Section):
    """[material]: what conducts."""

    conductivity: Conductivity | None = None
    name: Annotated[str, BeforeValidator(entries.line("name of a material", 80))] | None = None
    temperature_coefficient: Change | None = None
    reference_temperature: ExactTemperature | None = None
    emissivity: Emissivity | None = None


class JointSection(Section):
    """[joint]: what a healthy joint should have."""

    expected: Resistance | None = None


class PlateSection(Section):
    """[plate]: what carries the fin, where heat is measured for all of it."""

    fins: Annotated[int, BeforeValidator(entries.count)] = 1
    bare_area: Area | None = None
    losses: PlateLosses | None = None


class CandidatesSection(Section):
    """[candidates]: which models a fit compares."""

    surface_laws: Laws | None = None
    tips: Tips | None = None
    exponent: Exponent | None = None
    noise: Noises = ("normal",)


class AirSection(Section):
    """[air]: what a healthy fin should see, what tells it, and what else the fin sees."""

    temperature: Temperature | None = None
    expected_h: Coefficient | None = None
    speed: Speed | None = None
    correlation: Annotated[str, BeforeValidator(entries.line("name of a correlation", 80))] | None = None
    pressure: Pressure | None = None
    humidity: Humidity | None = None
    surroundings_temperature: Temperature | None = None


class DefaultsSection(Section):
    """[sensors.defaults]: what holds for every temperature sensor that does not say otherwise."""

    noise: Spread | None = None
    calibration: Spread | None = None
    position: Uncertainty | None = None

    @field_validator("noise", "calibration", mode="before")
    @classmethod
    def _read_spread(cls, text: object, info: ValidationInfo) -> Spread:
        return entries.spread(text, str(info.field_name), "fin")


class SensorSection(Section):
    """One sensor: where it sits and how well it reads."""

    at: Position | None = None
    on: Place | None = None
    noise: Spread | None = None
    calibration: Spread | None = None
    position: Uncertainty | None = None

    @field_validator("noise", "calibration", mode="before")
    @classmethod
    def _read_spread(cls, text: object, info: ValidationInfo) -> Spread:
        return entries.spread(text, str(info.field_name), info.data.get("on") or "fin")


class SensorsSection(BaseModel):
    """[sensors]: one key a sensor, and the defaults."""

    model_config = ConfigDict(extra="allow", frozen=True)
    __pydantic_extra__: dict[str, SensorSection] = Field(init=False)
    defaults: DefaultsSection = DefaultsSection()


class RigSection(Section):
    """The whole of rig.toml."""

    title: Annotated[str, BeforeValidator(entries.line("title"))] = "untitled rig"
    fin: FinSection
    material: MaterialSection = MaterialSection()
    joint: JointSection | None = None
    plate: PlateSection | None = None
    air: AirSection = AirSection()
    candidates: CandidatesSection = CandidatesSection()
    sensors: SensorsSection


def decode(content: bytes, source: Path | None) -> dict[str, Any]:
    """Read TOML. Raises InputError for what is not TOML, naming the line."""
    remedy = 'write tables such as [fin] and lines such as length = "120 mm" below them'
    try:
        return tomllib.loads(content.decode("utf-8-sig"))
    except UnicodeDecodeError:
        raise InputError(source, None, "this is not text in UTF-8", "save the rig as UTF-8 text") from None
    except RecursionError:
        raise InputError(source, None, "brackets are nested too deeply", remedy) from None
    except ValueError as error:  # tomllib.TOMLDecodeError, or a number too long to be read
        message, _, place = str(error).partition(" (at ")
        place = plain(place.rstrip(")"))
        if message.startswith("Cannot"):  # overwrite a value, declare a table twice, and the like
            raise InputError(source, place, "a key or table is given twice", "keep one of the two") from None
        raise InputError(source, place, f"this is not TOML ({plain(message, 80)})", remedy) from None


def check(document: Mapping[str, Any], source: Path | None) -> RigSection:
    """Check a rig given as nested tables. Raises InputError for the first thing that is wrong."""
    try:
        return RigSection.model_validate(document)
    except ValidationError as error:
        raise _sentence(error.errors(include_url=False), source) from None


def place_of(path: tuple[str, ...]) -> str | None:
    """Return where in a rig file a path of keys leads: "[fin] length", "[sensors] T1 at"."""
    if path[:2] == ("sensors", "defaults"):
        return " ".join(["[sensors.defaults]", *path[2:]])
    shown = [part if part.isidentifier() and len(part) <= 64 else quoted(part) for part in path]
    if path and path[0] in RigSection.model_fields and path[0] != "title":
        shown[0] = f"[{path[0]}]"
    return " ".join(shown) or None


_SECTIONS: Mapping[str, type[BaseModel]] = {
    "fin": FinSection,
    "material": MaterialSection,
    "joint": JointSection,
    "plate": PlateSection,
    "air": AirSection,
    "candidates": CandidatesSection,
}
_EXAMPLES = {
    "fin": "add it with profile and the sizes that the profile needs",
    "sensors": 'add it with a line for each sensor, such as T1 = { at = "5 mm" }',
    "profile": 'add a line such as profile = "pin"',
}


def _sentence(errors: list[ErrorDetails], source: Path | None) -> InputError:
    """Return the first error as a sentence; a misspelt key comes before the key that is missing for it."""
    first = next((error for error in errors if error["type"] == "extra_forbidden"), errors[0])
    path = tuple(str(part) for part in first["loc"])
    kind = first["type"]
    if kind == "value_error" and isinstance(entry := first["ctx"]["error"], EntryError):
        return InputError(source, place_of(path), entry.problem, entry.remedy)
    if kind == "extra_forbidden":
        return _unknown_key(path, source, isinstance(first["input"], Mapping))
    if kind == "missing" and len(path) == 1:
        return InputError(source, None, f"the table [{path[0]}] is missing", _EXAMPLES[path[0]])
    if kind == "missing":
        problem = f"the key {quoted(path[-1])} is missing"
        return InputError(source, place_of(path[:-1]), problem, _EXAMPLES[path[-1]])
    if len(path) == 2 and path[0] == "sensors" and path[1] != "defaults":
        return InputError(
            source, place_of(path), "this is no sensor", 'write { at = "5 mm" } or { on = "air" }'
        )
    return InputError(
        source, place_of(path), "this is no table", "write its name in brackets and its keys below"
    )


def _unknown_key(path: tuple[str, ...], source: Path | None, is_table: bool) -> InputError:
    *table, key = path
    model: type[BaseModel] = RigSection
    if table[:1] == ["sensors"]:
        model = DefaultsSection if table[1] == "defaults" else SensorSection
    elif table:
        model = _SECTIONS[table[0]]
    known = list(model.model_fields)
    near = nearest(key, known)
    if is_table and not table:
        remedy = f"the nearest known one is [{near}]" if near else f"known are {', '.join(known)}"
        return InputError(source, f"[{plain(key)}]", "this table is unknown", remedy)
    remedy = f"the nearest known key is {quoted(near)}" if near else f"known are {', '.join(known)}"
    return InputError(source, place_of(tuple(table)), f"the key {quoted(key)} is unknown", remedy)
