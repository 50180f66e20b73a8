"""The chooser: which correlation a fin gets, what it makes of it, and the way back to the air speed."""

import dataclasses
import re
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from finback.models import correlations, laws
from finback.models.air import air
from finback.models.constants import GRAVITY, STEFAN_BOLTZMANN
from finback.models.correlations import Layout
from finback.models.expected import expected_coefficient, implied_air_speed
from finback.models.exposure import (
    DISC_SCATTER,
    ExposedDisc,
    ExposedPin,
    ExposedPlate,
    Flow,
    PinBank,
    Stand,
    situation,
)
from finback.models.laws import LAWS, Stream
from finback.models.names import UnknownNameError
from finback.models.vapour import vapour_fraction

README = (Path(__file__).parents[2] / "models" / "README.md").read_text(encoding="utf-8")
ROOM, WARM = 295.0, 335.0
STILL, BLOWN = Stream(ROOM), Stream(ROOM, speed=3.0)
BANK = PinBank(Layout.STAGGERED, transverse_pitch=0.02, longitudinal_pitch=0.018, rows=6)
LEVEL_PIN, UPRIGHT_PIN = ExposedPin(0.12, 0.008), ExposedPin(0.12, 0.008, Stand.VERTICAL)
PIN_IN_BANK = ExposedPin(0.12, 0.008, bank=BANK)
PLATE, ROW = ExposedPlate(0.15, 0.04), ExposedPlate(0.15, 0.04, gap=0.008)
LEVEL_PLATE = ExposedPlate(0.15, 0.04, Stand.HORIZONTAL)
DISC, DISCS = ExposedDisc(0.025, 0.06), ExposedDisc(0.025, 0.06, gap=0.005)
LEVEL_DISC = ExposedDisc(0.025, 0.06, Stand.VERTICAL)
EVERY = {
    "level pin": LEVEL_PIN,
    "upright pin": UPRIGHT_PIN,
    "pin in a bank": PIN_IN_BANK,
    "plate": PLATE,
    "row": ROW,
    "level plate": LEVEL_PLATE,
    "disc": DISC,
    "discs": DISCS,
    "level disc": LEVEL_DISC,
}


# --- what is chosen --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "stream", "chosen", "length"),
    [
        ("level pin", STILL, "churchill_chu_cylinder", 0.008),
        ("upright pin", STILL, "churchill_chu_vertical_all", 0.12),
        ("pin in a bank", STILL, "churchill_chu_cylinder", 0.008),
        ("plate", STILL, "churchill_chu_vertical_all", 0.15),
        ("row", STILL, "bar_cohen_rohsenow", 0.008),
        ("level plate", STILL, "horizontal_plate", 0.15 * 0.04 / 0.38),
        ("disc", STILL, "churchill_chu_vertical_all", np.pi / 4 * 0.06),
        ("discs", STILL, "bar_cohen_rohsenow", 0.005),
        ("level disc", STILL, "horizontal_plate", 0.035 / 4),
        ("level pin", BLOWN, "churchill_bernstein", 0.008),
        ("upright pin", BLOWN, "churchill_bernstein", 0.008),
        ("pin in a bank", BLOWN, "zukauskas_bank", 0.008),
        ("plate", BLOWN, "flat_plate_laminar", 0.15),
        ("plate", Stream(ROOM, speed=70.0), "flat_plate_mixed", 0.15),
        ("row", BLOWN, "teertstra", 0.008),
        ("level plate", BLOWN, "flat_plate_laminar", 0.15),
        ("disc", BLOWN, "flat_plate_laminar", np.pi / 4 * 0.06),
        ("discs", BLOWN, "teertstra", 0.005),
        ("level disc", BLOWN, "flat_plate_laminar", np.pi / 4 * 0.06),
    ],
)
def test_the_usual_correlation(name, stream, chosen, length):
    found = expected_coefficient(EVERY[name], stream, WARM)
    assert found.correlation == chosen
    assert found.length == pytest.approx(length)
    assert (found.reynolds is None) == (stream is STILL)
    assert (found.rayleigh is None) == (stream is not STILL)


@pytest.mark.parametrize("exposure", EVERY.values(), ids=EVERY)
@pytest.mark.parametrize("stream", [STILL, BLOWN], ids=["still", "blown"])
def test_what_an_engineer_would_expect(exposure, stream):
    """Incropera, Table 1.1: gases have 2 to 25 W/(m² K) free, 25 to 250 forced; 3 m/s is slow for a plate."""
    low, high = (2, 25) if stream is STILL else (15, 250)
    found = expected_coefficient(exposure, stream, WARM)
    assert low < found.coefficient < high
    assert 0.05 < found.standard_uncertainty / found.coefficient < 0.35
    assert found.film_temperature == 315.0
    assert found.radiation is None


def test_every_law_is_reached_by_its_name():
    used = set()
    for exposure in EVERY.values():
        for stream in (STILL, BLOWN):
            flow = situation(exposure, stream is BLOWN).flow
            for name in LAWS[flow]:
                found = expected_coefficient(exposure, stream, WARM, name)
                assert found.correlation == name
                assert np.isfinite(found.coefficient)
                used |= {(flow, name)}
    assert used == {(flow, name) for flow in Flow for name in LAWS[flow]}


def test_every_correlation_of_a_fin_has_its_name_in_the_table():
    inside_ducts = {"hausen_laminar"}  # of a round tube: no fin has it
    names = {name for table in LAWS.values() for name in table} - {"horizontal_plate"}
    helpers = {"Layout", "Nusselt", "TRANSITION", "Walls"} | {
        "narrowest_velocity",
        "petukhov_friction",
        "popiel_vertical_cylinder",
    }
    assert names == set(correlations.__all__) - helpers - inside_ducts


# --- the numbers, by hand --------------------------------------------------------------------------


def test_a_pin_across_a_stream_by_hand():
    film = air(315.0)
    Re = 3.0 * 0.008 * film.density / film.viscosity
    Nu = correlations.churchill_bernstein(Re, film.prandtl)
    found = expected_coefficient(LEVEL_PIN, BLOWN, WARM)
    assert found.reynolds == pytest.approx(Re)
    assert found.prandtl == pytest.approx(film.prandtl)
    assert found.coefficient == pytest.approx(Nu.value * film.conductivity / 0.008)
    assert found.standard_uncertainty == pytest.approx(0.15 * found.coefficient)
    assert found.nusselt == Nu.value
    assert found.flags == ()


def test_a_plate_in_still_air_by_hand():
    film = air(315.0)
    Ra = GRAVITY * film.expansion * 40.0 * 0.15**3 / (film.kinematic_viscosity * film.diffusivity)
    table = GRAVITY / 315.0 * 40 * 0.15**3 / (1.723e-5 * 2.444e-5)  # between 300 and 350 K of a table of air
    assert Ra == pytest.approx(table, rel=0.01)
    Nu = correlations.churchill_chu_vertical_all(Ra, film.prandtl).value
    found = expected_coefficient(PLATE, STILL, WARM)
    assert (found.rayleigh, found.nusselt) == pytest.approx((Ra, Nu))
    assert found.coefficient == pytest.approx(Nu * film.conductivity / 0.15)


def test_a_row_in_still_air_by_hand():
    film = air(315.0)
    Ra = GRAVITY * film.expansion * 40.0 * 0.008**4 / (film.kinematic_viscosity * film.diffusivity * 0.15)
    found = expected_coefficient(ROW, STILL, WARM)
    assert found.rayleigh == pytest.approx(Ra)
    h = correlations.bar_cohen_rohsenow(Ra).value * film.conductivity / 0.008
    assert found.coefficient == pytest.approx(h)
    named = expected_coefficient(ROW, STILL, WARM, "elenbaas")
    assert named.coefficient == pytest.approx(h, rel=0.05)


def test_a_bank_by_hand():
    free, surface = air(ROOM), air(WARM)
    diagonal = np.hypot(0.018, 0.01)
    fastest = 3.0 * 0.02 / min(0.012, 2 * (diagonal - 0.008))
    Re = fastest * 0.008 / free.kinematic_viscosity
    Nu = correlations.zukauskas_bank(Re, free.prandtl, surface.prandtl, Layout.STAGGERED, 6, 0.02 / 0.018)
    found = expected_coefficient(PIN_IN_BANK, BLOWN, WARM)
    assert found.reynolds == pytest.approx(Re)
    assert found.prandtl == pytest.approx(free.prandtl)
    assert found.coefficient == pytest.approx(Nu.value * free.conductivity / 0.008)
    assert "log-mean" in found.notes[-1]


@pytest.mark.parametrize("law", ["gnielinski", "dittus_boelter"])
def test_a_turbulent_row_cannot_take_up_more_than_the_air_carries(law):
    """h on the air that enters: h 2 L ≤ rho U b c_p, and far below that bound it is the duct's own."""
    film, fast = air(315.0), Stream(ROOM, speed=12.0)
    short, endless = ExposedPlate(0.001, 0.04, gap=0.01), ExposedPlate(50.0, 0.04, gap=0.01)
    carried = film.density * 12.0 * 0.01 * film.specific_heat
    bound = carried / (2 * 50.0)
    assert expected_coefficient(endless, fast, WARM, law).coefficient == pytest.approx(bound, rel=1e-6)
    Re = 12.0 * 0.02 * film.density / film.viscosity
    duct = {
        "gnielinski": correlations.gnielinski(Re, film.prandtl),
        "dittus_boelter": correlations.dittus_boelter(Re, film.prandtl, fluid_is_heated=True),
    }[law]
    found = expected_coefficient(short, fast, WARM, law)
    assert found.coefficient == pytest.approx(duct.value * film.conductivity / 0.02, rel=0.01)
    assert found.length == 0.02


def test_a_fin_that_is_colder_than_the_air():
    warm, cold = expected_coefficient(PLATE, STILL, WARM), expected_coefficient(PLATE, Stream(WARM), ROOM)
    assert cold.coefficient == pytest.approx(warm.coefficient)


def test_radiation_stands_beside():
    found = expected_coefficient(PLATE, STILL, WARM, emissivity=0.85)
    flux = 0.85 * STEFAN_BOLTZMANN * (WARM**4 - ROOM**4)
    assert found.radiation == pytest.approx(flux / (WARM - ROOM))
    assert found.coefficient == expected_coefficient(PLATE, STILL, WARM).coefficient
    with pytest.raises(ValueError, match="emissivity must lie between 0 and 1"):
        expected_coefficient(PLATE, STILL, WARM, emissivity=1.3)


def test_a_disc_is_less_certain_than_a_plate():
    disc = expected_coefficient(DISC, BLOWN, WARM)
    plate = expected_coefficient(ExposedPlate(np.pi / 4 * 0.06, 0.05), BLOWN, WARM)
    assert disc.coefficient == pytest.approx(plate.coefficient)
    expected = np.hypot(plate.standard_uncertainty / plate.coefficient, DISC_SCATTER)
    assert disc.standard_uncertainty / disc.coefficient == pytest.approx(expected)
    assert disc.notes[0].startswith("a disc is taken as a plate as long as its mean chord")


@given(height=st.floats(0.01, 0.5), excess=st.floats(1.0, 150.0))
def test_a_slender_pin_has_more_than_a_plate_of_its_height(height, excess):
    plate = expected_coefficient(ExposedPlate(height, 0.05), STILL, ROOM + excess)
    pin = expected_coefficient(ExposedPin(height, 0.005, Stand.VERTICAL), STILL, ROOM + excess)
    stout = expected_coefficient(ExposedPin(height, 50.0, Stand.VERTICAL), STILL, ROOM + excess)
    assert pin.coefficient > plate.coefficient
    assert stout.coefficient == pytest.approx(plate.coefficient, rel=0.02)


@given(gap=st.floats(0.08, 0.5))
def test_a_row_of_fins_far_apart_is_a_row_of_single_plates(gap):
    """Bar-Cohen and Rohsenow's wide limit is a laminar plate, 0.59 Ra^(1/4)."""
    single = expected_coefficient(PLATE, STILL, WARM, "mcadams_vertical").coefficient
    row = expected_coefficient(dataclasses.replace(PLATE, gap=gap), STILL, WARM).coefficient
    assert row == pytest.approx(single, rel=0.02)


@given(speed=st.floats(0.5, 20.0))
def test_channels_far_apart_are_plates_in_a_stream(speed):
    single = expected_coefficient(PLATE, Stream(ROOM, speed), WARM, "flat_plate_laminar").coefficient
    row = expected_coefficient(dataclasses.replace(PLATE, gap=1.0), Stream(ROOM, speed), WARM).coefficient
    assert row == pytest.approx(single, rel=0.04)


def test_thin_and_humid_air():
    low = Stream(ROOM, speed=3.0, pressure=5e4)
    wet = Stream(ROOM, speed=3.0, vapour_fraction=float(vapour_fraction(0.6, ROOM)))
    normal = expected_coefficient(PLATE, BLOWN, WARM).coefficient
    assert expected_coefficient(PLATE, low, WARM).coefficient == pytest.approx(normal * 0.5**0.5, rel=0.01)
    assert expected_coefficient(PLATE, wet, WARM).coefficient == pytest.approx(normal, rel=0.01)
    assert expected_coefficient(PLATE, wet, WARM).coefficient != normal


# --- flags -----------------------------------------------------------------------------------------


def messages(found):
    return [flag.message for flag in found.flags]


def test_free_and_forced_convection_together_are_a_flag():
    (message,) = messages(expected_coefficient(PLATE, Stream(ROOM, speed=0.4), WARM))
    assert message == (
        "Free convection counts beside the flow: Ra/(Re² Pr) is 1.2; it alone would give 5.73 W/(m² K), the "
        "flow alone 6.4 W/(m² K)."
    )
    (message,) = messages(expected_coefficient(PLATE, Stream(ROOM, speed=0.05), WARM))
    assert message.startswith("Free convection outweighs the flow: Ra/(Re² Pr) is 75; ")
    assert messages(expected_coefficient(PLATE, Stream(ROOM, speed=1.5), WARM)) == []
    assert messages(expected_coefficient(PLATE, Stream(ROOM, speed=0.4), ROOM)) == []


def test_the_limit_of_mixed_convection_is_where_the_books_put_it():
    """Incropera, section 9.9: Gr/Re² = Ra/(Re² Pr) of 0.1 and of 10."""
    for limit, word in ((0.1, "counts"), (10.0, "outweighs")):
        at = expected_coefficient(PLATE, Stream(ROOM, speed=1.0), WARM)
        ratio = expected_coefficient(PLATE, STILL, WARM).rayleigh / (at.reynolds**2 * at.prandtl)
        speed = np.sqrt(ratio / limit)
        below, above = (
            messages(expected_coefficient(PLATE, Stream(ROOM, speed=speed * f), WARM)) for f in (1.001, 0.999)
        )
        assert word in above[0]
        assert below == [] or word not in below[0]


def test_ranges_travel_to_the_result():
    (message,) = messages(expected_coefficient(LEVEL_PLATE, Stream(ROOM), 296.0))[:1]
    assert message.startswith("McAdams, horizontal plate, hot side up is stated for Ra from 10000 to 1e11")
    quantities = {flag.quantity for flag in expected_coefficient(ROW, Stream(ROOM, speed=120.0), WARM).flags}
    assert quantities == {"Re*", "speed"}
    quantities = {
        flag.quantity for flag in expected_coefficient(PLATE, Stream(ROOM, speed=10.0), 2000.0).flags
    }
    assert quantities == {"temperature"}


@pytest.mark.parametrize(
    ("exposure", "what"),
    [
        (PIN_IN_BANK, "a pin in still air"),
        (dataclasses.replace(LEVEL_PLATE, gap=0.01), "a level fin in still air"),
    ],
)
def test_neighbours_that_no_correlation_knows_are_a_flag(exposure, what):
    assert messages(expected_coefficient(exposure, STILL, WARM))[-1] == (
        f"No correlation here knows the neighbours of {what}: they are left out, and h may be less."
    )


# --- refusals --------------------------------------------------------------------------------------


def test_a_correlation_of_another_flow_is_refused():
    with pytest.raises(
        ValueError, match=r"^churchill_bernstein is for a stream across a cylinder; for "
    ) as caught:
        expected_coefficient(PLATE, BLOWN, WARM, "Churchill-Bernstein")
    assert str(caught.value).endswith(
        "for a stream along a plate there are flat_plate_laminar, flat_plate_mixed, flat_plate_turbulent, "
        "churchill_ozoe"
    )
    with pytest.raises(ValueError, match="mcadams_vertical is for air rising along a vertical plate or "):
        expected_coefficient(PLATE, BLOWN, WARM, "mcadams_vertical")


def test_an_unknown_correlation_names_the_nearest():
    with pytest.raises(UnknownNameError, match="no correlation is called 'hilbert'; the nearest are hilpert"):
        expected_coefficient(LEVEL_PIN, BLOWN, WARM, "hilbert")


@pytest.mark.parametrize(
    ("exposure", "sentence"),
    [
        (ExposedPin(0.0, 0.008), "the length must be positive and finite, not 0.0 m"),
        (ExposedPin(0.1, -0.008), "the diameter must be positive and finite, not -0.008 m"),
        (ExposedPlate(0.1, float("nan")), "the across must be positive and finite, not nan m"),
        (ExposedPlate(0.1, 0.1, gap=0.0), "the gap must be positive and finite, not 0.0 m"),
        (ExposedDisc(0.06, 0.025), "an annular fin needs an outer diameter larger than its inner diameter"),
        (ExposedDisc(0.0, 0.025), "the inner diameter must be positive and finite, not 0.0 m"),
    ],
)
def test_a_fin_that_cannot_be_is_refused(exposure, sentence):
    with pytest.raises(ValueError, match=f"^{sentence}$"):
        expected_coefficient(exposure, STILL, WARM)


@pytest.mark.parametrize("speed", [0.0, -1.0, float("nan"), float("inf")])
def test_a_speed_that_cannot_be_is_refused(speed):
    with pytest.raises(ValueError, match="the speed of the air must be positive and finite, not"):
        expected_coefficient(PLATE, Stream(ROOM, speed=speed), WARM)


def test_still_air_needs_an_excess_temperature():
    for exposure in EVERY.values():
        with pytest.raises(ValueError, match="the surface is as warm as the still air"):
            expected_coefficient(exposure, STILL, ROOM)
        assert expected_coefficient(exposure, BLOWN, ROOM).coefficient > 0


# --- the air speed that belongs to a coefficient ---------------------------------------------------


@pytest.mark.parametrize("exposure", EVERY.values(), ids=EVERY)
@settings(max_examples=30, deadline=None)
@given(speed=st.floats(0.05, 50.0))
def test_there_and_back(exposure, speed):
    found = expected_coefficient(exposure, Stream(ROOM, speed=speed), WARM)
    implied = implied_air_speed(found.coefficient, exposure, STILL, WARM)
    assert implied.speed is not None
    back = expected_coefficient(exposure, Stream(ROOM, speed=implied.speed), WARM)
    assert back.coefficient == pytest.approx(found.coefficient, rel=1e-9)
    assert implied.expected == back
    if any("bands do not meet" in flag.message for flag in implied.flags):
        assert exposure is PIN_IN_BANK
        assert f"{speed:.3g}" in implied.flags[0].message
    else:
        assert implied.speed == pytest.approx(speed, rel=1e-6)


def test_the_stream_of_the_air_is_left_out_of_account():
    assert implied_air_speed(60.0, LEVEL_PIN, STILL, WARM) == implied_air_speed(60.0, LEVEL_PIN, BLOWN, WARM)


@given(relative=st.floats(0.0, 0.1))
def test_the_uncertainty_of_the_speed(relative):
    """Along a laminar plate h goes as the root of the speed: twice the relative uncertainty of h."""
    h = 25.0
    implied = implied_air_speed(h, PLATE, STILL, WARM, coefficient_sd=relative * h)
    assert implied.standard_uncertainty / implied.speed == pytest.approx(
        2 * np.hypot(0.10, relative), rel=1e-3
    )


@pytest.mark.parametrize(("h", "side"), [(0.5, "below"), (5000.0, "above")])
def test_a_coefficient_out_of_reach_has_no_speed_and_says_so(h, side):
    implied = implied_air_speed(h, LEVEL_PIN, STILL, WARM)
    assert (implied.speed, implied.standard_uncertainty, implied.expected) == (None, None, None)
    (flag,) = implied.flags
    assert flag.message.startswith(f"h = {h:g} W/(m² K) lies {side} the ".replace("5000", "5e+03"))
    assert flag.message.endswith("m/s: no speed of the air explains it.")


def test_flags_of_the_flow_travel_with_the_speed():
    h = expected_coefficient(PLATE, Stream(ROOM, speed=0.3), WARM).coefficient
    implied = implied_air_speed(h, PLATE, STILL, WARM)
    assert implied.speed == pytest.approx(0.3)
    assert any(flag.quantity == "Ra/(Re² Pr)" for flag in implied.flags)


def test_a_step_between_two_bands_is_a_flag():
    """Hilpert's law rises by a step of 1 % at Re = 40: a coefficient inside it belongs to no speed."""
    wire = ExposedPin(0.1, 0.0005)
    film = air(315.0)
    at_the_step = 40.0 * film.kinematic_viscosity / 0.0005
    below, above = (
        expected_coefficient(wire, Stream(ROOM, speed=at_the_step * f), WARM, "hilpert").coefficient
        for f in (1 - 1e-9, 1 + 1e-9)
    )
    assert above > 1.005 * below
    implied = implied_air_speed((below + above) / 2, wire, STILL, WARM, "hilpert")
    assert implied.speed == pytest.approx(at_the_step, rel=1e-6)
    assert implied.flags[0].message.startswith("Hilpert, cylinder in cross flow steps over this coefficient")


@pytest.mark.parametrize("h", [0.0, -3.0, float("nan"), float("inf")])
def test_a_coefficient_that_cannot_be_is_refused(h):
    with pytest.raises(ValueError, match="a film coefficient must be positive and finite, not"):
        implied_air_speed(h, LEVEL_PIN, STILL, WARM)


def test_the_readme_lists_every_law_with_its_scatter():
    rows = re.findall(r"^\|[^|]*\| `(\w+)`[^|]*\|[^|]*\|[^|]*\| (\d+) % \|$", README, re.MULTILINE)
    told = {name: int(scatter) / 100 for name, scatter in rows}
    found = {}
    for exposure in EVERY.values():
        for stream in (STILL, BLOWN):
            place = situation(exposure, stream is BLOWN)
            for name, law in LAWS[place.flow].items():
                if place.flow is not Flow.RISING_UPRIGHT and name != "horizontal_plate":
                    found[name] = law(place, laws.film(WARM, stream)).nusselt.scatter
    assert told == found
    assert "| `horizontal_plate`: the mean of up and down |" in README


def test_the_table_has_every_flow():
    assert set(LAWS) == set(Flow)
    assert all(laws.named(name, situation(LEVEL_PIN, True)) == name for name in LAWS[Flow.ACROSS_CYLINDER])
