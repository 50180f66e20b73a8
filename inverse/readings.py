"""Readings: what was measured in one run. Reads readings.csv and .xlsx."""

import hashlib
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType

from finback.errors import InputError
from finback.quantity import scale
from finback.rig import Rig, Sensor, read_file
from finback.table import Sheet, read_csv, split_header
from finback.wording import listed, nearest, quoted

RUN = "run"
"""The column that names the runs."""

LARGEST_FILE = 200_000_000
"""Bytes of the largest table that is read."""

_EMPTY = frozenset(("", "-", "–", "—", "nan", "n/a", "na", "#n/a"))
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,4})?")


@dataclass(frozen=True)
class Readings:
    """The readings of one run, in SI units: temperatures in K (absolute), heat in W.

    `values`: sensor name -> value, measured ones only. `excluded`: sensor name -> why its value is set aside
    (the value stays in `values`). `extra`: the table's other columns as text.
    """

    run: str
    values: Mapping[str, float]
    excluded: Mapping[str, str] = field(default_factory=dict)
    extra: Mapping[str, str] = field(default_factory=dict)
    source: Path | None = None
    sha256: str | None = None

    def __post_init__(self) -> None:
        for name in ("values", "excluded", "extra"):
            object.__setattr__(self, name, MappingProxyType(dict(getattr(self, name))))

    @property
    def used(self) -> Mapping[str, float]:
        """The values that count, sensor name -> value: those that are not set aside."""
        return {name: value for name, value in self.values.items() if name not in self.excluded}


@dataclass(frozen=True, slots=True)
class Column:
    """A sensor's column: where it is, and how its numbers become SI values (factor · number + offset)."""

    sensor: Sensor
    index: int
    header: str
    factor: float
    offset: float


@dataclass(frozen=True)
class Table:
    """The runs of one file, of which only those asked for become Readings."""

    rig: Rig
    sheet: Sheet
    columns: tuple[Column, ...]
    extra: Mapping[str, int]
    rows: Mapping[str, int]  # run -> index in sheet.rows
    source: Path | None
    sha256: str | None

    @property
    def runs(self) -> tuple[str, ...]:
        """Names of the runs, in the order of the file."""
        return tuple(self.rows)

    def __len__(self) -> int:
        return len(self.rows)

    def __iter__(self) -> Iterator[Readings]:
        return (self.pick(run) for run in self.rows)

    def pick(self, run: str | None = None) -> Readings:
        """Return the readings of one run. Argument: run, its name; None takes the only run there is.

        Raises InputError for an unknown run, for none named among several, and for a wrong cell in its row.
        """
        if run is None:
            if len(self.rows) > 1:
                problem = f"there are {len(self.rows)} runs ({listed(self.rows, 3)})"
                raise InputError(self.source, None, problem, "name the one that is meant")
            run = next(iter(self.rows))
        if run not in self.rows:
            near = nearest(run, self.rows)
            remedy = f"the nearest is {quoted(near)}" if near else f"there are {listed(self.rows, 3)}"
            raise InputError(self.source, None, f"there is no run {quoted(run)}", remedy)
        number, cells = self.sheet.rows[self.rows[run]]
        values = {}
        for column in self.columns:
            cell = cells[column.index] if column.index < len(cells) else ""
            if cell.casefold() not in _EMPTY:
                values[column.sensor.name] = self._value(cell, column, number)
        extra = {name: cells[at] if at < len(cells) else "" for name, at in self.extra.items()}
        return Readings(run, values, extra=extra, source=self.source, sha256=self.sha256)

    def _value(self, cell: str, column: Column, row: int) -> float:
        text = cell.replace("−", "-")
        if self.sheet.decimal_comma:
            text = text.replace(",", ".")
        if not _NUMBER.fullmatch(text):
            raise InputError(self.source, f"row {row}, column {column.header}", f"{quoted(cell)} is not a number", "write a number")
        return float(text) * column.factor + column.offset


def read(path: Path | str, rig: Rig) -> Table:
    """Read a table of readings. Raises InputError for the first thing that is wrong."""
    path = Path(path)
    return read_bytes(read_file(path, LARGEST_FILE), rig, path)


def read_bytes(content: bytes, rig: Rig, source: Path | None = None) -> Table:
    """Read the content of a table of readings. Raises InputError as `read` does."""
    sheet = read_csv(content, {*rig.sensors, RUN}, source)
    columns, extra = [], {}
    run_index = None
    for index, cell in enumerate(sheet.header):
        name, unit = (cell, None) if cell in rig.sensors else split_header(cell)
        if name in rig.sensors:
            sensor = rig.sensors[name]
            factor, offset = scale(unit or ("degC" if sensor.reads_temperature else "W"), "temperature" if sensor.reads_temperature else "heat")
            columns.append(Column(sensor, index, name, factor, offset))
        elif cell == RUN:
            run_index = index
        else:
            extra[cell] = index
    rows = {}
    for at, (_, cells) in enumerate(sheet.rows):
        rows[cells[run_index] if run_index is not None else str(at + 1)] = at
    return Table(rig, sheet, tuple(columns), extra, rows, source, hashlib.sha256(content).hexdigest())
