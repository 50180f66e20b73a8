"""Published: a fitted law beside the correlations that hold in its range, and the speed that h implies.

Both at the median temperatures of the runs, on the coefficient h at the same speed, or the same Ra, so that
it does not matter at which temperature a correlation takes its properties.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.groups import Body
from finback.models import laws
from finback.models.constants import ATMOSPHERE, GRAVITY
from finback.models.laws import LAWS, Film, Stream
from finback.models.vapour import vapour_fraction

Array = NDArray[np.float64]

GRID = 25
"""Abscissae at which laws are compared, evenly in logarithms."""

SLOWEST, FASTEST, SPEEDS = 0.01, 100.0, 400
"""Speeds [m/s] among which the implied one is looked for, and how many are tried; between them by
logarithms."""

STEP = 0.02
"""In ln Re, for the slope of a correlation."""


@dataclass(frozen=True, slots=True)
class Compared:
    """A fitted law beside a published one, over the range of the data.

    `correlation`, as in rig.toml, and its `name`; `scatter`, the usual one [1], with what the likeness of the
    fin adds; `ratio` of fitted to published h on average over ln x, its 95 % interval `low95` to `high95`,
    and at both ends of the range, `ratio_low`, `ratio_high`; `scatters`, by how many scatters the average is
    off; `curve`, published h at the grid.
    """

    correlation: str
    name: str
    scatter: float
    ratio: float
    low95: float
    high95: float
    ratio_low: float
    ratio_high: float
    scatters: float
    curve: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class OutOfRange:
    """A published law whose range does not hold the data, and the sentence that says so."""

    correlation: str
    name: str
    reason: str


@dataclass(frozen=True)
class Typical:
    """The runs at their medians: `body`, temperatures `air` and `surface` [K], and the film beside it."""

    body: Body
    air: float
    surface: float

    @property
    def stream(self) -> Stream:
        """The air, still."""
        around = self.body.rig.surroundings
        pressure = ATMOSPHERE if around.pressure is None else around.pressure.value
        wet = 0.0
        if around.humidity is not None:
            wet = float(vapour_fraction(around.humidity.value, self.air, pressure))
        return Stream(self.air, None, pressure, wet)

    def blown(self, speed: float) -> Film:
        """Return the film at a speed [m/s]."""
        still = self.stream
        film = laws.film(self.surface, still)
        stream = Stream(still.temperature, speed, still.pressure, still.vapour_fraction)
        return Film(self.surface, stream, film.properties)

    def risen(self, rayleigh: float) -> Film:
        """Return the film whose Ra is given, about the same film temperature."""
        film = laws.film(self.surface, self.stream)
        p = film.properties
        length = self.body.place.length
        drive = rayleigh * float(p.kinematic_viscosity * p.diffusivity)
        drive /= GRAVITY * float(p.expansion) * length**3
        stream = Stream(
            float(p.temperature) - drive / 2, None, film.stream.pressure, film.stream.vapour_fraction
        )
        return Film(float(p.temperature) + drive / 2, stream, p)


def compare(
    typical: Typical, films: Sequence[Film], h: Array
) -> tuple[tuple[Compared, ...], tuple[OutOfRange, ...]]:
    """Compare a fitted law with every published one of its flow.

    Arguments: typical; films (n,), from end to end of the data's range; h (n_draws, n) of the fitted law
    there [W/(m² K)].
    """
    place = typical.body.place
    compared, others = [], []
    for key, law in LAWS[place.flow].items():
        outcomes = [law(place, film) for film in films]
        flags = [flag for outcome in outcomes for flag in outcome.nusselt.flags]
        name = outcomes[0].nusselt.name
        if flags:
            told = next((f for f in outcomes[-1].nusselt.flags), flags[0])
            others.append(OutOfRange(key, name, str(told)))
            continue
        theirs = np.array([outcome.coefficient for outcome in outcomes])
        scatter = float(np.hypot(outcomes[0].nusselt.scatter, typical.body.scatter))
        logs = np.log(h) - np.log(theirs)
        low, middle, high = np.exp(np.quantile(logs.mean(axis=1), (0.025, 0.5, 0.975)))
        ends = np.exp(np.median(logs, axis=0))
        compared.append(
            Compared(
                correlation=key,
                name=name,
                scatter=scatter,
                ratio=float(middle),
                low95=float(low),
                high95=float(high),
                ratio_low=float(ends[0]),
                ratio_high=float(ends[-1]),
                scatters=float(middle - 1) / scatter,
                curve=tuple(float(value) for value in theirs),
            )
        )
    return tuple(sorted(compared, key=lambda one: abs(one.scatters))), tuple(others)


@dataclass(frozen=True)
class Implied:
    """The air speeds that the runs' coefficients imply by a correlation.

    `correlation` and its `name`; `speed` and `sd` (n,) [m/s], nan where no speed gives that coefficient.
    """

    correlation: str
    name: str
    speed: Array
    sd: Array


def implied_speeds(typical: Typical, h: Array, h_sd: Array, conductivity: Array, viscosity: Array) -> Implied:
    """Return the speed that each run's coefficient implies.

    The correlation is tabled at the median temperatures as Nu over Re, both with the film's properties, and
    read backwards for each run with the properties of its own film.

    Arguments: typical; h and its standard uncertainty h_sd [W/(m² K)], conductivity [W/(m K)] and kinematic
    viscosity [m²/s] of each run's film, (n,).
    """
    place, rig = typical.body.place, typical.body.rig
    speeds = np.geomspace(SLOWEST, FASTEST, SPEEDS)
    films = [typical.blown(float(speed)) for speed in speeds]
    asked = rig.surroundings.correlation
    usual = laws.usual(place, films[SPEEDS // 2])
    key = asked if asked is not None and asked in LAWS[place.flow] else usual
    outcomes = [LAWS[place.flow][key](place, film) for film in films]
    p = films[0].properties
    x = np.log(speeds * place.length / float(p.kinematic_viscosity))
    y = np.log([outcome.coefficient * place.length / float(p.conductivity) for outcome in outcomes])
    y = np.maximum.accumulate(y)  # bands that do not meet step: the lowest speed of those that give it
    wanted = np.log(h * place.length / conductivity)
    rising = np.concatenate([[True], np.diff(y) > 0])
    found = np.interp(wanted, y[rising], x[rising], left=np.nan, right=np.nan)
    speed = np.exp(found) * viscosity / place.length
    up, down = (np.interp(found + step, x[rising], y[rising]) for step in (STEP, -STEP))
    power = (up - down) / (2 * STEP)
    scatter = float(np.hypot(outcomes[0].nusselt.scatter, typical.body.scatter))
    return Implied(key, outcomes[0].nusselt.name, speed, speed * np.hypot(h_sd / h, scatter) / power)
