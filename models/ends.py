"""The two ends of a fin: what happens at its tip, and how its base hangs on the plate.

Temperatures in K; each value may be a float or an array of shape (n_sets,).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = float | NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class AdiabaticTip:
    """No heat leaves through the tip face."""


@dataclass(frozen=True, slots=True)
class ConvectiveTip:
    """The tip face loses heat by convection.

    Argument: coefficient [W/(m² K)] of the tip face; None takes the coefficient of the side.
    """

    coefficient: Values | None = None


@dataclass(frozen=True, slots=True)
class FixedTip:
    """The tip is held at a temperature [K]."""

    temperature: Values


@dataclass(frozen=True, slots=True)
class InfiniteTip:
    """The fin goes on unchanged beyond its last sensor, so far that it ends at air temperature."""


Tip = AdiabaticTip | ConvectiveTip | FixedTip | InfiniteTip


@dataclass(frozen=True, slots=True)
class BaseTemperature:
    """The base of the fin itself is at a temperature [K]: no joint, or the joint is not looked at."""

    temperature: Values


@dataclass(frozen=True, slots=True)
class Joint:
    """The base hangs on a plate behind a joint: q_b = A_b (T_plate - T_b)/R''.

    Arguments: plate_temperature [K]; resistance R'' [m² K/W], an area resistance, not negative.
    """

    plate_temperature: Values
    resistance: Values


Base = BaseTemperature | Joint
