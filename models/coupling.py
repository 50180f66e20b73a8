"""A solved fin coupled to what stands at its two ends: the plate behind its joint, and a tip that is held.

A solver of a tapered fin finds how much heat leaves the base for one kelvin of excess temperature there, and
what a kelvin at a held tip adds; the algebra from there to temperatures and heats is the same for every
shape. Heats are counted per conductivity, as falls -A theta' [m] for one kelvin.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.ends import Base, ConvectiveTip, FixedTip, InfiniteTip, Joint, Tip
from finback.models.profiles import Profile

Array = NDArray[np.float64]
Values = float | Array


@dataclass(frozen=True, slots=True)
class Driving:
    """What drives a base: an excess temperature [K] behind a bond R'' k/A_b [1/m], 0 without joint."""

    excess: Values
    bond: Values


@dataclass(frozen=True, slots=True)
class HeldFalls:
    """Falls -A theta' [m] of a fin held at both ends, for one kelvin.

    through: from base to tip with the tip at air temperature; base_loss and tip_loss: what base and tip give
    to the side when both are at one temperature. All of shape (n_sets,).
    """

    through: Array
    base_loss: Array
    tip_loss: Array


@dataclass(frozen=True, slots=True)
class Settled:
    """Excess temperature of the base [K], and the falls -A theta' [m K] at base and tip, shape (n_sets,)."""

    base_excess: Values
    base_fall: Array
    tip_fall: Array


def driving(base: Base, air: Values, conductivity: Values, base_area: float) -> Driving:
    """Return what drives the base; air [K], conductivity [W/(m K)], base_area [m²]."""
    if isinstance(base, Joint):
        return Driving(base.plate_temperature - air, base.resistance * conductivity / base_area)
    return Driving(base.temperature - air, 0.0)


def settle_held(drive: Driving, held: HeldFalls, tip_excess: Values) -> Settled:
    """Settle a fin whose tip is held at an excess temperature [K].

    The difference of the two ends' temperatures is formed from the driving ones, so that the heat through a
    short fin keeps its digits.
    """
    slack = 1 + drive.bond * (held.base_loss + held.through)
    base_excess = (drive.excess + drive.bond * held.through * tip_excess) / slack
    across = (drive.excess - tip_excess * (1 + drive.bond * held.base_loss)) / slack
    return Settled(
        base_excess,
        base_fall=held.through * across + held.base_loss * base_excess,
        tip_fall=held.through * across - held.tip_loss * tip_excess,
    )


def tip_strength(tip: Tip, side: Values, conductivity: Values, tip_area: float) -> Values:
    """Return h_tip A_tip/k [m] of a free tip, 0 if adiabatic; side, the side's coefficient [W/(m² K)]."""
    if not isinstance(tip, ConvectiveTip):
        return 0.0
    coefficient = side if tip.coefficient is None else tip.coefficient
    return coefficient * tip_area / conductivity


def require_tip(profile: Profile, tip: Tip) -> None:
    """Refuse a tip that the profile, which is not uniform, cannot have. Raises ValueError."""
    name = type(profile).__name__
    match tip:
        case InfiniteTip():
            raise ValueError(f"an infinite tip needs a Uniform profile: a {name} has no shape to go on with")
        case FixedTip() if not float(profile.area(np.array([profile.length]))[0]) > 0:
            raise ValueError(f"a tip of zero thickness cannot be held: this {name} ends sharp")


def within(profile: Profile, x: Array) -> Array:
    """Return positions x [m], rounding at the ends taken off. Raises ValueError for one outside the fin."""
    length = profile.length
    low, high = float(x.min(initial=0.0)), float(x.max(initial=0.0))
    if not (low >= -1e-9 * length and high <= (1 + 1e-9) * length):
        wrong = high if high > length else low
        raise ValueError(f"positions must lie from 0 to the fin's {length} m, got {wrong} m")
    return np.minimum(np.maximum(x, 0.0), length)


def rows(value: Values, like: Array) -> Array:
    """Return a value [any unit] with a row for each set, also where it does not depend on any array."""
    return value if isinstance(value, np.ndarray) and value.shape == like.shape else np.full_like(like, value)
