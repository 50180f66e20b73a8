"""Outline: how high a fin stands to either side of its axis, for drawings of it. Nothing is drawn here."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.rig import Rig

Array = NDArray[np.float64]

POINTS = 97
"""Points of an outline that is curved, closer together towards the tip, where a convex one falls steeply."""


@dataclass(frozen=True, slots=True)
class Outline:
    """The side view of a fin that is symmetric about its axis.

    `x` (n,) from base to tip and `half` (n,), half the height there [m]; two points of one x are a step.
    """

    x: Array
    half: Array

    @property
    def largest(self) -> float:
        """Half the height where it is largest [m]."""
        return float(self.half.max())

    def at(self, x: Array) -> Array:
        """Half the height at x [m] -> [m]; at a step, that towards the tip."""
        return np.asarray(np.interp(x, self.x, self.half), dtype=np.float64)


def trace(rig: Rig) -> Outline:
    """Return the outline of a rig's fin.

    A straight fin is seen on its narrow edge, an annular one cut along its axis. A table does not tell what
    its section looks like: it is drawn round.
    """
    if rig.shape_file is not None:
        table = rig.shape_file.table
        return Outline(table.positions, np.sqrt(table.areas / np.pi))
    sizes = {name: quantity.value for name, quantity in rig.geometry.items()}
    profile = rig.profile()
    x = profile.length * (1 - np.linspace(1.0, 0.0, POINTS) ** 2)
    area = profile.area(x)
    if "width" in sizes:
        half = area / sizes["width"] / 2
    elif "outer_diameter" in sizes:
        half = area / (2 * np.pi * (sizes["inner_diameter"] / 2 + x)) / 2
    else:
        half = np.sqrt(area / np.pi)
    return Outline(x, half)
