"""Readings: one table in every dress it comes in, and what a run may lack."""

import datetime
import hashlib
import io
import zipfile

import openpyxl
import pytest

from finback import readings as tables
from finback.checks import check_run
from finback.errors import InputError
from finback.readings import Readings
from finback.rig import Rig

SENSORS = {
    "T1": {"at": "5 mm"},
    "T2": {"at": "30 mm"},
    "T3": {"at": "50 mm"},
    "TP": {"on": "plate"},
    "TA": {"on": "air"},
    "Q": {"on": "heat", "noise": "3 %"},
}


def rig(**sensors) -> Rig:
    return Rig.from_dict(
        {
            "fin": {"profile": "pin", "length": "60 mm", "diameter": "8 mm"},
            "material": {"conductivity": "167 W/(m K)"},
            "sensors": SENSORS | {"defaults": {"noise": "0.1 K"}} | sensors,
        }
    )


def read(content: str | bytes, the_rig: Rig | None = None, run: str | None = None) -> Readings:
    return tables.read_bytes(
        content if isinstance(content, bytes) else content.encode(), the_rig or rig()
    ).pick(run)


def workbook(*rows) -> bytes:
    book = openpyxl.Workbook()
    for row in rows:
        book.active.append(row)
    content = io.BytesIO()
    book.save(content)
    return content.getvalue()


# 343.65 K = 70.5 degC = 158.9 degF by the definitions of the scales
EXPECTED = {"T1": 343.65, "T2": 333.15, "T3": 328.4, "TP": 353.15, "TA": 294.15, "Q": 5.25}

COMMA = "run,T1,T2,T3,TP,TA,Q,note\nfirst,70.5,60,55.25,80,21,5.25,calm\n"
SEMICOLON = "run;T1;T2;T3;TP;TA;Q;note\nfirst;70,5;60;55,25;80;21;5,25;calm\n"


@pytest.mark.parametrize(
    "content",
    [
        COMMA,
        COMMA.replace("\n", "\r\n"),
        COMMA.replace("\n", "\r"),
        "\ufeff" + COMMA,
        "\n\n" + COMMA + "\n\n",
        COMMA.replace(",", " , "),
        COMMA.replace("first", '"first"').replace("70.5", '"70.5"'),
        COMMA.replace("70.5", "+7.05e1"),
        COMMA.replace("run,", "Run,"),
        SEMICOLON,
        SEMICOLON.replace("70,5", "70.5"),
        SEMICOLON.replace(";", "\t"),
        "sep=;\n" + SEMICOLON,
        SEMICOLON.encode("utf-16"),
        COMMA.replace("TA", "TA [degC]").replace("Q", "Q (W)"),
        COMMA.replace("T1", "T1 [degF]").replace("70.5", "158.9"),
        COMMA.replace("T1", "T1 (°F)").replace("70.5", "158.9"),
        COMMA.replace("T1", "T1[K]").replace("70.5", "343.65"),
        COMMA.replace("Q", "Q [mW]").replace("5.25", "5250").replace("55250", "55.25"),
        "run,T1,T2,T3,TP,TA,Q,note\n,degF,°C,[degC],(K),,W,-\nfirst,158.9,60,55.25,353.15,21,5.25,calm\n",
        "note,Q,TA,TP,T3,T2,T1,run\ncalm,5.25,21,80,55.25,60,70.5,first\n",
        workbook(["run", "T1", "T2", "T3", "TP", "TA", "Q", "note"],
                 ["first", 70.5, 60, 55.25, 80, 21, 5.25, "calm"]),
        workbook(["run", "T1", "T2", "T3", "TP", "TA", "Q", "note"],
                 ["first", "70,5", 60, "55.25", 80, 21, 5.25, "calm"]),
        workbook([], ["run", "T1 [K]", "T2", "T3", "TP", "TA", "Q", "note"], [],
                 ["first", 343.65, 60, 55.25, 80, 21, 5.25, "calm"]),
    ],
)  # fmt: skip
def test_one_run_in_every_dress_is_the_same_run(content):
    found = read(content)
    assert found.run == "first"
    assert found.values == pytest.approx(EXPECTED, rel=1e-12)
    assert found.extra == {"note": "calm"}
    assert found.excluded == {}


@pytest.mark.parametrize(
    ("text", "note"), [("für 20 °C", "für 20 °C"), ("a; b", "a; b"), ('5" pipe', '5" pipe'), ("", "")]
)
def test_a_remark_is_kept_as_it_stands(text, note):
    quoted = '"' + text.replace('"', '""') + '"'
    for encoding in ("utf-8", "utf-8-sig", "cp1252"):
        assert read(SEMICOLON.replace("calm", quoted).encode(encoding)).extra == {"note": note}


@pytest.mark.parametrize("empty", ["", " ", "-", "–", "NaN", "nan", "n/a", "N/A", "#N/A", "NULL"])
def test_an_empty_cell_was_not_measured(empty):
    found = read(COMMA.replace("60", empty).replace("5.25,calm", f"{empty},calm"))
    assert set(found.values) == {"T1", "T3", "TP", "TA"}


def test_a_row_that_ends_early_has_empty_cells():
    found = read("run,T1,T2,T3,TP,TA,Q,note\nfirst,70.5,60,55.25\n")
    assert set(found.values) == {"T1", "T2", "T3"}
    assert found.extra == {"note": ""}


def test_other_columns_travel_along_with_their_units():
    found = read("run;speed [m/s];T1;T2;T3;TP;TA;Q;when\nfirst;2,5;70,5;60;55,25;80;21;5,25;Monday\n")
    assert found.values == pytest.approx(EXPECTED)
    assert found.extra == {"speed [m/s]": "2,5", "when": "Monday"}


def test_a_column_without_a_name_is_left_over_from_a_program():
    assert read(",run,T1,T2,T3,TP,TA,Q\n0,first,70.5,60,55.25,80,21,5.25\n").extra == {}


def test_runs_without_names_are_counted():
    table = tables.read_bytes(b"T1,T2,T3,TP,TA,Q\n70,60,55,80,21,5\n\n71,61,56,81,21,5\n", rig())
    assert table.runs == ("1", "2")
    assert [run.values["T1"] for run in table] == pytest.approx([343.15, 344.15])
    assert table.pick("2").values["T2"] == pytest.approx(334.15)


def test_cells_of_a_workbook_are_named_as_they_look():
    header = ["run", "T1", "T2", "T3", "TP", "TA", "Q", "day", "ok"]
    row = [7.0, 70.5, 60, 55.25, 80, 21, 5.25, datetime.date(2026, 3, 1), True]
    found = read(workbook(header, row))
    assert found.run == "7"
    assert found.extra == {"day": "2026-03-01T00:00:00", "ok": "TRUE"}


def test_a_workbook_that_states_a_wrong_size_is_read_to_its_end():
    # some programs that write workbooks state "A1" as the size of every sheet
    content = workbook(["run", *SENSORS], ["a", 70.5, 60, 55.25, 80, 21, 5.25])
    changed = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(changed, "w") as new:
        for name in old.namelist():
            part = old.read(name)
            assert ("sheet1.xml" in name) == (b'<dimension ref="A1:G2"' in part)
            new.writestr(name, part.replace(b'<dimension ref="A1:G2"', b'<dimension ref="A1"'))
    assert read(changed.getvalue()).values == pytest.approx(EXPECTED)


@pytest.mark.parametrize(
    ("name", "column", "alike"),
    [
        ("outer", "Outer", True),
        ("outer", "out er", True),
        ("outer", "outre", True),
        ("outer", "oter", True),
        ("outer", "outter", True),
        ("outer", "oufer", True),
        ("outer", "other", False),
        ("outer", "outside", False),
        ("T_1", "t-1", True),
        ("TX", "TY", False),  # of two letters one alike is chance
        ("TX", "T12", True),
        ("TX", "speed [degC]", True),
        ("TX", "speed [m/s]", False),
    ],
)
def test_a_column_that_looks_like_a_sensors_is_no_remark(name, column, alike):
    content = COMMA.replace("note", f"{name},{column}").replace("calm", "50,51")
    the_rig = rig(**{name: {"at": "20 mm"}})
    if alike:
        with pytest.raises(InputError, match="the rig has no sensor of this name"):
            read(content, the_rig)
    else:
        assert read(content, the_rig).extra == {column: "51"}


def test_a_wrong_cell_matters_only_in_the_run_that_is_asked_for():
    table = tables.read_bytes(COMMA.encode() + b"second,x,60,55.25,80,21,5.25,\n", rig())
    assert table.pick("first").values == pytest.approx(EXPECTED)
    with pytest.raises(InputError, match=r'^row 3, column T1: "x" is no number;'):
        table.pick("second")


def test_the_names_of_a_sensor_may_hold_brackets_and_commas():
    the_rig = rig(**{"T1 [top]": {"at": "5 mm"}, "a,b": {"at": "6 mm"}})
    content = COMMA.replace("note", '"T1 [top] [K]","a,b"').replace("calm", "340,41")
    found = read(content, the_rig)
    assert found.values["T1 [top]"] == pytest.approx(340)
    assert found.values["a,b"] == pytest.approx(314.15)
    assert found.values["T1"] == pytest.approx(343.65)


def test_a_file_is_known_by_its_path_and_its_hash(tmp_path):
    for name, content in (
        ("r.csv", COMMA.encode()),
        ("r.xlsx", workbook(["run", *SENSORS], ["a", 70, 60, 55, 80, 21, 5])),
    ):
        path = tmp_path / name
        path.write_bytes(content)
        found = tables.read(str(path), rig()).pick()
        assert found.source == path
        assert found.sha256 == hashlib.sha256(content).hexdigest()


def test_readings_are_copied_and_cannot_be_changed():
    values = {"T1": 340.0}
    found = Readings("a", values)
    values["T1"] = 0.0
    assert found.values == {"T1": 340.0}
    with pytest.raises(TypeError):
        found.values["T1"] = 0.0


def test_what_is_set_aside_does_not_count():
    found = Readings("a", {"T1": 340.0, "T2": 900.0}, excluded={"T2": "the thermocouple came loose"})
    assert found.used == {"T1": 340.0}


@pytest.mark.parametrize(
    "change",
    [
        {},
        {"Q": -5.25},  # a cold plate, or a sensor the wrong way round: for the fit to say
        {"T1": 280.0, "T2": 285.0, "T3": 288.0, "TP": 275.0},
    ],
)
def test_a_run_that_can_be_fitted_passes(change):
    check_run(rig(), Readings("a", EXPECTED | change))


@pytest.mark.parametrize(
    ("sensors", "names", "enough"),
    [
        # unknown: h, base temperature, air temperature
        ({}, "T1 T2 TA", True),
        ({}, "T1 TA", False),
        # and the joint
        ({}, "T1 T2 TP TA", True),
        ({}, "T1 TP TA", False),
        # a heater's power is an upper bound and no reading
        ({"Q": {"on": "heater"}}, "T1 TA Q", False),
        # an air that is exactly known is no unknown and no reading
        ({"TA": {"on": "air", "noise": "0 K"}}, "T1 T2 TA", True),
        ({"TA": {"on": "air", "noise": "0 K"}}, "T1 TA", False),
        # neither is such a plate: h, joint and air are left
        ({"TP": {"on": "plate", "noise": "0 K"}}, "T1 T2 TP TA", True),
        ({"TP": {"on": "plate", "noise": "0 K"}}, "T1 TP TA", False),
        # an air that was not read is unknown all the same
        ({}, "T1 T2 T3", True),
        ({}, "T1 T2", False),
        # the noise, where it is to be estimated
        ({"defaults": {}}, "T1 T2 T3 TA", True),
        ({"defaults": {}}, "T1 T2 TA", False),
    ],
)
def test_readings_are_counted_against_unknowns(sensors, names, enough):
    readings = Readings("a", {name: EXPECTED[name] for name in names.split()})
    if enough:
        check_run(rig(**sensors), readings)
    else:
        with pytest.raises(InputError, match="cannot determine"):
            check_run(rig(**sensors), readings)


@pytest.mark.parametrize(("excess", "enough"), [(0.29, False), (0.31, True), (-0.31, True)])
def test_the_fin_must_differ_from_the_air_by_more_than_the_noise(excess, enough):
    values = {"T1": 300 + excess, "T2": 300.0, "T3": 300.0, "TA": 300.0, "TP": 300.0}
    if enough:
        check_run(rig(), Readings("a", values))
    else:
        with pytest.raises(InputError, match=r"further than 0\.29 K from the air"):
            check_run(rig(), Readings("a", values))
