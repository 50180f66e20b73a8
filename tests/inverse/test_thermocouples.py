"""Thermocouple classes: the standards' tolerances, how a rig states one, and what becomes of it in a fit.

The expected tolerances are recalled from other editions than those in the code, which print the same limits
in another form: IEC 584-2:1982 in pieces of the range, ANSI MC96.1 in degrees Fahrenheit.
"""

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from rigs import Truth, exact_readings, pin_rig

from finback import candidates, cli, optimum, posing, thermocouples
from finback.errors import InputError
from finback.quantity import Quantity
from finback.rig import Rig
from finback.thermocouples import CLASSES

ZERO = 273.15

# (types, class): pieces of the range as (from °C, to °C, amount K, share of |t|); one of the two is 0
PIECES = {
    ("T", "1"): [(-40, 125, 0.5, 0), (125, 350, 0, 0.004)],
    ("T", "2"): [(-40, 133, 1, 0), (133, 350, 0, 0.0075)],
    ("T", "3"): [(-67, 40, 1, 0), (-200, -67, 0, 0.015)],
    ("E", "1"): [(-40, 375, 1.5, 0), (375, 800, 0, 0.004)],
    ("E", "2"): [(-40, 333, 2.5, 0), (333, 900, 0, 0.0075)],
    ("EKN", "3"): [(-167, 40, 2.5, 0), (-200, -167, 0, 0.015)],
    ("J", "1"): [(-40, 375, 1.5, 0), (375, 750, 0, 0.004)],
    ("J", "2"): [(-40, 333, 2.5, 0), (333, 750, 0, 0.0075)],
    ("KN", "1"): [(-40, 375, 1.5, 0), (375, 1000, 0, 0.004)],
    ("KN", "2"): [(-40, 333, 2.5, 0), (333, 1200, 0, 0.0075)],
    ("RS", "1"): [(0, 1100, 1, 0)],
    ("RS", "2"): [(0, 600, 1.5, 0), (600, 1600, 0, 0.0025)],
    ("B", "2"): [(600, 1700, 0, 0.0025)],
    ("B", "3"): [(600, 800, 4, 0), (800, 1700, 0, 0.005)],
}
IEC_ROWS = [(kind, grade, pieces) for (kinds, grade), pieces in PIECES.items() for kind in kinds]


@pytest.mark.parametrize(("kind", "grade", "pieces"), IEC_ROWS)
def test_tolerances_as_the_iec_once_printed_them(
    kind: str, grade: str, pieces: list[tuple[float, float, float, float]]
) -> None:
    known = CLASSES[f"{kind} class {grade}"]
    for low, high, amount, share in pieces:
        for celsius in np.linspace(low, high, 9):
            # the edition rounds the temperatures where one piece meets the next to whole degrees
            expected = pytest.approx(amount or share * abs(celsius), rel=0.006)
            assert known.tolerance(ZERO + celsius) == expected
    assert known.low == min(piece[0] for piece in pieces)
    if (kind, grade) not in (("R", "1"), ("S", "1")):
        assert known.high == max(piece[1] for piece in pieces)


def test_types_r_and_s_of_class_1_have_a_form_of_their_own() -> None:
    for kind in "RS":
        known = CLASSES[f"{kind} class 1"]
        for celsius in (1100, 1200, 1600):  # 1 + 0.003 (t - 1100)
            assert known.tolerance(ZERO + celsius) == pytest.approx(1 + 0.003 * (celsius - 1100))
        assert known.high == 1600


# type: standard and special limits of error in °F and per cent, upper end of the range in °F
FAHRENHEIT = {
    "K": (4.0, 0.75, 2.0, 0.4, 2300),
    "J": (4.0, 0.75, 2.0, 0.4, 1400),
    "N": (4.0, 0.75, 2.0, 0.4, 2300),
    "T": (1.8, 0.75, 0.9, 0.4, 700),
    "E": (3.0, 0.5, 1.8, 0.4, 1600),
    "R": (2.7, 0.25, 1.1, 0.1, 2700),
    "S": (2.7, 0.25, 1.1, 0.1, 2700),
}


@pytest.mark.parametrize("kind", FAHRENHEIT)
def test_limits_of_error_as_ansi_printed_them(kind: str) -> None:
    standard, standard_share, special, special_share, high = FAHRENHEIT[kind]
    for grade, amount, share in (("standard", standard, standard_share), ("special", special, special_share)):
        known = CLASSES[f"{kind} {grade}"]
        assert 1.8 * known.tolerance(ZERO) == pytest.approx(amount, abs=0.07)  # printed in tenths
        at_the_top = known.tolerance(ZERO + known.high)
        assert at_the_top == pytest.approx(share / 100 * known.high, rel=1e-12)
        assert known.low == 0
        assert 1.8 * known.high + 32 == pytest.approx(high, abs=10)  # printed in hundreds, or nearly


def test_type_b_has_a_share_alone() -> None:
    for grade, share in (("standard", 0.005), ("special", 0.0025)):
        known = CLASSES[f"B {grade}"]
        assert known.tolerance(ZERO + 1000) == pytest.approx(1000 * share)
        assert (known.low, known.high) == (870, 1700)


@pytest.mark.parametrize("name", CLASSES)
def test_better_classes_promise_more(name: str) -> None:
    kind, _, grade = name.partition(" ")
    worse = {"class 1": "class 2", "special": "standard"}.get(grade)
    known = CLASSES[name]
    assert known.standard == (thermocouples.IEC if "class" in grade else thermocouples.ASTM)
    assert known.low < known.high
    if worse is not None:
        for celsius in np.linspace(known.low, known.high, 20):
            assert known.tolerance(ZERO + celsius) < CLASSES[f"{kind} {worse}"].tolerance(ZERO + celsius)


def test_an_even_spread_has_the_standard_deviation_of_one() -> None:
    known = CLASSES["K class 1"]
    drawn = np.random.default_rng(1).uniform(-1.5, 1.5, 400_000)
    assert known.standard_uncertainty(ZERO + 20) == pytest.approx(drawn.std(), rel=0.005)


@pytest.mark.parametrize("celsius", [-41, 1001])
def test_beyond_the_range_a_tolerance_goes_on(celsius: float) -> None:
    known = CLASSES["K class 1"]
    assert not known.covers(ZERO + celsius)
    assert known.covers(ZERO + 20)
    assert known.tolerance(ZERO + celsius) == pytest.approx(max(1.5, 0.004 * abs(celsius)))


@pytest.mark.parametrize(
    "text", ["K class 1", "k Class 1", " type K class 1", "Type-K class-1", "K, class 1"]
)
def test_ways_to_write_one(text: str) -> None:
    assert thermocouples.is_meant(text)
    assert thermocouples.parse(text) is CLASSES["K class 1"]


@pytest.mark.parametrize("text", ["0.3 K", "2 %", "0.3", "K", "0.3 degC +/- 0.1 degC", "nan K", 3, None])
def test_what_is_no_class(text: object) -> None:
    assert not thermocouples.is_meant(text)


@pytest.mark.parametrize(
    ("text", "nearest"),
    [
        ("K class 4", "K class 1"),
        ("J class 3", "J class 1"),
        ("T speciel", "T special"),
        ("B class 1", "B class 2"),
        ("X class 1", "K class 1"),
        ("K standart", "K standard"),
    ],
)
def test_an_unknown_one_is_answered_with_the_nearest(text: str, nearest: str) -> None:
    assert thermocouples.is_meant(text)
    with pytest.raises(InputError) as caught:
        thermocouples.parse(text)
    expected = f'"{text}" is no thermocouple class that is known; the nearest known one is "{nearest}".'
    assert str(caught.value) == expected


@given(st.text())
def test_any_text_is_a_class_or_one_sentence(text: str) -> None:
    try:
        said = thermocouples.parse(text).words
    except InputError as error:
        said = str(error)
    assert said.isprintable()


PIN = {
    "fin": {"profile": "pin", "length": "120 mm", "diameter": "8 mm", "tip": "adiabatic"},
    "material": {"conductivity": "167 W/(m K) +/- 5 %"},
    "sensors": {
        "defaults": {"calibration": "K class 1", "noise": "0.2 K"},
        "T1": {"at": "10 mm"},
        "T2": {"at": "110 mm", "calibration": "T special"},
        "T3": {"at": "60 mm", "calibration": "0.3 K"},
        "TP": {"on": "plate"},
        "TA": {"on": "air", "noise": "0 K"},
        "TB": {"on": "air", "noise": "0 K", "calibration": "T class 1"},
        "Q": {"on": "heat"},
    },
}


def test_a_rig_states_one_for_all_its_thermometers_or_for_one() -> None:
    rig = Rig.from_dict(PIN)
    names = {
        name: each.calibration_class and each.calibration_class.name for name, each in rig.sensors.items()
    }
    assert names == {
        "T1": "K class 1",
        "T2": "T special",
        "T3": None,
        "TP": "K class 1",
        "TA": None,  # exactly known: a default does not speak of it
        "TB": "T class 1",
        "Q": None,
    }
    assert rig.sensors["TA"].exactly_known
    assert not rig.sensors["TB"].exactly_known
    at = rig.sensors["T1"].calibration_at
    assert at(ZERO + 500) == pytest.approx(2.0 / math.sqrt(3))
    assert at(ZERO + 20) == pytest.approx(1.5 / math.sqrt(3))
    assert rig.sensors["T3"].calibration_at(ZERO + 500) == 0.3


def test_how_a_class_is_taken_is_listed_among_the_assumptions() -> None:
    rig = Rig.from_dict(PIN)
    said = [finding.message for finding in rig.assumed if "class 1" in str(finding.evidence.get("value"))]
    assert said[0] == (
        '"K class 1" is taken as an even spread within ±1.5 K or ±0.4 % of the temperature in °C, the larger '
        "(IEC 60584-1:2013, −40 to 1000 °C), and as one error of all sensors that read the same; the "
        "instrument's own error is not in it."
    )
    assert len(said) == 2
    unstated = [finding.message for finding in rig.assumed if "No calibration" in finding.message]
    assert len(unstated) == 1
    assert '"Q"' in unstated[0]
    assert '"T1"' not in unstated[0]


def test_check_shows_the_class_of_a_sensor(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    tables = (
        '[fin]\nprofile = "pin"\nlength = "120 mm"\ndiameter = "8 mm"\n'
        '[sensors.defaults]\ncalibration = "K class 1"\n'
        '[sensors]\nT1 = { at = "10 mm", noise = "0.2 K" }\n'
        'T2 = { at = "90 mm", calibration = "T special" }\n'
    )
    path = tmp_path / "rig.toml"
    path.write_text(tables, encoding="utf-8")
    assert cli.run(["check", str(path)]) == 0
    lines = [line.split() for line in capsys.readouterr().out.splitlines()]
    assert ["T1", "fin", "10", "mm", "0.2", "K", "K", "class", "1"] in lines
    assert ["T2", "fin", "90", "mm", "estimated", "T", "special"] in lines
    assert any(line[:6] == ['"T', 'special"', "is", "taken", "as", "an"] for line in lines)


HOT_PIN = Truth(plate=ZERO + 600, air=ZERO + 22, joint=None, tip="adiabatic")


def with_class(rig: Rig, name: str) -> Rig:
    return replace(
        rig,
        sensors={
            key: replace(each, calibration=0.0, calibration_class=CLASSES[name])
            if each.reads_temperature
            else each
            for key, each in rig.sensors.items()
        },
    )


def posed(rig: Rig):
    readings = exact_readings(rig, HOT_PIN)
    every = candidates.enumerate_candidates(rig, readings)
    candidate = next(each for each in every if not each.joint and each.tip == "adiabatic")
    return posing.pose(rig, readings, candidate)


def test_its_uncertainty_is_shared_by_all_that_read_the_same() -> None:
    rig = with_class(pin_rig(position_sd=0.0, noise=0.2), "K class 1")
    problem = posed(rig)
    celsius = problem.measured.values - ZERO
    place = np.array([sensor.place for sensor in problem.measured.sensors])
    u = np.maximum(1.5, 0.004 * celsius) / math.sqrt(3)
    assert u[place == "fin"].max() > 1.1 * u[place == "fin"].min()  # hot enough for the share to count
    heat = place == "heat"
    u[heat] = 0.0
    expected = np.where(place[:, None] == place, np.outer(u, u), 0.0)
    expected += np.diag(np.where(heat, 0.03 * problem.measured.values, 0.2) ** 2)
    np.testing.assert_allclose(problem.noise.covariance(1.0), expected, rtol=1e-9, atol=1e-12)


def test_it_widens_a_fit_as_the_same_number_in_kelvin_would() -> None:
    rig = pin_rig(position_sd=0.0, noise=0.2, calibration=0.0, conductivity=Quantity(167.0, 3.0))
    # below 125 °C the tolerance of T class 1 is 0.5 K everywhere
    mild = replace(HOT_PIN, plate=ZERO + 80)
    sds = []
    for each in (rig, pin_rig_in_kelvin(rig, 0.5 / math.sqrt(3)), with_class(rig, "T class 1")):
        readings = exact_readings(each, mild)
        candidate = next(c for c in candidates.enumerate_candidates(each, readings) if not c.joint)
        sds.append(math.sqrt(optimum.fit(posing.pose(each, readings, candidate)).point.covariance[0, 0]))
    assert sds[2] == pytest.approx(sds[1], rel=1e-9)
    assert sds[2] > 1.02 * sds[0]


def pin_rig_in_kelvin(rig: Rig, calibration: float) -> Rig:
    changed = {
        key: replace(each, calibration=calibration) if each.reads_temperature else each
        for key, each in rig.sensors.items()
    }
    return replace(rig, sensors=changed)
