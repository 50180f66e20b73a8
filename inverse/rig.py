"""The rig: what the user describes once. Reads rig.toml and turns names into physics.

(The reader is written below the values it fills.)
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray

from finback import handbook, sensors, shapes, surroundings
from finback.errors import InputError
from finback.findings import Finding
from finback.models import (
    AdiabaticTip,
    Base,
    BaseTemperature,
    ConvectiveTip,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    Profile,
    Tip,
    UniformCoefficient,
)
from finback.models.materials import Material
from finback.quantity import Quantity
from finback.sensors import Sensor, SensorPlace
from finback.shape_table import ShapeFile, parse
from finback.shapes import SHAPES
from finback.surroundings import Surroundings
from finback.wording import plain

if TYPE_CHECKING:
    from finback.rig_file import RigSection

__all__ = ["Rig", "Sensor", "SensorPlace", "TipName", "read", "read_bytes", "read_file"]

TipName = Literal["adiabatic", "convective", "fixed", "infinite"]
Values = float | NDArray[np.float64]

LARGEST_FILE = 1_000_000
"""Bytes of the largest rig.toml that is read."""


@dataclass(frozen=True)
class Rig:
    """A rig as described in rig.toml, every number in SI units.

    `geometry`: the keys of [fin] that are lengths (length, diameter, width, thickness and the like), as
    quantities in m; `shape_file`, the table of a profile that is given by one. `tip` None: candidates are
    compared. `conductivity` None: a wide prior; `material`, its name; `handbook`, where that name, and no
    number, is what tells the conductivity. `assumed`: defaults that were used, each an `assumed` finding.
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

    def warmed(self, temperature: float) -> Rig:
        """Return the rig with its conductivity as at a temperature [K], if it is a handbook's."""
        if self.handbook is None:
            return self
        return replace(
            self,
            conductivity=handbook.conductivity(self.handbook, temperature),
            assumed=(*handbook.without(self.assumed), *handbook.findings(self.handbook, temperature)),
        )

    def build(
        self, values: Mapping[str, Values], tip: TipName, changes: Mapping[str, float] | None = None
    ) -> tuple[Fin, Base, Values]:
        """Turn names into physics: the one place where this is done.

        Arguments: values by name, floats or arrays of shape (n_sets,): h [W/(m² K)], k [W/(m K)], air [K];
        plate [K] and joint [m² K/W] for a base behind a joint, plate alone for a base at the plate's
        temperature, otherwise base_temperature [K]; tip_temperature [K] for a fixed tip. tip; changes, as in
        `profile`.
        Returns the fin, its base and the air temperature [K], as `finback.models.solve` takes them.
        """
        base: Base
        if "joint" in values:
            base = Joint(values["plate"], values["joint"])
        elif "plate" in values:
            base = BaseTemperature(values["plate"])
        else:
            base = BaseTemperature(values["base_temperature"])
        fin = Fin(self.profile(changes), values["k"], UniformCoefficient(values["h"]), _tip(tip, values))
        return fin, base, values["air"]

    @cached_property
    def _as_drawn(self) -> Profile:
        return self._made({})

    def _made(self, changes: Mapping[str, float]) -> Profile:
        if self.shape_file is not None:
            return self.shape_file.table
        lengths = {name: quantity.value for name, quantity in self.geometry.items()} | dict(changes)
        return SHAPES[self.profile_name].profile(lengths, self.guarded_edges, self.slant_surface)


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
    shapes.check_options(fin, profile, source)
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
            *sensors.assumed(section.sensors, placed),
        ),
    ).warmed(handbook.ROOM)


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
    fin = section.fin
    if fin.tip_temperature is not None and fin.tip != "fixed":
        problem = 'only a tip = "fixed" has a temperature of its own'
        raise InputError(source, "[fin] tip_temperature", problem, 'leave it out, or write tip = "fixed"')
    if section.joint is not None and not any(sensor.place == "plate" for sensor in placed.values()):
        problem = "no sensor reads the plate, so the readings cannot tell of a joint"
        raise InputError(
            source, "[joint]", problem, 'leave it out, or add a sensor such as TP = { on = "plate" }'
        )
