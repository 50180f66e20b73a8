"""Air against a full equation of state, textbook tables and the laws that tie its properties together."""

import json
from pathlib import Path

import CoolProp.CoolProp as CoolProp
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.models import vapour
from finback.models.air import AirProperties, air, film_temperature
from finback.models.constants import (
    ATMOSPHERE,
    GAS_CONSTANT,
    GRAVITY,
    STEFAN_BOLTZMANN,
    ZERO_CELSIUS,
)

TABLE = json.loads((Path(__file__).parent / "data" / "handbook.json").read_text(encoding="utf-8"))["air_1atm"]
NAMES = {
    "density": "D",
    "specific_heat": "C",
    "viscosity": "V",
    "conductivity": "L",
    "prandtl": "PRANDTL",
    "expansion": "ISOBARIC_EXPANSION_COEFFICIENT",
}
SYMBOLS = {
    "rho": "density",
    "cp": "specific_heat",
    "mu": "viscosity",
    "nu": "kinematic_viscosity",
    "k": "conductivity",
    "alpha": "diffusivity",
    "Pr": "prandtl",
}


def full_equation(name, temperature, pressure):
    """CoolProp's air: Lemmon et al. 2000 in full, with the transport equations of 2004."""
    return CoolProp.PropsSI(NAMES[name], "T", temperature, "P", pressure, "Air")


@pytest.mark.parametrize("name", NAMES)
@given(temperature=st.floats(250.0, 500.0))
def test_at_one_atmosphere_it_is_the_full_equation_of_state(name, temperature):
    expected = full_equation(name, temperature, ATMOSPHERE)
    assert getattr(air(temperature), name) == pytest.approx(expected, rel=2e-5)  # asked for: 0.5 %


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("pressure", [1e2, 1e4, 5e4, 2e5, 5e5])
@pytest.mark.parametrize("temperature", [200.0, 220.0, 300.0, 600.0, 1000.0])
def test_over_its_whole_range_it_is_right_to_half_a_percent(name, temperature, pressure):
    properties = air(temperature, pressure)
    assert properties.flags == ()
    assert getattr(properties, name) == pytest.approx(full_equation(name, temperature, pressure), rel=1e-3)


@pytest.mark.parametrize("row", TABLE["rows"], ids=lambda row: f"{row['T_K']} K")
def test_the_table_at_one_atmosphere(row):
    """The figures of CoolProp 8.0.0 at 101325 Pa, seven digits."""
    properties = air(float(row["T_K"]), TABLE["pressure_Pa"])
    found = {symbol: getattr(properties, name) for symbol, name in SYMBOLS.items()}
    assert found == pytest.approx(row["CoolProp"], rel=2e-5)


@pytest.mark.parametrize("row", TABLE["rows"], ids=lambda row: f"{row['T_K']} K")
def test_the_textbooks_table_lies_at_another_pressure(row):
    """Incropera, Table A.4: its densities are those of dry air at 100 kPa, 1.3 % lower."""
    properties, printed = air(float(row["T_K"]), 1e5), row["Incropera_A4"]
    assert properties.density == pytest.approx(printed["rho"], rel=1e-3)
    assert properties.viscosity == pytest.approx(printed["mu"], rel=6e-3)
    assert properties.conductivity == pytest.approx(printed["k"], rel=0.02)
    assert properties.prandtl == pytest.approx(printed["Pr"], rel=0.022)


def test_properties_belong_together():
    room = air(np.linspace(250.0, 500.0, 11), np.linspace(8e4, 2e5, 11))
    assert room.prandtl == pytest.approx(room.kinematic_viscosity / room.diffusivity, rel=1e-14)
    assert room.kinematic_viscosity == pytest.approx(room.viscosity / room.density, rel=1e-14)


@given(temperature=st.floats(200.0, 900.0), pressure=st.floats(1e3, 5e5), wet=st.floats(0.0, 0.02))
def test_expansion_is_how_density_falls(temperature, pressure, wet):
    step = 1e-4 * temperature
    near, far = (air(temperature + sign * step, pressure, wet).density for sign in (-1, 1))
    slope = (near - far) / (2 * step)
    properties = air(temperature, pressure, wet)
    assert properties.expansion == pytest.approx(slope / properties.density, rel=1e-6)


@given(temperature=st.floats(200.0, 900.0), wet=st.floats(0.0, 0.02))
def test_heat_capacity_follows_pressure_as_volume_follows_temperature(temperature, wet):
    """Thermodynamics: dc_p/dp = -T d²v/dT², at any one temperature."""
    step, low, high = 2e-3 * temperature, 2e4, 4e5

    def volume(T, p):
        return 1 / air(T, p, wet).density

    curvature = [
        (volume(temperature + step, p) - 2 * volume(temperature, p) + volume(temperature - step, p)) / step**2
        for p in (low, high)
    ]
    rise = air(temperature, high, wet).specific_heat - air(temperature, low, wet).specific_heat
    expected = -temperature * (high - low) * (curvature[0] + curvature[1]) / 2
    assert rise == pytest.approx(expected, rel=1e-2, abs=1e-3)  # J/(kg K); the curvature is a difference


@given(pressure=st.floats(1e2, 1e3))
def test_thin_air_is_an_ideal_gas(pressure):
    assert air(300.0, pressure).density == pytest.approx(
        pressure * 0.02896546 / (GAS_CONSTANT * 300.0), rel=1e-5
    )
    assert air(300.0, pressure).expansion == pytest.approx(1 / 300.0, rel=1e-4)


def test_blocks_are_rows_of_single_values():
    temperatures, pressures = np.array([260.0, 310.0, 480.0]), np.array([9e4, 1e5, 2e5])
    block = air(temperatures, pressures, np.array([0.0, 0.01, 0.02]))
    for i, wet in enumerate((0.0, 0.01, 0.02)):
        one = air(float(temperatures[i]), float(pressures[i]), wet)
        for name in (*NAMES, "kinematic_viscosity", "diffusivity"):
            assert getattr(block, name)[i] == pytest.approx(getattr(one, name), rel=1e-13)


def test_the_film_is_half_way():
    assert film_temperature(350.0, 300.0) == 325.0
    assert film_temperature(np.array([350.0, 400.0]), 300.0).tolist() == [325.0, 350.0]


# --- humid air -------------------------------------------------------------------------------------


@pytest.mark.parametrize("celsius", [-40.0, -10.0, 0.0, 0.01, 20.0, 60.0, 99.0])
def test_saturation_pressure(celsius):
    """Above 0 °C the steam formulation in CoolProp; below, the ice of its humid air (ASHRAE RP-1485)."""
    T = celsius + ZERO_CELSIUS
    if celsius > 0:
        expected = CoolProp.PropsSI("P", "T", T, "Q", 1, "Water")
    else:
        wet = CoolProp.HAPropsSI("P_w", "T", T, "P", ATMOSPHERE, "R", 1.0)
        expected = wet / 1.0045  # at one atmosphere the other gas lifts it by 0.4 to 0.5 %
    assert vapour.saturation_pressure(T) == pytest.approx(expected, rel=5e-4 if celsius > 0 else 2e-3)


@pytest.mark.parametrize("temperature", [275.0, 300.0, 330.0, 370.0, 500.0])
def test_vapour_is_thin_steam(temperature):
    """CoolProp's water at a pressure where its molecules no longer meet."""
    thin = {
        name: CoolProp.PropsSI(key, "T", temperature, "P", 1.0, "Water")
        for name, key in {"molar_heat": "CP0MOLAR", "viscosity": "V", "conductivity": "L"}.items()
    }
    found = {name: getattr(vapour, name)(temperature) for name in thin}
    assert found == pytest.approx(thin, rel=2e-5)


@pytest.mark.parametrize("humidity", [0.2, 0.6, 1.0])
@pytest.mark.parametrize("temperature", [275.0, 290.0, 300.0, 310.0])
def test_humid_air(temperature, humidity):
    """CoolProp's humid air, whose mixing rules are others. Per kilogram of the mixture."""
    fraction = vapour.vapour_fraction(humidity, temperature)
    properties = air(temperature, ATMOSPHERE, fraction)
    assert properties.flags == ()

    def expected(key):
        return CoolProp.HAPropsSI(key, "T", temperature, "P", ATMOSPHERE, "R", humidity)

    assert fraction == pytest.approx(expected("psi_w"), rel=6e-3)
    assert properties.density == pytest.approx(1 / expected("Vha"), rel=3e-4)
    assert properties.specific_heat == pytest.approx(expected("cp_ha"), rel=2e-3)
    assert properties.viscosity == pytest.approx(expected("mu"), rel=0.011)
    assert properties.conductivity == pytest.approx(expected("k"), rel=0.017)


def test_a_trace_of_vapour_changes_a_trace():
    dry, wet = air(300.0), air(300.0, ATMOSPHERE, 1e-9)
    for name in NAMES:
        assert getattr(wet, name) == pytest.approx(getattr(dry, name), rel=1e-8)


def test_the_fraction_stays_where_the_humidity_does_not():
    fraction = vapour.vapour_fraction(0.8, 293.15)
    assert fraction / vapour.vapour_fraction(1.0, 333.15) < 0.1


# --- ranges and refusals ---------------------------------------------------------------------------


def sentences(properties: AirProperties):
    return [str(flag) for flag in properties.flags]


def test_leaving_the_range_is_a_flag():
    assert sentences(air(1200.0)) == [
        "The air's property formula is stated for temperature from 200 to 1000 K; here it is 1200 K."
    ]
    assert sentences(air(np.array([300.0, 300.0]), np.array([1e5, 1e6]))) == [
        "The air's property formula is stated for pressure from 100 to 500000 Pa; here it is 1e6 Pa "
        "(1 of 2 values)."
    ]
    assert sentences(air(280.0, ATMOSPHERE, 0.05)) == [
        "The air holds 5.11 times the vapour that it can at its temperature: water condenses."
    ]


@pytest.mark.parametrize("wrong", [0.0, -5.0, np.nan, np.inf])
def test_a_state_that_cannot_be_is_refused(wrong):
    with pytest.raises(ValueError, match="the temperature of air must be positive and finite, not"):
        air(wrong)
    with pytest.raises(ValueError, match="the pressure of air must be positive and finite, not"):
        air(300.0, wrong)


def test_a_share_outside_0_to_1_is_refused():
    with pytest.raises(ValueError, match=r"mole fraction must lie between 0 and 1, not -0\.1"):
        air(300.0, ATMOSPHERE, -0.1)
    with pytest.raises(ValueError, match="relative humidity must lie between 0 and 1, not 50"):
        vapour.vapour_fraction(50.0, 293.15)
    with pytest.raises(ValueError, match="cannot exceed the pressure of the air"):
        vapour.vapour_fraction(1.0, 400.0)


def test_the_constants_are_those_of_codata():
    from scipy import constants

    assert constants.g == GRAVITY
    assert pytest.approx(constants.R, rel=1e-14) == GAS_CONSTANT
    assert pytest.approx(constants.Stefan_Boltzmann, rel=1e-10) == STEFAN_BOLTZMANN
    assert (constants.zero_Celsius, constants.atm) == (ZERO_CELSIUS, ATMOSPHERE)
