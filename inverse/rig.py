"""The rig: what the user describes once. Reads rig.toml and turns names into physics.

(The reader is written below the values it fills.)
"""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import Literal

from finback.findings import Finding
from finback.quantity import Quantity

SensorPlace = Literal["fin", "plate", "air", "heat", "heater"]
TipName = Literal["adiabatic", "convective", "fixed", "infinite"]


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
