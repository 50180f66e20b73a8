"""Scenes: what each figure shows, chosen and converted for drawing (mm, °C, %), free of any drawing library."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.estimate import Estimate
from finback.report import phrases

Array = NDArray[np.float64]

ZERO_CELSIUS = 273.15
MAIN_QUANTITIES = (
    "h",
    "k",
    "joint",
    "h_over_k",
    "base_temperature",
    "heat",
    "air",
    "noise",
    "tip_temperature",
)
MOST_PAIRED = 4
SAME = 0.9995  # correlation beyond which two quantities are one and only the first is drawn
MOST_DRAWS = 20_000
GRID = 160


@dataclass(frozen=True, slots=True)
class Mark:
    """One sensor in the drawing: name, place, and position along the fin [mm] where it has one."""

    name: str
    place: str
    position: float | None


@dataclass(frozen=True, slots=True)
class DrawingScene:
    """The fin to scale: length, thickness (height of the side view) and width [mm]; round: a pin."""

    length: float
    thickness: float
    width: float
    round: bool
    guarded: bool
    joint: bool
    tip: str
    marks: tuple[Mark, ...]


@dataclass(frozen=True, slots=True)
class Point:
    """One temperature reading in the profile: x [mm], None beside the fin; temperatures and uncertainty [°C, K]."""

    name: str
    place: str
    x: float | None
    measured: float
    residual: float
    uncertainty: float
    position_sd: float
    excluded: bool


@dataclass(frozen=True, slots=True)
class ProfileScene:
    """Temperature along the fin [mm, °C] with its band, the readings, and the air's level where it is known."""

    length: float
    air: float | None
    x: Array
    median: Array
    low: Array
    high: Array
    points: tuple[Point, ...]


@dataclass(frozen=True, slots=True)
class Paired:
    """One quantity of the pair plot: draws (n,), the window shown, and densities of posterior and prior in it.

    `prior` is None where the quantity has none of its own.
    """

    symbol: str
    unit: str
    draws: Array
    window: tuple[float, float]
    grid: Array
    posterior: Array
    prior: Array | None


@dataclass(frozen=True, slots=True)
class Bar:
    """One candidate: name, probability [%], and that as text."""

    name: str
    percent: float
    text: str


def drawing(estimate: Estimate) -> DrawingScene:
    """Return the fin with its sensors."""
    rig = estimate.rig
    sizes = {name: 1e3 * quantity.value for name, quantity in rig.geometry.items()}
    round_ = "diameter" in sizes
    marks = tuple(
        Mark(phrases.clean(s.name, 16), s.place, None if s.position is None else 1e3 * s.position)
        for s in rig.sensors.values()
    )
    return DrawingScene(
        length=sizes["length"],
        thickness=sizes["diameter"] if round_ else sizes["thickness"],
        width=sizes["diameter"] if round_ else sizes["width"],
        round=round_,
        guarded=rig.guarded_edges,
        joint=any(mark.place == "plate" for mark in marks),
        tip=f"{rig.tip} tip" if rig.tip else "tip compared",
        marks=marks,
    )


def profile(estimate: Estimate) -> ProfileScene:
    """Return the temperature profile with band and readings."""
    band = estimate.band
    points = tuple(
        Point(
            phrases.clean(row.sensor, 16),
            row.place,
            None if row.position is None else 1e3 * row.position,
            row.measured - ZERO_CELSIUS,
            row.residual,
            row.uncertainty,
            1e3 * row.position_sd,
            row.excluded is not None,
        )
        for row in estimate.table
        if row.place in ("fin", "plate", "air")
    )
    lines = (values - ZERO_CELSIUS for values in (band.median, band.low95, band.high95))
    air = estimate.parameters.get("air")
    length = 1e3 * estimate.rig.geometry["length"].value
    return ProfileScene(length, air.median if air else None, 1e3 * band.x, *lines, points)


def pairs(estimate: Estimate) -> tuple[Paired, ...]:
    """Return the quantities of the pair plot: the main ones that were drawn, move, and aren't one and the same."""
    draws = estimate.draws
    flat = draws.values.reshape(-1, len(draws.names))
    flat = flat[:: max(1, len(flat) // MOST_DRAWS)]
    chosen: list[int] = []
    for name in MAIN_QUANTITIES:
        if name in draws.names and len(chosen) < MOST_PAIRED and len(flat) > 1:
            index = draws.names.index(name)
            column = flat[:, index]
            if not np.all(np.isfinite(column)) or np.ptp(column) <= 1e-12 * np.abs(column).max():
                continue
            if all(abs(np.corrcoef(column, flat[:, other])[0, 1]) < SAME for other in chosen):
                chosen.append(index)
    return tuple(
        _paired(draws.names[i], draws.units[i], flat[:, i], draws.prior[:, i] if draws.prior.size else None)
        for i in chosen
    )


def bars(estimate: Estimate) -> tuple[Bar, ...]:
    """Return the candidates' probabilities, best first."""
    return tuple(
        Bar(phrases.clean(score.name, 60), 100 * score.probability, phrases.probability(score.probability))
        for score in estimate.candidates
    )


def _paired(name: str, unit: str, draws: Array, prior: Array | None) -> Paired:
    largest = float(np.abs(draws).max())
    power = 0 if 1e-2 <= largest < 1e5 else int(np.floor(np.log10(largest)))
    draws = draws / 10.0**power
    label = f"{phrases.ten(power)} {phrases.pretty(unit)}" if power else phrases.pretty(unit)

    low, high = (float(limit) for limit in np.quantile(draws, [0.002, 0.998]))
    margin = 0.08 * (high - low)
    positive = unit != "degC" and bool(np.all(draws > 0))
    window = (max(low - margin, 0.5 * low) if positive else low - margin, high + margin)
    grid = np.linspace(*window, GRID)
    given = None
    if prior is not None and np.all(np.isfinite(prior)) and len(prior) > 1 and np.ptp(prior) > 0:
        given = _density(prior / 10.0**power, grid, positive)
    return Paired(
        phrases.symbol(name), label.strip(), draws, window, grid, _density(draws, grid, positive), given
    )


def _density(draws: Array, grid: Array, logarithmic: bool) -> Array:
    """Kernel density at grid points; in the logarithm for a positive quantity, whose prior may span decades."""
    if logarithmic and np.all(draws > 0):
        return _density(np.log(draws), np.log(grid), False) / grid
    draws = draws[:: max(1, len(draws) // 2000)]
    low, high = np.quantile(draws, [0.25, 0.75])
    spread = min(float(draws.std()), float(high - low) / 1.349) or float(draws.std())
    width = 0.9 * spread * len(draws) ** -0.2  # Silverman's rule of thumb
    kernels = np.exp(-0.5 * np.square((grid[:, None] - draws) / width))
    return np.asarray(kernels.mean(axis=1) / (width * np.sqrt(2 * np.pi)), dtype=np.float64)
