"""Readings: what was measured in one run. Reads readings.csv and .xlsx.

One row a run, one column a sensor, named as in the rig. A column may carry its unit, in its header as
"TA [degF]" or in a row of units below it; temperatures are in °C otherwise and heat in W. An empty cell was
not measured. Other columns are kept as text.
"""

import hashlib
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType

from finback.columns import Column, Columns, assign, is_empty
from finback.errors import InputError
from finback.rig import Rig, read_file
from finback.sensors import RUN_COLUMN
from finback.table import WORKBOOK_START, Row, parse_text, parse_workbook, to_number
from finback.wording import listed, nearest, plain, quoted

LONGEST_RUN = 120
LARGEST_FILE = 200_000_000
"""Bytes of the largest table that is read."""

HOTTEST = 3000.0 + 273.15
"""No fin is hotter [K]: tungsten melts at 3422 °C, and a thermometer that says more is broken."""


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
        """The values that count, sensor name -> value [K or W]: those that are not set aside."""
        return {name: value for name, value in self.values.items() if name not in self.excluded}


@dataclass(frozen=True)
class Table:
    """The runs of one file, of which only those asked for become Readings.

    `columns`: what each column of the file means; `rows`: the row of each run by its name, in the order of
    the file; `decimal_comma`: a comma in a number is its decimal sign.
    """

    columns: Columns
    rows: Mapping[str, Row]
    decimal_comma: bool
    source: Path | None = None
    sha256: str | None = None

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
        if run is None and len(self.rows) > 1:
            problem = f"there are {len(self.rows)} runs ({listed(self.rows, 3)})"
            raise InputError(self.source, None, problem, "name the one that is meant (--run)")
        if run is None:
            run = next(iter(self.rows))
        if run not in self.rows:
            near = nearest(run, self.rows)
            remedy = f"the nearest is {quoted(near)}" if near else f"there are {listed(self.rows, 3)}"
            raise InputError(self.source, None, f"there is no run {quoted(run)}", remedy)
        row = self.rows[run]
        extra = {name: cell_of(row, at) for name, at in self.columns.extra.items()}
        values = values_of(self.columns, run, row, self.decimal_comma, self.source)
        return Readings(run, values, extra=extra, source=self.source, sha256=self.sha256)


def values_of(
    columns: Columns, run: str, row: Row, decimal_comma: bool, source: Path | None
) -> dict[str, float]:
    """Return what the sensors read in one row [K or W], by name; those that were measured.

    Raises InputError for a cell that is no such reading, and for a row without a temperature along the fin.
    """
    values = {}
    for column in columns.sensors:
        value = _value(column, row, decimal_comma, source)
        if value is not None:
            values[column.sensor.name] = value
    if not any(c.sensor.place == "fin" and c.sensor.name in values for c in columns.sensors):
        problem = f"run {quoted(run)} has no temperature along the fin"
        raise InputError(source, f"row {row[0]}", problem, "fill in at least one, or choose another run")
    return values


def _value(column: Column, row: Row, decimal_comma: bool, source: Path | None) -> float | None:
    """Return what a sensor read in a row [K or W], None where it was not measured."""
    cell = cell_of(row, column.index)
    if is_empty(cell):
        return None
    place = f"row {row[0]}, column {plain(column.sensor.name)}"
    number = to_number(cell, decimal_comma)
    if number is None:
        raise InputError(source, place, f"{quoted(cell)} is no number", "write a number or leave it empty")
    value = number * column.factor + column.offset
    if not math.isfinite(value):
        raise InputError(source, place, f"{quoted(cell)} is too large", "write a number or leave it empty")
    if column.sensor.reads_temperature and value < 0:
        problem = f"{quoted(cell)} {column.unit} is below absolute zero"
        raise InputError(source, place, problem, "correct the value, or its unit in the header")
    if column.sensor.reads_temperature and value > HOTTEST:
        problem = f"{quoted(cell)} {column.unit} is hotter than any fin (3000 degC)"
        raise InputError(source, place, problem, "correct the value, or its unit in the header")
    return value


def read(path: Path | str, rig: Rig) -> Table:
    """Read the table of readings of a rig, .csv or .xlsx.

    Raises InputError for the first thing that is wrong with the file, its columns or the names of its runs;
    the cells of a run are checked when it is picked.
    """
    path = Path(path)
    return read_bytes(read_file(path, LARGEST_FILE), rig, path)


def read_bytes(content: bytes, rig: Rig, source: Path | None = None) -> Table:
    """Read the content of a table of readings. Raises InputError as `read` does."""
    workbook = content.startswith(WORKBOOK_START) or (source is not None and source.suffix.lower() == ".xlsx")
    if workbook:
        sheet = parse_workbook(content, source)
    else:
        sheet = parse_text(content, {RUN_COLUMN, *rig.sensors}, source)
    columns, body = assign(sheet, rig.sensors, source)
    runs = _runs(body, columns.run, source)
    return Table(columns, runs, sheet.decimal_comma, source, hashlib.sha256(content).hexdigest())


def _runs(body: tuple[Row, ...], column: int | None, source: Path | None) -> dict[str, Row]:
    """Return the row of each run by its name; without a column of names they are counted from 1."""
    if column is None:
        return {str(count): row for count, row in enumerate(body, start=1)}
    runs: dict[str, Row] = {}
    for row in body:
        name = cell_of(row, column)
        place = f"row {row[0]}, column {RUN_COLUMN}"
        if not is_run_name(name):
            remedy = f"write a name of 1 to {LONGEST_RUN} printable characters"
            raise InputError(source, place, "this run has no proper name", remedy)
        if name in runs:
            problem = f"the run {quoted(name)} stands in row {runs[name][0]} already"
            raise InputError(source, place, problem, "give each run a name of its own")
        runs[name] = row
    return runs


def is_run_name(name: str) -> bool:
    """Tell whether a run may be called so: 1 to 120 printable characters."""
    return 0 < len(name) <= LONGEST_RUN and name.isprintable()


def cell_of(row: Row, at: int) -> str:
    """Return the cell of a row in one column, "" where the row is shorter."""
    cells = row[1]
    return cells[at] if at < len(cells) else ""
