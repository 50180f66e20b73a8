"""Kinks of the flux along a fin: where its temperature passes one at which a law of it has a kink.

A power law of convection has one at the air's temperature, a conductivity table a weaker one at each of its
points. No polynomial follows a flux across them. Where a fin has one is known once it is solved, if only
roughly. The place of a strong one is put into a cell, 1/128 of the length, and pieces of the length end at
the cell's sides and at eight and sixty-four times their distance from its middle. What the polynomials then
miss lies in the cell. Cells stand at fixed places, so that fins whose kinks are in the same ones share their
nodes.
"""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from finback.models.iteration import Cases, Values

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Rows = NDArray[np.intp]

CELLS = 256
"""Middles of cells in a length [1]; a cell reaches to its neighbours' middles."""
AROUND = (1, 8, 64)
"""Distances from the middle of a cell [1], over that of two neighbours, at which pieces end."""
PLACES = np.linspace(0.0, 1.0, 129)
"""Places x/L [1] between which a fin is looked at for kinks."""
ROUNDING = 1e-9
"""Excess over a kink's temperature [1], over the fin's range, that is none."""
CLOSE = 1e-6
"""How far beyond a kink's temperature [1], over its range, a fin has to go for the kink to count.

A long fin settles at the air's temperature, and passes it by as much as is left of errors on the way.
"""


def of_side(cases: Cases, tip_held: bool) -> tuple[Values, ...]:
    """Return the temperatures [K] at which the law of the side has a kink, nan in fins that cannot pass them.

    Where all that drives a fin is on one side of a temperature the fin is too, up to rounding. A tip that is
    held at that very temperature does reach it.
    """
    own = getattr(cases.surface, "kinks", None)
    levels = () if own is None else tuple(own(cases.air))
    if tip_held:
        return levels
    nearly = CLOSE * (cases.highest - cases.lowest)
    found = []
    for level in levels:
        potential = cases.conductivity.potential(level, cases.air)
        between = (cases.lowest + nearly < potential) & (potential < cases.highest - nearly)
        found.append(np.where(between, level, np.nan))
    return tuple(found)


def of_solid(cases: Cases) -> tuple[Values, ...]:
    """Return the temperatures [K] at which the conductivity has one: a far weaker one of the flux."""
    return tuple(getattr(cases.conductivity, "kinks", ()))


def passed(temperatures: Array, levels: tuple[Values, ...], tip_held: bool) -> Flags:
    """Tell in which fins a kink lies among the temperatures [K]: (n_places, n_sets) -> (n_sets,).

    Where the tip is held, the last of them, a kink at its very temperature counts as well.
    """
    low, high = temperatures.min(axis=0), temperatures.max(axis=0)
    nearly = CLOSE * (high - low)
    found = [(low + nearly < level) & (level < high - nearly) for level in levels]
    if tip_held:
        nothing = ROUNDING * (high - low)
        found += [(np.abs(temperatures[-1] - level) <= nothing) & (high > low) for level in levels]
    return np.asarray(np.any(found, axis=0))


def cells(temperatures: Array, levels: tuple[Values, ...]) -> Iterator[tuple[tuple[float, ...], Rows]]:
    """Put the kinks of fins into cells.

    Arguments: temperatures [K] at `PLACES` (n_places, n_sets); levels [K]. Yields the places x/L [1] at which
    pieces end, and the fins that have their kinks there; fins without a kink are left out.
    """
    middles = _middles(temperatures, levels)
    fins = np.flatnonzero(middles.any(axis=0))
    kinds, kind = np.unique(middles[:, fins], axis=1, return_inverse=True)
    for i, own in enumerate(kinds.T):
        ends = np.flatnonzero(own)[:, None] + np.array([*(-step for step in AROUND), *AROUND])
        inside = np.unique(ends[(ends > 0) & (ends < CELLS)])
        yield tuple((inside / CELLS).tolist()), fins[kind.ravel() == i]


def _middles(temperatures: Array, levels: tuple[Values, ...]) -> Flags:
    """Return which middles of cells are next to a kink, shape (CELLS + 1, n_sets)."""
    nothing = ROUNDING * (temperatures.max(axis=0) - temperatures.min(axis=0))
    found = np.zeros((CELLS + 1, temperatures.shape[1]), dtype=np.bool_)
    for level in levels:
        excess = temperatures - level
        excess[np.abs(excess) <= nothing] = 0.0
        before, after = excess[:-1], excess[1:]
        at, fin = np.nonzero(before * after < 0)
        start, end = before[at, fin], after[at, fin]
        place = PLACES[at] + (PLACES[at + 1] - PLACES[at]) * start / (start - end)
        found[np.rint(place * CELLS).astype(np.intp), fin] = True
        found[-1] |= (after[-1] == 0) & (before[-1] != 0)
    return found
