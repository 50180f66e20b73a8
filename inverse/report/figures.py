"""Figures: draw the scenes. The only module that imports matplotlib; objects only, no pyplot, nothing kept.

Colours are those of Okabe and Ito, told apart in every common kind of colour blindness; markers differ too.
User-given names are drawn as they are, never read as mathematics.
"""

import io
import warnings
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.patches import Circle, Rectangle
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from finback.estimate import Estimate
from finback.report import scenes

Array = NDArray[np.float64]

WIDTH = 6.4  # inches, of every figure
DPI = 160
BLACK, ORANGE, SKY, GREEN, BLUE, VERMILION, PURPLE = (
    "#000000", "#E69F00", "#56B4E9", "#009E73", "#0072B2", "#D55E00", "#CC79A7"
)  # fmt: skip
METAL, INK, FAINT = "#e3e6ea", "#222222", "#8a9099"
MARKERS = {"fin": ("o", BLUE), "plate": ("s", VERMILION), "air": ("D", GREEN)}
DENSITY = LinearSegmentedColormap.from_list("density", ["#ffffff", SKY, BLUE])
STYLE = {
    "font.family": "DejaVu Sans",
    "font.size": 9,
    "axes.edgecolor": FAINT,
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.unicode_minus": True,
    "hatch.linewidth": 0.6,
    "path.simplify": True,
    "svg.fonttype": "path",
    "svg.hashsalt": "finback",
    "text.usetex": False,
}
PLAIN: dict[str, Any] = {"parse_math": False}  # a "$" in a name is a dollar sign


@dataclass(frozen=True, slots=True)
class Picture:
    """One figure: file stem, and its bytes as PNG and SVG."""

    name: str
    png: bytes
    svg: bytes


NAMES = ("drawing", "profile", "candidates", "pairs")


def draw(estimate: Estimate) -> tuple[Picture, ...]:
    """Return the figures of an estimate, in the order of NAMES; without those it has nothing for."""
    painters: list[tuple[str, Callable[[], Figure]]] = [
        ("drawing", lambda: _drawing(scenes.drawing(estimate)))
    ]
    if estimate.band.x.size:
        painters.append(("profile", lambda: _profile(scenes.profile(estimate))))
    if estimate.candidates:
        painters.append(("candidates", lambda: _bars(scenes.bars(estimate))))
    paired = scenes.pairs(estimate)
    if paired:
        painters.append(("pairs", lambda: _pairs(paired)))
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings(
            "ignore", "Glyph .* missing from", UserWarning
        )  # a name in any script is drawn
        return tuple(_picture(name, paint()) for name, paint in painters)


def _picture(name: str, figure: Figure) -> Picture:
    png, svg = io.BytesIO(), io.BytesIO()
    FigureCanvasAgg(figure).print_figure(png, format="png", dpi=DPI, metadata={"Software": None})
    FigureCanvasSVG(figure).print_figure(svg, format="svg", dpi=DPI, metadata={"Date": None, "Creator": None})
    return Picture(name, png.getvalue(), svg.getvalue())


# The drawing: one pair of axes in inches over the whole figure.

HEIGHT, FIN_LEFT, FIN_RIGHT, AXIS = 2.9, 1.0, 4.75, 1.45
LEAST_THICKNESS, MOST_THICKNESS = 0.12, 0.9
STRETCHES = (2, 3, 4, 5, 8, 10, 15, 20, 30, 40, 50, 80, 100, 200, 500, 1000)


def _drawing(scene: scenes.DrawingScene) -> Figure:
    figure = Figure(figsize=(WIDTH, HEIGHT))
    axes = figure.add_axes((0, 0, 1, 1), xlim=(0, WIDTH), ylim=(0, HEIGHT))
    axes.set_axis_off()
    scale = min((FIN_RIGHT - FIN_LEFT) / scene.length, MOST_THICKNESS / scene.thickness)
    stretch = 1
    if scene.thickness * scale < LEAST_THICKNESS:
        stretch = next(
            (s for s in STRETCHES if s * scene.thickness * scale >= 1.5 * LEAST_THICKNESS), STRETCHES[-1]
        )
    thickness = max(scene.thickness * scale * stretch, 0.02)
    right = FIN_LEFT + scene.length * scale

    _fin_and_plate(axes, scene, thickness, right)
    _fin_sensors(axes, scene, thickness, scale)
    _other_sensors(axes, scene, thickness, right)
    _cross_section(axes, scene)
    _dimension(axes, FIN_LEFT, right, 0.42, f"{scene.length:.4g} mm")
    to_scale = "to scale" if stretch == 1 else f"length to scale, thickness drawn {stretch} times larger"
    axes.text(FIN_LEFT, 0.1, f"Side view, {to_scale}", color=INK, fontsize=8)
    return figure


def _fin_and_plate(axes: Axes, scene: scenes.DrawingScene, thickness: float, right: float) -> None:
    gap = 0.08 if scene.joint else 0.0
    half = thickness / 2 + 0.33
    plate = Rectangle(
        (FIN_LEFT - gap - 0.34, AXIS - half), 0.34, 2 * half, facecolor="white", edgecolor=FAINT, hatch="////"
    )
    fin = Rectangle(
        (FIN_LEFT, AXIS - thickness / 2), right - FIN_LEFT, thickness, facecolor=METAL, edgecolor=INK
    )
    axes.add_patch(plate)
    axes.add_patch(fin)
    below = AXIS - half - 0.06
    if scene.joint:
        strip = Rectangle(
            (FIN_LEFT - gap, AXIS - thickness / 2),
            gap,
            thickness,
            facecolor=ORANGE,
            edgecolor=INK,
            linewidth=0.6,
        )
        axes.add_patch(strip)
        axes.text(FIN_LEFT - gap - 0.17, below, "plate", ha="center", va="top", color=INK)
        axes.annotate(
            "joint R″", (FIN_LEFT - gap / 2, AXIS - thickness / 2), (FIN_LEFT + 0.12, below), va="top", color=INK,
            arrowprops={"arrowstyle": "-", "color": FAINT, "linewidth": 0.8},
        )  # fmt: skip
    else:
        axes.text(FIN_LEFT - 0.17, below, "base", ha="center", va="top", color=INK)
    axes.text(
        right + 0.06,
        AXIS,
        scene.tip,
        va="center",
        color=INK,
        fontsize=8,
        rotation=90 if thickness > 0.8 else 0,
    )


def _fin_sensors(axes: Axes, scene: scenes.DrawingScene, thickness: float, scale: float) -> None:
    """Markers on the fin, names above and positions below, moved sideways where they would overlap."""
    marks = sorted((m for m in scene.marks if m.position is not None), key=lambda m: m.position or 0.0)
    if not marks:
        return
    x = np.array([FIN_LEFT + (m.position or 0.0) * scale for m in marks])
    shape, colour = MARKERS["fin"]
    axes.plot(
        x,
        np.full_like(x, AXIS),
        shape,
        color=colour,
        markersize=5,
        markeredgecolor="white",
        markeredgewidth=0.5,
    )
    size = 9.0 if len(marks) <= 26 else max(4.0, 9.0 * 26 / len(marks))
    top, bottom = AXIS + thickness / 2, AXIS - thickness / 2
    for texts, edge, sign in (
        ([m.name for m in marks], top, 1),
        ([f"{m.position:.4g}" for m in marks], bottom, -1),
    ):
        width = 0.0085 * size * max(len(t) for t in texts) + 0.05
        upright = width * len(texts) > 3.9
        places = _spread(x, size / 72 * 1.25 if upright else width, FIN_LEFT - 0.05, FIN_RIGHT + 0.25)
        for at, place, text in zip(x, places, texts, strict=True):
            axes.plot(
                [at, at, place, place],
                edge + sign * np.array([0, 0.05, 0.16, 0.2]),
                color=FAINT,
                linewidth=0.7,
            )
            axes.text(
                place, edge + sign * 0.22, text, ha="center", va="bottom" if sign > 0 else "top", color=INK,
                fontsize=size, rotation=90 if upright else 0, **PLAIN,
            )  # fmt: skip


def _spread(wanted: Array, apart: float, low: float, high: float) -> Array:
    """Return places as near the wanted ones (ascending) as can be with `apart` between neighbours."""
    apart = min(apart, (high - low) / max(1, len(wanted) - 1))
    steps = apart * np.arange(len(wanted))
    from_left = np.maximum.accumulate(wanted - steps) + steps
    from_right = np.minimum.accumulate((wanted - steps)[::-1])[::-1] + steps
    places = (from_left + from_right) / 2  # each keeps the distance, so their mean does
    return np.minimum(np.maximum(places, low + steps), high - steps[::-1])


def _other_sensors(axes: Axes, scene: scenes.DrawingScene, thickness: float, right: float) -> None:
    """Markers of the plate's and the air's sensors, and the heat as an arrow into the base."""
    by_place = {
        place: [m.name for m in scene.marks if m.place == place]
        for place in ("plate", "air", "heat", "heater")
    }
    half = thickness / 2 + 0.33
    middle = FIN_LEFT - (0.25 if scene.joint else 0.17)
    if by_place["plate"]:
        shape, colour = MARKERS["plate"]
        heights = np.linspace(-1, 1, len(by_place["plate"]) + 2)[1:-1] * half + AXIS
        axes.plot(
            np.full_like(heights, middle), heights, shape, color=colour, markersize=6, markeredgecolor="white"
        )
        axes.text(
            middle,
            AXIS + half + 0.06,
            "\n".join(by_place["plate"]),
            ha="center",
            va="bottom",
            color=INK,
            **PLAIN,
        )
    if by_place["air"]:
        shape, colour = MARKERS["air"]
        axes.plot([right + 0.3], [HEIGHT - 0.2], shape, color=colour, markersize=6, markeredgecolor="white")
        axes.text(right + 0.42, HEIGHT - 0.2, ", ".join(by_place["air"]), va="center", color=INK, **PLAIN)
    power = by_place["heat"] + by_place["heater"]
    if power:
        axes.annotate(
            "", (middle - 0.2, AXIS), (0.12, AXIS),
            arrowprops={"arrowstyle": "-|>", "color": PURPLE, "linewidth": 2.2, "shrinkA": 0, "shrinkB": 0},
        )  # fmt: skip
        axes.text(0.12, AXIS + 0.12, "\n".join(power), va="bottom", color=INK, **PLAIN)


def _cross_section(axes: Axes, scene: scenes.DrawingScene) -> None:
    """The cross-section at the right, at a scale of its own."""
    x, y, room = WIDTH - 0.55, AXIS, 0.72
    if scene.round:
        axes.add_patch(Circle((x, y), room / 2, facecolor=METAL, edgecolor=INK))
        text, low = f"⌀ {scene.thickness:.4g} mm", room / 2
    else:
        scale = room / max(scene.width, scene.thickness)
        wide, high = scene.width * scale, max(scene.thickness * scale, 0.02)
        axes.add_patch(Rectangle((x - wide / 2, y - high / 2), wide, high, facecolor=METAL, edgecolor=INK))
        if scene.guarded:
            for left in (x - wide / 2 - 0.07, x + wide / 2):
                axes.add_patch(
                    Rectangle(
                        (left, y - high / 2), 0.07, high, facecolor="white", edgecolor=INK, hatch="xxxx"
                    )
                )
        text, low = f"{scene.width:.4g} × {scene.thickness:.4g} mm", high / 2
    axes.text(x, y - low - 0.08, text, ha="center", va="top", color=INK)
    note = "Section, edges guarded" if scene.guarded else "Section"
    axes.text(x, 0.1, note, ha="center", color=INK, fontsize=8)


def _dimension(axes: Axes, left: float, right: float, y: float, text: str) -> None:
    axes.annotate(
        "", (left, y), (right, y),
        arrowprops={"arrowstyle": "<|-|>", "color": INK, "linewidth": 0.8, "shrinkA": 0, "shrinkB": 0},
    )  # fmt: skip
    axes.text((left + right) / 2, y, text, ha="center", va="center", color=INK, backgroundcolor="white")


def _profile(scene: scenes.ProfileScene) -> Figure:
    """Temperatures with band and readings; residuals beneath; plate and air readings at either side."""
    figure = Figure(figsize=(WIDTH, 4.5))
    axes = figure.add_axes((0.105, 0.36, 0.875, 0.62))
    below = figure.add_axes((0.105, 0.105, 0.875, 0.22), sharex=axes)
    axes.fill_between(scene.x, scene.low, scene.high, color=SKY, alpha=0.45, linewidth=0, label="95 % band")
    axes.plot(scene.x, scene.median, color=BLUE, linewidth=1.4, label="posterior median")
    if scene.air is not None:
        axes.axhline(
            scene.air, color=GREEN, linestyle=(0, (5, 3)), linewidth=1, label="air, posterior median"
        )
    below.axhline(0, color=FAINT, linewidth=0.8)

    beside = {"plate": -0.07 * scene.length, "air": 1.07 * scene.length}
    for place, (shape, colour) in MARKERS.items():
        label = f"{place} readings ± 2 sd"
        for excluded in (False, True):
            chosen = [p for p in scene.points if p.place == place and p.excluded == excluded]
            if not chosen:
                continue
            x = [beside[place] if p.x is None else p.x for p in chosen]
            bars = {
                "yerr": [2 * p.uncertainty for p in chosen], "fmt": "x" if excluded else shape, "elinewidth": 1,
                "color": FAINT if excluded else colour, "markersize": 5, "capsize": 2,
            }  # fmt: skip
            text = "set aside" if excluded else label
            axes.errorbar(x, [p.measured for p in chosen], label=text, **bars)
            below.errorbar(x, [p.residual for p in chosen], **bars)

    axes.set_ylabel("temperature, °C")
    below.set_ylabel("residual, K")
    below.set_xlabel("distance from the base, mm")
    places = {p.place for p in scene.points if p.x is None}
    axes.set_xlim(*(edge * 1.6 if place in places else inner for place, edge, inner in (
        ("plate", beside["plate"], -0.02 * scene.length), ("air", beside["air"] / 1.6 * 1.12 / 1.07, 1.02 * scene.length)
    )))  # fmt: skip
    ticks = [t for t in MaxNLocator(7).tick_values(0, scene.length) if 0 <= t <= scene.length]
    texts = [f"{t:g}" for t in ticks]
    for place in sorted(places):
        ticks.append(beside[place])
        texts.append(place)
    below.set_xticks(ticks, texts)
    axes.tick_params(labelbottom=False)
    axes.legend(frameon=False, fontsize=8.5)
    return figure


def _bars(bars: tuple[scenes.Bar, ...]) -> Figure:
    figure = Figure(figsize=(WIDTH, 0.7 + 0.3 * len(bars)))
    height = figure.get_figheight()
    axes = figure.add_axes((0.34, 0.5 / height, 0.63, 1 - 0.55 / height))
    rows = np.arange(len(bars))
    axes.barh(rows, [bar.percent for bar in bars], height=0.62, color=[BLUE] + [SKY] * (len(bars) - 1))
    for row, bar in zip(rows, bars, strict=True):
        axes.text(bar.percent + 1, row, bar.text, va="center", color=INK)
    axes.set_yticks(rows, [bar.name for bar in bars], **PLAIN)
    axes.set_xlim(0, 115)
    axes.set_xticks([0, 20, 40, 60, 80, 100])
    axes.set_ylim(len(bars) - 0.5, -0.5)
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel("posterior probability, %")
    return figure


def _pairs(quantities: tuple[scenes.Paired, ...]) -> Figure:
    """Marginals on the diagonal with the prior dashed, densities with 50 and 95 % contours below it."""
    n = len(quantities)
    size = WIDTH if n > 2 else 4.6
    figure = Figure(figsize=(size, size * (0.94 if n > 1 else 0.6)))
    left, bottom, gap = 0.13, 0.12, 0.025
    side, tall = (0.985 - left + gap) / n, (0.985 - bottom + gap) / n
    for row, below in enumerate(quantities):
        for column in range(row + 1):
            box = (left + column * side, bottom + (n - 1 - row) * tall, side - gap, tall - gap)
            across = quantities[column]
            axes = figure.add_axes(box, xlim=across.window)
            if row == column:
                _marginal(axes, across, legend=row == 0)
            else:
                _joint_density(axes, across, below)
            axes.xaxis.set_major_locator(MaxNLocator(3, prune="both"))
            axes.tick_params(labelbottom=row == n - 1, labelleft=column == 0 and row > 0, labelsize=8)
            if row == n - 1:
                axes.set_xlabel(_axis_label(across))
            if column == 0 and row > 0:
                axes.set_ylabel(_axis_label(below))
    return figure


def _axis_label(quantity: scenes.Paired) -> str:
    return f"{quantity.symbol}, {quantity.unit}" if quantity.unit else quantity.symbol


def _marginal(axes: Axes, quantity: scenes.Paired, legend: bool) -> None:
    axes.fill_between(quantity.grid, quantity.posterior, color=SKY, alpha=0.45, linewidth=0)
    axes.plot(quantity.grid, quantity.posterior, color=BLUE, linewidth=1.2, label="posterior")
    if quantity.prior is not None:
        axes.plot(
            quantity.grid,
            quantity.prior,
            color=VERMILION,
            linestyle=(0, (4, 2)),
            linewidth=1.2,
            label="prior",
        )
    axes.set_ylim(0, 1.08 * float(quantity.posterior.max()))
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    if legend:
        axes.legend(frameon=False, fontsize=8, loc="upper left", bbox_to_anchor=(1.02, 1.0), borderaxespad=0)


BINS = 36


def _joint_density(axes: Axes, across: scenes.Paired, up: scenes.Paired) -> None:
    counts, x_edges, y_edges = np.histogram2d(across.draws, up.draws, BINS, (across.window, up.window))
    density = _smooth(_smooth(counts.T).T).T
    ordered = np.sort(density, axis=None)[::-1]
    mass = np.cumsum(ordered) / ordered.sum()
    levels = [float(ordered[np.searchsorted(mass, share)]) for share in (0.95, 0.5)]
    axes.imshow(
        density, origin="lower", aspect="auto", cmap=DENSITY, interpolation="bilinear",
        extent=(*across.window, *up.window),
    )  # fmt: skip
    if levels[0] < levels[1]:
        middles = [(edges[:-1] + edges[1:]) / 2 for edges in (x_edges, y_edges)]
        axes.contour(*middles, density, levels=levels, colors=INK, linewidths=(0.7, 1.0))
    axes.set_ylim(*up.window)
    axes.yaxis.set_major_locator(MaxNLocator(3, prune="both"))


def _smooth(rows: Array) -> Array:
    """Smooth each row by a short bell, so that contours don't follow single draws."""
    bell = np.exp(-0.5 * np.square(np.arange(-3, 4) / 1.2))
    return np.apply_along_axis(np.convolve, 1, rows, bell / bell.sum(), mode="same")
