"""Figures: draw the scenes. The only module that imports matplotlib; objects only, no pyplot, nothing kept.

Colours are those of Okabe and Ito, told apart in every common kind of colour blindness; markers differ too.
User-given names are drawn as they are, never read as mathematics.
"""

import io
import math
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
from matplotlib.patches import Circle, Polygon, Rectangle
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from finback.estimate import Estimate
from finback.report import scenes, shares
from finback.report.layout import (
    CROWDED,
    FIN_END,
    JOINT,
    LETTER,
    LINE,
    SECTION,
    SECTION_FROM_RIGHT,
    SMALL_LETTER,
    WIDTH,
    Layout,
    lay_out,
    names,
    on_fin,
    spread,
)

Array = NDArray[np.float64]

DPI = 160
BLACK, ORANGE, SKY, GREEN, BLUE, VERMILION, PURPLE = (
    "#000000", "#E69F00", "#56B4E9", "#009E73", "#0072B2", "#D55E00", "#CC79A7"
)  # fmt: skip
METAL, INK, FAINT = "#e3e6ea", "#222222", "#8a9099"
EDGE: dict[str, Any] = {"edgecolor": INK, "linewidth": 0.8}
INNER: dict[str, Any] = {"edgecolor": INK, "linewidth": 0.6, "linestyle": (0, (4, 2))}
LEAST_SEEN = 0.05  # inches between two lines that are to be told apart
SMALL: dict[str, Any] = {"color": INK, "fontsize": 8}
MARKERS = {"fin": ("o", BLUE), "plate": ("s", VERMILION), "air": ("D", GREEN)}
DENSITY = LinearSegmentedColormap.from_list("density", ["#ffffff", SKY, BLUE])
STYLE: dict[Any, Any] = {
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


HATCHES = {"random": "", "systematic": "////", "prior": "...."}
KIND_COLOURS = {
    "random": (BLUE, SKY, "#a9d4f0", "#dcecf8"),
    "systematic": (ORANGE, "#f6d58f", VERMILION, "#f5bd9a", "#fbeccb", "#e8e0d0"),
    "prior": (GREEN, PURPLE, "#8fd4bd", "#ecc9dc"),
}
"""Colours of the sources of a kind, in turn."""
LEAST_LETTERED, LEAST_NUMBERED = 3.0, 7.0
"""Per cent of a bar from which a piece has room for its letter, and for its share."""
LETTER_OF_BARS = 0.072
"""Width of a letter beside a bar [in]."""
NAMES = ("drawing", "profile", "candidates", "pairs", "budget")


def draw(estimate: Estimate) -> tuple[Picture, ...]:
    """Return the figures of an estimate, in the order of NAMES; without those it has nothing for."""
    painters: list[tuple[str, Callable[[], Figure]]] = [
        ("drawing", lambda: _drawing(scenes.drawing(estimate)))
    ]
    if estimate.band.x.size:
        painters.append(("profile", lambda: _profile(scenes.profile(estimate))))
    if len(estimate.candidates) > 1:
        painters.append(("candidates", lambda: _bars(scenes.bars(estimate))))
    paired = scenes.pairs(estimate)
    if paired:
        painters.append(("pairs", lambda: _pairs(paired)))
    if estimate.budget:
        painters.append(("budget", lambda: _budget(*shares.pieces(estimate))))
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings(
            "ignore", "Glyph .* missing from", UserWarning
        )  # a name in any script is drawn
        return tuple(picture(name, paint()) for name, paint in painters)


def picture(name: str, figure: Figure) -> Picture:
    """Return a figure as PNG and SVG, the same bytes every time."""
    png, svg = io.BytesIO(), io.BytesIO()
    figure.set_dpi(DPI)  # the canvases' own print methods: print_figure would lay everything out twice
    raster: Any = FigureCanvasAgg(figure)  # matplotlib does not say what the print methods take
    vector: Any = FigureCanvasSVG(figure)
    raster.print_png(png, metadata={"Software": None}, pil_kwargs={"compress_level": 2})
    vector.print_svg(svg, metadata={"Date": None, "Creator": None})
    return Picture(name, png.getvalue(), svg.getvalue())


# The drawing: one pair of axes in inches over the whole figure.


def _drawing(scene: scenes.DrawingScene) -> Figure:
    lay = lay_out(scene)
    figure = Figure(figsize=(WIDTH, lay.height))
    axes = figure.add_axes((0, 0, 1, 1), xlim=(0, WIDTH), ylim=(0, lay.height))
    axes.set_axis_off()
    _draw_fin_and_plate(axes, scene, lay)
    _draw_fin_sensors(axes, scene, lay)
    _draw_other_sensors(axes, scene, lay)
    _draw_section(axes, scene, lay)
    _draw_dimension(axes, lay, f"{scene.length:.4g} mm")
    to_scale = (
        "to scale" if lay.stretch == 1 else f"length to scale, thickness drawn {lay.stretch} times larger"
    )
    seen = "Side view" if scene.tube is None else "Cut along the axis of the tube"
    caption = f"{seen}, {to_scale}; {scene.tip}"
    room = WIDTH - SECTION_FROM_RIGHT - SMALL_LETTER * (len(caption) + len(scene.section.caption) / 2 + 3)
    axes.text(max(0.12, min(lay.left, room)), 0.1, caption, **SMALL)
    return figure


def _draw_fin_and_plate(axes: Axes, scene: scenes.DrawingScene, lay: Layout) -> None:
    gap = JOINT if scene.joint else 0.0
    half = lay.plate_half
    plate = Rectangle((lay.left - gap - lay.plate, lay.axis - half), lay.plate, 2 * half, hatch="////")
    plate.set(facecolor="white", edgecolor=FAINT)
    axes.add_patch(plate)
    x, height = lay.left + scene.x * lay.scale, scene.half * (lay.thickness / scene.thickness)
    above, below = np.stack([x, lay.axis + height], axis=1), np.stack([x, lay.axis - height], axis=1)
    axes.add_patch(Polygon(np.concatenate([above, below[::-1]]), closed=True, facecolor=METAL, **EDGE))
    bottom, middle = lay.axis - half - 0.06, lay.left - gap - lay.plate / 2
    name = "tube" if scene.tube is not None else "plate" if scene.joint else "base"
    axes.text(middle, bottom, name, ha="center", va="top", color=INK)
    if lay.tube_axis is not None:
        style: dict[str, Any] = {"color": FAINT, "linewidth": 0.8, "linestyle": (0, (9, 3, 1.5, 3))}
        axes.plot([lay.tube_axis] * 2, [lay.axis - half - 0.1, lay.axis + half + 0.1], **style)
    if scene.joint:
        low, high = lay.axis - height[0], 2 * height[0]
        axes.add_patch(Rectangle((lay.left - gap, low), gap, high, facecolor=ORANGE, **EDGE))
        x_joint = lay.left - gap / 2
        axes.plot([x_joint, x_joint], [low, bottom - 0.2], color=FAINT, linewidth=0.7)
        axes.text(x_joint + 0.05, bottom - 0.22, "joint R″", ha="right", va="top", color=INK)


def _draw_fin_sensors(axes: Axes, scene: scenes.DrawingScene, lay: Layout) -> None:
    """Draw markers on the fin, names above and positions below, moved sideways where they would overlap."""
    marks = on_fin(scene)
    if not marks:
        return
    x = np.array([lay.left + position * lay.scale for position, _ in marks])
    shape, colour = MARKERS["fin"]
    axes.plot(x, np.full_like(x, lay.axis), shape, color=colour, markersize=5, markeredgecolor="white")
    size = 9.0 if len(marks) <= CROWDED else max(3.5, 9.0 * CROWDED / len(marks))
    heights = lay.half(scene, np.array([position for position, _ in marks]))
    sides = (([name for _, name in marks], 1), ([f"{position:.4g}" for position, _ in marks], -1))
    for texts, sign in sides:
        edge = lay.axis + sign * lay.thickness / 2
        width = LETTER * max(len(text) for text in texts) + 0.05
        upright = width * len(texts) > 1.15 * (lay.right - lay.left)
        places = spread(
            x,
            1.3 * size / 72 if upright else width,
            lay.left + (0.09 if upright else width / 2),
            FIN_END + 0.1,
        )
        for at, place, text, height in zip(x, places, texts, heights, strict=True):
            bend = edge + sign * np.array([0.02, 0.06, 0.15, 0.19])
            bend[0] = lay.axis + sign * max(height + 0.02, 0.06)  # clear of the marker
            axes.plot([at, at, place, place], bend, color=FAINT, linewidth=0.7)
            label = axes.text(place, edge + sign * 0.21, text, ha="center", fontsize=size, color=INK, **PLAIN)
            label.set(va="bottom" if sign > 0 else "top", rotation=90 if upright else 0)


def _draw_other_sensors(axes: Axes, scene: scenes.DrawingScene, lay: Layout) -> None:
    """Draw the plate's and the air's sensors, and the heat as an arrow into plate or base."""
    gap = JOINT if scene.joint else 0.0
    middle, top = lay.left - gap - lay.plate / 2, lay.axis + lay.plate_half + 0.06
    plate, air, heat = names(scene, "plate"), names(scene, "air"), names(scene, "heat", "heater")
    if plate:
        shape, colour = MARKERS["plate"]
        heights = np.linspace(-1, 1, len(plate) + 2)[1:-1] * lay.plate_half + lay.axis
        axes.plot(np.full_like(heights, middle), heights, shape, color=colour, markeredgecolor="white")
        axes.text(lay.left - gap, top, "\n".join(plate), ha="right", va="bottom", color=INK, **PLAIN)
    shape, colour = MARKERS["air"]
    for row, name in enumerate(air):
        y = top + 0.1 + row * LINE
        axes.plot([lay.right + 0.3], [y], shape, color=colour, markeredgecolor="white")
        axes.text(lay.right + 0.4, y, name, va="center", color=INK, **PLAIN)
    if heat:
        arrow = {"arrowstyle": "-|>", "color": PURPLE, "linewidth": 2.2, "shrinkA": 0, "shrinkB": 0}
        axes.annotate("", (middle - lay.plate / 2 - 0.03, lay.axis), (0.12, lay.axis), arrowprops=arrow)
        axes.text(0.12, lay.axis + 0.1, "\n".join(heat), va="bottom", color=INK, **PLAIN)


def _draw_section(axes: Axes, scene: scenes.DrawingScene, lay: Layout) -> None:
    """Draw the cross-section at the right, at a scale of its own: the base's, and the tip's inside it."""
    section = scene.section
    x, y = WIDTH - SECTION_FROM_RIGHT, lay.axis
    largest = max(section.base, section.tip)
    if section.kind == "flat":
        half = _draw_flat_section(axes, section, x, y)
    else:
        half = SECTION / 2
        for diameter in sorted((section.base, section.tip), reverse=True):
            radius = half * diameter / largest
            hole = section.kind == "ring" and diameter < largest
            style = EDGE if hole or diameter == largest else INNER
            axes.add_patch(Circle((x, y), radius, facecolor="white" if hole else METAL, **style))
    axes.text(x, y - half - 0.08, section.text, ha="center", va="top", color=INK)
    axes.text(x, 0.1, section.caption, ha="center", **SMALL)


def _draw_flat_section(axes: Axes, section: scenes.Section, x: float, y: float) -> float:
    """Draw a rectangular section about a point and return half its height."""
    largest = max(section.base, section.tip)
    scale = SECTION / max(section.width, largest)
    wide, high = section.width * scale, max(largest * scale, 0.02)
    axes.add_patch(Rectangle((x - wide / 2, y - high / 2), wide, high, facecolor=METAL, **EDGE))
    inner = min(section.base, section.tip) * scale
    if LEAST_SEEN < inner < high - LEAST_SEEN:
        axes.add_patch(Rectangle((x - wide / 2, y - inner / 2), wide, inner, facecolor=METAL, **INNER))
    for left in (x - wide / 2 - 0.08, x + wide / 2) if section.guarded else ():
        axes.add_patch(Rectangle((left, y - high / 2), 0.08, high, facecolor="white", hatch="xxxx", **EDGE))
    return high / 2


def _draw_dimension(axes: Axes, lay: Layout, text: str) -> None:
    arrow = {"arrowstyle": "<|-|>", "color": INK, "linewidth": 0.8, "shrinkA": 0, "shrinkB": 0}
    axes.annotate("", (lay.left, lay.dimension), (lay.right, lay.dimension), arrowprops=arrow)
    middle = (lay.left + lay.right) / 2
    backed = {"facecolor": "white", "edgecolor": "none", "pad": 2}
    axes.text(middle, lay.dimension, text, ha="center", va="center", color=INK, bbox=backed)


def _profile(scene: scenes.ProfileScene) -> Figure:
    """Draw temperatures with band and readings, residuals beneath, plate and air readings at either side."""
    figure = Figure(figsize=(WIDTH, 4.4))
    axes = figure.add_axes((0.105, 0.37, 0.875, 0.61))
    below = figure.add_axes((0.105, 0.105, 0.875, 0.22), sharex=axes)
    axes.fill_between(scene.x, scene.low, scene.high, color=SKY, alpha=0.45, linewidth=0, label="95 % band")
    axes.plot(scene.x, scene.median, color=BLUE, linewidth=1.4, label="posterior median")
    if scene.air is not None:
        dashes: dict[str, Any] = {"linestyle": (0, (5, 3)), "linewidth": 1}
        axes.axhline(scene.air, color=GREEN, label="air, posterior median", **dashes)
    below.axhline(0, color=FAINT, linewidth=0.8)
    for excluded in (False, True):
        for place in MARKERS:
            points = [p for p in scene.points if p.place == place and p.excluded == excluded]
            if points:
                _draw_readings(axes, below, points, scene)
    _mark_positions(axes, below, scene)
    axes.set_ylabel("temperature, °C")
    below.set_ylabel("residual, K")
    below.set_xlabel("distance from the base, mm")
    handles = dict(zip(*reversed(axes.get_legend_handles_labels()), strict=True))
    axes.legend(handles.values(), handles.keys(), frameon=False, fontsize=8.5)
    return figure


def _draw_readings(axes: Axes, below: Axes, points: list[scenes.Point], scene: scenes.ProfileScene) -> None:
    """Draw readings of one place with error bars of two standard deviations, in both panels."""
    place, excluded = points[0].place, points[0].excluded
    shape, colour = ("x", FAINT) if excluded else MARKERS[place]
    x = [scene.beside(place) if p.x is None else p.x for p in points]
    style: dict[str, Any] = {"fmt": shape, "color": colour, "markersize": 5, "elinewidth": 1, "capsize": 2}
    style["yerr"] = [2 * p.uncertainty for p in points]
    if any(p.position_sd for p in points):
        style["xerr"] = [2 * p.position_sd for p in points]
    label = "set aside" if excluded else f"{place} readings ± 2 sd"
    axes.errorbar(x, [p.measured for p in points], label=label, **style)
    below.errorbar(x, [p.residual for p in points], **style)


def _mark_positions(axes: Axes, below: Axes, scene: scenes.ProfileScene) -> None:
    """Set the ticks: distances along the fin, and the names of the places beside it."""
    ticks = [float(t) for t in MaxNLocator(7).tick_values(0, scene.length) if 0 <= t <= scene.length]
    texts = [f"{t:g}" for t in ticks]
    limits = [-0.02 * scene.length, 1.02 * scene.length]
    for side, place in enumerate(("plate", "air")):
        if any(p.x is None and p.place == place for p in scene.points):
            ticks.append(scene.beside(place))
            texts.append(place)
            limits[side] = scene.beside(place) + (0.04 if side else -0.04) * scene.length
    below.set_xticks(ticks, texts)
    axes.set_xlim(*limits)
    axes.tick_params(labelbottom=False)


def _bars(bars: tuple[scenes.Bar, ...]) -> Figure:
    height = 0.6 + 0.27 * len(bars)
    figure = Figure(figsize=(WIDTH, height))
    longest = max(len(bar.name) for bar in bars)
    left = min(max(LETTER_OF_BARS * longest / WIDTH + 0.02, 0.2), 0.6)
    axes = figure.add_axes((left, 0.48 / height, 0.97 - left, 1 - 0.52 / height))
    rows = np.arange(len(bars))
    axes.barh(rows, [bar.percent for bar in bars], height=0.62, color=[BLUE] + [SKY] * (len(bars) - 1))
    for row, bar in enumerate(bars):
        axes.text(bar.percent + 1, row, bar.text, va="center", color=INK)
    axes.set_yticks(rows, [bar.name for bar in bars], **PLAIN)
    axes.set_xlim(0, 115)
    axes.set_xticks([0, 20, 40, 60, 80, 100])
    axes.set_ylim(len(bars) - 0.5, -0.5)
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel("posterior probability, %")
    return figure


def _budget(names: tuple[str, ...], pieces: tuple[shares.Piece, ...]) -> Figure:
    """Draw one stacked bar a quantity; a piece is told apart by its letter, its kind by hatch."""
    bars, legend = 0.27 * len(names), 0.19 * math.ceil(len(pieces) / 2)
    height = bars + legend + 0.53
    figure = Figure(figsize=(WIDTH, height))
    axes = figure.add_axes((0.08, (legend + 0.48) / height, 0.89, bars / height))
    starts, used = np.zeros(len(names)), dict.fromkeys(KIND_COLOURS, 0)
    for piece in pieces:
        colours = KIND_COLOURS[piece.kind]
        _draw_piece(axes, piece, starts, colours[used[piece.kind] % len(colours)])
        used[piece.kind] += 1
        starts = starts + np.array(piece.percent)
    axes.set_yticks(range(len(names)), [scenes.name_on_axis(name) for name in names])
    axes.set_xlim(0, 100)
    axes.set_ylim(len(names) - 0.5, -0.5)
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel("share of the variance, %")
    spacing = {"handlelength": 2.2, "handleheight": 1.1, "labelspacing": 0.25, "borderaxespad": 0.1}
    style: dict[str, Any] = {"ncols": 2, "frameon": False, "fontsize": 8, **spacing}
    handles, labels = axes.get_legend_handles_labels()
    figure.legend(handles, labels, loc="lower left", bbox_to_anchor=(0.06, 0.0), **style)
    return figure


def _draw_piece(axes: Axes, piece: shares.Piece, starts: Array, colour: str) -> None:
    """Draw one source in every bar, with its letter and share where there is room."""
    style: dict[str, Any] = {"facecolor": colour, "hatch": HATCHES[piece.kind], **EDGE}
    rows, label = range(len(starts)), f"{piece.letter}  {piece.name}"
    axes.barh(rows, piece.percent, 0.7, starts, label=label, **style)
    backed = {"facecolor": "white", "edgecolor": "none", "pad": 0.8}
    for row, start, percent in zip(rows, starts, piece.percent, strict=True):
        if percent >= LEAST_LETTERED:
            text = f"{piece.letter} {percent:.0f}" if percent >= LEAST_NUMBERED else piece.letter
            axes.text(start + percent / 2, row, text, ha="center", va="center", bbox=backed, **SMALL)


def _pairs(quantities: tuple[scenes.Paired, ...]) -> Figure:
    """Draw marginals on the diagonal with the prior dashed, densities with 50 and 95 % contours below it."""
    n = len(quantities)
    used = 0.97 if n > 2 else 0.72  # of the width, for panels
    high = WIDTH * used * (0.9 if n > 1 else 0.6)
    figure = Figure(figsize=(WIDTH, high))
    left, bottom, gap = 0.85 / WIDTH, 0.5 / high, 0.025
    across_step, up_step = (used - left + gap) / n, (0.99 - bottom + gap) / n
    for row, up in enumerate(quantities):
        for column, across in enumerate(quantities[: row + 1]):
            corner = left + column * across_step, bottom + (n - 1 - row) * up_step
            axes = figure.add_axes((*corner, across_step - gap, up_step - gap), xlim=across.window)
            if row == column:
                _draw_marginal(axes, across, legend=row == 0)
            else:
                _draw_density(axes, across, up)
            axes.set_xticks(_inner_ticks(across.window, WIDTH * (across_step - gap)))
            axes.tick_params(labelbottom=row == n - 1, labelleft=column == 0 and row > 0, labelsize=8)
            if row == n - 1:
                axes.set_xlabel(across.label)
            if column == 0 and row > 0:
                axes.set_ylabel(up.label)
                axes.yaxis.set_label_coords(-0.62 / (WIDTH * (across_step - gap)), 0.5)
    return figure


def _inner_ticks(window: tuple[float, float], room: float) -> list[float]:
    """Return a few round values whose labels keep clear of each other and of the next panel.

    Arguments: window of the axis; room, its length [in].
    """
    low, high = window
    margin = 0.14 * (high - low)
    ticks: list[float] = []
    for most in (4, 3, 2):
        values = MaxNLocator(most).tick_values(low, high)
        ticks = [float(tick) for tick in values if low + margin <= tick <= high - margin]
        longest = max((len(f"{tick:.6g}") for tick in ticks), default=1)
        if len(ticks) < 2 or (ticks[1] - ticks[0]) / (high - low) * room > LETTER * longest:
            break
    return ticks


def _draw_marginal(axes: Axes, quantity: scenes.Paired, legend: bool) -> None:
    axes.fill_between(quantity.grid, quantity.posterior, color=SKY, alpha=0.45, linewidth=0)
    axes.plot(quantity.grid, quantity.posterior, color=BLUE, linewidth=1.2, label="posterior")
    if quantity.prior is not None:
        dashes: dict[str, Any] = {"linestyle": (0, (4, 2)), "linewidth": 1.2}
        axes.plot(quantity.grid, quantity.prior, color=VERMILION, label="prior", **dashes)
    axes.set_ylim(0, 1.08 * float(quantity.posterior.max()))
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    if legend:
        axes.legend(
            frameon=False, fontsize=8.5, loc="upper left", bbox_to_anchor=(1.05, 1.0), borderaxespad=0
        )


def _draw_density(axes: Axes, across: scenes.Paired, up: scenes.Paired) -> None:
    cloud = scenes.cloud(across, up)
    box = (*across.window, *up.window)
    axes.imshow(
        cloud.density, origin="lower", aspect="auto", cmap=DENSITY, interpolation="bilinear", extent=box
    )
    if cloud.levels:
        axes.contour(cloud.x, cloud.y, cloud.density, levels=cloud.levels, colors=INK, linewidths=(0.7, 1.0))
    axes.set_ylim(*up.window)
    axes.set_yticks(_inner_ticks(up.window, WIDTH))
