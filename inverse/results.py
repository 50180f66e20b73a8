"""Results: a table of many runs, as a batch or an engineer writes it, of which a few columns are needed.

One row a run. Only the columns that are asked for are kept, as numbers in SI units, and a long table is read
in blocks: a million rows need little memory. A cell without a number is nan.
"""

import csv
import hashlib
import io
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import islice
from pathlib import Path
from typing import IO, Any

import numpy as np
from numpy.typing import NDArray

from finback.columns import is_empty
from finback.errors import InputError
from finback.quantity import Dimension, is_temperature_scale, scale
from finback.table import SEPARATORS, parse_workbook, split_header
from finback.wording import nearest, plain, quoted

Array = NDArray[np.float64]

BLOCK = 50_000
"""Rows of a text file at a time."""

START = 1_000_000
"""Bytes of a text file from which its header is read."""

_EXCEL_SEPARATOR = re.compile(r"sep=([,;\t])\s*", re.IGNORECASE)
_COMMA = re.compile(r"[+-]?\d*,\d+(?:[eE][+-]?\d+)?")
_BINARY = re.compile(r"[\x00-\x08\x0e-\x1f]")

LONGEST_SYMBOL = 2
"""Letters of a name whose capitals matter."""

PER_CENT = "%"


@dataclass(frozen=True, slots=True)
class Wanted:
    """A column that may be needed.

    Arguments: key, what it is called here; names it may have, the best one first; dimension of its numbers,
    None for text; unit that they have where none is written; sd, whether it is a standard uncertainty, which
    may be written in per cent as well and is then a share.
    """

    key: str
    names: tuple[str, ...]
    dimension: Dimension | None = None
    unit: str = ""
    sd: bool = False


@dataclass(frozen=True)
class Results:
    """The runs of a table.

    `runs`, their names; `text`, the columns of text by their keys; `numbers` (n,) in SI units by their keys,
    nan where there is none; `shares`, the keys whose numbers are shares of the value [1], not amounts;
    `headers`, what each column is called in the file.
    """

    runs: tuple[str, ...]
    text: Mapping[str, tuple[str, ...]]
    numbers: Mapping[str, Array]
    shares: frozenset[str]
    headers: Mapping[str, str]
    source: Path
    sha256: str

    def __len__(self) -> int:
        return len(self.runs)


@dataclass(frozen=True, slots=True)
class _Found:
    """A column that is there: what it is wanted for, its place, and how its numbers become SI values."""

    wanted: Wanted
    index: int
    header: str
    unit: str | None


RUN = Wanted("run", ("run",))


def read(path: Path | str, wanted: Sequence[Wanted]) -> Results:
    """Read the wanted columns of a table, .csv, .xlsx or .parquet, as far as it has them.

    Raises InputError for a file that is no such table, is empty, or has a unit that its numbers cannot have.
    """
    path = Path(path)
    try:
        with path.open("rb") as file:
            start = file.read(START)
        if path.suffix.lower() == ".parquet" or start[:4] == b"PAR1":
            found, blocks = _parquet(path, wanted)
        elif start[:4] == b"PK\x03\x04":
            found, blocks = _workbook(path, wanted)
        else:
            found, blocks = _text(path, start, wanted)
        return _gather(path, found, blocks)
    except OSError as error:
        reason = error.strerror or str(error)
        raise InputError(path, None, f"cannot be read ({reason})", "give the table of results") from None


def missing(path: Path, name: str, remedy: str) -> InputError:
    """Return the error for a column that is needed and missing, with the nearest that there is."""
    near = nearest(name, [split_header(cell)[0] for cell in header(path)])
    hint = f"rename the nearest column, {quoted(near)}, or " if near else ""
    return InputError(path, None, f"there is no column {quoted(name)}", f"{hint}{remedy}")


def bare(name: str) -> str:
    """Return the name of a column without its unit."""
    return split_header(name)[0]


def header(path: Path | str) -> tuple[str, ...]:
    """Return the header of a table, as it stands. Raises InputError as `read` does."""
    path = Path(path)
    try:
        with path.open("rb") as file:
            start = file.read(START)
        if path.suffix.lower() == ".parquet" or start[:4] == b"PAR1":
            return tuple(_schema(path))
        if start[:4] == b"PK\x03\x04":
            return parse_workbook(path.read_bytes(), path).header
        return _layout(path, start, ())[1]
    except OSError as error:
        reason = error.strerror or str(error)
        raise InputError(path, None, f"cannot be read ({reason})", "give the table of results") from None


def _find(path: Path, cells: Sequence[str], wanted: Sequence[Wanted]) -> tuple[_Found, ...]:
    """Return the wanted columns that a header has; of several names for one thing the best."""
    split = [split_header(cell.strip()) for cell in cells]
    found = []
    for each in (RUN, *wanted):
        for name in each.names:
            places = [i for i, (bare, _) in enumerate(split) if bare == name]
            places = places or [i for i, cell in enumerate(cells) if cell.strip() == name]
            if not places and len(name) > LONGEST_SYMBOL:  # "nu" is not "Nu"
                places = [i for i, (bare, _) in enumerate(split) if bare.casefold() == name.casefold()]
            if len(places) > 1:
                problem = f"there are {len(places)} columns {quoted(name)}"
                raise InputError(path, None, problem, "keep one, or give the others names of their own")
            if places:
                cell = cells[places[0]].strip()
                unit = split[places[0]][1]
                if cell == name and unit is not None and not _is_unit(unit):
                    unit = None  # what stands in brackets belongs to the name
                found.append(_Found(each, places[0], cell, unit))
                break
    return tuple(found)


def _text(
    path: Path, start: bytes, wanted: Sequence[Wanted]
) -> tuple[tuple[_Found, ...], Iterator[Mapping[str, Sequence[Any]]]]:
    """Return the columns of a text file and its blocks, each column of cells by its key."""
    separator, cells, encoding, skipped, first = _layout(path, start, wanted)
    if not first:
        layout = "write a header and below it one row a run"
        raise InputError(path, None, "there is no run below the header", layout)
    found = _find(path, cells, wanted)
    units = _units(found, first)
    found = tuple(_Found(one.wanted, one.index, one.header, units.get(one.index, one.unit)) for one in found)

    def blocks() -> Iterator[Mapping[str, Sequence[Any]]]:
        with path.open(encoding=encoding, errors="replace", newline="") as file:
            for _ in range(skipped):
                file.readline()
            rows = _rows(path, file, separator, len(cells), skipped)
            if units:
                next(rows)
            while block := list(islice(rows, BLOCK)):
                yield {
                    one.wanted.key: _clean([row[one.index] for row in block], separator != ",")
                    for one in found
                }

    return found, blocks()


def _rows(path: Path, file: IO[str], separator: str, width: int, skipped: int) -> Iterator[list[str]]:
    """Yield the rows below a header that are not empty, as wide as it; `skipped`, the lines above them."""
    remedy = "write as many as the header has; close every quotation mark"
    reader = csv.reader(file, delimiter=separator, strict=True)
    try:
        for row in reader:
            if len(row) < width:
                if not any(row):
                    continue
                row += [""] * (width - len(row))
            elif len(row) > width and any(cell.strip() for cell in row[width:]):
                place = f"line {skipped + reader.line_num}"
                raise InputError(path, place, f"{len(row)} cells, and the header has {width}", remedy)
            yield row
    except csv.Error:
        place = f"line {skipped + reader.line_num}"
        raise InputError(path, place, "this row cannot be split into cells", remedy) from None


def _clean(cells: Sequence[str], decimal_comma: bool) -> Sequence[str]:
    """Return cells without blanks around them, with points for decimal commas."""
    stripped = [cell.strip().replace("−", "-") for cell in cells]
    if not decimal_comma:
        return stripped
    return [cell.replace(",", ".") if _COMMA.fullmatch(cell) else cell for cell in stripped]


def _layout(
    path: Path, start: bytes, wanted: Sequence[Wanted]
) -> tuple[str, tuple[str, ...], str, int, tuple[str, ...]]:
    """Return separator, header, encoding, lines down to the first row, and the cells of that row."""
    encoding = "utf-8-sig"
    if start[:2] in (b"\xff\xfe", b"\xfe\xff"):
        encoding = "utf-16"
    else:
        try:
            start[: start.rfind(b"\n") + 1].decode(encoding)
        except UnicodeDecodeError:
            encoding = "cp1252"
    text = start.decode(encoding, errors="replace")
    if _BINARY.search(text):
        raise InputError(path, None, "this is not a text file", "save the table as CSV, XLSX or Parquet")
    lines = text.splitlines()
    at = next((i for i, line in enumerate(lines) if line.strip()), None)
    if at is None:
        raise InputError(path, None, "this file is empty", "write a header and below it one row a run")
    declared = _EXCEL_SEPARATOR.fullmatch(lines[at])
    if declared:
        at += 1
    top = lines[at] if at < len(lines) else ""
    known = {name for each in (RUN, *wanted) for name in each.names}

    def told(mark: str) -> tuple[int, int]:
        cells = next(csv.reader([top], delimiter=mark), [])
        return sum(split_header(cell.strip())[0] in known for cell in cells), len(cells)

    separator = declared[1] if declared else max(SEPARATORS, key=told)
    cells = tuple(cell.strip() for cell in next(csv.reader([top], delimiter=separator), []))
    below = (line for line in lines[at + 1 :] if line.strip())
    first = next(csv.reader(io.StringIO(next(below, "")), delimiter=separator), [])
    return separator, cells, encoding, at + 1, tuple(cell.strip() for cell in first)


def _units(found: Sequence[_Found], first: Sequence[str]) -> dict[int, str]:
    """Return the units in a row of units, by place; nothing where the first row is a run's."""
    numbers = [one for one in found if one.wanted.dimension is not None and one.index < len(first)]
    cells = {one.index: _unbracketed(first[one.index]) for one in numbers}
    written = {index: cell for index, cell in cells.items() if not is_empty(cell)}
    if not written or not all(_is_unit(cell) for cell in written.values()):
        return {}
    return written


def _unbracketed(cell: str) -> str:
    for opening, closing in ("[]", "()"):
        if cell.startswith(opening) and cell.endswith(closing):
            return cell[1:-1].strip()
    return cell


def _is_unit(cell: str) -> bool:
    if is_temperature_scale(cell) or cell in (PER_CENT, "1"):
        return cell != "1"
    kinds: tuple[Dimension, ...] = ("coefficient", "speed")
    for kind in kinds:
        try:
            scale(cell, kind)
        except InputError:
            continue
        return True
    return False


def _workbook(
    path: Path, wanted: Sequence[Wanted]
) -> tuple[tuple[_Found, ...], Iterator[Mapping[str, Sequence[Any]]]]:
    sheet = parse_workbook(path.read_bytes(), path)
    found = _find(path, sheet.header, wanted)
    units = _units(found, sheet.rows[0][1])
    found = tuple(_Found(one.wanted, one.index, one.header, units.get(one.index, one.unit)) for one in found)
    rows = [cells for _, cells in sheet.rows[bool(units) :]]
    columns = {
        one.wanted.key: [
            cells[one.index].replace("−", "-") if one.index < len(cells) else "" for cells in rows
        ]
        for one in found
    }
    return found, iter([columns])


def _schema(path: Path) -> list[str]:
    from pyarrow import parquet

    try:
        return list(parquet.read_schema(path).names)
    except Exception:  # noqa: BLE001  # pyarrow raises a handful of its own kinds for a damaged file
        problem = "this is not a readable Parquet file"
        raise InputError(path, None, problem, "give the results of a batch") from None


def _parquet(
    path: Path, wanted: Sequence[Wanted]
) -> tuple[tuple[_Found, ...], Iterator[Mapping[str, Sequence[Any]]]]:
    import pandas as pd

    cells = _schema(path)
    found = _find(path, cells, wanted)
    frame = pd.read_parquet(path, columns=[cells[one.index] for one in found])
    return found, iter([{one.wanted.key: frame[cells[one.index]].to_list() for one in found}])


def _gather(path: Path, found: Sequence[_Found], blocks: Iterator[Mapping[str, Sequence[Any]]]) -> Results:
    """Return the results, the numbers of all blocks joined and in SI units."""
    import pandas as pd

    numbers: dict[str, list[Array]] = {one.wanted.key: [] for one in found if one.wanted.dimension}
    text: dict[str, list[str]] = {one.wanted.key: [] for one in found if not one.wanted.dimension}
    factors = {one.wanted.key: _scale(path, one) for one in found if one.wanted.dimension}
    count = 0
    for block in blocks:
        for key, cells in block.items():
            if key in text:
                text[key] += ["" if cell is None else str(cell) for cell in cells]
                continue
            factor, offset = factors[key]
            values = pd.to_numeric(pd.Series(cells, dtype=object), errors="coerce").to_numpy(dtype=np.float64)
            numbers[key].append(np.where(np.isfinite(values), values, np.nan) * factor + offset)
        count += len(next(iter(block.values()), ()))
    if count == 0:
        raise InputError(path, None, "there is no run below the header", "write one row a run")
    names = tuple(text.pop("run", ())) or tuple(str(n) for n in range(1, count + 1))
    digest = hashlib.sha256()
    with path.open("rb") as file:
        while piece := file.read(1 << 20):
            digest.update(piece)
    shares = frozenset(one.wanted.key for one in found if one.wanted.sd and one.unit == PER_CENT)
    return Results(
        runs=tuple(plain(name, 120) for name in names),
        text={key: tuple(cells) for key, cells in text.items()},
        numbers={key: np.concatenate(parts) for key, parts in numbers.items()},
        shares=shares,
        headers={one.wanted.key: one.header for one in found},
        source=path,
        sha256=digest.hexdigest(),
    )


def _scale(path: Path, one: _Found) -> tuple[float, float]:
    """Return factor and offset of a column's numbers."""
    wanted = one.wanted
    assert wanted.dimension is not None
    if wanted.dimension == "number":
        if one.unit in (None, "1", "-"):
            return 1.0, 0.0
        if one.unit == PER_CENT:
            return 0.01, 0.0
        problem = f"{quoted(one.header)} has the unit {quoted(one.unit)}, and is a number without one"
        raise InputError(path, f"column {plain(one.header)}", problem, "take the unit out")
    if wanted.sd and one.unit == PER_CENT:
        return 0.01, 0.0
    try:
        return scale(one.unit or wanted.unit, wanted.dimension)
    except InputError as error:
        raise InputError(path, f"column {plain(one.header)}", error.problem, error.remedy) from None
