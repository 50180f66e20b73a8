"""Tables: the cells of a .csv or .xlsx file as text, row by row, before anyone asks what they mean.

A CSV file may be separated by commas, semicolons or tabs, written in UTF-8 (with or without a byte order mark),
UTF-16 or Windows-1252. Rows are counted as a spreadsheet shows them, the header being the first that is not
empty.
"""

import csv
import io
import re
from collections.abc import Collection, Iterator
from dataclasses import dataclass
from pathlib import Path

from finback.errors import InputError
from finback.wording import quoted

SEPARATORS = ",;\t"
_HEADER = re.compile(r"(.*?)\s*(?:\[([^\[\]]*)\]|\(([^()]*)\))", re.DOTALL)


@dataclass(frozen=True)
class Sheet:
    """A table of text: header, its row number, and the rows that are not empty with theirs.

    `decimal_comma`: a comma in a number is its decimal sign.
    """

    header: tuple[str, ...]
    header_row: int
    rows: tuple[tuple[int, tuple[str, ...]], ...]
    decimal_comma: bool


def split_header(cell: str) -> tuple[str, str | None]:
    """Return the name and the unit of a header cell such as "TA [degF]" or "TA (K)"; None without a unit."""
    match = _HEADER.fullmatch(cell)
    if match is None or not match[1]:
        return cell, None
    unit = match[2] if match[2] is not None else match[3]
    return match[1], unit.strip()


def decode(content: bytes, source: Path | None) -> str:
    """Return the text of a CSV file. Raises InputError for what is not text."""
    not_text = InputError(source, None, "this is not a text file", "save the table as CSV in UTF-8, or as XLSX")
    encodings = ("utf-16",) if content[:2] in (b"\xff\xfe", b"\xfe\xff") else ("utf-8-sig", "cp1252")
    for encoding in encodings:
        try:
            text = content.decode(encoding)
        except UnicodeDecodeError:
            continue
        if "\0" in text:
            break
        return text
    raise not_text


def read_csv(content: bytes, names: Collection[str], source: Path | None) -> Sheet:
    """Read the content of a CSV file.

    Arguments: content; names, columns that are expected, by which the separator is told; source, for errors.
    """
    text = decode(content, source)
    first = next((line for line in text.splitlines() if line.strip()), "")
    if not first:
        raise InputError(source, None, "this file is empty", "write a header with one column a sensor, then one row a run")
    separator = max(SEPARATORS, key=lambda mark: _known_columns(first, mark, names))
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    rows: list[tuple[int, tuple[str, ...]]] = []
    number = 0
    try:
        for number, row in enumerate(reader, start=1):
            cells = tuple(cell.strip() for cell in row)
            if any(cells):
                rows.append((number, cells))
    except csv.Error as error:
        problem = f"this row cannot be split into cells ({error})"
        raise InputError(source, f"row {number + 1}", problem, "close every quotation mark") from None
    (header_row, header), *body = rows
    return Sheet(header, header_row, tuple(body), separator != ",")


def _known_columns(line: str, separator: str, names: Collection[str]) -> tuple[int, int]:
    """Return how many columns of the header are known by name, and how many there are."""
    try:
        cells = next(csv.reader([line], delimiter=separator), [])
    except csv.Error:
        return 0, 0
    known = sum(cell.strip() in names or split_header(cell.strip())[0] in names for cell in cells)
    return known, len(cells)
