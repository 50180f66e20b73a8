"""Quantities: what is read, what it is in SI units, and how it is written back."""

import math
import subprocess
import sys

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.errors import InputError
from finback.quantity import (
    KINDS,
    SCALES,
    Quantity,
    format_number,
    format_value,
    parse,
    pretty_unit,
    scale,
)

DIMENSIONS = sorted(KINDS)


@pytest.mark.parametrize(
    ("text", "dimension", "value", "sd"),
    [
        ("8 mm", "length", 8e-3, 0),
        ("8mm", "length", 8e-3, 0),
        ("  8 mm  ", "length", 8e-3, 0),
        ("0,5 mm", "length", 0.5e-3, 0),
        (".5 mm", "length", 0.5e-3, 0),
        ("8 mm +/- 0.05 mm", "length", 8e-3, 0.05e-3),
        ("8 mm ± 0,05 mm", "length", 8e-3, 0.05e-3),
        ("(8 ± 0.05) mm", "length", 8e-3, 0.05e-3),
        ("8 mm +/- 50 µm", "length", 8e-3, 50e-6),
        ("8 mm +/- 1 %", "length", 8e-3, 0.08e-3),
        ("8 mm +/- 0 mm", "length", 8e-3, 0),
        ("-3 mm", "length", -3e-3, 0),
        ("−3 mm", "length", -3e-3, 0),
        ("167 W/(m K) +/- 5 %", "conductivity", 167, 8.35),
        ("167 W/m/K", "conductivity", 167, 0),
        ("167 W/m K", "conductivity", 167, 0),
        ("167 W/mK", "conductivity", 167, 0),
        ("167 W/(m·K)", "conductivity", 167, 0),
        ("1.67 W/(cm K)", "conductivity", 167, 0),
        ("167 W m^-1 K^-1", "conductivity", 167, 0),
        ("45 W/(m² K) +/- 20 %", "coefficient", 45, 9),
        ("45 W/(m^2 K)", "coefficient", 45, 0),
        ("45 W/(m**2*K)", "coefficient", 45, 0),
        ("45 W/m2K", "coefficient", 45, 0),
        ("45 W/m^2/K", "coefficient", 45, 0),
        ("45 W m⁻² K⁻¹", "coefficient", 45, 0),
        ("45 W/(m^2 degC)", "coefficient", 45, 0),
        ("5e-5 m^2 K/W", "resistance", 5e-5, 0),
        ("5E-5 m²·K/W", "resistance", 5e-5, 0),
        ("0.5 cm^2 K/W", "resistance", 5e-5, 0),
        ("21.3 degC", "temperature", 294.45, 0),
        ("21.3 °C", "temperature", 294.45, 0),
        ("21.3 C", "temperature", 294.45, 0),
        ("21.3 deg C", "temperature", 294.45, 0),
        ("294.4 K", "temperature", 294.4, 0),
        ("-40 degF", "temperature", 233.15, 0),
        ("21 degC +/- 0.5 K", "temperature", 294.15, 0.5),
        ("21 degC +/- 0.5 degC", "temperature", 294.15, 0.5),
        ("21 degC +/- 0.9 degF", "temperature", 294.15, 0.5),
        ("0.5 K", "temperature difference", 0.5, 0),
        ("0.5 degC", "temperature difference", 0.5, 0),
        ("0.9 degF", "temperature difference", 0.5, 0),
        ("200 mK", "temperature difference", 0.2, 0),
        ("12 W", "heat", 12, 0),
        ("0.012 kW +/- 3 %", "heat", 12, 0.36),
        ("3 %", "relative", 0.03, 0),
        ("3%", "relative", 0.03, 0),
        ("50 mm^2", "area", 50e-6, 0),
        ("0,5 cm² ± 1 mm²", "area", 50e-6, 1e-6),
        ("2.5 m/s +/- 10 %", "speed", 2.5, 0.25),
        ("9 km/h", "speed", 2.5, 0),
        ("98 kPa +/- 0.5 %", "pressure", 98e3, 490),
        ("1013.25 mbar", "pressure", 101325, 0),
        ("45 % +/- 5 %", "humidity", 0.45, 0.05),  # five points of it
    ],
)
def test_a_quantity_is_read(text, dimension, value, sd):
    found = parse(text, dimension)
    assert found.value == pytest.approx(value, rel=1e-12)
    assert found.sd == pytest.approx(sd, rel=1e-12)
    assert found.text == text


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        # NIST Special Publication 811 (2008), appendix B.8 and B.9; factors printed to seven digits.
        ("1 Btu/(h ft degF)", "conductivity", 1.730735),
        ("1 Btu/(h ft^2 degF)", "coefficient", 5.678263),
        ("1 degF h ft^2/Btu", "resistance", 0.1761102),
        ("1 Btu/h", "heat", 0.2930711),
        ("1 hp", "heat", 745.6999),
        ("1 in", "length", 0.0254),
        ("1 in^2", "area", 6.4516e-4),
        ("1 ft/min", "speed", 5.08e-3),
        ("1 mi/h", "speed", 0.44704),
        ("1 psi", "pressure", 6894.757),
        ("1 atm", "pressure", 101325),
        ("1 ft", "length", 0.3048),
        ("32 degF", "temperature", 273.15),
        ("212 degF", "temperature", 373.15),
        ("491.67 degR", "temperature", 273.15),
        ("1.8 degR", "temperature difference", 1.0),
    ],
)
def test_other_units_agree_with_the_published_factors(text, dimension, value):
    # 5e-7: the last printed digit; the Btu of the table and that of the unit library differ by 1.4e-7
    assert parse(text, dimension).value == pytest.approx(value, rel=5e-7)


@pytest.mark.parametrize("name", sorted(SCALES))
@pytest.mark.parametrize("reading", [-12.5, 0.0, 98.6])
def test_the_temperature_scales_are_those_of_the_unit_library(name, reading):
    factor, offset = SCALES[name]
    expected = pint.application_registry.get().Quantity(reading, name).to("K").magnitude
    assert reading * factor + offset == pytest.approx(expected, abs=1e-9)


def write(kind):
    return f'write {KINDS[kind].words} with its unit, such as "{KINDS[kind].example}"'


@pytest.mark.parametrize(
    ("text", "dimension", "sentence"),
    [
        (8, "length", f"the number 8 has no unit; {write('length')}."),
        (8.5, "length", f"the number 8.5 has no unit; {write('length')}."),
        (True, "length", f"this is not a number with a unit; {write('length')}."),
        (None, "heat", f"this is not a number with a unit; {write('heat')}."),
        ("8", "length", f'"8" has no unit; {write("length")}.'),
        ("", "length", f'"" does not begin with a number; {write("length")}.'),
        ("mm 8", "length", f'"mm 8" does not begin with a number; {write("length")}.'),
        ("nan mm", "length", f'"nan mm" does not begin with a number; {write("length")}.'),
        ("inf mm", "length", f'"inf mm" does not begin with a number; {write("length")}.'),
        ("1e999 mm", "length", f'"1e999 mm" is too large a number; {write("length")}.'),
        ("1e308 km", "length", f'"1e308 km" is too large a number; {write("length")}.'),
        ("1.2.3 mm", "length", f'"1.2.3 mm" does not begin with a number; {write("length")}.'),
        ("1,000 mm", "length", '"1,000 mm" can be read as 1.000 and as 1000; write "1.000" or "1000".'),
        ("8 kg", "length", f'the unit "kg" is not that of a length; {write("length")}.'),
        ("8 m^2", "length", f'the unit "m^2" is not that of a length; {write("length")}.'),
        ("8 %", "length", f'the unit "%" is not that of a length; {write("length")}.'),
        ("8 mm mm", "length", f'the unit "mm mm" is not that of a length; {write("length")}.'),
        ("8 furlogs", "length", f'the unit "furlogs" is unknown; {write("length")}.'),
        ("8 m^^2", "length", f'the unit "m^^2" cannot be read; {write("length")}.'),
        ("8 (m", "length", f'the unit "(m" cannot be read; {write("length")}.'),
        ("8 m)", "length", f'the unit "m)" cannot be read; {write("length")}.'),
        ("8 m/", "length", f'the unit "m/" cannot be read; {write("length")}.'),
        ("8 m^9^9^9^9", "length", f'the unit "m^9^9^9^9" cannot be read; {write("length")}.'),
        ("8 __import__('os')", "length", f"the unit \"__import__('os')\" cannot be read; {write('length')}."),
        ("8 mm +/- 1", "length", 'the uncertainty in "8 mm +/- 1" has no unit; write its standard '
         'uncertainty with a unit, such as "+/- 0.05 mm".'),
        ("8 mm +/- 1 K", "length", f'the unit "K" is not that of a length; {write("length")}.'),
        ("8 mm +/- -1 mm", "length", '"8 mm +/- -1 mm" has a negative uncertainty; write a positive one.'),
        ("8 mm +/- 1 mm +/- 1 mm", "length",
         f'"8 mm +/- 1 mm +/- 1 mm" has more than one "+/-"; {write("length")}.'),
        ("20 degC +/- 2 %", "temperature", '"20 degC +/- 2 %" has an uncertainty in per cent, which means '
         'nothing for a temperature; write a difference, such as "+/- 0.5 K".'),
        ("20 J", "temperature", f'the unit "J" is not that of a temperature; {write("temperature")}.'),
        ("0.03", "relative", f'"0.03" has no unit; {write("relative")}.'),
        ("45", "humidity", f'"45" has no unit; {write("humidity")}.'),
        ("45 mm", "humidity", f'the unit "mm" is not that of a relative humidity; {write("humidity")}.'),
        ("98 %", "pressure", f'the unit "%" is not that of a pressure; {write("pressure")}.'),
        ("2.5 Hz", "speed", f'the unit "Hz" is not that of a speed; {write("speed")}.'),
        ("3 mm", "relative", f'the unit "mm" is not that of a share of the value; {write("relative")}.'),
        ("8 mm" + " " * 100, "length",
         f'"8 mm{" " * 35}…" is longer than 80 characters; {write("length")}.'),
    ],
)  # fmt: skip
def test_what_is_no_quantity_is_refused_in_a_sentence(text, dimension, sentence):
    with pytest.raises(InputError) as refusal:
        parse(text, dimension)
    assert str(refusal.value) == sentence


def read_or_refuse(text, dimension):
    try:
        return parse(text, dimension)
    except InputError as refusal:
        return str(refusal)


@given(text=st.text(max_size=90), dimension=st.sampled_from(DIMENSIONS))
def test_any_text_gives_a_quantity_or_a_sentence(text, dimension):
    found = read_or_refuse(text, dimension)
    if isinstance(found, str):
        assert found.isprintable()
    else:
        assert math.isfinite(found.value)
        assert found.sd >= 0


@given(
    text=st.text("0123456789.,eE+-/*^()% mWKkdegCFbarJx±²·⁻¹", max_size=24),
    dimension=st.sampled_from(DIMENSIONS),
)
def test_nearly_right_text_gives_a_quantity_or_a_sentence(text, dimension):
    found = read_or_refuse("8" + text, dimension)
    assert isinstance(found, str) or math.isfinite(found.value)


@given(
    value=st.floats(-1e6, 1e6, allow_subnormal=False),
    sd=st.floats(0, 1e6, allow_subnormal=False),
    unit=st.sampled_from(["m", "mm", "in", "km"]),
)
def test_a_written_quantity_is_read_back(value, sd, unit):
    found = parse(f"{value!r} {unit} +/- {sd!r} {unit}", "length")
    factor = scale(unit, "length")[0]
    assert found == Quantity(value * factor, sd * factor, found.text)


@pytest.mark.parametrize(
    ("value", "sd", "unit", "text"),
    [
        (41.3, 1.8, "W/(m^2 K)", "41.3 ± 1.8 W/(m² K)"),
        (41.34, 0.996, "W/(m^2 K)", "41.3 ± 1.0 W/(m² K)"),
        (184140.0, 1395.0, "W/m^2", "184100 ± 1400 W/m²"),
        (19.1422, 0.1395, "W/(m^2 K)", "19.14 ± 0.14 W/(m² K)"),
        (5.21e-5, 4.4e-6, "m^2 K/W", "(5.21 ± 0.44) × 10⁻⁵ m² K/W"),
        (2.5e7, 1.2e6, "", "(2.50 ± 0.12) × 10⁷"),
        (0.01, 0.5, "degC", "0.01 ± 0.50 °C"),
        (-3.1e-8, 1e-8, "m", "(-3.1 ± 1.0) × 10⁻⁸ m"),
        (21.2897, 0.0, "degC", "21.29 °C"),
        (21.2897, None, "degC", "21.29 °C"),
        (None, None, "W", "–"),
        (math.nan, 1.0, "W", "–"),
    ],
)
def test_a_value_is_rounded_to_its_uncertainty(value, sd, unit, text):
    assert format_value(value, sd, unit) == text


@given(value=st.floats(-1e9, 1e9), sd=st.floats(1e-9, 1e9))
def test_a_rounded_value_is_right_within_half_a_unit_of_the_second_digit(value, sd):
    text = format_value(value, sd)
    body, _, power = text.partition(" × 10")
    factor = 10.0 ** int(power.translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")) or 0)
    shown_value, shown_sd = (float(part) * factor for part in body.strip("()").split(" ± "))
    second_digit = 10.0 ** (math.floor(math.log10(shown_sd * (1 + 1e-9))) - 1)
    rounding = 4 * sys.float_info.epsilon * (abs(value) + sd) + 1e-6 * second_digit
    assert abs(shown_sd - sd) <= 0.5 * second_digit + rounding
    assert abs(shown_value - value) <= 0.5 * second_digit + rounding


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.000123, "1.23 × 10⁻⁴"),
        (0.00099996, "0.00100"),
        (2.0, "2.00"),
        (41.27, "41.3"),
        (-5.125e3, "-5120"),
        (123456.0, "123000"),
        (999999.6, "1.00 × 10⁶"),
        (0.0, "0"),
        (None, "–"),
        (math.inf, "–"),
    ],
)
def test_a_number_is_shown_with_three_digits(value, text):
    assert format_number(value) == text


@pytest.mark.parametrize(
    ("unit", "text"),
    [
        ("W/(m^2 K)", "W/(m² K)"),
        ("m^2 K/W", "m² K/W"),
        ("degC", "°C"),
        ("1/m", "1/m"),
        ("W m^-2 K^-1", "W m⁻² K⁻¹"),
    ],
)
def test_a_unit_is_printed(unit, text):
    assert pretty_unit(unit) == text


def test_the_unit_library_is_loaded_when_a_unit_is_read_and_not_before():
    code = (
        "import sys\n"
        "import finback.quantity, finback.rig, finback.readings, finback.checks\n"
        "heavy = {'pint', 'pydantic', 'pandas', 'openpyxl'}\n"
        "assert not heavy & set(sys.modules)\n"
        "finback.quantity.parse('21 degC', 'temperature')\n"
        "assert 'pint' not in sys.modules\n"
        "finback.quantity.parse('8 mm', 'length')\n"
        "assert 'pint' in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)
