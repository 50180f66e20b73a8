"""Scenes: what each figure shows, chosen and converted for drawing (mm, °C, %); nothing is drawn here."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from finback import outline
from finback.estimate import Estimate
from finback.report import phrases
from finback.rig import Rig

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
NAMED = {
    "base_temperature": "T base",
    "air": "T air",
    "tip_temperature": "T tip",
    "noise": "noise",
    "heat": "heat",
}
"""What an axis calls a quantity whose symbol has a subscript."""

MOST_PAIRED = 4
SAME = 0.9995  # correlation beyond which two quantities are one and only the first is drawn
MOST_DRAWS = 20_000
GRID = 160
BINS = 40


@dataclass(frozen=True, slots=True)
class Mark:
    """One sensor in the drawing: name, place, and position along the fin [mm] where it has one."""

    name: str
    place: str
    position: float | None


@dataclass(frozen=True, slots=True)
class Section:
    """The fin across its axis [mm], at its base and at its tip.

    `kind`: "round", "flat", or "ring" for the face of an annular fin, whose sizes are its outer and its inner
    diameter. `width` and `base`, `tip`: of a flat one its thickness, else diameters. `text`: its sizes;
    `caption`: what is drawn.
    """

    kind: Literal["round", "flat", "ring"]
    width: float
    base: float
    tip: float
    guarded: bool
    text: str
    caption: str


@dataclass(frozen=True, slots=True)
class DrawingScene:
    """The fin to scale [mm]: its length, the outline of its side view, and its section.

    `x` (n,) from base to tip and `half` (n,), half the height there; `tube`: radius of the tube below an
    annular fin, None for others.
    """

    length: float
    x: Array
    half: Array
    section: Section
    tube: float | None
    joint: bool
    tip: str
    marks: tuple[Mark, ...]

    @property
    def thickness(self) -> float:
        """Height of the side view where it is largest [mm]."""
        return 2 * float(self.half.max())

    @property
    def tapered(self) -> bool:
        """Whether the height changes along the fin."""
        return bool(np.ptp(self.half) > 1e-9 * self.half.max())


@dataclass(frozen=True, slots=True)
class Point:
    """One temperature reading of the profile: x [mm], None beside the fin; temperatures [°C, K]."""

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
    """Temperature along the fin [mm, °C] with its band, the readings, and the air's level if known."""

    length: float
    air: float | None
    x: Array
    median: Array
    low: Array
    high: Array
    points: tuple[Point, ...]

    def beside(self, place: str) -> float:
        """Where plate and air readings are drawn: at the base's side of the fin, or the tip's [mm]."""
        return {"plate": -0.07, "air": 1.07}[place] * self.length


@dataclass(frozen=True, slots=True)
class Paired:
    """One quantity of the pair plot: its label, draws (n,), the window shown, and densities on a grid in it.

    Draws are nan where a candidate has no such quantity. `prior` is None where the quantity has none.
    """

    label: str
    draws: Array
    window: tuple[float, float]
    grid: Array
    posterior: Array
    prior: Array | None


@dataclass(frozen=True, slots=True)
class Cloud:
    """Density of the draws of two quantities on a grid x, y, and its levels around 95 % and 50 % of them."""

    x: Array
    y: Array
    density: Array
    levels: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Bar:
    """One candidate: name, probability [%], and that as text."""

    name: str
    percent: float
    text: str


def drawing(estimate: Estimate) -> DrawingScene:
    """Return the fin with its sensors."""
    rig = estimate.rig
    marks = tuple(
        Mark(phrases.clean(s.name, 16), s.place, None if s.position is None else 1e3 * s.position)
        for s in rig.sensors.values()
    )
    seen = outline.trace(rig)
    inner = rig.geometry.get("inner_diameter")
    return DrawingScene(
        length=1e3 * rig.length,
        x=1e3 * seen.x,
        half=1e3 * seen.half,
        section=_section(rig, seen),
        tube=None if inner is None else 1e3 * inner.value / 2,
        joint=any(mark.place == "plate" for mark in marks),
        tip=f"{rig.tip} tip" if rig.tip else "tip left open" if rig.has_tip_face else "sharp tip",
        marks=marks,
    )


def _section(rig: Rig, seen: outline.Outline) -> Section:
    sizes = {name: 1e3 * quantity.value for name, quantity in rig.geometry.items()}
    if "outer_diameter" in sizes:
        outer, inner = sizes["outer_diameter"], sizes["inner_diameter"]
        return Section("ring", outer, outer, inner, False, f"⌀ {outer:.4g} on ⌀ {inner:.4g} mm", "Face")
    base, tip = 2e3 * float(seen.half[0]), 2e3 * float(seen.half[-1])
    changes = abs(base - tip) > 1e-9 * base
    across = f"{base:.4g} to {tip:.4g}" if changes else f"{base:.4g}"
    if "width" in sizes:
        width = sizes["width"]
        caption = "Section, edges guarded" if rig.guarded_edges else "Section"
        return Section("flat", width, base, tip, rig.guarded_edges, f"{width:.4g} × {across} mm", caption)
    if rig.shape_file is not None:
        areas = 1e6 * rig.shape_file.table.areas
        ends = dict.fromkeys((f"{areas[0]:.4g}", f"{areas[-1]:.4g}"))
        return Section("round", base, base, tip, False, f"{' to '.join(ends)} mm²", "Section, drawn round")
    return Section("round", base, base, tip, False, f"⌀ {across} mm", "Section")


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
    median, low, high = (values - ZERO_CELSIUS for values in (band.median, band.low95, band.high95))
    air = estimate.parameters.get("air")
    length = 1e3 * estimate.rig.length
    return ProfileScene(length, air.median if air else None, 1e3 * band.x, median, low, high, points)


def pairs(estimate: Estimate) -> tuple[Paired, ...]:
    """Return the quantities of the pair plot: the main ones that vary, and aren't one and the same."""
    draws = estimate.draws
    if not draws.values.size:
        return ()
    flat = draws.values.reshape(-1, len(draws.names))
    flat = flat[:: max(1, len(flat) // MOST_DRAWS)]
    settled = {name for name, summary in estimate.parameters.items() if summary.median is not None}
    chosen: list[int] = []
    for name in MAIN_QUANTITIES:
        if name not in draws.names or (name == "h_over_k" and {"h", "k"} <= settled):
            continue
        index = draws.names.index(name)
        alike = (_correlation(flat[:, index], flat[:, other]) >= SAME for other in chosen)
        if len(chosen) < MOST_PAIRED and _varies(flat[:, index]) and not any(alike):
            chosen.append(index)
    return tuple(
        _paired(draws.names[i], draws.units[i], flat[:, i], draws.prior[:, i] if draws.prior.size else None)
        for i in chosen
    )


def cloud(across: Paired, up: Paired) -> Cloud:
    """Return the density of two quantities' draws, smoothed by a short bell."""
    both = np.isfinite(across.draws) & np.isfinite(up.draws)
    windows = (across.window, up.window)
    counts, x_edges, y_edges = np.histogram2d(across.draws[both], up.draws[both], BINS, windows)
    bell = np.exp(-0.5 * np.square(np.subtract.outer(np.arange(BINS), np.arange(BINS)) / 1.3))
    density = bell @ counts.T @ bell
    x, y = ((edges[:-1] + edges[1:]) / 2 for edges in (x_edges, y_edges))
    if not density.any():
        return Cloud(x, y, density, ())
    ordered = np.sort(density, axis=None)[::-1]
    held = np.cumsum(ordered) / ordered.sum()
    outer, inner = (float(ordered[np.searchsorted(held, share)]) for share in (0.95, 0.5))
    return Cloud(x, y, density, (outer, inner) if outer < inner else ())


def bars(estimate: Estimate) -> tuple[Bar, ...]:
    """Return the candidates' probabilities, best first."""
    return tuple(
        Bar(phrases.clean(score.name, 60), 100 * score.probability, phrases.probability(score.probability))
        for score in estimate.candidates
    )


def name_on_axis(name: str) -> str:
    """Return what an axis calls a quantity."""
    return NAMED.get(name, phrases.symbol(name))


def _varies(draws: Array) -> bool:
    finite = draws[np.isfinite(draws)]
    return finite.size > 1 and float(np.ptp(finite)) > 1e-9 * float(np.abs(finite).max())


def _correlation(one: Array, other: Array) -> float:
    both = np.isfinite(one) & np.isfinite(other)
    if not (_varies(one[both]) and _varies(other[both])):
        return 0.0
    return abs(float(np.corrcoef(one[both], other[both])[0, 1]))


def _paired(name: str, unit: str, draws: Array, prior: Array | None) -> Paired:
    finite = draws[np.isfinite(draws)]
    largest = float(np.abs(finite).max())
    power = 0 if 1e-2 <= largest < 1e5 else int(np.floor(np.log10(largest)))
    draws, finite = draws / 10.0**power, finite / 10.0**power
    shown = f"{phrases.ten(power)} {phrases.pretty(unit)}" if power else phrases.pretty(unit)

    low, high = (float(limit) for limit in np.quantile(finite, [0.002, 0.998]))
    margin = 0.08 * (high - low)
    positive = unit != "degC" and bool(np.all(finite > 0))
    window = (max(low - margin, 0.5 * low) if positive else low - margin, high + margin)
    grid = np.linspace(*window, GRID)
    given = None
    if prior is not None and np.all(np.isfinite(prior)) and _varies(prior):
        given = _density(prior / 10.0**power, grid, positive)
    label = ", ".join(part for part in (name_on_axis(name), shown.strip()) if part)
    return Paired(label, draws, window, grid, _density(finite, grid, positive), given)


def _density(draws: Array, grid: Array, logarithmic: bool) -> Array:
    """Return the kernel density at grid points; that of a positive quantity is smoothed in its logarithm.

    A wide prior spans decades, and a bell as wide as that would blur it beyond recognition.
    """
    if logarithmic and np.all(draws > 0):
        return _density(np.log(draws), np.log(grid), False) / grid
    lower, upper = np.quantile(draws, [0.25, 0.75])
    spread = min(float(draws.std()), float(upper - lower) / 1.349) or float(draws.std())
    width = 1.06 * spread * len(draws) ** -0.2  # Silverman's rule of thumb
    edges = np.linspace(grid.min() - 4 * width, grid.max() + 4 * width, 601)
    counts, _ = np.histogram(draws, edges)
    kernels = np.exp(-0.5 * np.square(np.subtract.outer(grid, (edges[:-1] + edges[1:]) / 2) / width))
    return np.asarray(kernels @ counts / (len(draws) * width * np.sqrt(2 * np.pi)), dtype=np.float64)
