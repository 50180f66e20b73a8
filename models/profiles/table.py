"""A profile given by a table of positions, sections and perimeters: any shape that was measured or drawn."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False, init=False)
class Table:
    """A fin by a table of its shape, straight lines between the rows.

    Arguments, of shape (n_rows,), two rows or more: positions [m], 0 in the first row and rising, the last
    one the fin's length; areas [m²] of the section and perimeters [m] that lose heat, both positive. Two rows
    of the same position are a jump: the first holds on the base's side, the second from there on.
    Copies are kept, read-only. Raises ValueError for the first thing that is wrong, with its argument and row
    (counted from 1).

    Examples:
    A shaft of 10 mm that is turned down to 6 mm half-way:

    >>> d = np.array([10e-3, 10e-3, 6e-3, 6e-3])
    >>> shaft = Table([0.0, 0.05, 0.05, 0.1], np.pi * d**2 / 4, np.pi * d)
    >>> (shaft.perimeter(np.array([0.049, 0.05, 0.051])) / np.pi).round(6).tolist()
    [0.01, 0.006, 0.006]

    """

    positions: Array
    areas: Array
    perimeters: Array
    _key: tuple[bytes, ...] = field(init=False, repr=False)
    _hash: int = field(init=False, repr=False)

    def __init__(self, positions: ArrayLike, areas: ArrayLike, perimeters: ArrayLike) -> None:
        columns = {"positions": positions, "areas": areas, "perimeters": perimeters}
        kept = {name: _column(name, values) for name, values in columns.items()}
        _check_positions(kept["positions"])
        for name in ("areas", "perimeters"):
            _check_positive(name, kept[name], len(kept["positions"]))
        for name, values in kept.items():
            object.__setattr__(self, name, values)
        object.__setattr__(self, "_key", tuple(values.tobytes() for values in kept.values()))
        object.__setattr__(self, "_hash", hash(self._key))

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Table) and self._key == other._key

    def __hash__(self) -> int:
        return self._hash

    @property
    def length(self) -> float:
        """Length from base to tip [m]."""
        return float(self.positions[-1])

    @property
    def breaks(self) -> Array:
        """Positions of the rows between base and tip [m], where the shape may jump or have a kink."""
        return np.unique(self.positions)[1:-1]

    def area(self, x: Array) -> Array:
        """Conducting cross-section at x [m] -> [m²]."""
        return self._between_rows(x, self.areas)

    def perimeter(self, x: Array) -> Array:
        """Perimeter that loses heat at x [m] -> [m]."""
        return self._between_rows(x, self.perimeters)

    def side_area(self) -> float:
        """Surface of the sides, tip face excluded [m²]."""
        return float(np.trapezoid(self.perimeters, self.positions))

    def _between_rows(self, x: Array, values: Array) -> Array:
        last = len(self.positions) - 2
        row = np.clip(np.searchsorted(self.positions, x, side="right") - 1, 0, last)
        start, end = self.positions[row], self.positions[row + 1]
        share = (x - start) / np.where(end > start, end - start, 1.0)
        found: Array = values[row] + share * (values[row + 1] - values[row])
        return found


def _column(name: str, values: ArrayLike) -> Array:
    column = np.array(values, dtype=np.float64)
    if column.ndim != 1:
        raise ValueError(f"{name} must be one column, got an array of shape {column.shape}")
    column.flags.writeable = False
    return column


def _check_positions(positions: Array) -> None:
    if len(positions) < 2:
        raise ValueError(f"positions must have two rows or more, got {len(positions)}")
    if not np.all(np.isfinite(positions)):
        row = int(np.argmin(np.isfinite(positions)))
        raise ValueError(f"positions must be finite, got {float(positions[row])!r} in row {row + 1}")
    if positions[0] != 0:
        raise ValueError(f"positions must begin with 0 at the base, got {float(positions[0])!r} in row 1")
    steps = np.diff(positions)
    if np.any(steps < 0):
        row = int(np.argmax(steps < 0)) + 1
        raise ValueError(
            f"positions must rise from row to row, got {float(positions[row])!r} "
            f"after {float(positions[row - 1])!r} in row {row + 1}"
        )
    if steps[0] == 0 or steps[-1] == 0:
        row = 2 if steps[0] == 0 else len(positions)
        raise ValueError(f"positions may repeat only between base and tip, where the shape jumps: row {row}")
    thrice = (steps[1:] == 0) & (steps[:-1] == 0)
    if np.any(thrice):
        row = int(np.argmax(thrice)) + 3
        value = float(positions[row - 1])
        raise ValueError(f"positions may hold a value twice, for a jump, not more: {value!r} in row {row}")


def _check_positive(name: str, values: Array, n_rows: int) -> None:
    if len(values) != n_rows:
        raise ValueError(f"{name} must have as many rows as positions, got {len(values)} for {n_rows}")
    good = np.isfinite(values) & (values > 0)
    if not np.all(good):
        row = int(np.argmin(good))
        raise ValueError(f"{name} must be positive and finite, got {float(values[row])!r} in row {row + 1}")
