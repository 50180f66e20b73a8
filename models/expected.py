"""The film coefficient that a fin should have in its air, with the scatter that is usual for its correlation.

`expected_coefficient` chooses the correlation from how the fin stands and whether the air is driven,
evaluates it with the properties of the air, and says what it is good for. `implied_air_speed` is the way
back: the speed that belongs to a coefficient.
"""

from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import brentq

from finback.models import laws
from finback.models.emissivity import radiation_coefficient
from finback.models.exposure import Exposure, Flow, Situation, situation
from finback.models.laws import LAWS, Film, Outcome, Stream
from finback.models.validity import Flag, Range

SPEEDS = Range("speed", 0.01, 100.0, "m/s")
"""From the draught in a still room to three tenths of the speed of sound, where air is compressed."""

TRIES = 50
"""Speeds at which a coefficient is looked for; bands that meet with a step give it at several."""

MIXED = Range("Ra/(Re² Pr)", high=0.1)
"""Up to here free convection is lost in the flow; from 10 on, the flow in free convection [1]."""


@dataclass(frozen=True, slots=True)
class ExpectedCoefficient:
    """What a correlation expects of a fin.

    Arguments: coefficient h [W/(m² K)], of convection alone; standard_uncertainty [W/(m² K)], from the
    scatter that is usual; radiation h_r [W/(m² K)], for surroundings at air temperature, or None without an
    emissivity; correlation, as a user writes it; name, for people; nusselt Nu [1]; length [m] and
    length_name, the characteristic one; prandtl Pr [1]; reynolds Re and rayleigh Ra [1], the one that drives
    the flow, starred (times b/L) in a channel, the other None; film_temperature [K]; flags, what to beware
    of; notes, what was assumed.
    """

    coefficient: float
    standard_uncertainty: float
    radiation: float | None
    correlation: str
    name: str
    nusselt: float
    length: float
    length_name: str
    prandtl: float
    reynolds: float | None
    rayleigh: float | None
    film_temperature: float
    flags: tuple[Flag, ...]
    notes: tuple[str, ...]


def expected_coefficient(
    exposure: Exposure,
    stream: Stream,
    surface: float,
    correlation: str | None = None,
    emissivity: float | None = None,
) -> ExpectedCoefficient:
    """Return the film coefficient that a fin should have.

    Arguments: exposure, how the fin stands; stream, the air, with a speed [m/s] where it is driven; surface,
    the fin's mean temperature [K]; correlation, by name, or None for the usual one; emissivity [1], for the
    radiation beside it. Raises ValueError for lengths, temperatures or a speed that cannot be, for a surface
    at the temperature of still air, and for a correlation that is unknown or for another flow.

    Examples:
    A pin of 8 mm across a stream of 3 m/s, and level in still air:

    >>> from finback.models.exposure import ExposedPin
    >>> pin = ExposedPin(length=0.12, diameter=0.008)
    >>> blown = expected_coefficient(pin, Stream(295.0, speed=3.0), surface=335.0)
    >>> round(blown.coefficient), round(blown.standard_uncertainty), blown.correlation
    (65, 10, 'churchill_bernstein')
    >>> still = expected_coefficient(pin, Stream(295.0), surface=335.0, emissivity=0.09)
    >>> round(still.coefficient, 1), round(still.radiation, 1)
    (9.8, 0.6)

    """
    speed = stream.speed
    forced = speed is not None
    if speed is not None and not 0 < speed < np.inf:
        raise ValueError(f"the speed of the air must be positive and finite, not {speed} m/s")
    place, beside = situation(exposure, forced), laws.film(surface, stream)
    if not forced and surface == stream.temperature:
        raise ValueError("the surface is as warm as the still air: nothing drives a flow along it")
    chosen, outcome = _at_work(place, beside, correlation)
    flags = outcome.nusselt.flags + beside.properties.flags + place.flags
    if speed is not None:
        flags += SPEEDS.check(speed, "A correlation of forced convection")
        flags += _mixed_convection(exposure, outcome, beside)
    h = outcome.coefficient
    return ExpectedCoefficient(
        coefficient=h,
        standard_uncertainty=h * float(np.hypot(outcome.nusselt.scatter, place.scatter)),
        radiation=_radiation(emissivity, surface, stream),
        correlation=chosen,
        name=outcome.nusselt.name,
        nusselt=float(outcome.nusselt.value),
        length=outcome.length,
        length_name=outcome.nusselt.length,
        prandtl=outcome.prandtl,
        reynolds=outcome.reynolds,
        rayleigh=outcome.rayleigh,
        film_temperature=float(beside.properties.temperature),
        flags=flags,
        notes=place.notes + outcome.notes,
    )


def _at_work(place: Situation, beside: Film, correlation: str | None) -> tuple[str, Outcome]:
    chosen = laws.usual(place, beside) if correlation is None else laws.named(correlation, place)
    return chosen, LAWS[place.flow][chosen](place, beside)


def _radiation(emissivity: float | None, surface: float, stream: Stream) -> float | None:
    if emissivity is None:
        return None
    return float(radiation_coefficient(emissivity, surface, stream.temperature))


def _mixed_convection(exposure: Exposure, driven: Outcome, beside: Film) -> tuple[Flag, ...]:
    """Return a flag where free convection counts beside the flow, with what it would give alone."""
    place = situation(exposure, forced=True)
    length = place.extent if place.flow is Flow.ALONG_CHANNEL else place.length
    Re = beside.reynolds(length)
    ratio = beside.rayleigh(length) / (Re**2 * beside.prandtl)
    if MIXED.holds(ratio):
        return ()
    still = situation(exposure, forced=False)
    alone = LAWS[still.flow][laws.usual(still, beside)](still, beside).coefficient
    verb = "outweighs" if ratio > 1 / MIXED.high else "counts beside"
    message = (
        f"Free convection {verb} the flow: {MIXED.quantity} is {ratio:.2g}; it alone would give {alone:.3g} "
        f"W/(m² K), the flow alone {driven.coefficient:.3g} W/(m² K)."
    )
    return (Flag(MIXED.quantity, message),)


@dataclass(frozen=True, slots=True)
class ImpliedSpeed:
    """The air speed that belongs to a film coefficient.

    Arguments: speed [m/s], or None where the correlation gives the coefficient at no speed;
    standard_uncertainty [m/s], from that of the coefficient and the correlation's scatter, or None; expected,
    the correlation at that speed, or None; flags, what to beware of, and why there is no speed.
    """

    speed: float | None
    standard_uncertainty: float | None
    expected: ExpectedCoefficient | None
    flags: tuple[Flag, ...]


def implied_air_speed(
    coefficient: float,
    exposure: Exposure,
    stream: Stream,
    surface: float,
    correlation: str | None = None,
    coefficient_sd: float = 0.0,
) -> ImpliedSpeed:
    """Return the air speed at which a correlation gives a film coefficient.

    Arguments: coefficient h [W/(m² K)], of convection alone; exposure; stream, the air, whose speed is left
    out of account; surface, the fin's mean temperature [K]; correlation, by name, or None for the usual one;
    coefficient_sd, standard uncertainty of h [W/(m² K)]. Looked for from 0.01 to 100 m/s. Raises ValueError
    as `expected_coefficient` does, and for a coefficient that is not positive and finite.

    Examples:
    >>> from finback.models.exposure import ExposedPin
    >>> implied = implied_air_speed(65.0, ExposedPin(0.12, 0.008), Stream(295.0), surface=335.0)
    >>> round(implied.speed, 1), round(implied.standard_uncertainty, 1)
    (3.0, 0.9)

    """
    if not 0 < coefficient < np.inf:
        raise ValueError(f"a film coefficient must be positive and finite, not {coefficient} W/(m² K)")

    place, still = situation(exposure, forced=True), laws.film(surface, stream)

    def moving(log_speed: float) -> Stream:
        return replace(stream, speed=float(np.exp(log_speed)))

    def at(log_speed: float) -> ExpectedCoefficient:
        return expected_coefficient(exposure, moving(log_speed), surface, correlation)

    def excess(log_speed: float) -> float:
        beside = replace(still, stream=moving(log_speed))  # the properties stay
        return float(np.log(_at_work(place, beside, correlation)[1].coefficient / coefficient))

    speeds = np.linspace(np.log(SPEEDS.low), np.log(SPEEDS.high), TRIES)
    tried = np.array([excess(each) for each in speeds])
    if tried[0] > 0 or tried[-1] < 0:
        end, side = (speeds[0], "below") if tried[0] > 0 else (speeds[-1], "above")
        return ImpliedSpeed(None, None, None, (_out_of_reach(coefficient, at(end), side),))
    crossings = [
        float(brentq(excess, speeds[i], speeds[i + 1], xtol=1e-13))
        for i in np.flatnonzero((tried[:-1] <= 0) != (tried[1:] <= 0))
    ]
    roots = [root for root in crossings if abs(excess(root)) < 1e-6]
    chosen = (roots or crossings)[0]
    found, speed = at(chosen), float(np.exp(chosen))
    step = 0.02
    power = (excess(chosen + step) - excess(chosen - step)) / (2 * step)
    relative = np.hypot(coefficient_sd / coefficient, found.standard_uncertainty / found.coefficient)
    flags = _steps(found, [float(np.exp(root)) for root in roots], speed) + found.flags
    return ImpliedSpeed(speed, float(speed * relative / abs(power)), found, flags)


def _steps(found: ExpectedCoefficient, roots: list[float], speed: float) -> tuple[Flag, ...]:
    """Return a flag where the bands of a law do not meet, so that a coefficient has no speed or several."""
    if len(roots) == 1:
        return ()
    if not roots:
        message = f"{found.name} steps over this coefficient where two of its bands meet, at {speed:.3g} m/s."
        return (Flag("speed", message),)
    places = " and ".join(f"{root:.3g}" for root in roots)
    message = f"{found.name} gives this coefficient at {places} m/s, because its bands do not meet."
    return (Flag("speed", message),)


def _out_of_reach(coefficient: float, end: ExpectedCoefficient, side: str) -> Flag:
    speed = SPEEDS.low if side == "below" else SPEEDS.high
    message = (
        f"h = {coefficient:.3g} W/(m² K) lies {side} the {end.coefficient:.3g} W/(m² K) that {end.name} "
        f"gives at {speed:g} m/s: no speed of the air explains it."
    )
    return Flag("speed", message)
