"""Groups: what each run is in dimensionless numbers, from the rig and the air's properties.

The properties are those at the film temperature of the run, half-way between the air and the fin's mean.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback.errors import InputError
from finback.findings import Finding
from finback.models.air import AirProperties, air
from finback.models.constants import ATMOSPHERE, GRAVITY
from finback.models.exposure import Situation, situation
from finback.models.vapour import vapour_fraction
from finback.quantity import Quantity
from finback.rig import Rig
from finback.surroundings import Likeness, liken

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Body:
    """What a rig's fin is to a correlation.

    `likeness`; `place`, the flow about it with its characteristic length [m]; `length_sd`, the relative
    standard uncertainty of that length [1], which all runs share; `driven`, whether the air is.
    """

    rig: Rig
    likeness: Likeness
    place: Situation
    length_sd: float
    driven: bool

    @property
    def notes(self) -> tuple[str, ...]:
        """What was assumed for it, a phrase each."""
        return (*self.likeness.notes, *self.place.notes)

    @property
    def scatter(self) -> float:
        """What the likeness adds to a correlation's scatter [1]."""
        return float(np.hypot(self.likeness.scatter, self.place.scatter))


@dataclass(frozen=True)
class Warmths:
    """How warm each run is: `air` and `surface` [K], (n,), nan where nothing tells; `findings`."""

    air: Array
    surface: Array
    findings: tuple[Finding, ...]

    @property
    def film(self) -> Array:
        """Film temperatures [K]."""
        return (self.air + self.surface) / 2


def body(rig: Rig, driven: bool) -> Body:
    """Return what a rig's fin is to a correlation of driven or of still air."""
    speed = Quantity(1.0 if driven else 0.0)  # the table's runs, not the rig's one speed, say if it is driven
    around = replace(rig.surroundings, speed=speed)
    likeness = liken(rig.profile_name, rig.geometry, rig.profile(), around)
    place = situation(likeness.exposure, driven)
    variance = 0.0
    for name, quantity in rig.geometry.items():
        if quantity.sd > 0:
            step = 0.01 * quantity.sd
            moved = {**rig.geometry, name: Quantity(quantity.value + step, quantity.sd)}
            profile = rig.profile({name: quantity.value + step})
            exposure = liken(rig.profile_name, moved, profile, around).exposure
            change = np.log(situation(exposure, driven).length / place.length) / step
            variance += float(change * quantity.sd) ** 2
    return Body(rig, likeness, place, float(np.sqrt(variance)), driven)


def warmths(numbers: Mapping[str, Array], n: int, rig: Rig, driven: bool) -> Warmths:
    """Return how warm the runs are, from the columns air, surface, or base and efficiency.

    The efficiency of a fin is its mean excess temperature over that of its base. Raises InputError where
    nothing tells the air, or, in still air, the fin.
    """
    findings = []
    stated = rig.surroundings.air
    if "air" in numbers:
        around = numbers["air"]
    elif stated is not None:
        around = np.full(n, stated.value)
    else:
        remedy = 'add it, or write temperature = "21 degC" in [air] of the rig'
        raise InputError(None, None, "no column tells the temperature of the air", remedy)
    if "surface" in numbers:
        surface = numbers["surface"]
    elif "base" in numbers and "efficiency" in numbers:
        surface = around + numbers["efficiency"] * (numbers["base"] - around)
    elif "base" in numbers:
        surface = numbers["base"]
        message = "No column tells the fin's mean temperature: that of its base stands in for it."
        findings.append(Finding("assumed", "note", message, evidence={"key": "surface_temperature"}))
    elif driven:
        surface = around
        message = (
            "No column tells the fin's temperature: the air's properties are taken at the air's own, which "
            "makes Re about 3 % too large for each 10 K of the fin above it; add surface_temperature."
        )
        findings.append(Finding("assumed", "caution", message, evidence={"key": "surface_temperature"}))
    else:
        remedy = "add surface_temperature, or base_temperature and efficiency"
        raise InputError(None, None, "no column tells the temperature of the fin, which drives Ra", remedy)
    return Warmths(around, surface, tuple(findings))


def properties(rig: Rig, warm: Warmths) -> AirProperties:
    """Return the properties of the rig's air at the film temperatures, which must be finite."""
    around = rig.surroundings
    pressure = ATMOSPHERE if around.pressure is None else around.pressure.value
    wet = 0.0 if around.humidity is None else vapour_fraction(around.humidity.value, warm.air, pressure)
    return air(warm.film, pressure, wet)


def rayleigh(warm: Warmths, beside: AirProperties, length: float) -> Array:
    """Return Ra = g beta |T_s - T_air| l³/(nu alpha) [1] of each run."""
    drive = GRAVITY * beside.expansion * np.abs(warm.surface - warm.air)
    found: Array = np.asarray(drive * length**3 / (beside.kinematic_viscosity * beside.diffusivity))
    return found
