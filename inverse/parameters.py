"""Parameters: the unknowns of a problem, each with name, unit, coordinate and prior.

The default priors stand here, in one table, so that they can be read, reported and argued with.
"""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from finback.priors import Normal, log_normal, within_a_factor
from finback.quantity import Quantity

Array = NDArray[np.float64]
Transform = Literal["log", "identity"]

ZERO_CELSIUS = 273.15
LARGEST_LOG = 80.0  # e**80 overflows nothing, and is further out than any prior reaches

DEFAULT_PRIORS: dict[str, tuple[Transform, Normal, str]] = {
    "h": ("log", within_a_factor(50.0, 10.0), "W/(m^2 K)"),
    "k": ("log", within_a_factor(50.0, 10.0), "W/(m K)"),
    "joint": ("log", within_a_factor(1e-4, 5.0), "m^2 K/W"),
    "plate": ("identity", Normal(ZERO_CELSIUS + 50.0, 500.0), "degC"),
    "base_temperature": ("identity", Normal(ZERO_CELSIUS + 50.0, 500.0), "degC"),
    "air": ("identity", Normal(ZERO_CELSIUS + 20.0, 100.0), "degC"),
    "tip_temperature": ("identity", Normal(ZERO_CELSIUS + 20.0, 100.0), "degC"),
    "noise": ("log", within_a_factor(0.2, 10.0), "K"),
}
"""Wide priors by parameter: coordinate, prior, reported unit. Choices of ours, wide enough that determined
quantities don't feel them: h and k within a factor of 10 of 50 (gases and liquids; plastics to copper), the
joint within a factor of 5 of 1e-4 m² K/W (handbook tables of contact resistance run from 1e-5 to 1e-3)."""

UNMEASURED_AIR = Normal(ZERO_CELSIUS + 20.0, 15.0)
"""Air temperature where no sensor reads it [K]: a room or a bench."""

LABELS = {
    "h": "convection coefficient h",
    "k": "conductivity k",
    "joint": "joint resistance R''",
    "plate": "plate temperature",
    "base_temperature": "base temperature",
    "air": "air temperature",
    "tip_temperature": "tip temperature",
    "noise": "noise of a reading",
}


@dataclass(frozen=True, slots=True)
class Parameter:
    """One unknown.

    Arguments: name, a key of DEFAULT_PRIORS; prior of its coordinate; stated, whether the rig states that
    prior (and not the default table).
    """

    name: str
    prior: Normal
    stated: bool = False

    @property
    def transform(self) -> Transform:
        """How the coordinate z gives the value: "log" for value = exp(z), "identity" for value = z."""
        return DEFAULT_PRIORS[self.name][0]

    @property
    def unit(self) -> str:
        """Unit in which the value is reported."""
        return DEFAULT_PRIORS[self.name][2]

    @property
    def default_prior(self) -> Normal:
        """The wide prior that would hold if nothing were stated."""
        return DEFAULT_PRIORS[self.name][1]

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
            text = f"{label}: {centre:.4g} {self.unit} {width}"
        else:
            text = f"{label}: {self.prior.mean - ZERO_CELSIUS:.4g} degC ± {self.prior.sd:.3g} K"
        return text + (" (stated)" if self.stated else " (wide default)")


def default(name: str) -> Parameter:
    """Return the parameter of that name with its wide prior."""
    return Parameter(name, DEFAULT_PRIORS[name][1])


def stated(name: str, quantity: Quantity) -> Parameter:
    """Return the parameter of that name with the prior that the rig states; its sd must not be 0."""
    if DEFAULT_PRIORS[name][0] == "log":
        return Parameter(name, log_normal(quantity.value, quantity.sd / quantity.value), stated=True)
    return Parameter(name, Normal(quantity.value, quantity.sd), stated=True)


def reported(name: str, values: Array) -> Array:
    """Return SI values of a parameter in the unit it is reported in: temperatures in degC."""
    return values - ZERO_CELSIUS if DEFAULT_PRIORS[name][2] == "degC" else values
