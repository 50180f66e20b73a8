"""A table read as a stream says what the same table says that is read as a whole."""

import tracemalloc
from pathlib import Path

import openpyxl
import pytest
from campaigns import RIG, SENSORS, rows, text

from finback import readings, readings_stream, rig
from finback.errors import InputError

DESCRIBED = rig.read_bytes(RIG.encode())
HEADER = ["run", *SENSORS, "note"]
BODY = [["a", "72", "60", "50", "41", "21", "4", "x, y"], ["b", "71", "", "50", "41", "21", "4", ""]]
COMMAS = [[cell.replace(".", ",") for cell in row] for row in BODY]


def lines(separator: str, *table: list[str]) -> str:
    return "".join(
        separator.join(f'"{cell}"' if "," in cell and separator == "," else cell for cell in row) + "\n"
        for row in table
    )


def units() -> list[str]:
    return ["", "degC", "degF", "K", "degC", "degC", "W", ""]


TABLES = {
    "commas": lines(",", HEADER, *BODY).encode(),
    "semicolons": lines(";", HEADER, *COMMAS).encode(),
    "tabs": lines("\t", HEADER, *COMMAS).encode(),
    "a declared separator": b"sep=;\r\n" + lines(";", HEADER, *COMMAS).replace("\n", "\r\n").encode(),
    "units": lines(",", HEADER, units(), *[[*row[:3], "320", *row[4:]] for row in BODY]).encode(),
    "blank lines": b"\n\n" + lines(",", HEADER).encode() + b"\n,,,\n" + lines(",", *BODY).encode(),
    "a mark": lines(",", HEADER, *BODY).encode("utf-8-sig"),
    "UTF-16": lines(",", HEADER, *BODY).encode("utf-16"),
    "Windows": lines(",", [*HEADER[:-1], "Prüfer"], *BODY).encode("cp1252"),
    "a line break in a cell": lines(",", HEADER).encode() + b'c,72,60,50,41,21,4,"two\nlines"\n',
    "no names": lines(",", HEADER[1:], *(row[1:] for row in BODY)).encode(),
}


@pytest.mark.parametrize("name", TABLES)
def test_a_stream_reads_what_the_whole_reads(tmp_path: Path, name: str) -> None:
    path = tmp_path / "readings.csv"
    path.write_bytes(TABLES[name])
    whole = readings.read(path, DESCRIBED)
    found = readings_stream.look_through(path, DESCRIBED)
    assert found.columns == whole.columns
    assert found.decimal_comma == whole.decimal_comma
    assert found.sha256 == whole.sha256
    assert list(found.rows()) == list(whole.rows.values())


def test_a_workbook_as_well(tmp_path: Path) -> None:
    path = tmp_path / "readings.xlsx"
    book = openpyxl.Workbook()
    for row in (HEADER, units(), *BODY):
        book.active.append(row)
    book.save(path)
    whole = readings.read(path, DESCRIBED)
    found = readings_stream.look_through(path, DESCRIBED)
    assert found.columns == whole.columns
    assert list(found.rows()) == list(whole.rows.values())


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"", "this file is empty"),
        (lines(",", HEADER).encode(), "there is no run below the header"),
        (b"\x00\x01\x02" * 9, "this is not a text file"),
        (lines(",", [*HEADER[:3], "T9", *HEADER[4:]], *BODY).encode(), "the rig has no sensor of this name"),
        (lines(",", HEADER, *BODY).encode() + b'c,"72\n', "this row cannot be split into cells"),
        (b"PK\x03\x04 and no more", "this is not a readable XLSX workbook"),
    ],
)
def test_a_wrong_file_is_a_sentence(tmp_path: Path, content: bytes, sentence: str) -> None:
    path = tmp_path / "readings.csv"
    path.write_bytes(content)
    with pytest.raises(InputError, match=sentence):
        list(readings_stream.look_through(path, DESCRIBED).rows())


def test_a_long_table_needs_no_more_memory_than_a_short_one(tmp_path: Path) -> None:
    def most(count: int) -> int:
        path = tmp_path / f"{count}.csv"
        header, *body = text(rows(10)).splitlines(keepends=True)
        path.write_text(header + "".join(body) * (count // 10), encoding="utf-8")
        tracemalloc.start()
        assert sum(1 for _ in readings_stream.look_through(path, DESCRIBED).rows()) == count
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        return peak

    chunk = readings_stream.CHUNK  # what is read at a time, as bytes and as text in two encodings
    assert most(60_000) < most(1000) + 8 * chunk
    assert (tmp_path / "60000.csv").stat().st_size > 2 * chunk
