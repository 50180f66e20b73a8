"""Shapes: which keys of [fin] describe each profile, and how they become a profile of `finback.models`.

The one table of profiles on this side. A new one is a class in `finback.models.profiles` and a row here; its
name, and keys of its own, are a line each in `finback.rig_file`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from finback import models
from finback.errors import InputError
from finback.findings import Finding
from finback.models import Profile
from finback.quantity import Quantity
from finback.wording import quoted

if TYPE_CHECKING:
    from finback.rig_file import FinSection

EXAMPLES: Mapping[str, str] = {
    "length": "120 mm",
    "width": "100 mm",
    "thickness": "2 mm",
    "tip_thickness": "1 mm",
    "diameter": "8 mm",
    "tip_diameter": "3 mm",
    "inner_diameter": "25 mm",
    "outer_diameter": "55 mm",
    "file": "shape.csv",
}
"""Every key of [fin] that gives a size, or the table of one, and a value it may have [mm]."""


@dataclass(frozen=True, slots=True)
class Shape:
    """How one profile is described.

    Arguments: words, what a sentence calls it; needed and optional keys of [fin], lengths in m; make, which
    takes the lengths by their keys and returns the profile, None where a table is it; straight, whether it
    has two narrow edges; tapered, whether its surface has a slant; even, whether its section is the same
    everywhere, so that it may go on for ever.
    """

    words: str
    needed: tuple[str, ...]
    make: Callable[..., Profile] | None
    optional: tuple[str, ...] = ()
    straight: bool = False
    tapered: bool = False
    even: bool = False

    def profile(self, lengths: Mapping[str, float], guarded_edges: bool, slant_surface: bool) -> Profile:
        """Return the profile of these lengths [m], by their keys. Raises ValueError where they make none."""
        assert self.make is not None, "a table is a profile already"
        options: dict[str, bool] = {}
        if self.straight:
            options["guarded_edges"] = guarded_edges
        if self.tapered:
            options["slant_surface"] = slant_surface
        return self.make(**lengths, **options)


_STRAIGHT = ("length", "width", "thickness")

SHAPES: Mapping[str, Shape] = {
    "pin": Shape("a pin", ("length", "diameter"), models.pin, even=True),
    "rectangular": Shape("a rectangular fin", _STRAIGHT, models.rectangular, straight=True, even=True),
    "trapezoidal": Shape(
        "a trapezoidal fin", (*_STRAIGHT, "tip_thickness"), models.Trapezoidal, straight=True, tapered=True
    ),
    "triangular": Shape("a triangular fin", _STRAIGHT, models.Triangular, straight=True, tapered=True),
    "concave-parabolic": Shape(
        "a concave parabolic fin", _STRAIGHT, models.ConcaveParabolic, straight=True, tapered=True
    ),
    "convex-parabolic": Shape(
        "a convex parabolic fin", _STRAIGHT, models.ConvexParabolic, straight=True, tapered=True
    ),
    "cone": Shape("a cone", ("length", "diameter"), models.Cone, ("tip_diameter",), tapered=True),
    "concave-pin": Shape("a concave pin", ("length", "diameter"), models.ConcavePin, tapered=True),
    "convex-pin": Shape("a convex pin", ("length", "diameter"), models.ConvexPin, tapered=True),
    "annular": Shape("an annular fin", ("inner_diameter", "outer_diameter", "thickness"), models.Annular),
    "hyperbolic-annular": Shape(
        "a hyperbolic annular fin",
        ("inner_diameter", "outer_diameter", "thickness"),
        models.HyperbolicAnnular,
        tapered=True,
    ),
    "table": Shape("a table", ("file",), None),
}
"""The profiles by their names in [fin]."""


def measure(fin: FinSection, source: Path | None) -> dict[str, Quantity]:
    """Return the lengths [m] of a checked table [fin] by their keys.

    Raises InputError for a missing key, one of another profile, and for diameters in the wrong order.
    """
    shape = SHAPES[fin.profile]
    known = (*shape.needed, *shape.optional)
    given: dict[str, Quantity | str | None] = {key: getattr(fin, key) for key in EXAMPLES}
    for key, value in given.items():
        if value is not None and key not in known:
            problem = f"{shape.words} has no {key}"
            raise InputError(source, f"[fin] {key}", problem, f"it is described by {', '.join(known)}")
    for key in shape.needed:
        if given[key] is None:
            problem = f"{shape.words} needs the key {quoted(key)}"
            raise InputError(source, "[fin]", problem, f'add a line such as {key} = "{EXAMPLES[key]}"')
    found = {key: value for key in known if isinstance(value := given[key], Quantity)}
    if "outer_diameter" in found and found["outer_diameter"].value <= found["inner_diameter"].value:
        inner, outer = (quoted(found[key].text) for key in ("inner_diameter", "outer_diameter"))
        problem = f"{outer} is not above the inner diameter, {inner}"
        remedy = "write the diameter of the rim, which is larger than that of the tube"
        raise InputError(source, "[fin] outer_diameter", problem, remedy)
    return found


def check_options(
    fin: FinSection, profile: Profile, source: Path | None, compared: tuple[str, ...] = ()
) -> None:
    """Check edges, surface and tip of a checked table [fin], and the tips compared, against its profile.

    Raises InputError for what this profile cannot have.
    """
    shape = SHAPES[fin.profile]
    if fin.edges is not None and not shape.straight:
        raise InputError(source, "[fin] edges", f"{shape.words} has no edges", "leave edges out")
    if fin.surface is not None and not shape.tapered:
        problem = f"{shape.words} has no slant that could be counted or not"
        if shape.make is None:
            problem = "the perimeter of a table is taken as it stands"
        raise InputError(source, "[fin] surface", problem, "leave surface out")
    for tip in compared:
        _check_tip(tip, "[candidates] tips", shape, profile, source)
    if fin.tip is not None:
        _check_tip(fin.tip, "[fin] tip", shape, profile, source)


def _check_tip(tip: str, place: str, shape: Shape, profile: Profile, source: Path | None) -> None:
    key = place.partition(" ")[2]
    if tip == "infinite" and not shape.even:
        problem = f"{shape.words} cannot go on for ever as it ends"
        remedy = f'write "adiabatic", "convective" or "fixed", or leave {key} out'
        raise InputError(source, place, problem, remedy)
    if tip == "fixed" and not has_tip_face(profile):
        which = shape.words
        if {"tip_thickness", "tip_diameter"} & {*shape.needed, *shape.optional}:  # another one may be held
            which = f"this {which.partition(' ')[2]}"
        problem = f"{which} ends too sharp to be held at a temperature"
        raise InputError(source, place, problem, f'write tip = "adiabatic", or leave {key} out')


def has_tip_face(profile: Profile) -> bool:
    """Tell whether a profile ends in a face: a sharp tip has none, and loses no heat of its own."""
    return bool(profile.area(np.array([profile.length]))[0] > 0)


def assumed(fin: FinSection) -> Iterator[Finding]:
    """Yield a finding for each default of the shape that was used."""
    if SHAPES[fin.profile].straight and fin.edges is None:
        yield Finding(
            "assumed",
            "note",
            "It is not stated whether the two narrow side faces lose heat: they are taken to; state it with "
            'edges = "exposed" or "guarded" in [fin].',
            evidence={"key": "edges", "value": "exposed"},
        )
