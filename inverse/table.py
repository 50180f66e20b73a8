"""Tables: the cells of a .csv or .xlsx file as text, row by row, before anyone asks what they mean.

A CSV file may be separated by commas, semicolons or tabs, and written in UTF-8 (with or without a byte order
mark), UTF-16 or Windows-1252. Of a workbook the first sheet is taken. Rows are counted as a spreadsheet shows
them; the first that is not empty is the header.
"""

import csv
import datetime
import io
import re
import warnings
from collections.abc import Collection, Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import IO, NamedTuple

from finback.errors import InputError
from finback.wording import quoted

SEPARATORS = {",": "comma", ";": "semicolon", "\t": "tab"}
WORKBOOK_START = b"PK\x03\x04"
"""First bytes of a .xlsx file, which is a ZIP archive."""

_BINARY = re.compile(r"[\x00-\x08\x0e-\x1f]")
_EXCEL_SEPARATOR = re.compile(r"sep=([,;\t])\s*", re.IGNORECASE)

_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,4})?")

Row = tuple[int, tuple[str, ...]]
"""The number of a row and its cells."""


class Contents(NamedTuple):
    """What a table holds, for sentences: what one row is, and how the whole is to be written."""

    row: str
    layout: str


RUNS = Contents("run", "write a header with one column a sensor and below it one row a run")


@dataclass(frozen=True)
class Sheet:
    """A table of text: its header, and below it the rows that are not empty, each with its number.

    `decimal_comma`: a comma in a number is its decimal sign.
    """

    header: tuple[str, ...]
    rows: tuple[Row, ...]
    decimal_comma: bool


def split_header(cell: str) -> tuple[str, str | None]:
    """Return the name and the unit of a header cell such as "TA [degF]" or "TA (K)"; None without a unit."""
    for opening, closing in ("[]", "()"):
        name, bracket, unit = cell.removesuffix(closing).rpartition(opening)
        if cell.endswith(closing) and bracket and name.strip():
            return name.strip(), unit.strip()
    return cell, None


def to_number(cell: str, decimal_comma: bool) -> float | None:
    """Return the number in a cell, inf for one beyond all bounds, None where there is none.

    Arguments: cell; decimal_comma, whether a comma is the decimal sign.
    """
    text = cell.replace("−", "-")
    if decimal_comma:
        text = text.replace(",", ".")
    return float(text) if _NUMBER.fullmatch(text) else None


class Layout(NamedTuple):
    """How a CSV file is written: its separator, and whether its first row says that and nothing else.

    `decimal_comma`: a comma in a number is its decimal sign.
    """

    separator: str
    declared: bool

    @property
    def decimal_comma(self) -> bool:
        """Whether a comma is the decimal sign: where it does not part the cells."""
        return self.separator != ","


def layout_of(first: str, names: Collection[str]) -> Layout:
    """Return the layout of a CSV file by its first line that is not blank and the columns expected."""
    declared = _EXCEL_SEPARATOR.fullmatch(first.rstrip("\r\n"))
    if declared:
        return Layout(declared[1], True)
    return Layout(max(SEPARATORS, key=lambda mark: _known_columns(first, mark, names)), False)


def split_rows(lines: Iterable[str], layout: Layout, source: Path | None) -> Iterator[Row]:
    """Yield the rows of a CSV file that are not empty, its header among them.

    Arguments: lines, with their ends; layout; source, for errors. Raises InputError for a row that cannot be
    split into cells.
    """
    number, skipping = 0, layout.declared
    try:
        for number, cells in enumerate(csv.reader(lines, delimiter=layout.separator, strict=True), start=1):
            if any(cell.strip() for cell in cells):
                if not skipping:
                    yield number, tuple(cell.strip() for cell in cells)
                skipping = False
    except csv.Error as error:
        problem = "this row cannot be split into cells"
        remedy = "close every quotation mark, and write one inside a cell twice"
        if str(error).startswith("field larger"):
            problem, remedy = "this row has a cell of more than 131072 characters", "shorten it"
        raise InputError(source, f"row {number + 1}", problem, remedy) from None


def parse_text(
    content: bytes, names: Collection[str], source: Path | None, contents: Contents = RUNS
) -> Sheet:
    """Return the table in the content of a CSV file.

    Arguments: content; names, the columns that are expected, by which the separator is told; source and
    contents, for errors. Raises InputError for what is no text, is empty, or cannot be split into cells.
    """
    text = _decode(content, source)
    lines = (line for line in text.splitlines() if line.strip())
    layout = layout_of(next(lines, ""), names)
    rows = list(split_rows(io.StringIO(text, newline=""), layout, source))
    return _sheet(rows, layout.decimal_comma, source, contents)


def parse_workbook(content: bytes, source: Path | None, contents: Contents = RUNS) -> Sheet:
    """Return the table in the first sheet of a .xlsx file.

    Arguments: content; source and contents, for errors.
    Raises InputError for what is no such workbook, is empty, or holds a formula whose value was not stored.
    """
    rows = [row for row in workbook_rows(io.BytesIO(content), True, source) if any(row[1])]
    if not rows or any("" in cells for _, cells in rows):
        typed = workbook_rows(io.BytesIO(content), False, source)
        check_formulas(typed, workbook_rows(io.BytesIO(content), True, source), source)
    return _sheet(rows, True, source, contents)


def check_formulas(typed: Iterable[Row], stored: Iterable[Row], source: Path | None) -> None:
    """Refuse a workbook whose formulas were never computed: a program that wrote it stored no values.

    Arguments: typed and stored, its rows with what was typed and with the values; source, for errors.
    """
    first = None
    for (number, cells), (_, values) in zip(typed, stored, strict=False):
        for at, cell in enumerate(cells):
            if cell.startswith("="):
                if "".join(values[at : at + 1]):
                    return
                first = first or (f"row {number}, column {_letters(at)}", cell)
    if first:
        problem = f"the formula {quoted(first[1])} has no stored value"
        raise InputError(source, first[0], problem, "open the workbook in a spreadsheet and save it")


def _sheet(rows: list[Row], decimal_comma: bool, source: Path | None, contents: Contents) -> Sheet:
    """Return the sheet of these rows, once each is known to fit under the header."""
    if not rows:
        raise InputError(source, None, "this file is empty", contents.layout)
    (_, header), *body = rows
    if not body:
        raise InputError(source, None, f"there is no {contents.row} below the header", contents.layout)
    for number, cells in body:
        if any(cells[len(header) :]):
            problem = f"this row has {len(cells)} cells and the header {len(header)}"
            remedy = "write one cell a column; where the comma is the decimal sign, separate by semicolons"
            raise InputError(source, f"row {number}", problem, remedy)
    return Sheet(header, tuple(body), decimal_comma)


def _decode(content: bytes, source: Path | None) -> str:
    encodings = ("utf-16",) if content[:2] in (b"\xff\xfe", b"\xfe\xff") else ("utf-8-sig", "cp1252")
    for encoding in encodings:
        try:
            text = content.decode(encoding)
        except UnicodeDecodeError:
            continue
        if _BINARY.search(text):
            break
        return text
    raise InputError(source, None, "this is not a text file", "save the table as CSV in UTF-8, or as XLSX")


def _known_columns(line: str, separator: str, names: Collection[str]) -> tuple[int, int]:
    """Return how many columns of a header are known by name, and how many there are."""
    try:
        cells = [cell.strip() for cell in next(csv.reader([line], delimiter=separator), [])]
    except csv.Error:
        return 0, 0
    return sum(cell in names or split_header(cell)[0] in names for cell in cells), len(cells)


def workbook_rows(file: IO[bytes], values: bool, source: Path | None) -> Iterator[Row]:
    """Yield every row of a workbook's first sheet, empty ones too: the stored values, or what was typed.

    Arguments: file, open for reading; values, which of the two; source, for errors.
    """
    import openpyxl

    number, rows = 0, None
    while True:
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # of styles and extensions that say nothing of the readings
                if rows is None:
                    book = openpyxl.load_workbook(file, read_only=True, data_only=values)
                    sheet = book.worksheets[0]
                    # or a sheet that says it is 16384 columns wide is padded to that
                    sheet.reset_dimensions()
                    rows = sheet.iter_rows(values_only=True)
                row = next(rows, None)
        except Exception:  # noqa: BLE001  # openpyxl has no error of its own: a damaged workbook raises many kinds
            problem = "this is not a readable XLSX workbook"
            raise InputError(source, None, problem, "save the table as XLSX or CSV") from None
        if row is None:
            return
        number += 1
        yield number, _texts(row)


def _texts(row: Iterable[object]) -> tuple[str, ...]:
    return tuple(_text(value) for value in row)


def _text(value: object) -> str:
    """Return the content of a workbook's cell as text; whole numbers without a decimal point."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return str(value).upper()
    if isinstance(value, float):
        return str(int(value)) if value.is_integer() and abs(value) < 1e15 else repr(value)
    if isinstance(value, datetime.datetime | datetime.date | datetime.time):
        return value.isoformat()
    return str(value).strip()


def _letters(at: int) -> str:
    """Return the letters by which a spreadsheet names a column, counted from 0."""
    name, at = "", at + 1
    while at:
        at, rest = divmod(at - 1, 26)
        name = chr(ord("A") + rest) + name
    return name
