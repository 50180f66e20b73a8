"""Exposure: how a fin stands in the air, and the flow that this makes of it.

An exposure is what an engineer sees: a pin, a plate fin or a disc, upright or level, alone or among its like.
A `Situation` is what a correlation sees: one of nine flows with its characteristic length. `situation` leads
from the one to the other; what it has to assume on the way is a note, and widens the scatter.
"""

from dataclasses import dataclass
from enum import Enum

import numpy as np

from finback.models.correlations import Layout
from finback.models.validity import Flag


class Stand(Enum):
    """How an axis or a face stands."""

    VERTICAL = "vertical"
    HORIZONTAL = "horizontal"


@dataclass(frozen=True, slots=True)
class PinBank:
    """The neighbours of a pin.

    Arguments: layout; transverse_pitch S_T [m], from axis to axis across the flow; longitudinal_pitch S_L
    [m], from row to row along it; rows along the flow [1].
    """

    layout: Layout
    transverse_pitch: float
    longitudinal_pitch: float
    rows: int


@dataclass(frozen=True, slots=True)
class ExposedPin:
    """A pin or rod; a moving stream crosses it.

    Arguments: length [m]; diameter [m], its mean where it tapers; axis, how it stands; bank, its neighbours,
    or None for a pin by itself.
    """

    length: float
    diameter: float
    axis: Stand = Stand.HORIZONTAL
    bank: PinBank | None = None


@dataclass(frozen=True, slots=True)
class ExposedPlate:
    """A plate fin, both faces in the air.

    Arguments: along [m], its extent in the direction in which the air passes, or rises; across [m], its other
    extent; faces, how they stand; gap [m] to the next fin of a row, face to face, or None for a fin by
    itself.
    """

    along: float
    across: float
    faces: Stand = Stand.VERTICAL
    gap: float | None = None


@dataclass(frozen=True, slots=True)
class ExposedDisc:
    """An annular fin, both faces in the air; a moving stream passes along its faces.

    Arguments: inner_diameter [m]; outer_diameter [m]; axis, of the tube it sits on; gap [m] to the next disc,
    face to face, or None for a disc by itself.
    """

    inner_diameter: float
    outer_diameter: float
    axis: Stand = Stand.HORIZONTAL
    gap: float | None = None


Exposure = ExposedPin | ExposedPlate | ExposedDisc


class Flow(Enum):
    """The flows that there are correlations for; the value says what a correlation is for."""

    RISING_PLATE = "air rising along a vertical plate"
    RISING_CYLINDER = "air rising about a horizontal cylinder"
    RISING_UPRIGHT = "air rising along a vertical cylinder"
    RISING_LEVEL = "air rising from a level plate"
    RISING_CHANNEL = "air rising between vertical plates"
    ACROSS_CYLINDER = "a stream across a cylinder"
    ACROSS_BANK = "a stream through a bank of pins"
    ALONG_PLATE = "a stream along a plate"
    ALONG_CHANNEL = "a stream between parallel plates"


@dataclass(frozen=True, slots=True)
class Situation:
    """A flow about a body.

    Arguments: flow; length [m], the characteristic one; extent [m], of a channel along the flow or the
    diameter of an upright cylinder, else 0; bank; scatter [1], what the likening adds to a correlation's own;
    notes, what was assumed; flags, what could not be taken into account.
    """

    flow: Flow
    length: float
    extent: float = 0.0
    bank: PinBank | None = None
    scatter: float = 0.0
    notes: tuple[str, ...] = ()
    flags: tuple[Flag, ...] = ()


DISC_SCATTER = 0.15
"""Relative standard uncertainty [1] added where a disc is taken for a plate: a judgement, not measured."""


def situation(exposure: Exposure, forced: bool) -> Situation:
    """Return the flow about an exposed fin and its lengths [m]; forced, whether the air is driven.

    Raises ValueError for a length that is not positive and finite, and for a disc without width.
    """
    if isinstance(exposure, ExposedPin):
        _require_positive(length=exposure.length, diameter=exposure.diameter)
        return _pin(exposure, forced)
    if isinstance(exposure, ExposedPlate):
        _require_positive(along=exposure.along, across=exposure.across, gap=exposure.gap)
        area_over_perimeter = exposure.along * exposure.across / (2 * (exposure.along + exposure.across))
        return _faces(exposure.faces, exposure.gap, exposure.along, area_over_perimeter, forced)
    _require_positive(inner_diameter=exposure.inner_diameter, gap=exposure.gap)
    if not exposure.inner_diameter < exposure.outer_diameter < np.inf:
        raise ValueError("an annular fin needs an outer diameter larger than its inner diameter")
    faces = Stand.VERTICAL if exposure.axis is Stand.HORIZONTAL else Stand.HORIZONTAL
    chord = np.pi / 4 * exposure.outer_diameter
    across = (exposure.outer_diameter - exposure.inner_diameter) / 4
    note = "a disc is taken as a plate as long as its mean chord, pi/4 of the outer diameter"
    if faces is Stand.HORIZONTAL and not forced:
        note = "a level disc is taken as a level plate"
    return _faces(faces, exposure.gap, chord, across, forced, DISC_SCATTER, (note,))


def _pin(pin: ExposedPin, forced: bool) -> Situation:
    if forced:
        flow = Flow.ACROSS_CYLINDER if pin.bank is None else Flow.ACROSS_BANK
        return Situation(flow, pin.diameter, bank=pin.bank)
    flags = () if pin.bank is None else (_neighbours("a pin in still air"),)
    if pin.axis is Stand.HORIZONTAL:
        return Situation(Flow.RISING_CYLINDER, pin.diameter, flags=flags)
    return Situation(Flow.RISING_UPRIGHT, pin.length, extent=pin.diameter, flags=flags)


def _faces(
    faces: Stand,
    gap: float | None,
    along: float,
    area_over_perimeter: float,
    forced: bool,
    scatter: float = 0.0,
    notes: tuple[str, ...] = (),
) -> Situation:
    if forced and gap is not None:
        notes = (*notes, "the speed is that between the fins, h is on the temperature of the air that enters")
        return Situation(Flow.ALONG_CHANNEL, gap, along, scatter=scatter, notes=notes)
    if forced:
        return Situation(Flow.ALONG_PLATE, along, scatter=scatter, notes=notes)
    if faces is Stand.HORIZONTAL:
        flags = () if gap is None else (_neighbours("a level fin in still air"),)
        notes = (*notes, "h is the mean of both faces")
        return Situation(Flow.RISING_LEVEL, area_over_perimeter, scatter=scatter, notes=notes, flags=flags)
    if gap is not None:
        notes = (*notes, "h is on the temperature of the air that enters")
        return Situation(Flow.RISING_CHANNEL, gap, along, scatter=scatter, notes=notes)
    return Situation(Flow.RISING_PLATE, along, scatter=scatter, notes=notes)


def _neighbours(what: str) -> Flag:
    message = f"No correlation here knows the neighbours of {what}: they are left out, and h may be less."
    return Flag("gap", message)


def _require_positive(**lengths: float | None) -> None:
    for name, value in lengths.items():
        if value is not None and not 0 < value < np.inf:
            raise ValueError(f"the {name.replace('_', ' ')} must be positive and finite, not {value} m")
