"""Expectation: the film coefficient that a healthy fin should have, and the air speed that h implies.

What a rig states itself comes first; else a correlation tells, with the air's properties at the film
temperature of the readings, which lies half-way between the air and the fin's mean temperature. Both are
convection alone, while an estimate of h holds what the fin radiates too, unless its emissivity is known.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from finback.findings import Finding
from finback.models.constants import ATMOSPHERE
from finback.models.validity import Flag
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig
from finback.surroundings import Likeness, liken

if TYPE_CHECKING:
    from finback.models.expected import ExpectedCoefficient
    from finback.models.laws import Stream

STATED = "stated"
"""The correlation of an expectation that the rig states itself."""

POINTS = 129  # along the fin, for its mean temperature


@dataclass(frozen=True, slots=True)
class Expected:
    """The film coefficient that a healthy fin should have.

    `coefficient` and its standard uncertainty `sd` [W/(m² K)]; `correlation`, by the name it has in rig.toml,
    or "stated", and its `name` for people; `film_temperature` [K], None where no reading tells. With a
    correlation only: `speed` [m/s], None in still air; `nusselt` [1]; `reynolds` or `rayleigh` [1], the one
    that drives the flow; `prandtl` [1]; `length` [m], the characteristic one, and what it is; `flags`, what
    to beware of, and `notes`, what was assumed, a sentence each.
    """

    coefficient: float
    sd: float
    correlation: str
    name: str
    film_temperature: float | None = None
    speed: float | None = None
    nusselt: float | None = None
    reynolds: float | None = None
    rayleigh: float | None = None
    prandtl: float | None = None
    length: float | None = None
    length_name: str | None = None
    flags: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class ImpliedSpeed:
    """The air speed that belongs to an estimated coefficient.

    `speed` and its standard uncertainty `sd` [m/s], None where no speed gives that coefficient; `correlation`
    and its `name`, as in `Expected`; `stated`, the speed that the rig states [m/s], if it does; `flags`.
    """

    speed: float | None
    sd: float | None
    correlation: str
    name: str
    stated: float | None = None
    flags: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Warmth:
    """How warm a run is [K]: the air, and the fin on average over its side."""

    air: float
    surface: float

    @property
    def film(self) -> float:
        """Film temperature [K], half-way between the two."""
        return (self.air + self.surface) / 2


def mean_temperature(rig: Rig, readings: Readings) -> float:
    """Return the fin's mean temperature [K] over its side: straight lines between the readings along it."""
    read = readings.used
    pairs = sorted((s.position or 0.0, read[s.name]) for s in rig.fin_sensors() if s.name in read)
    x = np.linspace(0.0, rig.length, POINTS)
    along = np.interp(x, *np.array(pairs).T)
    weights = rig.profile().perimeter(x)
    return float(np.average(along, weights=weights)) if weights.any() else float(along.mean())


def extremes(rig: Rig, readings: Readings) -> tuple[float, float]:
    """Return the lowest and the highest temperature [K] read along the fin and on its plate."""
    read = readings.used
    found = [read[s.name] for s in (*rig.fin_sensors(), *rig.sensors_on("plate")) if s.name in read]
    return min(found), max(found)


def warmth(rig: Rig, readings: Readings, air: float | None = None) -> Warmth | None:
    """Return how warm a run is; air [K] stands in where no sensor reads it, and without either it is None."""
    read = [readings.used[s.name] for s in rig.sensors_on("air") if s.name in readings.used]
    stated = rig.surroundings.air
    if read:
        air = float(np.mean(read))
    elif stated is not None:
        air = stated.value
    return None if air is None else Warmth(air, mean_temperature(rig, readings))


def expect(rig: Rig, readings: Readings, air: float | None = None) -> Expected | None:
    """Return the coefficient that a healthy fin should have in this run, None where the rig says nothing.

    Arguments: rig; readings; air temperature [K], where no sensor reads it. Raises ValueError, with a
    sentence, for air in which no correlation can be evaluated.
    """
    warm = warmth(rig, readings, air)
    if rig.expected_coefficient is not None:
        stated = rig.expected_coefficient
        film = None if warm is None else warm.film
        return Expected(stated.value, stated.sd, STATED, "as the rig states", film)
    around = rig.surroundings
    if warm is None or around.driven is None or (around.driven and around.speed is None):
        return None
    likeness = _likeness(rig)
    found = _evaluate(rig, likeness, warm, around.speed, around.pressure, around.humidity)
    h = found.coefficient
    spread = float(np.hypot(found.standard_uncertainty, h * likeness.scatter))
    return Expected(
        coefficient=h,
        sd=float(np.hypot(spread, _of_inputs(rig, likeness, warm, h))),
        correlation=found.correlation,
        name=found.name,
        film_temperature=found.film_temperature,
        speed=around.speed.value if around.speed is not None and around.driven else None,
        nusselt=found.nusselt,
        reynolds=found.reynolds,
        rayleigh=found.rayleigh,
        prandtl=found.prandtl,
        length=found.length,
        length_name=found.length_name,
        flags=_sentences(found.flags),
        notes=(*likeness.notes, *found.notes, *_defaults(rig)),
    )


def imply(
    rig: Rig, readings: Readings, coefficient: float, sd: float, air: float | None = None
) -> ImpliedSpeed | None:
    """Return the air speed that a coefficient implies, None where the rig does not speak of driven air.

    Arguments: rig; readings; coefficient and its standard uncertainty sd [W/(m² K)]; air temperature [K],
    where no sensor reads it. Raises ValueError as `expect` does.
    """
    from finback.models.expected import implied_air_speed

    warm, around = warmth(rig, readings, air), rig.surroundings
    if warm is None or not around.driven:
        return None
    likeness = _likeness(rig)
    stream = _stream(warm, None, around.pressure, around.humidity)
    found = implied_air_speed(
        coefficient,
        likeness.exposure,
        stream,
        warm.surface,
        around.correlation,
        float(np.hypot(sd, coefficient * likeness.scatter)),
    )
    at = found.expected
    return ImpliedSpeed(
        speed=found.speed,
        sd=found.standard_uncertainty,
        correlation=around.correlation or (at.correlation if at else ""),
        name=at.name if at else "",
        stated=around.speed.value if around.speed is not None else None,
        flags=_sentences(found.flags),
    )


def findings(expected: Expected | None, implied: ImpliedSpeed | None) -> Iterator[Finding]:
    """Yield a finding for each range that was left, once each."""
    flags = [*(expected.flags if expected else ()), *(implied.flags if implied else ())]
    for sentence in dict.fromkeys(flags):
        yield Finding("out-of-range", "note", sentence, evidence={"key": "expected"})


def _likeness(rig: Rig) -> Likeness:
    return liken(rig.profile_name, rig.geometry, rig.profile(), rig.surroundings)


def _stream(
    warm: Warmth, speed: Quantity | None, pressure: Quantity | None, humidity: Quantity | None
) -> Stream:
    from finback.models.laws import Stream
    from finback.models.vapour import vapour_fraction

    p = ATMOSPHERE if pressure is None else pressure.value
    fraction = 0.0 if humidity is None else float(vapour_fraction(humidity.value, warm.air, p))
    driven = speed is not None and speed.value > 0
    return Stream(warm.air, speed.value if speed is not None and driven else None, p, fraction)


def _evaluate(
    rig: Rig,
    likeness: Likeness,
    warm: Warmth,
    speed: Quantity | None,
    pressure: Quantity | None,
    humidity: Quantity | None,
) -> ExpectedCoefficient:
    from finback.models.expected import expected_coefficient

    stream = _stream(warm, speed, pressure, humidity)
    return expected_coefficient(likeness.exposure, stream, warm.surface, rig.surroundings.correlation)


def _of_inputs(rig: Rig, likeness: Likeness, warm: Warmth, h: float) -> float:
    """Return what the uncertainties of speed, pressure and humidity make of h [W/(m² K)]."""
    around = rig.surroundings
    given = (around.speed, around.pressure, around.humidity)
    variance = 0.0
    for at, quantity in enumerate(given):
        if quantity is None or quantity.sd == 0 or quantity.value == 0:
            continue
        step = 0.01 * min(quantity.sd, quantity.value)
        moved = [*given]
        moved[at] = replace(quantity, value=quantity.value - step)
        slope = (h - _evaluate(rig, likeness, warm, *moved).coefficient) / step
        variance += (slope * quantity.sd) ** 2
    return float(np.sqrt(variance))


def _defaults(rig: Rig) -> Iterable[str]:
    around = rig.surroundings
    if around.pressure is None:
        yield "the air is at 1013 hPa"
    if around.humidity is None:
        yield "the air is dry"


def _sentences(flags: Iterable[Flag]) -> tuple[str, ...]:
    return tuple(str(flag) for flag in flags)
