"""Wrong readings in every fit: found, named, set aside or put back, and not invented."""

import itertools
from dataclasses import replace

import numpy as np
import pytest
from rigs import Truth, draw, pin_rig

from finback import faults, optimum, posing, readings, rig
from finback.datasets import path
from finback.faults import Search
from finback.findings import Finding
from finback.problem import Candidate
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig

PIN = pin_rig(conductivity=Quantity(167.0, 8.35), tip="convective")


def read(seed: int = 1) -> dict[str, float]:
    found, _ = draw(PIN, Truth(), np.random.default_rng(seed))
    return dict(found.values)


def search(values: dict[str, float], described: Rig = PIN, **options: bool) -> Search:
    return faults.search(described, Readings("r", values), **options)


def found(result: Search, code: str) -> list[Finding]:
    return [finding for finding in result.findings if finding.code == code]


@pytest.mark.parametrize("seed", range(5))
def test_nothing_is_invented(seed: int) -> None:
    result = search(read(seed))
    assert result.findings == ()
    assert result.readings.excluded == {}


def test_a_wrong_thermometer_is_set_aside_with_how_far_it_is_off() -> None:
    values = read() | {"T5": read()["T5"] - 4.0}
    result = search(values)
    (finding,) = found(result, "sensor-outlier")
    assert finding.sensor == "T5"
    assert finding.severity == "fault"
    assert "lower than the other readings say" in finding.message
    assert finding.evidence["error"] == pytest.approx(-4.0, abs=0.6)
    assert set(result.readings.excluded) == {"T5"}
    assert "by the other readings" in result.readings.excluded["T5"]


def test_where_a_hole_would_explain_it_as_well_both_are_named() -> None:
    values = read() | {"T1": read()["T1"] - 2.0}
    result = search(values)
    assert {f.code for f in result.findings} == {"sensor-outlier", "position-shift"}
    assert all(f.sensor == "T1" for f in result.findings)
    assert "mm" in found(result, "position-shift")[0].message
    assert "cannot tell that from this" in result.findings[0].message


def test_two_swapped_sensors_are_put_back() -> None:
    values = read()
    swapped = values | {"T3": values["T4"], "T4": values["T3"]}
    result = search(swapped)
    (finding,) = found(result, "sensor-swap")
    assert "T3 and T4 are swapped" in finding.message
    assert result.readings.values == values
    assert search(swapped, aside=False).readings.values == swapped


def test_an_air_thermometer_that_reads_far_off_is_told_what_the_air_is() -> None:
    described = replace(pin_rig(conductivity=Quantity(167.0, 8.35), length=0.3, holes=tuple(
        np.linspace(0.01, 0.29, 8))), tip="convective")  # fmt: skip
    drawn, truth = draw(described, Truth(), np.random.default_rng(1))
    result = search(dict(drawn.values) | {"TA": drawn.values["TA"] + 4.0}, described)
    (finding,) = found(result, "air-reference")
    told = float(finding.message.partition("air at ")[2].split()[0])
    assert told == pytest.approx(truth.air - 273.15, abs=1.0)
    assert finding.evidence["error"] == pytest.approx(4.0, abs=1.0)


def test_readings_that_scatter_more_than_stated_count_with_the_noise_that_they_have() -> None:
    described = pin_rig(noise=0.05, calibration=0.05, conductivity=Quantity(167.0, 8.35), tip="convective")
    drawn, _ = draw(described, Truth(), np.random.default_rng(3))
    rng = np.random.default_rng(4)
    values = {
        name: value + (rng.normal(0.0, 0.6) if name.startswith("T") and name[1:].isdigit() else 0.0)
        for name, value in drawn.values.items()
    }
    result = search(values, described)
    (finding,) = found(result, "misfit")
    assert "scatter" in finding.message
    assert all(sensor.noise is None for sensor in result.rig.fin_sensors())
    assert result.rig.sensors["TP"].noise == 0.05


def test_three_thermometers_do_not_tell_which_of_them_is_wrong() -> None:
    described = pin_rig(holes=(0.01, 0.05, 0.1), places=("air",), conductivity=Quantity(167.0, 8.35),
                        tip="convective")  # fmt: skip
    drawn, _ = draw(described, Truth(joint=None), np.random.default_rng(1))
    result = search(dict(drawn.values) | {"T2": drawn.values["T2"] + 8.0}, described)
    assert result.readings.excluded == {}


def test_a_glance_at_the_fit_sees_what_is_worth_a_search() -> None:
    def glance(values: dict[str, float]) -> bool:
        posed = posing.pose(PIN, Readings("r", values), Candidate("convective", True, True))
        return faults.is_suspicious(optimum.fit(posed))

    values = read()
    assert glance(values | {"T4": values["T4"] + 2.0})
    assert glance(values | {"T3": values["T4"], "T4": values["T3"]})
    assert np.mean([glance(read(seed)) for seed in range(40)]) < 0.35


@pytest.mark.slow
@pytest.mark.parametrize("name", ["aluminium-rod", "bench-pin"])
def test_ten_kelvin_in_any_one_sensor_are_found_and_h_stays(name: str) -> None:
    import finback

    described = rig.read(path(name) / "rig.toml")
    run = readings.read(path(name) / "readings.csv", described).pick(None)
    right = finback.fit(described, run).parameters["h"].median
    assert right is not None
    for sensor in described.fin_sensors():
        wrong = Readings("r", dict(run.values) | {sensor.name: run.values[sensor.name] + 10.0})
        estimate = finback.fit(described, wrong)
        assert ("sensor-outlier", sensor.name) in {(f.code, f.sensor) for f in estimate.findings}
        assert estimate.parameters["h"].median == pytest.approx(right, rel=0.02)


@pytest.mark.slow
@pytest.mark.parametrize("name", ["aluminium-rod", "bench-pin"])
def test_two_neighbours_that_differ_are_found_when_they_are_swapped(name: str) -> None:
    described = rig.read(path(name) / "rig.toml")
    run = readings.read(path(name) / "readings.csv", described).pick(None)
    fin = [sensor.name for sensor in described.fin_sensors()]
    for first, other in itertools.pairwise(fin):
        values = dict(run.values)
        values[first], values[other] = values[other], values[first]
        codes = {(f.code, f.sensor) for f in faults.search(described, Readings("r", values)).findings}
        if abs(values[first] - values[other]) > 1.0:  # the rod's last ones differ by less than it scatters
            assert ("sensor-swap", first) in codes
