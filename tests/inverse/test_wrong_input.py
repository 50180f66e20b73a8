"""Wrong input: each kind gives a whole sentence with file, place, what is wrong, what would be right."""

import io
import math
import re
import tomllib
from pathlib import Path

import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from finback import readings as tables
from finback import rig as rigs
from finback.checks import check_run
from finback.errors import InputError
from finback.readings import Readings
from finback.rig import Rig

RIG = """title = "An invented pin"

[fin]
profile = "pin"
length = "120 mm"
diameter = "8 mm"

[material]
conductivity = "167 W/(m K) +/- 5 %"

[joint]
expected = "5e-5 m^2 K/W"

[air]
expected_h = "45 W/(m^2 K)"

[sensors.defaults]
noise = "0.2 K"

[sensors]
T1 = { at = "5 mm" }
T2 = { at = "60 mm" }
TP = { on = "plate" }
TA = { on = "air" }
Q = { on = "heat", noise = "3 %" }
"""
TABLE = "run,T1,T2,TP,TA,Q\nwarm,70,60,80,21,5\nhot,90,75,99,21,8\n"

LENGTH = 'write a length with its unit, such as "8 mm"'
TABLES = 'write tables such as [fin] and lines such as length = "120 mm" below them'
NAME = "write 1 to 64 printable characters without blanks around them"
DIFFERENCE = 'write a temperature difference, such as "0.2 K"'
COLUMN = "rename the column, add the sensor, or take the column out"
ONE_ROW = "write a header with one column a sensor and below it one row a run"


def fin(key: str, value: str) -> tuple[str, str]:
    return "[material]", f"{key} = {value}\n[material]"


def material(key: str, value: str) -> tuple[str, str]:
    return "[joint]", f"{key} = {value}\n[joint]"


def air(key: str, value: str) -> tuple[str, str]:
    return "[sensors.defaults]", f"{key} = {value}\n[sensors.defaults]"


def plate(key: str, value: str) -> tuple[str, str]:
    return "[joint]", f"[plate]\n{key} = {value}\n[joint]"


def compared(key: str, value: str) -> tuple[str, str]:
    return "[joint]", f"[candidates]\n{key} = {value}\n[joint]"


WRONG_RIGS = [
    # keys and tables
    (("length =", "lenght ="), '[fin]: the key "lenght" is unknown; the nearest known key is "length".'),
    (("noise =", "niose ="), '[sensors.defaults]: the key "niose" is unknown; the nearest known key is '
     '"noise".'),
    (('{ at = "5 mm"', '{ att = "5 mm"'), '[sensors] T1: the key "att" is unknown; the nearest known key is '
     '"at".'),
    (("T1 =", "T.1 ="), '[sensors] T: the key "1" is unknown; known are at, on, noise, calibration, '
     'position.'),
    (("[material]", "[materiel]"), "[materiel]: this table is unknown; the nearest known one is [material]."),
    (("title", "titel"), ': the key "titel" is unknown; the nearest known key is "title".'),
    (('profile = "pin"\n', ""), '[fin]: the key "profile" is missing; add a line such as profile = "pin".'),
    (('length = "120 mm"\n', ""), '[fin]: a pin needs the key "length"; add a line such as length = "120 '
     'mm".'),
    (('diameter = "8 mm"\n', ""),
     '[fin]: a pin needs the key "diameter"; add a line such as diameter = "8 mm".'),
    (('"pin"', '"rectangular"'),
     "[fin] diameter: a rectangular fin has no diameter; it is described by length, width, thickness."),
    (("[joint]", "[[joint]]"), "[joint]: this is no table; write its name in brackets and its keys below."),
    # words
    (('"pin"', '"pinn"'), '[fin] profile: "pinn" is no profile; the nearest known one is "pin".'),
    (('"pin"', '"concave parabolic"'), '[fin] profile: "concave parabolic" is no profile; the nearest known '
     'one is "concave-parabolic".'),
    (('"pin"', "7"), '[fin] profile: this is no profile; write one of "pin", "rectangular", "trapezoidal", '
     '"triangular", "concave-parabolic", "convex-parabolic", "cone", "concave-pin", "convex-pin", "annular", '
     '"hyperbolic-annular", "table".'),
    (fin("tip", '"convectiv"'), '[fin] tip: "convectiv" is no tip; the nearest known one is "convective".'),
    (('on = "plate"', 'on = "wall"'),
     '[sensors] TP on: "wall" is no place of a sensor; write one of "plate", "air", "heat", "heater".'),
    # numbers
    (('"120 mm"', "120"), f"[fin] length: the number 120 has no unit; {LENGTH}."),
    (('"120 mm"', '"120"'), f'[fin] length: "120" has no unit; {LENGTH}.'),
    (('"120 mm"', '"120 kg"'), f'[fin] length: the unit "kg" is not that of a length; {LENGTH}.'),
    (('"120 mm"', '"120 mmm"'), f'[fin] length: the unit "mmm" is unknown; {LENGTH}.'),
    (('"120 mm"', '"long"'), f'[fin] length: "long" does not begin with a number; {LENGTH}.'),
    (('"120 mm"', '"nan mm"'), f'[fin] length: "nan mm" does not begin with a number; {LENGTH}.'),
    (('"120 mm"', '["120 mm"]'), f"[fin] length: this is not a number with a unit; {LENGTH}."),
    (('"120 mm"', "2026-03-01"), f"[fin] length: this is not a number with a unit; {LENGTH}."),
    (('"120 mm"', '"-120 mm"'), '[fin] length: "-120 mm" is not above zero; write a positive value.'),
    (('"8 mm"', '"0 mm"'), '[fin] diameter: "0 mm" is not above zero; write a positive value.'),
    (('"8 mm"', '"8 mm +/- 9 mm"'), '[fin] diameter: the uncertainty in "8 mm +/- 9 mm" is as large as the '
     "value; write a standard uncertainty smaller than the value."),
    (('"8 mm"', '"8 mm +/- -1 mm"'),
     '[fin] diameter: "8 mm +/- -1 mm" has a negative uncertainty; write a positive one.'),
    (("167 W/(m K)", "167 W/(m^2 K)"), '[material] conductivity: the unit "W/(m^2 K)" is not that of a '
     'conductivity; write a conductivity with its unit, such as "167 W/(m K)".'),
    (fin("tip", '"fixed"\ntip_temperature = "-300 degC"'), '[fin] tip_temperature: "-300 degC" is below '
     'absolute zero; write a temperature in degC, degF or K, such as "21.3 degC".'),
    # what belongs together
    (fin("tip_temperature", '"15 degC"'), '[fin] tip_temperature: only a tip = "fixed" has a temperature of '
     'its '
     'own; leave it out, or write tip = "fixed".'),
    (fin("edges", '"guarded"'), "[fin] edges: a pin has no edges; leave edges out."),
    (('TP = { on = "plate" }\n', ""), "[joint]: no sensor reads the plate, so the readings cannot tell of a "
     'joint; leave it out, or add a sensor such as TP = { on = "plate" }.'),
    # surfaces
    (material("emissivity", "1.3"),
     '[material] emissivity: "1.3" is no emissivity; write one from 0 to 1, such as "0.08 +/- 0.03".'),
    (material("emissivity", '"0.9 W"'), '[material] emissivity: "0.9 W" has a unit, and should have none; '
     'write '
     'a number, such as 0.25 or "0.25 +/- 0.05".'),
    (material("emissivity", "true"),
     '[material] emissivity: this is not a number; write a number, such as 0.25 or "0.25 +/- 0.05".'),
    (material("emissivity", '"0.9 +/- -0.1"'),
     '[material] emissivity: "0.9 +/- -0.1" has a negative uncertainty; write a positive one.'),
    (material("emissivity", '"black paint"'), '[material] emissivity: "black paint" is no surface that the '
     'handbook knows; the nearest are "paint, black", "paint, white", "aluminium, black anodised, dull"; or '
     'write a number, such as "0.08 +/- 0.03".'),
    (air("surroundings_temperature", '"18 degC"'), "[air] surroundings_temperature: a temperature of the "
     "surroundings matters only to a fin that radiates; leave it out, or write emissivity = "
     '"0.08 +/- 0.03" in [material].'),
    (material("temperature_coefficient", '"4e-4"'), '[material] temperature_coefficient: "4e-4" has no unit; '
     'write a relative change a kelvin with its unit, such as "-4e-4 1/K".'),
    (material("temperature_coefficient", '"4e-4 1/K +/- 1e-4 1/K"'), "[material] temperature_coefficient: "
     "the "
     'uncertainty in "4e-4 1/K +/- 1e-4 1/K" is not used; leave it out.'),
    (('conductivity = "167 W/(m K) +/- 5 %"', 'temperature_coefficient = "4e-4 1/K"'),
     "[material] temperature_coefficient: there is no stated conductivity that it could change; state "
     "conductivity, or leave it out: a material's name brings its own."),
    (material("reference_temperature", '"20 degC"'), "[material] reference_temperature: only a "
     "temperature_coefficient has a reference temperature; leave it out, or write temperature_coefficient = "
     '"-4e-4 1/K".'),
    # the plate
    (plate("fins", "0"),
     "[plate] fins: this is no number of fins; write a whole number from 1 to 100000, such as 24."),
    (plate("fins", '"24"'),
     "[plate] fins: this is no number of fins; write a whole number from 1 to 100000, such as 24."),
    (plate("bare_area", '"110 mm"'), '[plate] bare_area: the unit "mm" is not that of an area; write an area '
     'with its unit, such as "50 mm^2".'),
    (plate("losses", '"3 K"'), '[plate] losses: the unit "K" is not that of a heat flow; write a heat flow '
     'with '
     'its unit, such as "12 W".'),
    (plate("losses", '"-3 W"'), '[plate] losses: "-3 W" is negative; write zero or a positive value.'),
    # candidates
    (compared("surface_laws", '"uniform"'), "[candidates] surface_laws: this is no list of surface laws; "
     "write a "
     'list in brackets, such as ["uniform", "free-convection"].'),
    (compared("surface_laws", '["unifrom"]'), '[candidates] surface_laws: "unifrom" is no surface law; the '
     'nearest known one is "uniform".'),
    (compared("surface_laws", '["varying", "varying"]'),
     '[candidates] surface_laws: "varying" is given twice; name each once.'),
    (compared("tips", "[]"), "[candidates] tips: this is no list of tips; write a list in brackets, such as "
     '["adiabatic", "convective"].'),
    (compared("exponent", "2.5"), '[candidates] exponent: "2.5" is no exponent of free convection; write one '
     'above 0 and below 2, such as 0.25 or "0.25 +/- 0.05".'),
    (compared("exponent", '0.25\nsurface_laws = ["uniform"]'), "[candidates] exponent: only the law of free "
     'convection has an exponent; leave it out, or add "free-convection" to surface_laws.'),
    (compared("laws", '["uniform"]'), '[candidates]: the key "laws" is unknown; known are surface_laws, '
     'tips, '
     "exponent, noise."),
    (compared("noise", '"heavy-tailed"'), "[candidates] noise: this is no list of noises; write a list in "
     'brackets, such as ["normal", "heavy-tailed"].'),
    (compared("noise", "[]"), "[candidates] noise: this is no list of noises; write a list in brackets, such "
     'as ["normal", "heavy-tailed"].'),
    (compared("noise", '["normal", "heavy"]'), '[candidates] noise: "heavy" is no noise; write one of '
     '"normal", "heavy-tailed".'),
    (compared("noise", '["normal", "normal"]'), '[candidates] noise: "normal" is given twice; name each '
     'once.'),
    # sensors
    (('"5 mm"', '"130 mm"'), '[sensors] T1 at: "130 mm" is beyond the fin, whose length is "120 mm"; write '
     'the '
     "distance from the base, at most the length."),
    (('"5 mm"', '"-5 mm"'),
     '[sensors] T1 at: "-5 mm" is negative; write the distance from the base towards the tip.'),
    (('{ at = "5 mm" }', '"5 mm"'), '[sensors] T1: this is no sensor; write { at = "5 mm" } or { on = "air" '
     '}.'),
    (('{ at = "5 mm" }', "{ }"), '[sensors] T1: it is not said what this sensor reads; write at = "5 mm" '
     'for a '
     'sensor in the fin, or on = "plate", "air", "heat" or "heater".'),
    (('{ at = "5 mm" }', '{ at = "5 mm", on = "air" }'),
     '[sensors] T1: this sensor is both in the fin ("at") and on "air"; leave one of the two out.'),
    (('{ on = "air" }', '{ on = "air", position = "1 mm" }'),
     "[sensors] TA position: only a sensor in the fin has a position; leave position out."),
    (('"5 mm" }', '"5 mm +/- 1 mm", position = "1 mm" }'), "[sensors] T1 position: the uncertainty of the "
     'position stands both here and in "at"; leave one of the two out.'),
    (('"5 mm" }', '"5 mm", noise = "0 K" }'), "[sensors] T1 noise: a noise of zero means exactly known, "
     "which "
     "only plate and air can be; write how much the sensor scatters, or leave noise out."),
    (('"3 %"', '"0 %"'), "[sensors] Q noise: a noise of zero means exactly known, which only plate and air "
     "can "
     "be; write how much the sensor scatters, or leave noise out."),
    (('"5 mm" }', '"5 mm", noise = "-1 K" }'),
     '[sensors] T1 noise: "-1 K" is negative; write a standard uncertainty of zero or more.'),
    (('"5 mm" }', '"5 mm", noise = "1 K +/- 1 K" }'), '[sensors] T1 noise: "1 K +/- 1 K" states the '
     'uncertainty '
     'of an uncertainty; leave out the part after "+/-".'),
    (('"5 mm" }', '"5 mm", noise = "3 %" }'),
     f'[sensors] T1 noise: "3 %" is a share of the reading, which means nothing for a temperature; '
     f'{DIFFERENCE}.'),
    (('"0.2 K"', '"2 %"'), '[sensors.defaults] noise: "2 %" is a share of the reading, which means nothing '
     'for a '
     f"temperature; {DIFFERENCE}."),
    (('"5 mm" }', '"5 mm", noise = "1 W" }'), '[sensors] T1 noise: the unit "W" is not that of a temperature '
     'difference; write a temperature difference with its unit, such as "0.2 K".'),
    (('"3 %"', '"0.2 K"'), '[sensors] Q noise: the unit "K" is not that of a heat flow; write a heat flow '
     'with '
     'its unit, such as "12 W".'),
    (('"5 mm" }', '"5 mm", calibration = "K class 4" }'), '[sensors] T1 calibration: "K class 4" is no '
     'thermocouple class that is known; the nearest known one is "K class 1".'),
    (('"0.2 K"', '"K class 1"'), '[sensors.defaults] noise: "K class 1" says nothing of how much readings '
     'scatter; write it as calibration, and noise in kelvin, such as "0.2 K".'),
    (('"3 %"', '"3 %", calibration = "K class 1"'), '[sensors] Q calibration: "K class 1" is for '
     'thermocouples, and this sensor reads heat; write a heat flow or a share of the reading, such as '
     '"0.2 W" or "2 %".'),
    (("T1 =", "run ="), '[sensors]: "run" is the column that names the runs, and no name for a sensor; give '
     'the '
     "sensor another name."),
    (("T1 =", '"" ='), f'[sensors]: "" is no name for a sensor; {NAME}.'),
    (("T1 =", '" T1" ='), f'[sensors]: " T1" is no name for a sensor; {NAME}.'),
    (("T1 =", '"T\\u001b[31m1" ='), f'[sensors]: "T?[31m1" is no name for a sensor; {NAME}.'),
    (("T1 =", f'"{"x" * 65}" ='), f'[sensors]: "{"x" * 39}…" is no name for a sensor; {NAME}.'),
    (("T1 = { at", "T1 = { on"),
     '[sensors] T1 on: "5 mm" is no place of a sensor; write one of "plate", "air", "heat", "heater".'),
    (('"An invented pin"', "7"), "title: this is no title; write one line of 1 to 200 printable characters "
     "in "
     "quotes."),
    (('"An invented pin"', '"a\\nb"'), "title: this is no title; write one line of 1 to 200 printable "
     "characters "
     "in quotes."),
]  # fmt: skip


@pytest.fixture(autouse=True)
def _in_a_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)  # so that a sentence names the file and not this machine's folders


def refusal(call, *arguments) -> str:
    with pytest.raises(InputError) as caught:
        call(*arguments)
    return str(caught.value)


def read_run(
    content: str | bytes, run: str | None, name: str = "readings.csv", rig_text: str = RIG
) -> Readings:
    path = Path(name)
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    rig = rigs.read_bytes(rig_text.encode(), Path("rig.toml"))
    readings = tables.read(path, rig).pick(run)
    check_run(rig, readings)
    return readings


def workbook(*rows) -> bytes:
    book = openpyxl.Workbook()
    for row in rows:
        book.active.append(row)
    content = io.BytesIO()
    book.save(content)
    return content.getvalue()


def test_the_rig_and_the_table_are_right_before_they_are_spoilt():
    assert read_run(TABLE, "warm").values["Q"] == 5


@pytest.mark.parametrize(("change", "sentence"), WRONG_RIGS, ids=[sentence for _, sentence in WRONG_RIGS])
def test_a_wrong_rig_is_refused_in_a_sentence(change, sentence):
    assert change[0] in RIG
    Path("rig.toml").write_text(RIG.replace(*change, 1), encoding="utf-8")
    assert refusal(rigs.read, "rig.toml") == ("rig.toml" if sentence[0] == ":" else "rig.toml, ") + sentence


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"", "rig.toml: the table [fin] is missing; add it with profile and the sizes that the profile "
         "needs."),
        (RIG.partition("[sensors.defaults]")[0].encode(), "rig.toml: the table [sensors] is missing; add it "
         "with a "
         'line for each sensor, such as T1 = { at = "5 mm" }.'),
        ((RIG.partition("T1 =")[0] + 'TP = { on = "plate" }').encode(), "rig.toml, [sensors]: there is no "
         "sensor in "
         'the fin; add a line for each, such as T1 = { at = "5 mm" }.'),
        (b'title = "a"\nlength 5\n', "rig.toml, line 2, column 8: this is not TOML (Expected '=' after a "
         "key in a "
         f"key/value pair); {TABLES}."),
        (b"[fin\nlength = 5\n", "rig.toml, line 1, column 5: this is not TOML (Expected ']' at the end of a "
         "table "
         f"declaration); {TABLES}."),
        (b"[fin]\n[fin]\n", "rig.toml, line 2, column 5: a key or table is given twice; keep one of the "
         "two."),
        (b"a = 1\na = 2\nb = 3\n", "rig.toml, line 2, column 6: a key or table is given twice; keep one of "
         "the two."),
        (b"x = " + b"[" * 5000, f"rig.toml: brackets are nested too deeply; {TABLES}."),
        (b"x = " + b"{a=" * 5000, f"rig.toml: brackets are nested too deeply; {TABLES}."),
        (b"\x00\x01\xff\xfe", "rig.toml: this is not text in UTF-8; save the rig as UTF-8 text."),
        ('title = "W\u00e4rme"'.encode("latin-1"),
         "rig.toml: this is not text in UTF-8; save the rig as UTF-8 text."),
        (b"PK\x03\x04", "rig.toml, line 1, column 3: this is not TOML (Expected '=' after a key in a "
         "key/value "
         f"pair); {TABLES}."),
        (b"#" * 1_000_001, "rig.toml: this file has 1000001 bytes; at most 1000000 are read."),
    ],
)  # fmt: skip
def test_a_file_that_is_no_rig_is_refused_in_a_sentence(content, sentence):
    Path("rig.toml").write_bytes(content)
    assert refusal(rigs.read, "rig.toml") == sentence


@pytest.mark.parametrize(
    ("path", "sentence"),
    [
        ("missing", "missing: there is no such file; check its name and folder."),
        ("folder", "folder: this is a folder; name the file in it."),
        ("rig.toml/below", "rig.toml/below: this file cannot be read; check its name and its permissions."),
        ("a\0b", "a\0b: this file cannot be read; check its name and its permissions."),
        ("x" * 5000, f"{'x' * 5000}: this file cannot be read; check its name and its permissions."),
    ],
)
def test_what_cannot_be_opened_is_refused_in_a_sentence(path, sentence):
    Path("folder").mkdir()
    Path("rig.toml").write_text(RIG, encoding="utf-8")
    assert refusal(rigs.read, path) == sentence
    assert refusal(tables.read, path, rigs.read("rig.toml")) == sentence


def test_a_file_one_may_not_read_is_refused_in_a_sentence(monkeypatch):
    def deny(_):
        raise PermissionError(13, "Permission denied")

    Path("rig.toml").write_text(RIG, encoding="utf-8")
    monkeypatch.setattr(Path, "read_bytes", deny)  # as root every file can be read
    sentence = "rig.toml: this file cannot be read; check its name and its permissions."
    assert refusal(rigs.read, "rig.toml") == sentence


WRONG_TABLES = [
    # files
    ("", ": this file is empty; " + ONE_ROW + "."),
    ("\n \n", ": this file is empty; " + ONE_ROW + "."),
    ("run,T1,T2,TP,TA,Q\n", ": there is no run below the header; " + ONE_ROW + "."),
    ("run,T1,T2,TP,TA,Q\n,degC,degC,degC,degC,W\n", ": there is no run below the units; write one row a "
     "run."),
    (b"\x89PNG\r\n\x1a\n\x00\x00", ": this is not a text file; save the table as CSV in UTF-8, or as XLSX."),
    (b"run,T1\n\x81\x8d,5\n", ": this is not a text file; save the table as CSV in UTF-8, or as XLSX."),
    (b"PK\x03\x04junk", ": this is not a readable XLSX workbook; save the table as XLSX or CSV."),
    (TABLE.replace("warm", '"warm'), ", row 2: this row cannot be split into cells; close every quotation "
     "mark, and "
     "write one inside a cell twice."),
    (TABLE.replace("70", "9" * 140_000), ", row 2: this row has a cell of more than 131072 characters; "
     "shorten it."),
    (TABLE.replace("70", "70,5"), ", row 2: this row has 7 cells and the header 6; write one cell a column; "
     "where "
     "the comma is the decimal sign, separate by semicolons."),
    (TABLE.replace(",", "|"), ': the sensor "T1" of the rig has no column; separate the columns, which are '
     'now '
     '"run|T1|T2|TP|TA|Q", by commas, semicolons or tabs.'),
    # columns
    (TABLE.replace("T2", "speed"),
     ': the sensor "T2" of the rig has no column; add it, with empty cells where it was not measured.'),
    (TABLE.replace("T2", "T2b"), ': the sensor "T2" of the rig has no column; rename the nearest column, '
     '"T2b", '
     "or add it, with empty cells where it was not measured."),
    (TABLE.replace("T2", "t2"), f', column t2: the rig has no sensor of this name; the nearest is "T2": '
     f'{COLUMN}.'),
    (TABLE.replace("T2", "T 2 [K]"),
     f', column T 2 [K]: the rig has no sensor of this name; the nearest is "T2": {COLUMN}.'),
    (TABLE.replace("T2", "T7"), f', column T7: the rig has no sensor of this name; the nearest is "T1": '
     f'{COLUMN}.'),
    (TABLE.replace("Q\n", "Q,wall [degF]\n", 1),
     f', column wall [degF]: the rig has no sensor of this name; the nearest is "TA": {COLUMN}.'),
    (TABLE.replace("T2", "T1"), ': there are two columns "T1"; keep one, or give the other a name of its '
     'own.'),
    (TABLE.replace("T2", "T2 [mm]"), ', column T2: the unit "mm" is not that of a temperature; write the '
     'column\'s '
     'unit in its header, such as "T2 [degC]".'),
    (TABLE.replace("Q", "Q [degC]", 1), ', column Q: the unit "degC" is not that of a heat flow; write the '
     'column\'s '
     'unit in its header, such as "Q [W]".'),
    (TABLE.replace("Q", "Q [wat]", 1), ', column Q: the unit "wat" is unknown; write the column\'s unit in '
     'its '
     'header, such as "Q [W]".'),
    (TABLE.replace("T2", "T2 [K]").replace("warm", ",degC,degC,degC,degC,W\nwarm"),
     ', row 2, column T2 [K]: the unit "degC" is not the one in the header; write the unit once.'),
    # runs
    (TABLE.replace("hot", "warm"),
     ', row 3, column run: the run "warm" stands in row 2 already; give each run a name of its own.'),
    (TABLE.replace("hot", ""), ", row 3, column run: this run has no proper name; write a name of 1 to 120 "
     "printable "
     "characters."),
    # cells
    (TABLE.replace("60", "about 60"),
     ', row 2, column T2: "about 60" is no number; write a number or leave it empty.'),
    (TABLE.replace("60", "60 degC"), ', row 2, column T2: "60 degC" is no number; write a number or leave '
     'it empty.'),
    (TABLE.replace("60", "1_000"), ', row 2, column T2: "1_000" is no number; write a number or leave it '
     'empty.'),
    (TABLE.replace("60", "inf"), ', row 2, column T2: "inf" is no number; write a number or leave it empty.'),
    (TABLE.replace("60", "1e999"), ', row 2, column T2: "1e999" is too large; write a number or leave it '
     'empty.'),
    (TABLE.replace("60", "[" * 5000),
     f', row 2, column T2: "{"[" * 39}…" is no number; write a number or leave it empty.'),
    (TABLE.replace("60", "\u200b60"), ', row 2, column T2: "?60" is no number; write a number or leave it '
     'empty.'),
    (TABLE.replace("60", "-300"),
     ', row 2, column T2: "-300" degC is below absolute zero; correct the value, or its unit in the header.'),
    (TABLE.replace("60", "3001"), ', row 2, column T2: "3001" degC is hotter than any fin (3000 degC); '
     'correct the '
     "value, or its unit in the header."),
    (TABLE.replace("70,60", ","), ', row 2: run "warm" has no temperature along the fin; fill in at least '
     'one, or '
     "choose another run."),
    # the run as a whole
    (TABLE.replace("70,60", "21.1,21.3"), ', run "warm": no temperature along the fin is further than 0.3 K '
     'from the '
     "air; heat or cool the fin, by 0.6 K at the very least."),
    (TABLE.replace("70,60,80,21,5", "70,,80,21,"), ', run "warm": 3 readings cannot determine 4 unknowns '
     '(h, plate '
     "temperature, joint, air temperature); read more sensors, or state more in the rig."),
    (TABLE.replace(",5\n", ",0\n"), ', run "warm": "Q" reads 0 W, of which a noise in per cent is no noise '
     'at all; '
     'state its noise in the rig as an amount, such as noise = "0.1 W".'),
]  # fmt: skip


@pytest.mark.parametrize(
    ("content", "sentence"), WRONG_TABLES, ids=[sentence for _, sentence in WRONG_TABLES]
)
def test_a_wrong_table_is_refused_in_a_sentence(content, sentence):
    assert content != TABLE
    assert refusal(read_run, content, "warm") == "readings.csv" + sentence


@pytest.mark.parametrize(
    ("run", "sentence"),
    [
        (
            None,
            'readings.csv: there are 4 runs ("warm", "hot", "hotter", …); name the one that is meant '
            "(--run).",
        ),
        ("wram", 'readings.csv: there is no run "wram"; the nearest is "warm".'),
        ("2", 'readings.csv: there is no run "2"; there are "warm", "hot", "hotter", ….'),
        ("", 'readings.csv: there is no run ""; there are "warm", "hot", "hotter", ….'),
    ],
)
def test_a_run_that_is_not_there_is_refused_in_a_sentence(run, sentence):
    content = TABLE + "hotter,95,80,99,21,9\nhottest,99,85,105,21,10\n"
    assert refusal(read_run, content, run) == sentence


def test_too_few_readings_for_the_noise_are_refused_in_a_sentence():
    bare = RIG.replace('noise = "0.2 K"\n', "").replace('conductivity = "167 W/(m K) +/- 5 %"', "")
    assert refusal(read_run, TABLE, "warm", "readings.csv", bare) == (
        'readings.csv, run "warm": 5 readings cannot determine 6 unknowns (h, plate temperature, joint, k, '
        "air "
        "temperature, noise); read more sensors, or state more in the rig."
    )


HEADER = ["run", "T1", "T2", "TP", "TA", "Q"]


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (workbook(), ": this file is empty; " + ONE_ROW + "."),
        (workbook(HEADER), ": there is no run below the header; " + ONE_ROW + "."),
        (workbook(HEADER, ["warm", True, 60, 80, 21, 5]),
         ', row 2, column T1: "TRUE" is no number; write a number or leave it empty.'),
        (workbook(HEADER, [], ["warm", "#DIV/0!", 60, 80, 21, 5]),
         ', row 3, column T1: "#DIV/0!" is no number; write a number or leave it empty.'),
        (workbook(HEADER, ["warm", "=70+0", 60, 80, 21, 5]), ', row 2, column B: the formula "=70+0" has no '
         'stored '
         "value; open the workbook in a spreadsheet and save it."),
        (b"run,T1\nwarm,70\n", ": this is not a readable XLSX workbook; save the table as XLSX or CSV."),
        (workbook(HEADER, ["warm", 70, 60, 80, 21, 5])[:-300],
         ": this is not a readable XLSX workbook; save the table as XLSX or CSV."),
    ],
)  # fmt: skip
def test_a_wrong_workbook_is_refused_in_a_sentence(content, sentence):
    assert refusal(read_run, content, "warm", "readings.xlsx") == "readings.xlsx" + sentence


def test_readings_from_python_are_checked_too():
    rig = rigs.read_bytes(RIG.encode())
    assert refusal(check_run, rig, Readings("a", {"T9": 300.0})) == (
        'run "a": the rig has no sensor "T9"; add it, or leave its reading out.'
    )
    assert refusal(check_run, rig, Readings("a", {"T1": -5.0})) == (
        'run "a": "T1" reads -5 K, which no temperature is; give temperatures in kelvin, above zero.'
    )
    assert refusal(check_run, rig, Readings("a", {"TA": 300.0})) == (
        'run "a": no temperature along the fin was read; read at least one, better five.'
    )


@pytest.mark.parametrize(
    "document", [3, None, [], {1: 2}, {"fin": 3}, {"fin": {"profile": "pin"}, "sensors": 3}]
)
def test_a_rig_from_python_that_is_none_is_refused(document):
    with pytest.raises(InputError):
        Rig.from_dict(document)


# Fuzzing: whatever is thrown at the readers gives a value or a sentence of one printable line.


def rig_or_sentence(read, *arguments) -> Rig | str:
    try:
        return read(*arguments)
    except InputError as error:
        return str(error)


def assert_one_line(found: Rig | str) -> None:
    if isinstance(found, str):
        assert re.fullmatch(r"rig\.toml[:,] .+; .+\.", found)
        assert found.isprintable()


def picked(content: bytes, name: str = "readings.csv") -> list[Readings | str]:
    found: list[Readings | str] = []
    try:
        table = tables.read_bytes(content, rigs.read_bytes(RIG.encode()), Path(name))
    except InputError as error:
        return [str(error)]
    for run in table.runs[:5]:
        try:
            found.append(table.pick(run))
        except InputError as error:
            found.append(str(error))
    return found


def assert_sound(found: list[Readings | str]) -> None:
    for each in found:
        if isinstance(each, str):
            assert each.isprintable()
        else:
            assert all(math.isfinite(value) for value in each.values.values())


BYTES = st.binary(max_size=200) | st.text(max_size=200).map(lambda text: text.encode("utf-8", "replace"))


@given(BYTES)
def test_any_bytes_as_a_rig(content):
    assert_one_line(rig_or_sentence(rigs.read_bytes, content, Path("rig.toml")))


ANY = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=20) | st.dates(),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=8), inner, max_size=3),
    max_leaves=6,
)
PLACES = [
    "title",
    "fin",
    "fin.profile",
    "fin.length",
    "fin.tip",
    "fin.tip_thickness",
    "fin.surface",
    "fin.orientation",
    "fin.file",
    "fin.new",
    "material",
    "material.conductivity",
    "material.name",
    "joint",
    "air.expected_h",
    "air.speed",
    "air.correlation",
    "air.pressure",
    "air.humidity",
    "sensors",
    "sensors.defaults",
    "sensors.defaults.noise",
    "sensors.T1",
    "sensors.T1.at",
    "sensors.T1.position",
    "sensors.Q.noise",
    "sensors.Q.calibration",
    "sensors.new",
    "new",
]


@given(place=st.sampled_from(PLACES), value=ANY)
def test_anything_in_any_place_of_a_rig(place, value):
    document = tomllib.loads(RIG)
    *path, last = place.split(".")
    table = document
    for key in path:
        table = table[key]
    table[last] = value
    found = rig_or_sentence(Rig.from_dict, document)
    if isinstance(found, str):
        assert found.isprintable()
    else:
        assert all(0 < quantity.value < math.inf for quantity in found.geometry.values())


@given(start=st.integers(0, len(RIG)), length=st.integers(0, 12), text=st.text(max_size=12))
def test_a_rig_with_a_slip_of_the_pen(start, length, text):
    content = (RIG[:start] + text + RIG[start + length :]).encode("utf-8", "replace")
    assert_one_line(rig_or_sentence(rigs.read_bytes, content, Path("rig.toml")))


@given(BYTES)
def test_any_bytes_as_a_table(content):
    assert_sound(picked(content))


@given(st.text("runT12PAQ,;\t\n\r\"' []()°CKFW0123456789.-+eE\ufeff", max_size=120))
def test_any_cells_as_a_table(text):
    assert_sound(picked(text.encode()))


@given(start=st.integers(0, len(TABLE)), length=st.integers(0, 12), text=st.text(max_size=12))
def test_a_table_with_a_slip_of_the_pen(start, length, text):
    assert_sound(picked((TABLE[:start] + text + TABLE[start + length :]).encode("utf-8", "replace")))


WORKBOOK = workbook(HEADER, ["warm", 70, 60, 80, 21, 5], ["hot", None, 75, 99, 21, 8])


@settings(max_examples=30)
@given(start=st.integers(0, len(WORKBOOK)), junk=st.binary(min_size=1, max_size=40))
def test_a_damaged_workbook(start, junk):
    assert_sound(picked(WORKBOOK[:start] + junk + WORKBOOK[start + len(junk) :], "readings.xlsx"))
