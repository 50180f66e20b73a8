"""The rig: what the user describes once. Reads rig.toml and turns names into physics.

(The reader is written below the values it fills.)
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray

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
    Tip,
    Uniform,
    UniformCoefficient,
    pin,
    rectangular,
)
from finback.quantity import Quantity
from finback.sensors import Sensor, SensorPlace, assumed, place_sensors

if TYPE_CHECKING:
    from finback.rig_file import RigSection

__all__ = ["Rig", "Sensor", "SensorPlace", "TipName", "read", "read_bytes", "read_file"]

TipName = Literal["adiabatic", "convective", "fixed", "infinite"]
Values = float | NDArray[np.float64]

LARGEST_FILE = 1_000_000
"""Bytes of the largest rig.toml that is read."""

LENGTHS: Mapping[str, tuple[str, ...]] = {
    "pin": ("length", "diameter"),
    "rectangular": ("length", "width", "thickness"),
}
"""The lengths that describe each profile, named as in [fin]."""


@dataclass(frozen=True)
class Rig:
    """A rig as described in rig.toml, every number in SI units.

    `geometry`: the keys of [fin] that are lengths (length, diameter, width, thickness), as quantities in m.
    `tip` None: candidates are compared. `conductivity` None: a wide prior. `assumed`: defaults that were
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

    def profile(self, changes: Mapping[str, float] | None = None) -> Uniform:
        """Return the fin's profile.

        Argument: changes, lengths [m] that replace those of the rig, by their key in [fin].
        """
        lengths = {name: quantity.value for name, quantity in self.geometry.items()} | dict(changes or {})
        if self.profile_name == "pin":
            return pin(**lengths)
        return rectangular(**lengths, guarded_edges=self.guarded_edges)

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
        profile = self._as_drawn if changes is None else self.profile(changes)
        fin = Fin(profile, values["k"], UniformCoefficient(values["h"]), _tip(tip, values))
        return fin, base, values["air"]

    @cached_property
    def _as_drawn(self) -> Uniform:
        return self.profile()


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
    geometry = _geometry(section, source)
    sensors = place_sensors(section.sensors, geometry["length"], source)
    _check_together(section, sensors, source)
    return Rig(
        title=section.title,
        profile_name=section.fin.profile,
        geometry=geometry,
        sensors=sensors,
        guarded_edges=section.fin.edges == "guarded",
        tip=section.fin.tip,
        tip_temperature=section.fin.tip_temperature,
        conductivity=section.material.conductivity,
        expected_joint=section.joint.expected if section.joint else None,
        expected_coefficient=section.air.expected_h,
        assumed=(*_assumed(section), *assumed(section.sensors, sensors)),
        source=source,
        sha256=sha256,
    )


def _geometry(section: RigSection, source: Path | None) -> dict[str, Quantity]:
    """Return the lengths of the profile; a missing one is refused, and so is one of another profile."""
    fin = section.fin
    wanted = LENGTHS[fin.profile]
    given: dict[str, Quantity | None] = {
        "length": fin.length,
        "diameter": fin.diameter,
        "width": fin.width,
        "thickness": fin.thickness,
    }
    geometry = {}
    for name, quantity in given.items():
        if quantity is None and name in wanted:
            problem = f'a {fin.profile} fin needs the key "{name}"'
            raise InputError(source, "[fin]", problem, f'add a line such as {name} = "8 mm"')
        if quantity is not None and name not in wanted:
            problem = f"a {fin.profile} fin has no {name}"
            raise InputError(source, f"[fin] {name}", problem, f"it is described by {', '.join(wanted)}")
        if quantity is not None:
            geometry[name] = quantity
    return geometry


def _check_together(section: RigSection, sensors: Mapping[str, Sensor], source: Path | None) -> None:
    """Check what no table can tell alone."""
    fin = section.fin
    if fin.edges is not None and fin.profile != "rectangular":
        problem = f"a {fin.profile} fin has no edges"
        raise InputError(source, "[fin] edges", problem, "leave edges out")
    if fin.tip_temperature is not None and fin.tip != "fixed":
        problem = 'only a tip = "fixed" has a temperature of its own'
        raise InputError(source, "[fin] tip_temperature", problem, 'leave it out, or write tip = "fixed"')
    if section.joint is not None and not any(sensor.place == "plate" for sensor in sensors.values()):
        problem = "no sensor reads the plate, so the readings cannot tell of a joint"
        raise InputError(
            source, "[joint]", problem, 'leave it out, or add a sensor such as TP = { on = "plate" }'
        )


def _assumed(section: RigSection) -> Iterator[Finding]:
    """Yield a finding for each default of fin and material that was used."""
    if section.fin.profile == "rectangular" and section.fin.edges is None:
        yield Finding(
            "assumed",
            "note",
            "It is not stated whether the two narrow side faces lose heat: they are taken to; state it with "
            'edges = "exposed" or "guarded" in [fin].',
            evidence={"key": "edges", "value": "exposed"},
        )
    if section.material.conductivity is None:
        yield Finding(
            "assumed",
            "note",
            "No conductivity is stated: k is left free within a wide prior; state it with "
            'conductivity = "167 W/(m K) +/- 5 %" in [material].',
            evidence={"key": "conductivity"},
        )
