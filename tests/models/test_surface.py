"""Surface laws and conductivity laws: derivatives, potentials, worked examples, and what is refused."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    Conductivity,
    ConstantConductivity,
    ConvectiveTip,
    Fin,
    FixedTip,
    LinearConductivity,
    PowerCoefficient,
    Radiating,
    SurfaceLaw,
    TabledCoefficient,
    TabulatedConductivity,
    UniformCoefficient,
    VaryingCoefficient,
    heat_parts,
    pin,
    solve,
)
from finback.models.constants import STEFAN_BOLTZMANN

AIR = 295.0
PLACES = np.array([[0.0], [0.1], [0.55], [1.0]])
LAWS = {
    "uniform": UniformCoefficient(35.0),
    "power": PowerCoefficient(9.0, 0.25, 40.0),
    "square": PowerCoefficient(9.0, 2.0, 40.0),
    "line": VaryingCoefficient(30.0, -1.2),
    "places": TabledCoefficient(25.0, ((0.05, 2.0), (0.5, 0.5), (0.9, 1.0))),
    "radiating": Radiating(UniformCoefficient(6.0), 0.85, 285.0),
    "all": Radiating(PowerCoefficient(9.0, 1 / 3, 40.0), 0.3),
    "radiating by place": Radiating(VaryingCoefficient(30.0, 2.0), 0.5, 340.0),
}
every_law = pytest.mark.parametrize("law", LAWS.values(), ids=LAWS)
TEMPERATURES = np.array([230.0, 294.0, 296.0, 310.0, 400.0, 900.0]) + 0 * PLACES


@every_law
def test_a_law_is_a_law(law):
    assert isinstance(law, SurfaceLaw)
    assert AIR in law.sinks(AIR)


@every_law
def test_the_derivative_is_that_of_the_flux(law):
    flux, slope = law.response(TEMPERATURES, AIR, PLACES)
    assert flux == pytest.approx(law.flux(TEMPERATURES, AIR, PLACES), rel=1e-15)
    step = 1e-3
    rise = law.flux(TEMPERATURES + step, AIR, PLACES) - law.flux(TEMPERATURES - step, AIR, PLACES)
    assert slope == pytest.approx(rise / (2 * step), rel=1e-6)
    assert flux.shape == slope.shape == (4, 6)


@every_law
def test_the_flux_rises_with_the_temperature_and_changes_sign_between_the_sinks(law):
    temperatures = np.linspace(-100.0, 1500.0, 400)
    assert np.all(np.diff(law.flux(temperatures, AIR, 0.3)) >= 0)
    sinks = law.sinks(AIR)
    below, above = np.array([min(sinks) - 1e-6]), np.array([max(sinks) + 1e-6])
    assert law.flux(below, AIR, 0.3)[0] < 0 < law.flux(above, AIR, 0.3)[0]


@every_law
def test_a_uniform_law_is_the_same_at_every_place(law):
    fluxes = law.flux(np.array([350.0]), AIR, PLACES)
    assert (np.ptp(fluxes) == 0) == law.uniform


@every_law
def test_a_linear_law_is_proportional_to_the_excess_temperature(law):
    one, two = law.flux(np.array([AIR + 20.0, AIR + 40.0]), AIR, 0.2)
    assert (two == pytest.approx(2 * one, rel=1e-13)) == law.linear


def test_every_value_may_be_one_a_set():
    air = np.array([290.0, 295.0, 300.0])
    several = np.array([1.0, 2.0, 3.0])
    law = Radiating(PowerCoefficient(10 * several, several / 4, 20 * several), several / 4, 280 + several)
    surface = air + np.array([[5.0], [50.0]])
    flux = law.flux(surface, air, np.array([[0.0], [1.0]]))
    assert flux.shape == (2, 3)
    for i in range(3):
        alone = Radiating(
            PowerCoefficient(10 * several[i], several[i] / 4, 20 * several[i]),
            several[i] / 4,
            280 + several[i],
        )
        assert flux[:, i] == pytest.approx(alone.flux(surface[:, i], air[i]), rel=1e-15)


def test_places_between_and_beyond_the_points_of_a_table():
    law = LAWS["places"]
    places = np.array([[0.0], [0.05], [0.275], [0.7], [1.0]])
    fluxes = law.flux(np.array([AIR + 1.0]), AIR, places).ravel()
    assert fluxes.tolist() == pytest.approx([50.0, 50.0, 25.0 * 1.25, 25.0 * 0.75, 25.0])


@pytest.mark.parametrize(
    ("make", "complaint"),
    [
        (lambda: Radiating(UniformCoefficient(5.0), 1.3), r"^emissivity must be from 0 to 1, got 1\.3$"),
        (lambda: Radiating(UniformCoefficient(5.0), np.nan), r"^emissivity must be from 0 to 1, got nan$"),
        (lambda: PowerCoefficient(5.0, 2.5, 10.0), r"^exponent must be from 0 to 2, got 2\.5$"),
        (lambda: PowerCoefficient(5.0, 0.25, 0.0), r"^reference must be above zero, got 0\.0$"),
        (lambda: VaryingCoefficient(5.0, -2.1), r"^rise must be from -2 to 2, got -2\.1$"),
        (lambda: TabledCoefficient(5.0, ((0.0, 1.0),)), r"needs two points or more, in rising order"),
        (lambda: TabledCoefficient(5.0, ((0.0, 1.0), (0.0, 2.0))), r"in rising order of place$"),
        (lambda: TabledCoefficient(5.0, ((0.0, 1.0), (1.5, 2.0))), r"^places .* must be from 0 to 1"),
        (lambda: TabledCoefficient(5.0, ((0.0, 1.0), (1.0, -1.0))), r"^factors .* not negative$"),
    ],
)
def test_a_value_outside_its_range_is_refused(make, complaint):
    with pytest.raises(ValueError, match=complaint):
        make()


# --- worked examples ---------------------------------------------------------------------------------------


def test_steam_pipe():
    """Incropera, Fundamentals of Heat and Mass Transfer, Example 9.4, p. 580, prints 763 W/m."""
    pipe = Radiating(UniformCoefficient(7.228714345), emissivity=0.85)
    flux = pipe.flux(np.array([165 + 273.15]), 23 + 273.15)
    assert np.pi * 0.1 * flux[0] == pytest.approx(763.0, rel=2e-3)
    assert np.pi * 0.1 * flux[0] == pytest.approx(763.4949922, rel=2e-3)  # recomputed; 0 degC is 273 K there


def test_hot_water_pipe():
    """Cengel, Heat Transfer: A Practical Approach, Example 9-1, p. 470, prints 443 W and 553 W."""
    pipe, hot, room = Radiating(UniformCoefficient(5.869), 1.0), np.array([343.0]), 293.0
    area = np.pi * 0.08 * 6
    assert area * pipe.convection.flux(hot, room)[0] == pytest.approx(443, abs=1)
    assert area * pipe.radiation(hot, room)[0] == pytest.approx(553, abs=1)


def test_heat_parts_of_a_fin_that_conducts_without_limit():
    """At one temperature all over, each part is its flux times the surface."""
    profile = pin(0.1, 0.01)
    area = profile.side_area() + profile.section_area
    law = Radiating(PowerCoefficient(6.0, 0.25, 50.0), 0.9, 280.0)
    fin = Fin(profile, 1e12, law, ConvectiveTip())
    parts = heat_parts(fin, solve(fin, BaseTemperature(395.0), AIR, np.array([])))
    assert parts.convective[0] == pytest.approx(area * 6.0 * 2**0.25 * 100.0, rel=1e-9)
    assert parts.radiative[0] == pytest.approx(
        area * 0.9 * STEFAN_BOLTZMANN * (395.0**4 - 280.0**4), rel=1e-9
    )


@pytest.mark.parametrize("tip", [AdiabaticTip(), ConvectiveTip(), ConvectiveTip(80.0), FixedTip(320.0)])
def test_heat_parts_are_those_of_the_temperatures(tip):
    profile = pin(0.1, 0.01)
    law = Radiating(PowerCoefficient(6.0, 0.25, 50.0), 0.9, 280.0)
    fin = Fin(profile, 60.0, law, tip)
    nodes, weights = np.polynomial.legendre.leggauss(40)
    solution = solve(fin, BaseTemperature(395.0), AIR, 0.05 * (1 + nodes))
    side = 0.05 * weights * profile.section_perimeter
    convective = side @ law.convection.flux(solution.temperatures[0], AIR)
    radiative = side @ law.radiation(solution.temperatures[0], AIR)
    if isinstance(tip, ConvectiveTip):
        face = law.convection if tip.coefficient is None else UniformCoefficient(tip.coefficient)
        convective += profile.section_area * face.flux(solution.tip_temperature, AIR)[0]
        if tip.coefficient is None:
            radiative += profile.section_area * law.radiation(solution.tip_temperature, AIR)[0]
    parts = heat_parts(fin, solution)
    assert parts.convective[0] == pytest.approx(convective, rel=1e-8)
    assert parts.radiative[0] == pytest.approx(radiative, rel=1e-8)


def test_a_law_without_radiation_has_no_radiative_part():
    for law in (UniformCoefficient(20.0), PowerCoefficient(9.0, 0.25, 40.0)):
        fin = Fin(pin(0.1, 0.01), 60.0, law, ConvectiveTip())
        solution = solve(fin, BaseTemperature(395.0), np.array([290.0, 295.0]), np.array([]))
        parts = heat_parts(fin, solution)
        assert parts.radiative.tolist() == [0.0, 0.0]
        assert parts.convective.tolist() == solution.base_heat.tolist()


# --- conductivity ------------------------------------------------------------------------------------------

CONDUCTIVITIES = {
    "constant": ConstantConductivity(160.0),
    "rising": LinearConductivity(160.0, 300.0, 1e-3),
    "falling": LinearConductivity(160.0, 300.0, -1e-3),
    "level": LinearConductivity(160.0, 300.0, 0.0),
    "table": TabulatedConductivity(
        ((250.0, 100.0), (300.0, 120.0), (330.0, 90.0), (500.0, 200.0)), factor=1.3
    ),
}
KINKS = (250.0, 300.0, 330.0, 500.0)
every_conductivity = pytest.mark.parametrize("law", CONDUCTIVITIES.values(), ids=CONDUCTIVITIES)
temperatures = st.floats(200.0, 700.0)


@every_conductivity
@given(temperature=temperatures, reference=temperatures)
def test_the_potential_is_the_integral_of_the_conductivity(law, temperature, reference):
    assert isinstance(law, Conductivity)
    inner = sorted(kink for kink in KINKS if min(temperature, reference) < kink < max(temperature, reference))
    edges = [reference, *(inner if reference < temperature else inner[::-1]), temperature]
    integral = sum(quad(law.at, low, high)[0] for low, high in pairwise(edges))
    assert law.potential(temperature, reference) == pytest.approx(integral, rel=1e-12, abs=1e-9)


@every_conductivity
@given(temperature=temperatures, reference=temperatures)
def test_the_way_back_from_the_potential(law, temperature, reference):
    potential = law.potential(temperature, reference)
    assert law.temperature(potential, reference) == pytest.approx(temperature, rel=1e-13)


def test_a_conductivity_of_several_sets():
    factor, reference = np.array([1.0, 2.0]), np.array([290.0, 310.0])
    for law in (
        LinearConductivity(100.0 * factor, 300.0, 1e-3 / factor),
        TabulatedConductivity(((250.0, 100.0), (350.0, 120.0)), factor),
        ConstantConductivity(100.0 * factor),
    ):
        hot = np.array([[280.0], [400.0]])
        potential = law.potential(hot, reference)
        assert np.shape(potential) == np.shape(law.at(hot)) == (2, 2)
        assert law.temperature(potential, reference) == pytest.approx(hot + 0 * reference, rel=1e-13)
