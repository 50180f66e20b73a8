"""The table of a fin's shape: how it may be written, what it becomes, what is refused of it.

The shaft is invented: 10 mm across, turned down to 6 mm half-way.
"""

import hashlib
import io
import math
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback import rig as rigs
from finback.errors import InputError
from finback.rig import Rig
from finback.shape_table import MOST_ROWS, ShapeFile, parse

RIG = """
[fin]
profile = "table"
file = "shape.csv"

[sensors]
T1 = { at = "5 mm" }
T2 = { at = "95 mm" }
"""
HEADER = "x [mm],area [mm^2],perimeter [mm]"
ROWS = ((0, 78.54, 31.416), (50, 78.54, 31.416), (50, 28.274, 18.85), (100, 28.274, 18.85))
SHAPE = "\n".join([HEADER, *(",".join(map(str, row)) for row in ROWS)]) + "\n"
BEFORE = "shape.csv"


@pytest.fixture(autouse=True)
def _in_a_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)  # so that a sentence names the file and not this machine's folders


def workbook(*rows: tuple) -> bytes:
    book = openpyxl.Workbook()
    for row in rows:
        book.active.append(row)
    content = io.BytesIO()
    book.save(content)
    return content.getvalue()


def read(content: str | bytes, name: str = "shape.csv") -> ShapeFile:
    return parse(content if isinstance(content, bytes) else content.encode(), Path(name))


def refusal(content: str | bytes, name: str = "shape.csv") -> str:
    with pytest.raises(InputError) as caught:
        read(content, name)
    return str(caught.value)


@pytest.mark.parametrize(
    "content",
    [
        SHAPE,
        "\ufeff" + SHAPE,
        SHAPE.replace("\n", "\r\n"),
        SHAPE.replace(",", ";"),
        SHAPE.replace(",", ";").replace(".", ","),
        SHAPE.replace(",", "\t"),
        "sep=;\n" + SHAPE.replace(",", ";"),
        SHAPE.replace("x [mm]", "X (mm)").replace("area [mm^2]", "Area [mm²]"),
        SHAPE.encode("utf-16"),
        "\n" + SHAPE.replace("\n", "\n\n"),
        "".join(f"{line},{'note' if line[0] == 'x' else 'turned'}\n" for line in SHAPE.splitlines()),
        "area [mm^2],x [mm],perimeter [mm]\n" + "".join(f"{a},{x},{p}\n" for x, a, p in ROWS),
        "x [cm],area [cm^2],perimeter [cm]\n" + "".join(f"{x / 10},{a / 100},{p / 10}\n" for x, a, p in ROWS),
        workbook(tuple(HEADER.split(",")), *ROWS),
    ],
)
def test_a_table_may_be_written_in_many_ways(content: str | bytes) -> None:
    table = read(content).table
    np.testing.assert_allclose(table.positions, [0, 0.05, 0.05, 0.1], rtol=1e-12)
    np.testing.assert_allclose(table.areas, [78.54e-6, 78.54e-6, 28.274e-6, 28.274e-6], rtol=1e-12)
    np.testing.assert_allclose(table.perimeters, [31.416e-3, 31.416e-3, 18.85e-3, 18.85e-3], rtol=1e-12)


def test_a_rig_takes_its_shape_from_the_file_beside_it(tmp_path: Path) -> None:
    folder = tmp_path / "bench"
    folder.mkdir()
    (folder / "rig.toml").write_text(RIG, encoding="utf-8")
    (folder / "shape.csv").write_text(SHAPE, encoding="utf-8")
    rig = rigs.read(folder / "rig.toml")
    assert rig.length == pytest.approx(0.1)
    assert rig.geometry == {}
    assert rig.has_tip_face
    assert rig.profile().side_area() == pytest.approx(math.pi * 0.05 * (0.010 + 0.006), rel=1e-4)
    assert rig.profile({}) is rig.profile()
    digest = hashlib.sha256(SHAPE.encode()).hexdigest()
    assert (rig.shape_file.source, rig.shape_file.sha256) == (folder / "shape.csv", digest)


def test_a_sensor_is_held_against_the_length_of_the_table() -> None:
    Path("shape.csv").write_text(SHAPE, encoding="utf-8")
    with pytest.raises(InputError) as caught:
        rigs.read_bytes(RIG.replace("95 mm", "110 mm").encode())
    assert str(caught.value) == (
        '[sensors] T2 at: "110 mm" is beyond the fin, whose length is "100 mm"; write the distance from the '
        "base, at most the length."
    )


LAYOUT = "write the header x [mm], area [mm^2], perimeter [mm] and below it one row a section"
TWICE = "write a position twice only between base and tip, where the shape jumps"


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        ("", f": this file is empty; {LAYOUT}."),
        (HEADER, f": there is no section below the header; {LAYOUT}."),
        (f"{HEADER}\n0,1,1\n", ": there is one section only; write two at least: base and tip."),
        (b"\x89PNG\r\n\x1a\n\x00\x00", ": this is not a text file; save the table as CSV in UTF-8, or as "
         "XLSX."),
        (SHAPE.replace(",", "|"), ': there is no column "x"; separate the columns, which are now '
         '"x [mm]|area [mm^2]|perimeter [mm]", by commas, semicolons or tabs.'),
        (SHAPE.replace("perimeter", "perimetre"),
         ': there is no column "perimeter"; rename the nearest column, "perimetre".'),
        (SHAPE.replace("x [mm]", "station"), ': there is no column "x"; the columns are "x", "area", '
         '"perimeter".'),
        (SHAPE.replace("area [mm^2]", "x [m]"), ': there are two columns "x"; keep one.'),
        (SHAPE.replace("x [mm]", "x"),
         ', column x: this column has no unit; write it in the header, such as "x [mm]".'),
        (SHAPE.replace("mm^2", "mm"), ', column area: the unit "mm" is not that of an area; write the '
         'unit in the header, such as "area [mm^2]".'),
        (SHAPE.replace("perimeter [mm]", "perimeter [mmm]"), ', column perimeter: the unit "mmm" is unknown; '
         'write the unit in the header, such as "perimeter [mm]".'),
        (SHAPE.replace("100,", "tip,"), ', row 5, column x: "tip" is no number; write a number.'),
        (SHAPE.replace("100,28.274", "100,"), ", row 5, column area: this cell is empty; write a number."),
        (SHAPE.replace("28.274,18.85\n", "1e999,18.85\n", 1),
         ', row 4, column area: "1e999" is too large; write a number.'),
        (SHAPE.replace("28.274,18.85\n", "-3,18.85\n", 1), ', row 4, column area: "-3" is not above zero; '
         "write a positive value, a very small one for a sharp tip."),
        (SHAPE.replace("18.85\n", "0\n"), ', row 4, column perimeter: "0" is not above zero; write a '
         "positive value, a very small one for a sharp tip."),
        (SHAPE.replace("\n0,", "\n2,"),
         ", row 2, column x: the first position is 2 mm; begin with 0, the base."),
        (SHAPE.replace("\n100,", "\n40,"),
         ", row 5, column x: 40 mm comes after 50 mm in row 4; write the rows from base to tip."),
        (SHAPE.replace("\n50,", "\n0,", 1), f", row 3, column x: 0 mm stands twice at the base; {TWICE}."),
        (SHAPE.replace("\n100,", "\n50,"), f", row 5, column x: 50 mm stands twice at the tip; {TWICE}."),
        (SHAPE.replace("\n100,", "\n50,28.274,18.85\n100,"), ", row 5, column x: 50 mm stands more "
         "than twice; write it twice for a jump, no more."),
        (SHAPE.replace("\n50,", "\n50,7,"), ", row 3: this row has 4 cells and the header 3; write one cell "
         "a column; where the comma is the decimal sign, separate by semicolons."),
        (HEADER + "\n" + "".join(f"{x},1,1\n" for x in range(MOST_ROWS + 1)),
         f": there are {MOST_ROWS + 1} rows; at most {MOST_ROWS} are read."),
        (f"{HEADER}\n0,1,1\n5,1e-320,1\n", ', row 3, column area: "1e-320" is not above zero; write a '
         "positive value, a very small one for a sharp tip."),
    ],
)  # fmt: skip
def test_a_wrong_table_is_refused_in_a_sentence(content: str | bytes, sentence: str) -> None:
    assert refusal(content) == BEFORE + sentence


def test_a_workbook_that_is_none_is_refused_in_a_sentence() -> None:
    assert refusal(SHAPE, "shape.xlsx") == (
        "shape.xlsx: this is not a readable XLSX workbook; save the table as XLSX or CSV."
    )


@pytest.mark.parametrize(
    ("file", "sentence"),
    [
        ("shape.csv", "shape.csv: there is no such file; check its name and folder."),
        ("", "[fin] file: this is no name of a file; write one line of 1 to 200 printable characters in "
         "quotes."),
        ("a\nb", "[fin] file: this is no name of a file; write one line of 1 to 200 printable characters in "
         "quotes."),
        (".", "/: this is a folder; name the file in it."),
    ],
)  # fmt: skip
def test_a_file_that_cannot_be_read_is_refused_in_a_sentence(file: str, sentence: str) -> None:
    with pytest.raises(InputError) as caught:
        Rig.from_dict({"fin": {"profile": "table", "file": file}, "sensors": {"T1": {"at": "5 mm"}}})
    assert str(caught.value).lstrip(".") == sentence.lstrip("/")


@pytest.mark.parametrize(
    ("fin", "sentence"),
    [
        ({"profile": "table"}, '[fin]: a table needs the key "file"; add a line such as file = "shape.csv".'),
        ({"profile": "table", "file": "shape.csv", "length": "90 mm"},
         "[fin] length: a table has no length; it is described by file."),
        ({"profile": "pin", "file": "shape.csv", "length": "90 mm", "diameter": "8 mm"},
         "[fin] file: a pin has no file; it is described by length, diameter."),
        ({"profile": "table", "file": "shape.csv", "surface": "slant"},
         "[fin] surface: the perimeter of a table is taken as it stands; leave surface out."),
        ({"profile": "table", "file": "shape.csv", "tip": "infinite"}, "[fin] tip: a table cannot go on for "
         'ever as it ends; write "adiabatic", "convective" or "fixed", or leave tip out.'),
    ],
)  # fmt: skip
def test_what_does_not_go_with_a_table_is_refused_in_a_sentence(fin: dict, sentence: str) -> None:
    Path("shape.csv").write_text(SHAPE, encoding="utf-8")
    with pytest.raises(InputError) as caught:
        Rig.from_dict({"fin": fin, "sensors": {"T1": {"at": "5 mm"}}})
    assert str(caught.value) == sentence


def read_or_complain(content: bytes) -> ShapeFile | str:
    try:
        return read(content)
    except InputError as error:
        return str(error)


@given(start=st.integers(0, len(SHAPE)), length=st.integers(0, 12), text=st.text(max_size=12))
def test_a_table_with_a_slip_of_the_pen_is_read_or_refused(start: int, length: int, text: str) -> None:
    content = (SHAPE[:start] + text + SHAPE[start + length :]).encode("utf-8", "replace")
    found = read_or_complain(content)
    if isinstance(found, str):
        assert found.isprintable()
    else:
        table = found.table
        assert np.all(np.diff(table.positions) >= 0)
        assert np.all(table.areas > 0)
