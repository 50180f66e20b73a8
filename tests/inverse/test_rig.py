"""The rig: what a file says, what is assumed where it is silent, and what becomes of it in the physics."""

import hashlib
import math
from pathlib import Path

import numpy as np
import pytest

from finback import rig as rigs
from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    ConvectiveTip,
    FixedTip,
    InfiniteTip,
    Joint,
    solve,
)
from finback.rig import Rig

WHOLE = """
title = "Rib 7 of an invented cooler, bench 2"

[fin]
profile = "pin"
length = "120 mm"
diameter = "8 mm +/- 0.02 mm"
tip = "convective"

[material]
conductivity = "167 W/(m K) +/- 5 %"

[joint]
expected = "5e-5 m^2 K/W"

[air]
expected_h = "45 W/(m^2 K) +/- 20 %"

[sensors.defaults]
noise = "0.2 K"
calibration = "0.3 K"
position = "0.5 mm"

[sensors]
T2 = { at = "12 mm +/- 0.1 mm", noise = "0.1 K" }
T1 = { at = "5 mm" }
T3 = { at = "12 cm", position = "0 mm", calibration = "0.9 degF" }
TP = { on = "plate" }
TA = { on = "air", noise = "0 K" }
Q  = { on = "heat", noise = "3 %", calibration = "2 %" }
P  = { on = "heater", noise = "0.1 W", calibration = "20 mW" }
"""

BAR = {
    "fin": {"profile": "rectangular", "length": "60 mm", "width": "30 mm", "thickness": "2 mm"},
    "sensors": {"T1": {"at": "5 mm"}, "TA": {"on": "air"}, "Q": {"on": "heat"}},
}


def bar(**fin: str) -> Rig:
    return Rig.from_dict(BAR | {"fin": BAR["fin"] | fin})


@pytest.fixture(scope="module")
def whole() -> Rig:
    return rigs.read_bytes(WHOLE.encode())


def test_everything_a_file_says_is_read(whole):
    assert whole.title == "Rib 7 of an invented cooler, bench 2"
    assert whole.profile_name == "pin"
    assert {name: (q.value, q.sd) for name, q in whole.geometry.items()} == {
        "length": (0.12, 0),
        "diameter": (0.008, pytest.approx(2e-5)),
    }
    assert whole.tip == "convective"
    assert (whole.conductivity.value, whole.conductivity.sd) == (167, pytest.approx(8.35))
    assert whole.expected_joint.value == pytest.approx(5e-5)
    assert (whole.expected_coefficient.value, whole.expected_coefficient.sd) == (45, 9)
    assert list(whole.sensors) == ["T2", "T1", "T3", "TP", "TA", "Q", "P"]
    assert whole.assumed == ()


@pytest.mark.parametrize(
    ("name", "position", "position_sd"),
    [("T1", 5e-3, 0.5e-3), ("T2", 12e-3, 0.1e-3), ("T3", 120e-3, 0), ("TP", None, 0), ("Q", None, 0)],
)
def test_a_position_has_its_own_uncertainty_or_the_defaults(whole, name, position, position_sd):
    sensor = whole.sensors[name]
    assert sensor.position == (None if position is None else pytest.approx(position, rel=1e-12))
    assert sensor.position_sd == pytest.approx(position_sd, rel=1e-12)


@pytest.mark.parametrize(
    ("name", "noise", "noise_relative", "calibration", "calibration_relative"),
    [
        ("T1", 0.2, None, 0.3, None),
        ("T2", 0.1, None, 0.3, None),
        ("T3", 0.2, None, 0.5, None),
        ("TP", 0.2, None, 0.3, None),
        ("TA", 0.0, None, 0.0, None),  # exactly known: the default calibration does not speak of it
        ("Q", None, 0.03, 0.0, 0.02),
        ("P", 0.1, None, 0.02, None),
    ],
)
def test_noise_and_calibration_are_its_own_or_those_of_the_temperatures(
    whole, name, noise, noise_relative, calibration, calibration_relative
):
    sensor = whole.sensors[name]
    assert sensor.noise == (None if noise is None else pytest.approx(noise, rel=1e-12))
    assert sensor.noise_relative == noise_relative
    assert sensor.calibration == pytest.approx(calibration, rel=1e-12)
    assert sensor.calibration_relative == calibration_relative
    assert sensor.exactly_known == (name == "TA")


def test_a_default_for_temperatures_leaves_heat_alone():
    document = BAR | {"sensors": BAR["sensors"] | {"defaults": {"noise": "0.2 K", "calibration": "0.3 K"}}}
    heat = Rig.from_dict(document).sensors["Q"]
    assert (heat.noise, heat.noise_relative, heat.calibration, heat.calibration_relative) == (
        None,
        0.05,
        0,
        None,
    )


def test_a_noise_that_is_not_stated_is_estimated_and_no_default():
    rig = bar()
    assert rig.sensors["T1"].noise is None
    assert not [
        finding
        for finding in rig.assumed
        if finding.evidence.get("key") == "noise" and "T1" in finding.message
    ]


def test_a_zero_noise_may_stand_beside_a_calibration():
    sensors = BAR["sensors"] | {"TA": {"on": "air", "noise": "0 K", "calibration": "0.3 K"}}
    air = Rig.from_dict(BAR | {"sensors": sensors}).sensors["TA"]
    assert (air.noise, air.calibration, air.exactly_known) == (0, 0.3, False)


def test_each_default_that_was_used_is_one_finding():
    messages = [finding.message for finding in bar().assumed]
    assert messages == [
        "It is not stated whether the two narrow side faces lose heat: they are taken to; state it with "
        'edges = "exposed" or "guarded" in [fin].',
        "No conductivity is stated: k is left free within a wide prior; state it with "
        'conductivity = "167 W/(m K) +/- 5 %" in [material].',
        'No calibration uncertainty is stated for "T1", "TA", "Q": it is taken as zero; state it with '
        'calibration = "0.3 K" in [sensors.defaults], for heat with calibration = "2 %".',
        'No uncertainty of the position is stated for "T1": it is taken as zero; state it with '
        'position = "0.5 mm" in [sensors.defaults].',
        'No noise is stated for "Q": it is taken as 5 % of the reading; state it with '
        'noise = "3 %" at the sensor.',
    ]
    assert all((finding.code, finding.severity) == ("assumed", "note") for finding in bar().assumed)


def test_a_rig_without_an_air_sensor_says_that_the_air_is_free():
    rig = Rig.from_dict(BAR | {"sensors": {"T1": {"at": "5 mm"}}})
    assert rig.assumed[-1].message == (
        "No sensor reads the air: its temperature is left free within a wide prior; add a sensor such as "
        'TA = { on = "air" }.'
    )


def test_sensors_of_a_place_come_from_base_to_tip(whole):
    assert [sensor.name for sensor in whole.fin_sensors()] == ["T1", "T2", "T3"]
    assert [sensor.name for sensor in whole.sensors_on("heat")] == ["Q"]
    assert whole.sensors_on("heater")[0].reads_temperature is False


def test_a_profile_has_the_area_and_perimeter_of_its_shape(whole):
    at = np.zeros(1)
    assert whole.profile().area(at)[0] == pytest.approx(math.pi * 0.004**2)
    assert whole.profile().perimeter(at)[0] == pytest.approx(math.pi * 0.008)
    assert bar().profile().area(at)[0] == pytest.approx(60e-6)
    assert bar(edges="exposed").profile().perimeter(at)[0] == pytest.approx(64e-3)
    assert bar(edges="guarded").profile().perimeter(at)[0] == pytest.approx(60e-3)


def test_a_profile_can_be_had_with_other_lengths(whole):
    changed = whole.profile({"diameter": 0.009})
    assert changed.length == 0.12
    assert changed.area(np.zeros(1))[0] == pytest.approx(math.pi * 0.0045**2)
    fin, _, _ = bar().build(
        {"h": 20.0, "k": 200.0, "air": 294.0, "plate": 350.0}, "adiabatic", {"width": 0.04}
    )
    assert fin.profile.area(np.zeros(1))[0] == pytest.approx(80e-6)


@pytest.mark.parametrize(
    ("values", "base"),
    [
        ({"plate": 350.0, "joint": 1e-4}, Joint(350.0, 1e-4)),
        ({"plate": 350.0}, BaseTemperature(350.0)),
        ({"base_temperature": 340.0}, BaseTemperature(340.0)),
        ({"plate": 350.0, "joint": 1e-4, "base_temperature": 340.0}, Joint(350.0, 1e-4)),
        ({"plate": 350.0, "base_temperature": 340.0}, BaseTemperature(350.0)),
    ],
)
def test_names_become_the_base(values, base):
    fin, found, air = bar().build({"h": 20.0, "k": 200.0, "air": 294.0} | values, "adiabatic")
    assert found == base
    assert (fin.conductivity, fin.surface.coefficient, air) == (200.0, 20.0, 294.0)


@pytest.mark.parametrize(
    ("name", "tip"),
    [
        ("adiabatic", AdiabaticTip()),
        ("convective", ConvectiveTip()),
        ("infinite", InfiniteTip()),
        ("fixed", FixedTip(300.0)),
    ],
)
def test_names_become_the_tip(name, tip):
    values = {"h": 20.0, "k": 200.0, "air": 294.0, "base_temperature": 340.0, "tip_temperature": 300.0}
    assert bar().build(values, name)[0].tip == tip


@pytest.mark.parametrize(("k", "heat"), [(398.0, 8.3), (180.0, 5.6), (14.0, 1.6)])
def test_a_long_rod_loses_the_heat_of_the_textbook(k, heat):
    # Incropera, Fundamentals of Heat and Mass Transfer, Example 3.9: rods of 5 mm in air at 25 °C with
    # h = 100 W/(m² K), base at 100 °C, of copper, aluminium alloy and stainless steel; printed to 0.1 W.
    rod = Rig.from_dict(
        {
            "fin": {"profile": "pin", "length": "300 mm", "diameter": "5 mm", "tip": "infinite"},
            "sensors": {"T1": {"at": "5 mm"}},
        }
    )
    values = {"h": 100.0, "k": k, "air": 298.15, "base_temperature": 373.15}
    fin, base, air = rod.build(values, rod.tip)
    assert solve(fin, base, air, np.zeros(1)).base_heat[0] == pytest.approx(heat, abs=0.05)


def test_a_block_of_values_is_built_at_once():
    values = {
        "h": np.array([20.0, 40.0]),
        "k": 200.0,
        "air": np.array([294.0, 295.0]),
        "plate": 350.0,
        "joint": np.array([1e-4, 0.0]),
    }
    rig = bar()
    whole_block = solve(*rig.build(values, "convective"), np.array([0.005, 0.05])).temperatures
    for row in range(2):
        one = {name: float(np.broadcast_to(value, 2)[row]) for name, value in values.items()}
        alone = solve(*rig.build(one, "convective"), np.array([0.005, 0.05])).temperatures
        np.testing.assert_allclose(whole_block[row], alone[0], rtol=1e-14)


def test_a_rig_can_come_from_python(whole):
    import tomllib

    found = Rig.from_dict(tomllib.loads(WHOLE))
    assert found.sensors == whole.sensors
    assert found.source is None
    assert found.sha256 is None


@pytest.mark.parametrize("change", [lambda text: "\ufeff" + text, lambda text: text.replace("\n", "\r\n")])
def test_a_byte_order_mark_and_other_line_ends_change_nothing(whole, change):
    assert rigs.read_bytes(change(WHOLE).encode()).sensors == whole.sensors


def test_a_file_is_known_by_its_path_and_its_hash(tmp_path):
    path = tmp_path / "rig.toml"
    path.write_text(WHOLE, encoding="utf-8")
    rig = rigs.read(str(path))
    assert rig.source == Path(path)
    assert rig.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


def test_a_rig_cannot_be_changed(whole):
    with pytest.raises(TypeError):
        whole.sensors["T9"] = whole.sensors["T1"]
    with pytest.raises(TypeError):
        whole.geometry["length"] = whole.geometry["diameter"]


@pytest.mark.parametrize("name", ["<script>alert(1)</script>", 'a "quoted" one', "T'1", "Ω-7", "x" * 64])
def test_a_name_may_hold_anything_that_can_be_printed(name):
    rig = Rig.from_dict(BAR | {"title": name, "sensors": {name: {"at": "5 mm"}}})
    assert (rig.title, list(rig.sensors)) == (name, [name])


def test_a_fixed_tip_may_leave_its_temperature_unknown():
    assert bar(tip="fixed").tip_temperature is None
    assert bar(tip="fixed", tip_temperature="15 degC").tip_temperature.value == pytest.approx(288.15)
