"""Surroundings: the air of a rig and how its fin stands in it, as its file says; and what flow that makes.

What a correlation has to know of the fin beside that is its `Exposure`: whether it is a rod, a plate or a
disc, and its lengths along and across the air. What is only like one of them is so with a note, and with a
wider scatter.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Literal

import numpy as np

from finback.errors import InputError
from finback.findings import Finding
from finback.models import Profile
from finback.models.exposure import ExposedDisc, ExposedPin, ExposedPlate, Exposure, Flow, Stand, situation
from finback.models.laws import LAWS, named
from finback.models.names import UnknownNameError, fold
from finback.quantity import Quantity
from finback.wording import plain, quoted

if TYPE_CHECKING:
    from finback.rig_file import RigSection

Orientation = Literal["vertical", "horizontal"]

BAR_SCATTER = 0.15
"""Relative standard uncertainty [1] added where a section that is not round is taken as round, or a tapered
fin as one of its mean diameter or of its width: a judgement, not measured."""

SLENDER = 0.5
"""4 pi A/P² [1] from which a section is a rod's and not a plate's: 1 for a round one, 0.5 for 4 by 1."""

DRIVEN = (Flow.ACROSS_CYLINDER, Flow.ACROSS_BANK, Flow.ALONG_PLATE, Flow.ALONG_CHANNEL)


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What a rig says of its air, and of how its fin stands, SI units; None where it says nothing.

    `speed` [m/s], 0 in still air; `correlation`, by the name it has in `finback.models.laws`; `pressure`
    [Pa]; `humidity`, relative [1]; `orientation` of the fin's axis, of an annular fin that of its tube;
    `temperature` [K] of what the fin radiates to, None for the air's; `air` [K], the air's own as stated.
    """

    speed: Quantity | None = None
    correlation: str | None = None
    pressure: Quantity | None = None
    humidity: Quantity | None = None
    orientation: Orientation | None = None
    temperature: Quantity | None = None
    air: Quantity | None = None

    @property
    def driven(self) -> bool | None:
        """Whether the air is driven: by its speed, or else by what the correlation is for; None: not said."""
        if self.speed is not None:
            return self.speed.value > 0
        if self.correlation is not None:
            return any(self.correlation in LAWS[flow] for flow in DRIVEN)
        return False if self.orientation is not None else None


@dataclass(frozen=True, slots=True)
class Likeness:
    """What a fin is to a correlation.

    Arguments: exposure; scatter [1], the relative standard uncertainty that the likeness adds; notes, what
    was assumed for it.
    """

    exposure: Exposure
    scatter: float = 0.0
    notes: tuple[str, ...] = ()


def liken(
    profile_name: str, geometry: Mapping[str, Quantity], profile: Profile, surroundings: Surroundings
) -> Likeness:
    """Return what a fin is to a correlation.

    Arguments: profile_name, as in [fin]; geometry, its lengths [m] by their keys; profile; surroundings.
    """
    axis = Stand(surroundings.orientation or "horizontal")
    sizes = {name: quantity.value for name, quantity in geometry.items()}
    if "outer_diameter" in sizes:
        return Likeness(ExposedDisc(sizes["inner_diameter"], sizes["outer_diameter"], axis))
    length = profile.length
    if "width" in sizes:
        thickness = (sizes["thickness"] + sizes.get("tip_thickness", sizes["thickness"])) / 2
        area, perimeter = sizes["width"] * thickness, 2 * (sizes["width"] + thickness)
        if _roundness(area, perimeter) < SLENDER:
            return _plate(length, sizes["width"], surroundings)
        note = "a bar is taken as a cylinder of the same perimeter"
        return Likeness(ExposedPin(length, perimeter / math.pi, axis), BAR_SCATTER, (note,))
    x = np.linspace(0.0, length, 257)
    perimeter = float(profile.perimeter(x).mean())
    diameter = perimeter / math.pi
    if profile_name == "pin":
        return Likeness(ExposedPin(length, diameter, axis))
    if "diameter" in sizes:
        note = "a tapered pin is taken as a cylinder of its mean diameter"
        return Likeness(ExposedPin(length, diameter, axis), BAR_SCATTER, (note,))
    if _roundness(float(profile.area(x).mean()), perimeter) < SLENDER:
        plate = _plate(length, perimeter / 2, surroundings)
        note = "the table's fin is taken as a plate half as wide as its perimeter is long"
        return Likeness(plate.exposure, BAR_SCATTER, (note, *plate.notes))
    note = "the table's fin is taken as a cylinder of the same perimeter"
    return Likeness(ExposedPin(length, diameter, axis), BAR_SCATTER, (note,))


def _roundness(area: float, perimeter: float) -> float:
    return 4 * math.pi * area / perimeter**2


def _plate(length: float, width: float, surroundings: Surroundings) -> Likeness:
    """Return a plate fin: its faces upright, unless its correlation is for level ones, and the air's way."""
    if surroundings.driven is not False:
        note = "the air passes along the fin's width, not from base to tip"
        return Likeness(ExposedPlate(along=width, across=length), notes=(note,))
    if surroundings.orientation == "vertical":
        return Likeness(ExposedPlate(along=length, across=width), notes=("the air rises from base to tip",))
    if surroundings.correlation in LAWS[Flow.RISING_LEVEL]:
        return Likeness(ExposedPlate(along=width, across=length, faces=Stand.HORIZONTAL))
    note = "the faces stand upright, and the air rises along the fin's width"
    return Likeness(ExposedPlate(along=width, across=length), notes=(note,))


def read(
    section: RigSection, geometry: Mapping[str, Quantity], profile: Profile, source: Path | None
) -> Surroundings:
    """Return the surroundings in a checked rig file, its correlation by the name that the models have.

    Raises InputError for a correlation that is unknown, or for another flow than the fin's.
    """
    air, fin = section.air, section.fin
    found = Surroundings(
        speed=air.speed,
        pressure=air.pressure,
        humidity=air.humidity,
        orientation=fin.orientation,
        temperature=air.surroundings_temperature,
        air=air.temperature,
    )
    if air.correlation is None:
        return found
    place = "[air] correlation"
    known = {fold(name): name for laws in LAWS.values() for name in laws}
    found = replace(found, correlation=known.get(fold(air.correlation), air.correlation))
    likeness = liken(fin.profile, geometry, profile, found)
    try:
        law = named(air.correlation, situation(likeness.exposure, bool(found.driven)))
    except UnknownNameError as error:
        problem = f"{quoted(air.correlation)} is no correlation"
        remedy = f"the nearest known ones are {', '.join(map(quoted, error.nearest))}"
        raise InputError(source, place, problem, remedy) from None
    except ValueError as error:
        problem, _, remedy = str(error).partition("; ")
        raise InputError(source, place, plain(problem, 200), plain(remedy, 200)) from None
    return replace(found, correlation=law)


def assumed(surroundings: Surroundings, expected: Quantity | None) -> Iterator[Finding]:
    """Yield a finding for each default that an expected coefficient rests on.

    Arguments: surroundings; expected, the coefficient [W/(m² K)] that the rig states, if it does.
    """
    if surroundings.driven is not False or expected is not None:
        return
    if surroundings.speed is None:
        yield Finding(
            "assumed",
            "note",
            "No speed of the air is stated: it is taken to be still, for the coefficient of a healthy fin; "
            'state it with speed = "2.5 m/s" in [air].',
            evidence={"key": "speed", "value": 0.0},
        )
    if surroundings.orientation is None:
        yield Finding(
            "assumed",
            "note",
            "It is not stated how the fin stands in the still air: its axis is taken to be horizontal; state "
            'it with orientation = "vertical" or "horizontal" in [fin].',
            evidence={"key": "orientation", "value": "horizontal"},
        )
