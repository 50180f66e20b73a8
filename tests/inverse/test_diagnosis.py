"""Diagnosis: causes, costs, what cannot be told apart and what to measure then."""

import json
import math
import tomllib
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from rigs import Truth, draw, exact_readings, pin_rig

import finback
from finback import diagnosis, readings, rig
from finback.causes import Cause
from finback.datasets import path
from finback.diagnosis import Diagnosis
from finback.models.constants import ZERO_CELSIUS
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig

K = Quantity(167.0, 8.35)
H, JOINT = Quantity(45.0, 4.5), Quantity(5e-5, 1e-5)


def described(**others: Any) -> Rig:
    """An invented pin that says what a healthy one has."""
    known = {"conductivity": K, "tip": "convective", "expected_coefficient": H, "expected_joint": JOINT}
    return pin_rig(**known | others)


def diagnose(
    truth: Truth, changes: dict[str, float] | None = None, seed: int | None = 1, **others: Any
) -> Diagnosis:
    """Diagnose an invented pin, without errors where there is no seed; some readings changed by so much."""
    of_rig = described(**others)
    run = (
        exact_readings(of_rig, truth) if seed is None else draw(of_rig, truth, np.random.default_rng(seed))[0]
    )
    values = {name: value + (changes or {}).get(name, 0.0) for name, value in run.values.items()}
    return diagnosis.diagnose(of_rig, Readings("r", values))


def first(found: Diagnosis) -> Cause:
    return found.causes[0]


def test_a_healthy_fin_is_healthy() -> None:
    found = diagnose(Truth())
    assert first(found).code == "healthy"
    assert found.healthy_probability == first(found).probability > 0.5
    assert found.fin_healthy_probability > 0.9
    assert found.measurement_faults == ()


@pytest.mark.parametrize(
    ("truth", "code"),
    [
        (Truth(joint=2.5e-4), "joint"),
        (Truth(h=45.0 * 0.6), "low-convection"),
        (Truth(k=110.0), "low-conductivity"),
    ],
)
def test_a_cause_in_the_fin_is_found_with_what_it_costs(truth: Truth, code: str) -> None:
    found = diagnose(truth, seed=None)
    cause = first(found)
    assert cause.code == code
    assert cause.probability > 0.9
    right = replace(truth, h=45.0, k=167.0, joint=5e-5)
    heats = [float(each.solve(described(), np.zeros(1)).base_heat[0]) for each in (truth, right)]
    assert cause.heat_recovered is not None
    assert cause.heat_recovered.low95 < heats[1] - heats[0] < cause.heat_recovered.high95
    assert found.costs[0].what == "now"
    assert found.costs[0].heat.low95 < heats[0] < found.costs[0].heat.high95
    assert found.costs[-1].heat.low95 < heats[1] < found.costs[-1].heat.high95


def test_two_causes_at_once_are_found_together() -> None:
    found = diagnose(Truth(joint=2.5e-4, h=45.0 * 0.6), seed=None)
    assert {cause.code for cause in found.causes[:2]} == {"joint", "low-convection"}
    assert set(found.together[0].names) == {"bad joint", "low convection"}


@pytest.mark.parametrize(
    ("changes", "code", "sensor"),
    [({"T4": 2.5}, "sensor-outlier", "T4"), ({"Q": 0.9}, "heat-balance", "Q")],
)
def test_a_wrong_reading_costs_nothing_and_the_fin_is_sound(
    changes: dict[str, float], code: str, sensor: str
) -> None:
    found = diagnose(Truth(), changes)
    assert (first(found).code, first(found).sensor) == (code, sensor)
    assert first(found).heat_recovered is not None
    assert first(found).heat_recovered.high95 == 0.0
    assert (code, sensor) in {(finding.code, finding.sensor) for finding in found.measurement_faults}


def test_a_bad_joint_and_a_wrong_thermometer_are_told_from_each_other() -> None:
    found = diagnose(Truth(joint=2.5e-4), {"T6": -4.0})
    assert {(cause.code, cause.sensor) for cause in found.causes[:2]} == {
        ("joint", None),
        ("sensor-outlier", "T6"),
    }


def test_a_tip_that_is_not_as_drawn_is_a_cause() -> None:
    truth = Truth(h=80.0, tip="fixed", tip_temperature=ZERO_CELSIUS + 24.0)
    holes = (0.004, 0.012, 0.02, 0.03, 0.04, 0.047)
    known = Quantity(80.0, 6.0)
    found = diagnose(truth, seed=None, length=0.05, holes=holes, expected_coefficient=known)
    assert first(found).name == "tip not as drawn"


# rigs that cannot tell: the first of what to measure next is what would


def test_without_a_plate_sensor_the_joint_is_open_and_its_thermocouple_comes_first() -> None:
    found = diagnose(Truth(joint=None), places=("air", "heat"), expected_joint=None)
    assert any("bad joint cannot be told" in sentence for sentence in found.cannot_tell)
    assert any('TP = { on = "plate" }' in sentence for sentence in found.missing)
    assert found.next_measurements[0].what == "plate thermocouple"
    (joint,) = [cause for cause in found.causes if cause.code == "joint"]
    assert joint.heat_recovered is None


@pytest.mark.parametrize("k", [110.0, 125.0])
def test_without_heat_a_low_conductivity_is_open_and_the_heat_comes_first(k: float) -> None:
    found = diagnose(Truth(k=k), seed=None, places=("plate", "air"), expected_coefficient=Quantity(45.0, 9.0))
    assert "low conductivity" in found.cannot_tell[0]
    assert "nothing wrong" in found.cannot_tell[0]
    assert found.next_measurements[0].what == "heat flow"
    assert found.next_measurements[0].expected_gain > 0.5


@pytest.mark.parametrize("sensor", ["T1", "T2"])
def test_where_a_hole_and_a_thermometer_are_open_what_tells_them_apart_comes_first(sensor: str) -> None:
    found = diagnose(Truth(), {sensor: -2.0}, seed=None)
    rivals = {(cause.code, cause.sensor) for cause in found.causes[:2]}
    assert rivals == {("sensor-outlier", sensor), ("position-shift", sensor)}
    assert found.cannot_tell
    best = {each.what.split(" of ")[0]: each.what for each in found.next_measurements[:2]}
    assert set(best) == {"swap test", "isothermal zero reading"}
    assert sensor in best["swap test"]


def test_a_measurement_says_how_much_narrower_h_would_be() -> None:
    found = diagnose(Truth(), seed=None, places=("plate", "air"), conductivity=Quantity(167.0, 33.0))
    (heat,) = [each for each in found.next_measurements if each.what == "heat flow"]
    assert heat.h_sd_ratio < 0.8
    assert "narrower" in heat.message


def test_a_rig_that_expects_nothing_is_told_which_lines_to_add() -> None:
    found = diagnose(Truth(), seed=None, conductivity=None, expected_coefficient=None, expected_joint=None)
    text = " ".join(found.missing)
    for line in ("expected_h =", "[air]", "conductivity =", "[material]", "expected =", "[joint]"):
        assert line in text
    assert first(found).code == "healthy"


def test_a_joint_that_cannot_be_judged_is_told_with_its_step() -> None:
    found = diagnose(Truth(joint=5e-4), seed=None, expected_joint=None)
    (joint,) = [finding for finding in found.findings if finding.code == "joint"]
    assert joint.severity == "caution"
    assert "5.0" in joint.message or "4.9" in joint.message
    assert "nothing says what a healthy one has" in joint.message


@pytest.mark.parametrize("places", [("plate", "air", "heat"), ("plate", "air", "heater")])
def test_an_expectation_that_is_too_low_is_no_fault_of_the_fin(places: tuple[str, ...]) -> None:
    found = diagnose(Truth(), seed=None, places=places, expected_coefficient=Quantity(22.0, 3.3))
    assert first(found).name == "more convection than expected"
    assert "check what is expected" in first(found).message
    assert found.fin_healthy_probability is not None
    assert found.fin_healthy_probability > 0.7
    assert not any(cause.sensor == "PH" for cause in found.causes)  # it supplies enough


def test_heavy_tailed_noise_alone_is_no_obstacle() -> None:
    found = diagnose(Truth(), {"T4": 4.0}, noise=0.15)
    heavy = described()
    run, _ = draw(heavy, Truth(), np.random.default_rng(1))
    wrong = Readings("r", dict(run.values) | {"T4": run.values["T4"] + 4.0})
    same = diagnosis.diagnose(replace(heavy, noise=("heavy-tailed",)), wrong)
    assert (first(same).code, first(same).sensor) == (first(found).code, first(found).sensor)
    assert first(same).sensor == "T4"


def test_what_nothing_judges_has_no_probability() -> None:
    unknown = {"conductivity": None, "expected_coefficient": None, "expected_joint": None, "tip": None}
    found = diagnose(Truth(joint=None), seed=None, places=("air",), **unknown)
    assert found.fin_healthy_probability is None


# what is written


def test_the_dictionary_has_the_keys_that_others_read() -> None:
    found = json.loads(json.dumps(diagnose(Truth(joint=2.5e-4)).to_dict(), allow_nan=False))
    assert list(found)[3] == "healthy_probability"
    cause = found["causes"][0]
    assert {"code", "probability", "message", "heat_recovered", "base_temperature_change"} <= set(cause)
    assert set(cause["heat_recovered"]) == {"median", "low95", "high95", "unit"}
    assert cause["heat_recovered"]["unit"] == "W"
    assert cause["base_temperature_change"]["unit"] == "K"
    assert {"what", "expected_gain", "message"} <= set(found["next_measurements"][0])
    probabilities = [each["probability"] for each in found["causes"]]
    assert probabilities == sorted(probabilities, reverse=True)


def test_one_seed_gives_one_diagnosis() -> None:
    assert diagnose(Truth(joint=2.5e-4)).to_dict() == diagnose(Truth(joint=2.5e-4)).to_dict()


# measured records: see test_real_records.py for their sources


def record(
    fin: dict[str, Any], at: dict[float, float], air: float, noise: str, **tables: Any
) -> tuple[Rig, Readings]:
    sensors: dict[str, Any] = {f"T{i}": {"at": f"{1e3 * x:g} mm"} for i, x in enumerate(at, start=1)}
    sensors |= {"TA": {"on": "air"}, "defaults": {"noise": noise, "calibration": "0.1 K", "position": "1 mm"}}
    values = {f"T{i}": t + ZERO_CELSIUS for i, t in enumerate(at.values(), start=1)}
    of_rig = Rig.from_dict({"fin": fin, "sensors": sensors, **tables})
    return of_rig, Readings("record", values | {"TA": air + ZERO_CELSIUS})


def test_the_brass_bar_scatters_more_than_is_stated() -> None:
    # physics laboratory record, 2017, sample data of the public repository UncValue
    temperatures = (98.0, 74.7, 57.1, 47.3, 39.3, 34.2, 31.1, 29.3, 28.2, 27.6, 27.4)
    bar = {0.1 * (i + 1): t for i, t in enumerate(temperatures)}
    fin = {"profile": "pin", "length": "1100 mm", "diameter": "30 mm", "tip": "convective"}
    found = diagnosis.diagnose(*record(fin, bar, 24.0, "0.1 K"))
    codes = {finding.code for finding in found.measurement_faults}
    assert codes & {"misfit", "air-reference"}
    air = next(cause for cause in found.causes if cause.code == "air-reference")
    assert "air at 25" in air.message


def test_the_copper_bar_scatters_and_its_h_stays() -> None:
    # student laboratory, 2025: a square bar of copper 110; the printed h is 10.82 W/(m² K), its optimum 10.77
    bar = {0.0: 64.77, 0.0306: 61.4, 0.055: 60.49, 0.0982: 58.16, 0.1715: 54.02, 0.2207: 53.51, 0.2807: 53.75}
    fin = {"profile": "rectangular", "length": "285 mm", "width": "12.7 mm", "thickness": "12.7 mm",
           "edges": "exposed", "tip": "convective"}  # fmt: skip
    copper = {"conductivity": "388 W/(m K) +/- 1 %"}
    of_rig, run = record(fin, bar, 22.32, "0.1 K", material=copper)
    found = diagnosis.diagnose(of_rig, run)
    assert any("scatter" in finding.message for finding in found.measurement_faults)
    assert finback.fit(of_rig, run).parameters["h"].median == pytest.approx(10.8, rel=0.05)


def test_no_fault_is_invented_on_the_aluminium_rod() -> None:
    of_rig = rig.read(path("aluminium-rod") / "rig.toml")
    run = readings.read(path("aluminium-rod") / "readings.csv", of_rig).pick(None)
    found = diagnosis.diagnose(of_rig, run)
    assert found.measurement_faults == ()
    assert first(found).code == "healthy"


def test_the_loose_joint_of_the_bench_is_named_and_its_cost_is_that_of_its_truth() -> None:
    folder = path("bench-pin-loose-joint")
    of_rig = rig.read(folder / "rig.toml")
    run = readings.read(folder / "readings.csv", of_rig).pick(None)
    cause = first(diagnosis.diagnose(of_rig, run))
    assert cause.code == "joint"
    assert cause.probability > 0.99
    expected = tomllib.loads((folder / "rig.toml").read_text(encoding="utf-8"))["joint"]["expected"]
    assert expected.startswith("5e-5")
    assert cause.heat_recovered is not None
    assert math.isclose(cause.heat_recovered.median, 1.6, abs_tol=0.3)


def test_a_fin_that_is_too_thick_is_said_to_be() -> None:
    found = diagnose(Truth(k=1.5), seed=None, length=0.03, diameter=0.02, holes=(0.002, 0.01, 0.02, 0.028),
                     conductivity=Quantity(1.5, 0.05))  # fmt: skip
    assert "thick-fin" in {finding.code for finding in found.findings}


def test_a_heat_that_no_heater_supplies_is_a_fault_of_the_measurement() -> None:
    of_rig = described(places=("plate", "air", "heater"))
    run, _ = draw(of_rig, Truth(), np.random.default_rng(1), power=2.0)
    found = diagnosis.diagnose(of_rig, run)
    assert ("heat-balance", "PH") in {(finding.code, finding.sensor) for finding in found.measurement_faults}
