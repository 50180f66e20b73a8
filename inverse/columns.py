"""Columns: which column of a table of readings belongs to which sensor, and in which unit it is written.

A column that only looks like a sensor's (its name is nearly one, or its unit is that of a thermometer) is
refused: a misspelt header must not turn a reading into a remark.
"""

import re
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from finback.errors import InputError
from finback.quantity import is_temperature_scale, scale
from finback.sensors import RUN_COLUMN, Sensor
from finback.table import Row, Sheet, split_header
from finback.wording import nearest, plain, quoted

EMPTY = frozenset(("", "-", "--", "–", "—", "nan", "n/a", "na", "#n/a", "null", "none"))
"""What stands in a cell, small letters or capitals, that was not measured."""

LONGEST_UNIT = 24
_THERMOCOUPLE = re.compile(r"[Tt][0-9]{1,4}")


@dataclass(frozen=True, slots=True)
class Column:
    """A sensor's column: its place in a row, and how its numbers become SI values (factor · number + offset).

    `unit`: as written, or the one that is taken where none is.
    """

    sensor: Sensor
    index: int
    unit: str
    factor: float
    offset: float


@dataclass(frozen=True, slots=True)
class Columns:
    """What the columns of a table mean: `sensors`; `run`, the place of the runs' names; `extra`, the rest."""

    sensors: tuple[Column, ...]
    run: int | None
    extra: Mapping[str, int]


def is_empty(cell: str) -> bool:
    """Tell whether a cell says that nothing was measured."""
    return cell.casefold() in EMPTY


def assign(
    sheet: Sheet, sensors: Mapping[str, Sensor], source: Path | None
) -> tuple[Columns, tuple[Row, ...]]:
    """Return the meaning of a table's columns, and its rows of runs without a row of units.

    Raises InputError for a column that stands twice, one that looks like a sensor's and is not, a sensor
    without a column, and a unit that its readings cannot have.
    """
    places = _places(sheet.header, sensors, source)
    units, body = _units(sheet, places, sensors, source)
    found = []
    extra = {}
    for name, index in places.items():
        if name in sensors:
            found.append(_column(sensors[name], index, units.get(index), source))
        elif name != RUN_COLUMN:
            _check_stranger(name, units.get(index), sensors, source)
            extra[name] = index
    for name in sensors:
        if name not in places:
            _complain_of_missing(name, extra, sheet.header, source)
    return Columns(tuple(found), places.get(RUN_COLUMN), extra), body


def _places(header: Sequence[str], sensors: Collection[str], source: Path | None) -> dict[str, int]:
    """Return the place of each column by its name: a sensor's without its unit, others as they stand."""
    places: dict[str, int] = {}
    for index, cell in enumerate(header):
        name = cell
        if cell not in sensors and split_header(cell)[0] in sensors:
            name = split_header(cell)[0]
        elif cell.casefold() == RUN_COLUMN:
            name = RUN_COLUMN
        if name in places:
            problem = f"there are two columns {quoted(name)}"
            raise InputError(source, None, problem, "keep one, or give the other a name of its own")
        if name:  # a column without a name holds what a program left over, such as its own row numbers
            places[name] = index
    return places


def _units(
    sheet: Sheet, places: Mapping[str, int], sensors: Mapping[str, Sensor], source: Path | None
) -> tuple[dict[int, str], tuple[Row, ...]]:
    """Return the units of the columns by their place, and the rows below a row of units if there is one."""
    units = {}
    for index, cell in enumerate(sheet.header):
        unit = None if cell in sensors else split_header(cell)[1]
        if unit is not None:
            units[index] = unit
    number, cells = sheet.rows[0]
    own = [index for name, index in places.items() if name in sensors]
    written = [cells[index] for index in own if index < len(cells) and not is_empty(cells[index])]
    if not written or not all(_is_unit(cell) for cell in written):
        return units, sheet.rows
    for index, cell in enumerate(cells):
        unit = _bare(cell)
        if not unit or is_empty(cell):
            continue
        if index in own and units.get(index, unit) != unit:
            place = f"row {number}, column {plain(sheet.header[index])}"
            problem = f"the unit {quoted(unit)} is not the one in the header"
            raise InputError(source, place, problem, "write the unit once")
        units.setdefault(index, unit)
    if len(sheet.rows) == 1:
        raise InputError(source, None, "there is no run below the units", "write one row a run")
    return units, sheet.rows[1:]


def _bare(cell: str) -> str:
    """Return a unit without the brackets around it."""
    for opening, closing in ("[]", "()"):
        if cell.startswith(opening) and cell.endswith(closing):
            return cell[1:-1].strip()
    return cell


def _is_unit(cell: str) -> bool:
    """Tell whether a cell holds the unit of a temperature or of a heat flow."""
    unit = _bare(cell)
    if is_temperature_scale(unit):
        return True
    if not unit[:1].isalpha() or len(unit) > LONGEST_UNIT:
        return False
    try:
        scale(unit, "heat")
    except InputError:
        return False
    return True


def _column(sensor: Sensor, index: int, unit: str | None, source: Path | None) -> Column:
    written = unit or ("degC" if sensor.reads_temperature else "W")
    try:
        factor, offset = scale(written, "temperature" if sensor.reads_temperature else "heat")
    except InputError as error:
        example = "degC" if sensor.reads_temperature else "W"
        remedy = f"write the column's unit in its header, such as {quoted(f'{sensor.name} [{example}]')}"
        raise InputError(source, f"column {plain(sensor.name)}", error.problem, remedy) from None
    return Column(sensor, index, written, factor, offset)


def _check_stranger(name: str, unit: str | None, sensors: Collection[str], source: Path | None) -> None:
    """Refuse a column that belongs to no sensor and looks as if it did."""
    bare = split_header(name)[0]
    near = next((sensor for sensor in sensors if _nearly_same(bare, sensor)), None)
    thermometer = unit is not None and len(unit) <= LONGEST_UNIT and is_temperature_scale(unit)
    if near is None and not thermometer and not _THERMOCOUPLE.fullmatch(bare):
        return
    near = near or nearest(bare, sensors, cutoff=0.0)
    problem = "the rig has no sensor of this name"
    remedy = f"the nearest is {quoted(near)}: rename the column, add the sensor, or take the column out"
    raise InputError(source, f"column {plain(name)}", problem, remedy)


def _complain_of_missing(
    name: str, extra: Collection[str], header: Sequence[str], source: Path | None
) -> None:
    problem = f"the sensor {quoted(name)} of the rig has no column"
    if len(header) == 1:
        remedy = f"separate the columns, which are now {quoted(header[0])}, by commas, semicolons or tabs"
        raise InputError(source, None, problem, remedy)
    near = nearest(name, extra)
    rename = f"rename the nearest column, {quoted(near)}, or " if near else ""
    remedy = f"{rename}add it, with empty cells where it was not measured"
    raise InputError(source, None, problem, remedy)


def _nearly_same(name: str, sensor: str) -> bool:
    """Tell whether a column's name is a sensor's but for capitals, blanks, marks, or one letter of many."""
    one, other = (re.sub(r"[\W_]+", "", each.casefold()) for each in (name, sensor))
    if one and one == other:
        return True
    return min(len(one), len(other)) >= 4 and _one_apart(one, other)


def _one_apart(one: str, other: str) -> bool:
    """Tell whether two words differ by one character put in, left out, replaced or swapped with the next."""
    if abs(len(one) - len(other)) > 1:
        return False
    alike = (a == b for a, b in zip(one, other, strict=False))
    start = next((i for i, same in enumerate(alike) if not same), min(len(one), len(other)))
    a, b = one[start:], other[start:]
    return a[1:] == b[1:] or a[1:] == b or a == b[1:] or (a[:2] == b[:2][::-1] and a[2:] == b[2:])
