"""Laws: the correlations by the flow that they are for, and what each needs from a fin in its air.

The table is the one place where a correlation's name, as a user writes it, becomes a function.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from finback.models import correlations
from finback.models.air import AirProperties, air, film_temperature
from finback.models.constants import ATMOSPHERE, GRAVITY
from finback.models.correlations import Nusselt
from finback.models.exposure import Flow, Situation
from finback.models.names import UnknownNameError, fold, nearest_names


@dataclass(frozen=True, slots=True)
class Stream:
    """The air that a fin stands in.

    Arguments: temperature [K]; speed [m/s], or None for still air: ahead of a single fin or a bank of pins,
    and between the fins of a row; pressure [Pa]; vapour_fraction, moles of water vapour in a mole of air [1].
    """

    temperature: float
    speed: float | None = None
    pressure: float = ATMOSPHERE
    vapour_fraction: float = 0.0

    def properties(self, temperature: float) -> AirProperties:
        """Return the properties of this air when warmed or cooled to a temperature [K]."""
        return air(temperature, self.pressure, self.vapour_fraction)


@dataclass(frozen=True, slots=True)
class Film:
    """The air beside a surface.

    Arguments: surface [K]; stream; properties of the air at the film temperature.
    """

    surface: float
    stream: Stream
    properties: AirProperties

    @property
    def prandtl(self) -> float:
        """Prandtl number of the film [1]."""
        return float(self.properties.prandtl)

    def rayleigh(self, length: float) -> float:
        """Return Ra = g beta |T_s - T_air| l³/(nu alpha) [1] of a length [m]."""
        p = self.properties
        drive = GRAVITY * p.expansion * abs(self.surface - self.stream.temperature)
        return float(drive * length**3 / (p.kinematic_viscosity * p.diffusivity))

    @property
    def speed(self) -> float:
        """Speed of the stream [m/s], 0 in still air."""
        return self.stream.speed or 0.0

    def reynolds(self, length: float) -> float:
        """Return Re = V l/nu [1] of a length [m]."""
        return float(self.speed * length / self.properties.kinematic_viscosity)


def film(surface: float, stream: Stream) -> Film:
    """Return the film beside a surface at a temperature [K]."""
    middle = film_temperature(surface, stream.temperature)
    return Film(surface, stream, stream.properties(float(middle)))


@dataclass(frozen=True, slots=True)
class Outcome:
    """A law at work: its Nusselt number, the air it was evaluated with, and its group.

    Arguments: nusselt; length [m], the one it is on; conductivity [W/(m K)] and prandtl [1] of the air it was
    evaluated with; reynolds or rayleigh [1], the group that drives it, the other None; notes.
    """

    nusselt: Nusselt
    length: float
    conductivity: float
    prandtl: float
    reynolds: float | None = None
    rayleigh: float | None = None
    notes: tuple[str, ...] = ()

    @property
    def coefficient(self) -> float:
        """Film coefficient h [W/(m² K)]."""
        return float(self.nusselt.coefficient(self.conductivity, self.length))


Law = Callable[[Situation, Film], Outcome]


def _rising(law: Callable[[float, float], Nusselt]) -> Law:
    """Make a law of free convection from a function of Ra and Pr on the situation's length."""

    def at_work(place: Situation, beside: Film) -> Outcome:
        Ra = beside.rayleigh(place.length)
        return _of_film(law(Ra, beside.prandtl), place.length, beside, rayleigh=Ra)

    return at_work


def _upright(law: Callable[[float, float], Nusselt]) -> Law:
    """Make a law of a vertical cylinder from that of a plate of its height."""

    def at_work(place: Situation, beside: Film) -> Outcome:
        Ra, Pr = beside.rayleigh(place.length), beside.prandtl
        slender = place.length / place.extent
        nusselt = correlations.popiel_vertical_cylinder(law(Ra, Pr), Ra, Pr, slender)
        return _of_film(nusselt, place.length, beside, rayleigh=Ra)

    return at_work


def _rising_channel(law: Callable[[float], Nusselt]) -> Law:
    def at_work(place: Situation, beside: Film) -> Outcome:
        Ra = beside.rayleigh(place.length) * place.length / place.extent
        return _of_film(law(Ra), place.length, beside, rayleigh=Ra)

    return at_work


def _stream(law: Callable[[float, float], Nusselt]) -> Law:
    """Make a law of forced convection from a function of Re and Pr on the situation's length."""

    def at_work(place: Situation, beside: Film) -> Outcome:
        Re = beside.reynolds(place.length)
        return _of_film(law(Re, beside.prandtl), place.length, beside, reynolds=Re)

    return at_work


def _channel(place: Situation, beside: Film) -> Outcome:
    Re = beside.reynolds(place.length) * place.length / place.extent
    return _of_film(correlations.teertstra(Re, beside.prandtl), place.length, beside, reynolds=Re)


def _duct(law: Callable[[float, float, bool], Nusselt]) -> Law:
    """Make a law of a channel from that of a duct, whose coefficient is on the bulk temperature.

    The balance of heat between the walls, h 2 L (T_s - T_bulk) against rho U b c_p, turns it into one on the
    temperature of the air that enters: a factor (1 - exp(-N))/N with N = 2 h L/(rho U b c_p).
    """

    def at_work(place: Situation, beside: Film) -> Outcome:
        wide, p = 2 * place.length, beside.properties
        Re = beside.reynolds(wide)
        nusselt = law(Re, beside.prandtl, beside.surface > beside.stream.temperature)
        carried = float(p.density * p.specific_heat) * beside.speed * place.length
        transfer = 2 * float(nusselt.coefficient(p.conductivity, wide)) * place.extent / carried
        entering = replace(nusselt, value=-nusselt.value * np.expm1(-transfer) / transfer)
        return _of_film(entering, wide, beside, reynolds=Re)

    return at_work


def _level(place: Situation, beside: Film) -> Outcome:
    """Take the mean of the two faces, one facing up and one down."""
    Ra, Pr = beside.rayleigh(place.length), beside.prandtl
    up = correlations.horizontal_plate_up(Ra)
    down = correlations.radziemska_lewandowski_down(Ra, Pr)
    total = up.value + down.value
    both = Nusselt(
        name="McAdams, and Radziemska and Lewandowski, both faces of a level plate",
        value=total / 2,
        length=up.length,
        scatter=float((up.scatter * up.value + down.scatter * down.value) / total),
        flags=up.flags + down.flags,
    )
    return _of_film(both, place.length, beside, rayleigh=Ra)


def _of_film(
    nusselt: Nusselt,
    length: float,
    beside: Film,
    reynolds: float | None = None,
    rayleigh: float | None = None,
) -> Outcome:
    return Outcome(nusselt, length, float(beside.properties.conductivity), beside.prandtl, reynolds, rayleigh)


def _zukauskas(place: Situation, beside: Film) -> Outcome:
    """Take the properties of the free stream, and Pr_s at the surface, as the law asks."""
    free = beside.stream.properties(beside.stream.temperature)
    at_surface = float(beside.stream.properties(beside.surface).prandtl)
    Pr, nu, k = float(free.prandtl), float(free.kinematic_viscosity), float(free.conductivity)
    speed, bank = beside.speed, place.bank
    if bank is None:
        Re = speed * place.length / nu
        nusselt = correlations.zukauskas_cylinder(Re, Pr, at_surface)
        return Outcome(nusselt, place.length, k, Pr, reynolds=Re)
    pitches = bank.transverse_pitch, bank.longitudinal_pitch
    fastest = float(correlations.narrowest_velocity(speed, bank.layout, place.length, *pitches))
    Re = fastest * place.length / nu
    ratio = bank.transverse_pitch / bank.longitudinal_pitch
    nusselt = correlations.zukauskas_bank(Re, Pr, at_surface, bank.layout, bank.rows, ratio)
    note = "Re is on the speed in the narrowest gap, h on the log-mean temperature difference of the bank"
    return Outcome(nusselt, place.length, k, Pr, reynolds=Re, notes=(note,))


LAWS: Mapping[Flow, Mapping[str, Law]] = {
    Flow.RISING_PLATE: {
        "churchill_chu_vertical_all": _rising(correlations.churchill_chu_vertical_all),
        "churchill_chu_vertical_laminar": _rising(correlations.churchill_chu_vertical_laminar),
        "mcadams_vertical": _rising(lambda Ra, _: correlations.mcadams_vertical(Ra)),
    },
    Flow.RISING_UPRIGHT: {
        "churchill_chu_vertical_all": _upright(correlations.churchill_chu_vertical_all),
        "churchill_chu_vertical_laminar": _upright(correlations.churchill_chu_vertical_laminar),
        "mcadams_vertical": _upright(lambda Ra, _: correlations.mcadams_vertical(Ra)),
    },
    Flow.RISING_CYLINDER: {
        "churchill_chu_cylinder": _rising(correlations.churchill_chu_cylinder),
        "churchill_chu_cylinder_laminar": _rising(correlations.churchill_chu_cylinder_laminar),
        "morgan_cylinder": _rising(lambda Ra, _: correlations.morgan_cylinder(Ra)),
    },
    Flow.RISING_LEVEL: {
        "horizontal_plate": _level,
        "horizontal_plate_up": _rising(lambda Ra, _: correlations.horizontal_plate_up(Ra)),
        "horizontal_plate_down": _rising(lambda Ra, _: correlations.horizontal_plate_down(Ra)),
        "radziemska_lewandowski_down": _rising(correlations.radziemska_lewandowski_down),
    },
    Flow.RISING_CHANNEL: {
        "bar_cohen_rohsenow": _rising_channel(correlations.bar_cohen_rohsenow),
        "elenbaas": _rising_channel(correlations.elenbaas),
    },
    Flow.ACROSS_CYLINDER: {
        "churchill_bernstein": _stream(correlations.churchill_bernstein),
        "hilpert": _stream(correlations.hilpert),
        "zukauskas_cylinder": _zukauskas,
    },
    Flow.ACROSS_BANK: {"zukauskas_bank": _zukauskas},
    Flow.ALONG_PLATE: {
        "flat_plate_laminar": _stream(correlations.flat_plate_laminar),
        "flat_plate_mixed": _stream(correlations.flat_plate_mixed),
        "flat_plate_turbulent": _stream(correlations.flat_plate_turbulent),
        "churchill_ozoe": _stream(correlations.churchill_ozoe),
    },
    Flow.ALONG_CHANNEL: {
        "teertstra": _channel,
        "gnielinski": _duct(lambda Re, Pr, _: correlations.gnielinski(Re, Pr)),
        "dittus_boelter": _duct(correlations.dittus_boelter),
    },
}
"""Every law by its flow and its name. The first of a flow is chosen unless another is asked for."""


def usual(place: Situation, beside: Film) -> str:
    """Return the name of the law that is usual in a situation; a plate turns turbulent at Re = 5e5 [1]."""
    if place.flow is Flow.ALONG_PLATE and beside.reynolds(place.length) > correlations.TRANSITION:
        return "flat_plate_mixed"
    return next(iter(LAWS[place.flow]))


def named(name: str, place: Situation) -> str:
    """Return the name of a law as the table has it.

    Case, blanks and hyphens do not count. Raises `UnknownNameError` for a name that no law has, and
    ValueError for a law of another flow; both name what would be right.
    """
    known = {fold(each): each for laws in LAWS.values() for each in laws}
    if fold(name) not in known:
        near = nearest_names(name, {each: each for each in known.values()}, 3)
        raise UnknownNameError("correlation", name, near)
    found = known[fold(name)]
    if found not in LAWS[place.flow]:
        flows = " or ".join(flow.value for flow, laws in LAWS.items() if found in laws)
        fitting = ", ".join(LAWS[place.flow])
        raise ValueError(f"{found} is for {flows}; for {place.flow.value} there are {fitting}")
    return found
