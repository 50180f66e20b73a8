"""Readings as a stream: the rows of a table of any length, one after the other, with what its columns mean.

The same tables as `readings` reads, without holding more than one row of them. What is wrong with one row is
said of that row, so that the others count.
"""

import codecs
import hashlib
import itertools
import re
import zipfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from finback.columns import Columns, assign
from finback.errors import InputError
from finback.rig import Rig
from finback.sensors import RUN_COLUMN
from finback.table import (
    RUNS,
    WORKBOOK_START,
    Row,
    Sheet,
    check_formulas,
    layout_of,
    split_rows,
    workbook_rows,
)

CHUNK = 1 << 20  # bytes read at a time
HEAD = 1 << 18  # characters in which the first line that is not blank must start

_BINARY = re.compile(r"[\x00-\x08\x0e-\x1f]")
_FORMULA = re.compile(rb"<f[ >]")


@dataclass(frozen=True)
class TableFile:
    """A table of readings that was looked through once and is whole.

    `columns`: what each column means; `decimal_comma`: a comma in a number is its decimal sign; `encoding` of
    the text, None for a workbook; `first`: the number of the first row that is a run; `sha256` of the file.
    """

    path: Path
    columns: Columns
    width: int
    decimal_comma: bool
    encoding: str | None
    first: int
    sha256: str

    def rows(self) -> Iterator[Row]:
        """Yield the rows of runs, empty ones left out. Raises InputError where the file cannot be read."""
        for row in _rows(
            self.path, self.encoding, {RUN_COLUMN, *(c.sensor.name for c in self.columns.sensors)}
        ):
            if row[0] >= self.first:
                yield row


def look_through(path: Path, rig: Rig) -> TableFile:
    """Look through the table of readings of a rig, .csv or .xlsx, and return what its columns mean.

    Raises InputError for the first thing that is wrong with the file or its columns, not with its runs.
    """
    with _readable(path):
        digest, encoding = _sniff(path)
        if encoding is None:
            _check_workbook(path)
        names = {RUN_COLUMN, *rig.sensors}
        start = list(itertools.islice(_rows(path, encoding, names), 3))
        if not start:
            raise InputError(path, None, "this file is empty", RUNS.layout)
        if len(start) == 1:
            raise InputError(path, None, f"there is no {RUNS.row} below the header", RUNS.layout)
        (_, header), *body = start
        comma = True if encoding is None else _layout_comma(path, encoding, names)
        columns, runs = assign(Sheet(header, tuple(body), comma), rig.sensors, path)
    return TableFile(path, columns, len(header), comma, encoding, runs[0][0], digest)


@contextmanager
def _readable(path: Path) -> Iterator[None]:
    """Turn what the system says of a file into a sentence."""
    try:
        if path.is_dir():
            raise InputError(path, None, "this is a folder", "name the file in it")
        yield
    except FileNotFoundError:
        raise InputError(path, None, "there is no such file", "check its name and folder") from None
    except (OSError, ValueError):
        problem, remedy = "this file cannot be read", "check its name, its permissions and the drive it is on"
        raise InputError(path, None, problem, remedy) from None


def _sniff(path: Path) -> tuple[str, str | None]:
    """Return the SHA-256 of a file and the encoding of its text, None where it is a workbook.

    Raises InputError for what is neither.
    """
    digest = hashlib.sha256()
    with path.open("rb") as file:
        chunk = file.read(CHUNK)
        workbook = chunk.startswith(WORKBOOK_START) or path.suffix.lower() == ".xlsx"
        wide = chunk[:2] in (b"\xff\xfe", b"\xfe\xff")
        encodings = ["utf-16"] if wide else ["utf-8-sig", "cp1252"]
        decoders = {name: codecs.getincrementaldecoder(name)() for name in encodings}
        while chunk:
            digest.update(chunk)
            following = file.read(CHUNK)
            for name in () if workbook else tuple(decoders):
                try:
                    text = decoders[name].decode(chunk, final=not following)
                except UnicodeDecodeError:
                    del decoders[name]
                    continue
                if _BINARY.search(text):
                    raise _no_text(path)
            chunk = following
    if workbook:
        return digest.hexdigest(), None
    if not decoders:
        raise _no_text(path)
    return digest.hexdigest(), next(name for name in encodings if name in decoders)


def _no_text(path: Path) -> InputError:
    return InputError(path, None, "this is not a text file", "save the table as CSV in UTF-8, or as XLSX")


def _rows(path: Path, encoding: str | None, names: set[str]) -> Iterator[Row]:
    """Yield the rows of a table that are not empty, the header first."""
    with _readable(path):
        if encoding is None:
            with path.open("rb") as file:
                yield from (row for row in workbook_rows(file, True, path) if any(row[1]))
            return
        with path.open(encoding=encoding, newline="") as text:
            yield from split_rows(text, layout_of(_first_line(path, encoding), names), path)


def _layout_comma(path: Path, encoding: str, names: set[str]) -> bool:
    return layout_of(_first_line(path, encoding), names).decimal_comma


def _first_line(path: Path, encoding: str) -> str:
    """Return the first line of a text that is not blank."""
    with path.open(encoding=encoding) as text:
        return next((line for line in text.read(HEAD).splitlines() if line.strip()), "")


def _check_workbook(path: Path) -> None:
    """Refuse a workbook that is none, or whose formulas were never computed."""
    try:
        with zipfile.ZipFile(path) as archive:
            sheets = [name for name in archive.namelist() if name.startswith("xl/worksheets/")]
            formulas = any(_holds_formula(archive, name) for name in sheets)
    except (zipfile.BadZipFile, NotImplementedError, RuntimeError):
        problem = "this is not a readable XLSX workbook"
        raise InputError(path, None, problem, "save the table as XLSX or CSV") from None
    if formulas:
        with path.open("rb") as typed, path.open("rb") as stored:
            check_formulas(workbook_rows(typed, False, path), workbook_rows(stored, True, path), path)


def _holds_formula(archive: zipfile.ZipFile, name: str) -> bool:
    if name.endswith("/"):
        return False
    with archive.open(name) as sheet:
        kept = b""
        while chunk := sheet.read(CHUNK):
            if _FORMULA.search(kept + chunk):
                return True
            kept = chunk[-2:]
    return False
