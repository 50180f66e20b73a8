"""Parameters: the unknowns of a problem, each with name, unit, coordinate and prior.

The default priors stand here, in one table, so that they can be read, reported and argued with.
"""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from finback.priors import Normal, log_normal, within, within_a_factor
from finback.quantity import Quantity

Array = NDArray[np.float64]
Transform = Literal["log", "identity", "bounded"]

ZERO_CELSIUS = 273.15
LARGEST_LOG = 80.0  # e**80 overflows nothing, and is further out than any prior reaches

SHARED_ERRORS: dict[str, str] = {
    "calibration": "common calibration error of the fin sensors, in standard uncertainties",
    **{
        f"{length}_error": f"error of the fin's {length.replace('_', ' ')}, in standard uncertainties"
        for length in (
            *("length", "width", "thickness", "tip_thickness", "diameter", "tip_diameter"),
            *("inner_diameter", "outer_diameter"),
        )
    },
}
"""Errors that several readings share, with their labels: unknowns of their own beside heavy tails, and part
of the readings' covariance otherwise."""

DEFAULT_PRIORS: dict[str, tuple[Transform, Normal, str]] = {
    "h": ("log", within_a_factor(50.0, 10.0), "W/(m^2 K)"),
    "k": ("log", within_a_factor(50.0, 10.0), "W/(m K)"),
    "joint": ("log", within_a_factor(1e-4, 5.0), "m^2 K/W"),
    "plate": ("identity", Normal(ZERO_CELSIUS + 50.0, 500.0), "degC"),
    "base_temperature": ("identity", Normal(ZERO_CELSIUS + 50.0, 500.0), "degC"),
    "air": ("identity", Normal(ZERO_CELSIUS + 20.0, 100.0), "degC"),
    "tip_temperature": ("identity", Normal(ZERO_CELSIUS + 20.0, 100.0), "degC"),
    "exponent": ("bounded", Normal(-1.5, 2.0), "1"),
    "rise": ("bounded", Normal(0.0, 4.0), "1"),
    "emissivity": ("bounded", Normal(0.0, 4.0), "1"),
    "surroundings": ("identity", Normal(ZERO_CELSIUS + 20.0, 100.0), "degC"),
    "bare_area": ("log", within_a_factor(0.01, 10.0), "m^2"),
    "loss": ("identity", Normal(0.0, 100.0), "W"),
    "loss_coefficient": ("identity", Normal(0.0, 10.0), "W/K"),
    "misfit": ("log", within_a_factor(0.005, 2.5), "1"),
    "noise": ("log", within_a_factor(0.2, 10.0), "K"),
    **dict.fromkeys(SHARED_ERRORS, ("identity", Normal(0.0, 1.0), "1")),
}
"""Wide priors by parameter: coordinate, prior, reported unit. Choices of ours, wide enough that determined
quantities don't feel them: h and k within a factor of 10 of 50 (gases and liquids; plastics to copper), the
joint within a factor of 5 of 1e-4 m² K/W (handbook tables of contact resistance run from 1e-5 to 1e-3). What
lies between bounds, or is told of a plate, is known by PRACTICE or stated, or no unknown: its wide prior only
tells what that adds."""

PRACTICE: dict[str, Normal] = {
    "exponent": within(0.25, 0.08, 0.0, 2.0),
    "rise": within(0.0, 0.4, -2.0, 2.0),
    "emissivity": Normal(-1.0, 1.5),
}
"""What the trade knows where the rig says nothing: the exponent of free convection lies about that of a
laminar boundary layer, 1/4, and holds 1/3 of a turbulent one and the smaller ones of weak convection. A
coefficient that rises or falls along the fin does so by some tens of per cent. An emissivity that nobody
states is a polished metal's, a paint's, or one between: 0.27, and from 0.02 to 0.9 with 95 %."""

BOUNDS: dict[str, tuple[float, float]] = {
    "exponent": (0.0, 2.0),
    "rise": (-2.0, 2.0),
    "emissivity": (0.0, 1.0),
}
"""What a bounded parameter lies between: z = ln((value - low)/(high - value))."""

UNMEASURED_AIR = Normal(ZERO_CELSIUS + 20.0, 25.0)
"""Air temperature where no sensor reads it and the rig does not state it [K]: a room, a bench, a cabinet."""

LABELS = {
    "h": "convection coefficient h",
    "k": "conductivity k",
    "joint": "joint resistance R''",
    "plate": "plate temperature",
    "base_temperature": "base temperature",
    "air": "air temperature",
    "tip_temperature": "tip temperature",
    "exponent": "exponent n of h ∝ θⁿ",
    "rise": "rise of h from base to tip, over its mean",
    "emissivity": "emissivity ε",
    "surroundings": "temperature of the surroundings",
    "bare_area": "bare area of the plate",
    "loss": "loss of the plate",
    "loss_coefficient": "loss of the plate a kelvin",
    "reference_excess": "excess temperature that h belongs to",
    "misfit": "smooth misfit, as a share of the excess temperature",
    "noise": "noise of a reading",
    **SHARED_ERRORS,
}


@dataclass(frozen=True, slots=True)
class Parameter:
    """One unknown.

    Arguments: name, a key of DEFAULT_PRIORS; prior of its coordinate; stated, whether that prior is
    knowledge, the rig's or the trade's, and not a wide one that only keeps the unknown in sight.
    """

    name: str
    prior: Normal
    stated: bool = False

    @property
    def transform(self) -> Transform:
        """How the coordinate z gives the value: "log" exp(z), "identity" z, "bounded" between its BOUNDS."""
        return DEFAULT_PRIORS[self.name][0]

    @property
    def unit(self) -> str:
        """Unit in which the value is reported."""
        return DEFAULT_PRIORS[self.name][2]

    @property
    def default_prior(self) -> Normal:
        """The wide prior that would hold if nothing were stated."""
        return DEFAULT_PRIORS[self.name][1]

    def values(self, z: Array) -> Array:
        """Return the values, SI units, that belong to coordinates z, of any shape."""
        if self.transform == "log":
            return np.asarray(np.exp(np.clip(z, -LARGEST_LOG, LARGEST_LOG)))
        if self.transform == "identity":
            return z
        low, high = BOUNDS[self.name]
        return low + (high - low) / (1 + np.exp(-np.clip(z, -LARGEST_LOG, LARGEST_LOG)))

    def describe(self) -> str:
        """Return one line of text on the prior, for the list of what was assumed."""
        label = LABELS[self.name]
        if self.transform == "log":
            centre, factor = math.exp(self.prior.mean), math.exp(self.prior.sd)
            width = (
                f"± {100 * self.prior.sd:.2g} %"
                if self.prior.sd < 0.3
                else f"within a factor of {factor:.3g}"
            )
            unit = "" if self.unit == "1" else f" {self.unit}"
            text = f"{label}: {centre:.4g}{unit} {width}"
        elif self.transform == "bounded":
            low, centre, high = self.values(self.prior.mean + self.prior.sd * np.array([-1.0, 0.0, 1.0]))
            text = f"{label}: {centre:.3g}, most likely from {low:.2g} to {high:.2g}"
        elif self.unit == "degC":
            text = f"{label}: {self.prior.mean - ZERO_CELSIUS:.4g} degC ± {self.prior.sd:.3g} K"
        else:
            unit = "" if self.unit == "1" else f" {self.unit}"
            text = f"{label}: {self.prior.mean:.4g} ± {self.prior.sd:.3g}{unit}"
        if self.prior == PRACTICE.get(self.name):
            return text + " (common practice)"
        return text + (" (stated)" if self.stated else " (wide default)")


def default(name: str) -> Parameter:
    """Return the parameter of that name with what the trade knows of it, or else with its wide prior."""
    return Parameter(name, PRACTICE.get(name, DEFAULT_PRIORS[name][1]), stated=name in PRACTICE)


def stated(name: str, quantity: Quantity) -> Parameter:
    """Return the parameter of that name with the prior that the rig states; its sd must not be 0."""
    transform = DEFAULT_PRIORS[name][0]
    if transform == "log":
        return Parameter(name, log_normal(quantity.value, quantity.sd / quantity.value), stated=True)
    if transform == "bounded":
        return Parameter(name, within(quantity.value, quantity.sd, *BOUNDS[name]), stated=True)
    return Parameter(name, Normal(quantity.value, quantity.sd), stated=True)


def shared(name: str) -> Parameter:
    """Return the parameter of one of the SHARED_ERRORS, whose size the rig states."""
    return Parameter(name, DEFAULT_PRIORS[name][1], stated=True)


def reported(name: str, values: Array) -> Array:
    """Return SI values of a parameter in the unit it is reported in: temperatures in degC."""
    return values - ZERO_CELSIUS if unit_of(name) == "degC" else values


def unit_of(name: str) -> str:
    """Return the unit in which a parameter, or the excess temperature of its law, is reported."""
    return "K" if name == "reference_excess" else DEFAULT_PRIORS[name][2]
