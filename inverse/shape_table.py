"""The shape of a fin as a table in a file of its own: columns x, area and perimeter, a row for each section.

Units stand in the header, as "x [mm]"; the rows run from base to tip. Two rows of one x are a jump. The file
is written as the readings are: CSV with commas, semicolons or tabs, or the first sheet of an .xlsx.
"""

import hashlib
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from finback.errors import InputError
from finback.models import Table
from finback.quantity import Dimension, scale
from finback.table import WORKBOOK_START, Contents, Sheet, parse_text, parse_workbook, split_header, to_number
from finback.wording import listed, nearest, quoted

COLUMNS: Mapping[str, tuple[Dimension, str]] = {
    "x": ("length", "x [mm]"),
    "area": ("area", "area [mm^2]"),
    "perimeter": ("length", "perimeter [mm]"),
}
"""The columns: what each holds, and how its header may read."""

MOST_ROWS = 1000
"""Rows of the longest table that is read: far more than a fin has steps."""

HEADER = ", ".join(example for _, example in COLUMNS.values())
CONTENTS = Contents("section", f"write the header {HEADER} and below it one row a section")
IN_BETWEEN = "write a position twice only between base and tip, where the shape jumps"


@dataclass(frozen=True)
class ShapeFile:
    """A fin's shape, where it was read, and the SHA-256 of that file. Lengths in m, areas in m²."""

    table: Table
    source: Path
    sha256: str


def parse(content: bytes, source: Path) -> ShapeFile:
    """Return the shape in the content of a file.

    Raises InputError, with row and column, for a missing column or unit, for what is no number or not above
    zero, and for positions that do not rise from 0.
    """
    if content.startswith(WORKBOOK_START) or source.suffix.lower() == ".xlsx":
        sheet = parse_workbook(content, source, CONTENTS)
    else:
        sheet = parse_text(content, COLUMNS, source, CONTENTS)
    if len(sheet.rows) > MOST_ROWS:
        raise InputError(source, None, f"there are {len(sheet.rows)} rows", f"at most {MOST_ROWS} are read")
    if len(sheet.rows) < 2:
        raise InputError(source, None, "there is one section only", "write two at least: base and tip")
    found = {name: _column(name, sheet, source) for name in COLUMNS}
    _check_positions(found["x"], sheet, source)
    for name in ("area", "perimeter"):
        _check_positive(name, found[name], sheet, source)
    table = Table(found["x"], found["area"], found["perimeter"])
    return ShapeFile(table, source, hashlib.sha256(content).hexdigest())


def _column(name: str, sheet: Sheet, source: Path) -> list[float]:
    """Return the values of a column in SI units."""
    at, unit = _place(name, sheet.header, source)
    dimension, example = COLUMNS[name]
    if not unit:
        remedy = f"write it in the header, such as {quoted(example)}"
        raise InputError(source, f"column {name}", "this column has no unit", remedy)
    try:
        factor, _ = scale(unit, dimension)
    except InputError as error:
        remedy = f"write the unit in the header, such as {quoted(example)}"
        raise InputError(source, f"column {name}", error.problem, remedy) from None
    values = []
    for number, cells in sheet.rows:
        cell = cells[at] if at < len(cells) else ""
        value = to_number(cell, sheet.decimal_comma)
        if value is None:
            problem = f"{quoted(cell)} is no number" if cell else "this cell is empty"
            raise InputError(source, f"row {number}, column {name}", problem, "write a number")
        if not math.isfinite(value * factor):
            problem = f"{quoted(cell)} is too large"
            raise InputError(source, f"row {number}, column {name}", problem, "write a number")
        values.append(value * factor)
    return values


def _place(name: str, header: Sequence[str], source: Path) -> tuple[int, str | None]:
    """Return the place of a column, and its unit if it has one."""
    split = [split_header(cell) for cell in header]
    places = [at for at, (own, _) in enumerate(split) if own.casefold() == name]
    if len(places) > 1:
        raise InputError(source, None, f"there are two columns {quoted(name)}", "keep one")
    if places:
        return places[0], split[places[0]][1]
    problem = f"there is no column {quoted(name)}"
    if len(header) == 1:
        remedy = f"separate the columns, which are now {quoted(header[0])}, by commas, semicolons or tabs"
        raise InputError(source, None, problem, remedy)
    others = [own for own, _ in split if own and own.casefold() not in COLUMNS]
    near = nearest(name, others)
    remedy = f"rename the nearest column, {quoted(near)}" if near else f"the columns are {listed(COLUMNS)}"
    raise InputError(source, None, problem, remedy)


def _check_positions(x: Sequence[float], sheet: Sheet, source: Path) -> None:
    """Check that positions [m] begin with 0, rise, and repeat only once and only between base and tip."""
    numbers = [number for number, _ in sheet.rows]

    def refuse(at: int, problem: str, remedy: str) -> InputError:
        return InputError(source, f"row {numbers[at]}, column x", problem, remedy)

    if x[0] != 0:
        problem = f"the first position is {1e3 * x[0]:g} mm"
        raise refuse(0, problem, "begin with 0, the base")
    for at in range(1, len(x)):
        shown, before = f"{1e3 * x[at]:g} mm", f"{1e3 * x[at - 1]:g} mm"
        if x[at] < x[at - 1]:
            problem = f"{shown} comes after {before} in row {numbers[at - 1]}"
            raise refuse(at, problem, "write the rows from base to tip")
        if x[at] > x[at - 1]:
            continue
        if at in (1, len(x) - 1):
            raise refuse(at, f"{shown} stands twice at the {'base' if at == 1 else 'tip'}", IN_BETWEEN)
        if x[at] == x[at - 2]:
            raise refuse(at, f"{shown} stands more than twice", "write it twice for a jump, no more")


def _check_positive(name: str, values: Sequence[float], sheet: Sheet, source: Path) -> None:
    for value, (number, cells) in zip(values, sheet.rows, strict=True):
        if not value > 0:
            at, _ = _place(name, sheet.header, source)
            problem = f"{quoted(cells[at])} is not above zero"
            remedy = "write a positive value, a very small one for a sharp tip"
            raise InputError(source, f"row {number}, column {name}", problem, remedy)
