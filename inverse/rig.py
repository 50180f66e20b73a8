"""The rig: what the user describes once. Reads rig.toml and turns names into physics.

(The reader is written below the values it fills.)
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, Literal, cast

import numpy as np
from numpy.typing import NDArray

from finback import handbook, sensors, shapes, surroundings
from finback.errors import InputError
from finback.findings import Finding
from finback.handbook import Change
from finback.models import (
    AdiabaticTip,
    Base,
    BaseTemperature,
    Conductivity,
    ConvectiveTip,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    Plate,
    PowerCoefficient,
    Profile,
    Radiating,
    SurfaceLaw,
    Tip,
    UniformCoefficient,
    VaryingCoefficient,
)
from finback.models.materials import Material
from finback.quantity import Quantity
from finback.sensors import Sensor, SensorPlace
from finback.shape_table import ShapeFile, parse
from finback.shapes import SHAPES
from finback.surroundings import Surroundings
from finback.wording import plain

if TYPE_CHECKING:
    from finback.rig_file import PlateSection, RigSection

__all__ = ["Rig", "Sensor", "SensorPlace", "TipName", "read", "read_bytes", "read_file"]

TipName = Literal["adiabatic", "convective", "fixed", "infinite"]
LawName = Literal["uniform", "free-convection", "varying", "radiating"]
NoiseName = Literal["normal", "heavy-tailed"]
Values = float | NDArray[np.float64]

LARGEST_FILE = 1_000_000
"""Bytes of the largest rig.toml that is read."""

COLDEST = 1.0
"""Temperature [K] that a fin which radiates does not fall below."""


@dataclass(frozen=True, slots=True)
class FinnedPlate:
    """The plate that carries the fin, as [plate] describes it.

    `fins`, how many like it; `bare_area` [m²], what of it loses heat and carries none, None for nothing;
    `losses` [W], or [W/K] of the plate's excess where `per_kelvin`; None where nothing is said of them.
    """

    fins: int = 1
    bare_area: Quantity | None = None
    losses: Quantity | None = None
    per_kelvin: bool = False

    def unknowns(self) -> Mapping[str, Quantity]:
        """Return what the balance of the plate has to know beside the fin, by the names of the parameters."""
        found = {}
        if self.bare_area is not None:
            found["bare_area"] = self.bare_area
        if self.losses is not None:
            found["loss_coefficient" if self.per_kelvin else "loss"] = self.losses
        return found


@dataclass(frozen=True)
class Rig:
    """A rig as described in rig.toml, every number in SI units.

    `geometry`: the keys of [fin] that are lengths (length, diameter, width, thickness and the like), as
    quantities in m; `shape_file`, the table of a profile that is given by one. `tip` None: candidates are
    compared. `conductivity` None: a wide prior; `material`, its name; `handbook`, where that name, and no
    number, is what tells the conductivity; `change`, how that follows the temperature, None where it does
    not. `emissivity` None: h is the total coefficient; `plate`, what carries the fin. `laws`, `tips`: the
    surface laws and tips that candidates are to have, None where the rig leaves that open; `exponent` of free
    convection; `noise`, the kinds of noise along the fin that they are to have. `assumed`: defaults that were
    used, each an `assumed` finding.
    """

    title: str
    profile_name: str
    geometry: Mapping[str, Quantity]
    sensors: Mapping[str, Sensor]
    guarded_edges: bool = False
    tip: TipName | None = None
    tip_temperature: Quantity | None = None
    conductivity: Quantity | None = None
    expected_joint: Quantity | None = None
    expected_coefficient: Quantity | None = None
    assumed: tuple[Finding, ...] = ()
    source: Path | None = None
    sha256: str | None = None
    slant_surface: bool = False
    shape_file: ShapeFile | None = None
    material: str | None = None
    handbook: Material | None = None
    surroundings: Surroundings = field(default_factory=Surroundings)
    change: Change | None = None
    emissivity: Quantity | None = None
    plate: FinnedPlate | None = None
    laws: tuple[LawName, ...] | None = None
    tips: tuple[TipName, ...] | None = None
    exponent: Quantity | None = None
    noise: tuple[NoiseName, ...] = ("normal",)

    def __post_init__(self) -> None:
        object.__setattr__(self, "geometry", MappingProxyType(dict(self.geometry)))
        object.__setattr__(self, "sensors", MappingProxyType(dict(self.sensors)))

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> Rig:
        """Return the rig that nested tables describe, with the keys of rig.toml.

        Raises InputError for the first thing that is wrong.
        """
        return _rig(document, None, None)

    def sensors_on(self, place: SensorPlace) -> tuple[Sensor, ...]:
        """Return the sensors that read this place: along the fin from base to tip, others as in the file."""
        found = [sensor for sensor in self.sensors.values() if sensor.place == place]
        return tuple(sorted(found, key=lambda sensor: sensor.position or 0.0))

    def fin_sensors(self) -> tuple[Sensor, ...]:
        """Return the sensors along the fin, from base to tip."""
        return self.sensors_on("fin")

    def profile(self, changes: Mapping[str, float] | None = None) -> Profile:
        """Return the fin's profile.

        Argument: changes, lengths [m] that replace those of the rig, by their key in [fin].
        """
        if changes is None:
            return self._as_drawn
        return self._made(changes)

    @property
    def length(self) -> float:
        """Length of the fin from base to tip [m]."""
        return self._as_drawn.length

    @property
    def has_tip_face(self) -> bool:
        """Whether the fin ends in a face that may lose heat; a sharp one does not."""
        return shapes.has_tip_face(self._as_drawn)

    @property
    def losses_stated(self) -> bool:
        """Whether the losses of the plate are stated, so that a heater's power tells the heat in the fins."""
        return self.plate is not None and self.plate.losses is not None

    def tells_heat(self, place: str) -> bool:
        """Tell whether a sensor of this place measures the heat into the fins."""
        return place == "heat" or (place == "heater" and self.losses_stated)

    def warmed(self, temperature: float, spread: tuple[float, float] | None = None) -> Rig:
        """Return the rig with its conductivity as at a temperature [K], if it is a handbook's.

        Argument: spread, the coldest and the hottest temperature [K] of the readings, between which the
        conductivity may change.
        """
        if self.handbook is None:
            return self
        change = handbook.change(self.handbook, temperature, spread)
        return replace(
            self,
            conductivity=handbook.conductivity(self.handbook, temperature),
            change=change,
            assumed=(*handbook.without(self.assumed), *handbook.findings(self.handbook, temperature, change)),
        )

    def build(
        self, values: Mapping[str, Values], tip: TipName, changes: Mapping[str, float] | None = None
    ) -> tuple[Fin, Base, Values]:
        """Turn names into physics: the one place where this is done.

        Arguments: values by name, floats or arrays of shape (n_sets,): h [W/(m² K)], k [W/(m K)], air [K];
        plate [K] and joint [m² K/W] for a base behind a joint, plate alone for a base at the plate's
        temperature, otherwise base_temperature [K]; tip_temperature [K] for a fixed tip; exponent [1] and
        reference_excess [K] where h follows the excess temperature, rise [1] where it follows the place;
        emissivity [1] of a fin that radiates, surroundings [K] where they are not at the air's temperature.
        tip; changes, as in `profile`.
        Returns the fin, its base and the air temperature [K], as `finback.models.solve` takes them.
        """
        values = self._possible(values)
        base: Base
        if "joint" in values:
            base = Joint(values["plate"], values["joint"])
        elif "plate" in values:
            base = BaseTemperature(values["plate"])
        else:
            base = BaseTemperature(values["base_temperature"])
        k: Values | Conductivity = values["k"] if self.change is None else self.change.law(values["k"])
        fin = Fin(self.profile(changes), k, _surface(values), _tip(tip, values))
        return fin, base, values["air"]

    def plate_of(self, values: Mapping[str, Values], fin: Fin) -> Plate:
        """Return the plate that carries the fin; what is bare of it follows the law of the fin's side.

        Arguments: values by name, as in `build`, with bare_area [m²], and loss [W] or loss_coefficient [W/K],
        where the rig has them; fin, as built from them.
        """
        bare, loss = values.get("bare_area"), values.get("loss", 0.0)
        if "loss_coefficient" in values:
            hot = values["plate" if "plate" in values else "base_temperature"]
            loss = values["loss_coefficient"] * (hot - values["air"])
        carried = 1 if self.plate is None else self.plate.fins
        return Plate(carried, 0.0 if bare is None else bare, None if bare is None else fin.surface, loss)

    def _possible(self, values: Mapping[str, Values]) -> Mapping[str, Values]:
        """Return values whose temperatures [K] the fin's laws can have: a sampler may ask for others."""
        low, high = (0.0, np.inf) if self.change is None else self.change.temperatures
        if "emissivity" in values:
            low = max(low, COLDEST)
        elif self.change is None:
            return values
        return {
            name: np.clip(value, low, high) if name in TEMPERATURES else value
            for name, value in values.items()
        }

    @cached_property
    def _as_drawn(self) -> Profile:
        return self._made({})

    def _made(self, changes: Mapping[str, float]) -> Profile:
        if self.shape_file is not None:
            return self.shape_file.table
        lengths = {name: quantity.value for name, quantity in self.geometry.items()} | dict(changes)
        return SHAPES[self.profile_name].profile(lengths, self.guarded_edges, self.slant_surface)


TEMPERATURES = ("plate", "base_temperature", "air", "tip_temperature", "surroundings")


def _surface(values: Mapping[str, Values]) -> SurfaceLaw:
    """Return the law of the side: its convection by the names among the values, and what it radiates."""
    law: SurfaceLaw = UniformCoefficient(values["h"])
    if "exponent" in values:
        law = PowerCoefficient(values["h"], values["exponent"], values["reference_excess"])
    elif "rise" in values:
        law = VaryingCoefficient(values["h"], values["rise"])
    if "emissivity" in values:
        return Radiating(law, values["emissivity"], values.get("surroundings"))
    return law


_TIPS: Mapping[str, Tip] = {
    "adiabatic": AdiabaticTip(),
    "convective": ConvectiveTip(),
    "infinite": InfiniteTip(),
}


def _tip(name: TipName, values: Mapping[str, Values]) -> Tip:
    if name == "fixed":
        return FixedTip(values["tip_temperature"])
    return _TIPS[name]


def read(path: Path | str) -> Rig:
    """Read a rig.toml. Raises InputError for the first thing that is wrong, with its place in the file."""
    path = Path(path)
    return read_bytes(read_file(path, LARGEST_FILE), path)


def read_file(path: Path, largest: int) -> bytes:
    """Return the content of a file of at most so many bytes. Raises InputError where it cannot be read."""
    try:
        if path.is_dir():
            raise InputError(path, None, "this is a folder", "name the file in it")
        if path.exists() and not path.is_file():
            raise InputError(path, None, "this is not a regular file", "name a file")
        size = path.stat().st_size
        if size > largest:
            problem = f"this file has {size} bytes"
            raise InputError(path, None, problem, f"at most {largest} are read")
        return path.read_bytes()
    except FileNotFoundError:
        raise InputError(path, None, "there is no such file", "check its name and folder") from None
    except (OSError, ValueError):
        raise InputError(
            path, None, "this file cannot be read", "check its name and its permissions"
        ) from None


def read_bytes(content: bytes, source: Path | None = None) -> Rig:
    """Read the content of a rig.toml. Raises InputError as `read` does."""
    from finback.rig_file import decode

    return _rig(decode(content, source), source, hashlib.sha256(content).hexdigest())


def _rig(document: Mapping[str, Any], source: Path | None, sha256: str | None) -> Rig:
    """Return the rig of checked tables, once they are checked against each other."""
    from finback.rig_file import check

    section = check(document, source)
    fin, stated = section.fin, section.material.conductivity
    name = section.material.name
    material = handbook.look_up(name, source) if name is not None and stated is None else None
    rig = Rig(
        title=section.title,
        profile_name=fin.profile,
        geometry=shapes.measure(fin, source),
        sensors={},
        guarded_edges=fin.edges == "guarded",
        tip=fin.tip,
        tip_temperature=fin.tip_temperature,
        conductivity=stated,
        change=handbook.stated_change(section.material),
        emissivity=section.material.emissivity,
        plate=_plate(section.plate),
        laws=cast("tuple[LawName, ...] | None", section.candidates.surface_laws),
        tips=cast("tuple[TipName, ...] | None", section.candidates.tips),
        exponent=section.candidates.exponent,
        noise=cast("tuple[NoiseName, ...]", section.candidates.noise),
        expected_joint=section.joint.expected if section.joint else None,
        expected_coefficient=section.air.expected_h,
        source=source,
        sha256=sha256,
        slant_surface=fin.surface == "slant",
        shape_file=_shape_file(fin.file, source),
        material=name,
        handbook=material,
    )
    profile = _drawn(rig)
    shapes.check_options(fin, profile, source, section.candidates.tips or ())
    placed = sensors.place_sensors(section.sensors, _length(rig), source)
    _check_together(section, placed, source)
    around = surroundings.read(section, rig.geometry, profile, source)
    return replace(
        rig,
        sensors=placed,
        surroundings=around,
        assumed=(
            *shapes.assumed(fin),
            *handbook.assumed(section.material),
            *surroundings.assumed(around, section.air.expected_h),
            *_assumed_of_radiation(rig.emissivity, around),
            *_assumed_of_plate(rig.plate, placed),
            *sensors.assumed(section.sensors, placed),
        ),
    ).warmed(handbook.ROOM)


def _plate(section: PlateSection | None) -> FinnedPlate | None:
    if section is None:
        return None
    losses = section.losses
    if losses is None:
        return FinnedPlate(section.fins, section.bare_area)
    return FinnedPlate(section.fins, section.bare_area, losses.amount, losses.per_kelvin)


def _assumed_of_radiation(emissivity: Quantity | None, around: Surroundings) -> Iterator[Finding]:
    if emissivity is not None and around.temperature is None:
        message = (
            "No temperature of the surroundings is stated: what the fin radiates to is taken to be as warm "
            'as the air; state it with surroundings_temperature = "19 degC" in [air].'
        )
        yield Finding("assumed", "note", message, evidence={"key": "surroundings_temperature"})


def _assumed_of_plate(plate: FinnedPlate | None, placed: Mapping[str, Sensor]) -> Iterator[Finding]:
    heaters = any(sensor.place == "heater" for sensor in placed.values())
    if plate is None or not heaters:
        return
    if plate.losses is None:
        message = (
            "No losses of the plate are stated: the heater's power is an upper bound of the heat in the fins "
            'and from the bare plate; state them with losses = "2 W +/- 0.5 W" in [plate].'
        )
        yield Finding("assumed", "note", message, evidence={"key": "losses"})
    if plate.bare_area is not None:
        message = "The bare area of the plate is taken to lose heat as the side of the fin does at its base."
        yield Finding("assumed", "note", message, evidence={"key": "bare_area"})


def _shape_file(name: str | None, source: Path | None) -> ShapeFile | None:
    """Return the table of a shape, whose file lies beside the rig's."""
    if name is None:
        return None
    path = Path(name) if source is None else source.parent / name
    return parse(read_file(path, LARGEST_FILE), path)


def _drawn(rig: Rig) -> Profile:
    try:
        return rig.profile()
    except ValueError as error:  # lengths that are far too small or large for numbers
        raise InputError(
            rig.source, "[fin]", plain(error, 200), "check the lengths and their units"
        ) from None


def _length(rig: Rig) -> Quantity:
    """Return the length of the fin [m], with the text that a sentence shows."""
    return rig.geometry.get("length", Quantity(rig.length, text=f"{1e3 * rig.length:g} mm"))


def _check_together(section: RigSection, placed: Mapping[str, Sensor], source: Path | None) -> None:
    """Check what no table can tell alone."""
    fin, material, compared = section.fin, section.material, section.candidates
    if fin.tip_temperature is not None and fin.tip != "fixed":
        problem = 'only a tip = "fixed" has a temperature of its own'
        raise InputError(source, "[fin] tip_temperature", problem, 'leave it out, or write tip = "fixed"')
    if section.joint is not None and not any(sensor.place == "plate" for sensor in placed.values()):
        problem = "no sensor reads the plate, so the readings cannot tell of a joint"
        raise InputError(
            source, "[joint]", problem, 'leave it out, or add a sensor such as TP = { on = "plate" }'
        )
    if material.temperature_coefficient is not None and material.conductivity is None:
        problem = "there is no stated conductivity that it could change"
        remedy = "state conductivity, or leave it out: a material's name brings its own"
        raise InputError(source, "[material] temperature_coefficient", problem, remedy)
    if material.reference_temperature is not None and material.temperature_coefficient is None:
        problem = "only a temperature_coefficient has a reference temperature"
        remedy = 'leave it out, or write temperature_coefficient = "-4e-4 1/K"'
        raise InputError(source, "[material] reference_temperature", problem, remedy)
    if section.air.temperature is not None and any(sensor.place == "air" for sensor in placed.values()):
        problem = "a sensor reads the air, so its temperature is no statement of the rig"
        raise InputError(source, "[air] temperature", problem, "leave it out, or the sensor")
    if section.air.surroundings_temperature is not None and not _radiates(section):
        problem = "a temperature of the surroundings matters only to a fin that radiates"
        remedy = 'leave it out, or write emissivity = "0.08 +/- 0.03" in [material]'
        raise InputError(source, "[air] surroundings_temperature", problem, remedy)
    if fin.tip is not None and compared.tips is not None:
        problem = "the tip is stated in [fin] already"
        raise InputError(source, "[candidates] tips", problem, "leave one of the two out")
    laws = compared.surface_laws
    if laws is not None and "radiating" in laws and material.emissivity is not None:
        problem = "with a stated emissivity every law radiates"
        raise InputError(source, "[candidates] surface_laws", problem, 'leave "radiating" out')
    if compared.exponent is not None and laws is not None and "free-convection" not in laws:
        problem = "only the law of free convection has an exponent"
        remedy = 'leave it out, or add "free-convection" to surface_laws'
        raise InputError(source, "[candidates] exponent", problem, remedy)


def _radiates(section: RigSection) -> bool:
    laws = section.candidates.surface_laws
    return section.material.emissivity is not None or (laws is not None and "radiating" in laws)
