"""The rig: what the user describes once. Reads rig.toml and turns names into physics.

(The reader is written below the values it fills.)
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
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
from finback.wording import listed, quoted

if TYPE_CHECKING:
    from finback.rig_file import RigSection, SensorSection, Spread

SensorPlace = Literal["fin", "plate", "air", "heat", "heater"]
TipName = Literal["adiabatic", "convective", "fixed", "infinite"]
Values = float | NDArray[np.float64]

HEAT_NOISE = 0.05
"""Noise of a heat reading where the rig states none, as a fraction of the reading."""

LARGEST_FILE = 1_000_000
"""Bytes of the largest rig.toml that is read."""

LENGTHS: Mapping[str, tuple[str, ...]] = {
    "pin": ("length", "diameter"),
    "rectangular": ("length", "width", "thickness"),
}
"""The lengths that describe each profile, named as in [fin]."""


@dataclass(frozen=True, slots=True)
class Sensor:
    """One sensor of a rig, in SI units.

    `place`: what it reads. `position` [m] from the base, fin sensors only, with its standard uncertainty
    `position_sd` [m]. `noise`: standard deviation from reading to reading, K for temperatures and W for heat,
    None when it is to be estimated from the readings; `calibration`: standard uncertainty of the error common
    to all sensors of this place. Where either was given in per cent of the reading, `noise_relative` or
    `calibration_relative` holds the fraction and the absolute one is None or 0.
    """

    name: str
    place: SensorPlace
    position: float | None = None
    position_sd: float = 0.0
    noise: float | None = None
    noise_relative: float | None = None
    calibration: float = 0.0
    calibration_relative: float | None = None

    @property
    def reads_temperature(self) -> bool:
        """Whether it reads a temperature rather than a heat flow."""
        return self.place in ("fin", "plate", "air")

    @property
    def exactly_known(self) -> bool:
        """Whether its reading is the true value: a stated noise of zero."""
        return self.noise == 0


@dataclass(frozen=True)
class Rig:
    """A rig as described in rig.toml, every number in SI units.

    `geometry`: the keys of [fin] that are lengths (length, diameter, width, thickness), as quantities in m.
    `tip` None: candidates are compared. `conductivity` None: a wide prior. `assumed`: defaults that were used,
    each an `assumed` finding.
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
        """Return the sensors that read this place, in the order of the file; along the fin, from base to tip."""
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

        Arguments: values by name, floats or arrays of shape (n_sets,): h [W/(m² K)], k [W/(m K)], air [K]; plate
        [K] and joint [m² K/W] for a base behind a joint, plate alone for a base at plate temperature, otherwise
        base_temperature [K]; tip_temperature [K] for a fixed tip. tip; changes, as in `profile`.
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


def _tip(name: TipName, values: Mapping[str, Values]) -> Tip:
    if name == "fixed":
        return FixedTip(values["tip_temperature"])
    return {"adiabatic": AdiabaticTip, "convective": ConvectiveTip, "infinite": InfiniteTip}[name]()


def read(path: Path | str) -> Rig:
    """Read a rig.toml. Raises InputError for the first thing that is wrong, with the file and the place in it."""
    path = Path(path)
    return read_bytes(read_file(path, LARGEST_FILE), path)


def read_file(path: Path, largest: int) -> bytes:
    """Return the content of a file. Raises InputError for what is no file, cannot be opened or is too large."""
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
        raise InputError(path, None, "this file cannot be read", "check its name and its permissions") from None


def read_bytes(content: bytes, source: Path | None = None) -> Rig:
    """Read the content of a rig.toml. Raises InputError as `read` does."""
    from finback.rig_file import decode

    return _rig(decode(content, source), source, hashlib.sha256(content).hexdigest())


def _rig(document: Mapping[str, Any], source: Path | None, sha256: str | None) -> Rig:
    """Return the rig of checked tables, once they are checked against each other."""
    from finback.rig_file import check

    section = check(document, source)
    geometry = _geometry(section, source)
    sensors = _sensors(section, geometry["length"], source)
    _check_whole(section, sensors, source)
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
        assumed=_assumed(section, sensors),
        source=source,
        sha256=sha256,
    )


def _geometry(section: RigSection, source: Path | None) -> dict[str, Quantity]:
    """Return the lengths of the profile; those of another profile, or none, are refused."""
    fin = section.fin
    given = {name: getattr(fin, name) for name in ("length", "diameter", "width", "thickness")}
    wanted = LENGTHS[fin.profile]
    for name, quantity in given.items():
        if quantity is None and name in wanted:
            problem = f'a {fin.profile} fin needs the key "{name}"'
            raise InputError(source, "[fin]", problem, f'add a line such as {name} = "8 mm"')
        if quantity is not None and name not in wanted:
            problem = f'a {fin.profile} fin has no "{name}"'
            raise InputError(source, f"[fin] {name}", problem, f"it is described by {', '.join(wanted)}")
    return {name: given[name] for name in wanted}


def _sensors(section: RigSection, length: Quantity, source: Path | None) -> dict[str, Sensor]:
    sensors = {}
    for name, entry in (section.sensors.model_extra or {}).items():
        sensors[name] = _sensor(name, entry, section, length, source)
    return sensors


def _sensor(
    name: str, entry: SensorSection, section: RigSection, length: Quantity, source: Path | None
) -> Sensor:
    """Return one sensor, with the defaults filled in where they apply."""
    from finback.rig_file import Spread

    defaults = section.sensors.defaults
    place: SensorPlace = entry.on or "fin"
    temperature = place in ("fin", "plate", "air")
    noise = entry.noise or (defaults.noise if temperature else Spread(HEAT_NOISE, True))
    calibration = entry.calibration or (defaults.calibration if temperature else None) or Spread(0.0, False)
    position_sd = 0.0
    if entry.at is not None:
        default = defaults.position.value if defaults.position else 0.0
        position_sd = entry.position.value if entry.position else entry.at.sd or default
    return Sensor(
        name,
        place,
        position=entry.at.value if entry.at else None,
        position_sd=position_sd,
        noise=None if noise is None or noise.relative else noise.amount,
        noise_relative=noise.amount if noise and noise.relative else None,
        calibration=0.0 if calibration.relative else calibration.amount,
        calibration_relative=calibration.amount if calibration.relative else None,
    )


def _check_whole(section: RigSection, sensors: Mapping[str, Sensor], source: Path | None) -> None:
    pass


def _assumed(section: RigSection, sensors: Mapping[str, Sensor]) -> tuple[Finding, ...]:
    return ()
