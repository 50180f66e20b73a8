"""The pictures of a diagnosis: the waterfall from now to healthy, and the readings, wrong ones marked."""

import warnings
from typing import Any

import matplotlib
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.ticker import MaxNLocator

from finback.diagnosis import Diagnosis
from finback.models.constants import ZERO_CELSIUS
from finback.report import diagnosis_scenes as scenes
from finback.report.figures import (
    BLUE,
    FAINT,
    GREEN,
    INK,
    MARKERS,
    ORANGE,
    PLAIN,
    SKY,
    STYLE,
    VERMILION,
    Picture,
    picture,
)
from finback.report.layout import LETTER, WIDTH

NAMES = ("waterfall", "readings")
ROW = 0.47  # height of a row of the waterfall [in]
BELOW, ABOVE = 0.5, 0.06  # room for the axis, and above it [in]
LEFT, GAP, RIGHT = 1.55, 0.22, 0.12  # of the panels [in]
SHARE = 0.56  # of the width, for the heat where the base temperature stands beside it
LEAST_SPAN = 4.0  # K that the axis of the base temperature covers
BAR = 0.56  # height of a bar in rows
BESIDE_ROW = 0.42  # rows by which a number stands above a row that has no room for it
BESIDE = {"plate": -0.07, "air": 1.07}  # of the length, where those readings are drawn


def draw(found: Diagnosis) -> tuple[Picture, ...]:
    """Return the pictures of a diagnosis, in the order of NAMES."""
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph .* missing from", UserWarning)
        figures = _waterfall(*scenes.waterfalls(found)), _readings(found)
        return tuple(picture(name, figure) for name, figure in zip(NAMES, figures, strict=True))


def _waterfall(heat: scenes.Waterfall, base: scenes.Waterfall | None) -> Figure:
    rows = len(heat.steps) + 2
    height = BELOW + ABOVE + ROW * rows
    figure = Figure(figsize=(WIDTH, height))
    room = WIDTH - LEFT - RIGHT
    first = room if base is None else SHARE * (room - GAP)
    box = BELOW / height, ROW * rows / height
    axes = figure.add_axes((LEFT / WIDTH, box[0], first / WIDTH, box[1]))
    _panel(axes, heat, from_zero=True)
    axes.set_xlabel("heat into the fin, W")
    axes.set_yticks(range(rows), [heat.now.name, *(s.name for s in heat.steps), heat.healthy.name], **PLAIN)
    if base is not None:
        left = (LEFT + first + GAP) / WIDTH
        beside = figure.add_axes((left, box[0], (room - GAP - first) / WIDTH, box[1]))
        _panel(beside, base, from_zero=False)
        beside.set_xlabel("base temperature, °C")
        beside.tick_params(labelleft=False)
        beside.set_yticks(range(rows))
    return figure


def _panel(axes: Axes, fall: scenes.Waterfall, from_zero: bool) -> None:
    """Draw one quantity: its two levels, and between them a step a row."""
    last = len(fall.steps) + 1
    ends = [(0, fall.now, FAINT), (last, fall.healthy, GREEN)]
    for row, level, colour in ends:
        arms = [[level.value - level.low], [level.high - level.value]]
        if from_zero:
            axes.barh(row, level.value, BAR, color=colour, alpha=0.55)
        style: dict[str, Any] = {"fmt": "none" if from_zero else "D", "color": INK, "markersize": 5}
        axes.errorbar([level.value], [row], xerr=arms, elinewidth=1.1, capsize=3, **style)
    at = fall.now.value
    for row, step in enumerate(fall.steps, start=1):
        _join(axes, at, row - 1)
        _draw_step(axes, step, row)
        at = step.start + step.expected
    _join(axes, at, last - 1)
    _frame(axes, fall, from_zero)
    for row, level, _ in ends:
        _label(axes, level.text, level.low, level.high, row)
    for row, step in enumerate(fall.steps, start=1):
        reach = [step.start + part for part in (0.0, step.whole, step.low, step.high)]
        _label(axes, step.text, min(reach), max(reach), row, abs(step.whole))


def _draw_step(axes: Axes, step: scenes.Step, row: int) -> None:
    """Draw what a cause put right brings: pale the whole of it, full the share that is probable."""
    pale: dict[str, Any] = {"facecolor": "#fbe3c0", "edgecolor": ORANGE, "linewidth": 0.9, "hatch": "////"}
    axes.add_patch(Rectangle((step.start, row - BAR / 2), step.whole, BAR, **pale))
    full: dict[str, Any] = {"facecolor": ORANGE, "edgecolor": INK, "linewidth": 0.7}
    axes.add_patch(Rectangle((step.start, row - BAR / 2), step.expected, BAR, **full))
    if step.high > step.low:
        arms = [[step.whole - step.low], [step.high - step.whole]]
        axes.errorbar([step.start + step.whole], [row], xerr=arms, fmt="none", ecolor=INK, capsize=3)


def _join(axes: Axes, at: float, row: int) -> None:
    """Draw the thin line on which one row hands over to the next."""
    axes.plot([at, at], [row + BAR / 2, row + 1 - BAR / 2], color=INK, linewidth=0.7, linestyle=(0, (2, 2)))


def _frame(axes: Axes, fall: scenes.Waterfall, from_zero: bool) -> None:
    """Set limits with room for the numbers, rows downwards."""
    places = [at for level in (fall.now, fall.healthy) for at in (level.low, level.high)]
    for step in fall.steps:
        places += [step.start + part for part in (0.0, step.whole, step.low, step.high)]
    low, high = min(places), max(places)
    if from_zero:
        low, high = min(low, 0.0), max(high, 0.0)
    else:
        more = max(LEAST_SPAN - (high - low), 0.0) / 2
        low, high = low - more, high + more
    span = high - low
    axes.set_xlim(low - (0.0 if from_zero and low == 0 else 0.06 * span), high + 0.06 * span)
    axes.set_ylim(len(fall.steps) + 1.5, -0.65)
    axes.xaxis.set_major_locator(MaxNLocator(5))
    axes.tick_params(axis="y", length=0)
    axes.margins(0)


def _label(axes: Axes, text: str, low: float, high: float, row: int, bar: float = 0.0) -> None:
    """Write a number in its row, at the side of its bar where there is more room, or else on or above it.

    Arguments: low and high, how far the row is taken; bar, how long its bar is.
    """
    left, right = axes.get_xlim()
    margin = 0.02 * (right - left)
    width = LETTER * len(text) * (right - left) / (axes.get_position().width * WIDTH) + margin
    height = float(row)
    if max(low - left, right - high) < width:
        at, side = (low + high) / 2, "center"
        height -= 0.0 if bar > 1.5 * width else BESIDE_ROW
    elif low - left > right - high:
        at, side = low - margin, "right"
    else:
        at, side = high + margin, "left"
    backed = {"facecolor": "white", "edgecolor": "none", "pad": 1.2}
    axes.text(at, height, text, ha=side, va="center", color=INK, fontsize=8.5, bbox=backed)


def _readings(found: Diagnosis) -> Figure:
    """Draw the temperatures against their places; a wrong one points to what it should be."""
    length = 1e3 * found.rig.length
    figure = Figure(figsize=(WIDTH, 2.9))
    axes = figure.add_axes((0.105, 0.16, 0.875, 0.8))
    reads = scenes.temperatures(found)
    x, temperatures = found.profile
    line: dict[str, Any] = {"color": SKY, "linewidth": 1.2, "zorder": 1}
    axes.plot(1e3 * x, temperatures - ZERO_CELSIUS, **line, label="the likeliest fin")
    for read in reads:
        at = BESIDE[read.place] * length if read.x is None else read.x
        shape, colour = MARKERS[read.place]
        if read.should is None:
            axes.plot(
                [at], [read.measured], shape, color=colour, markersize=5, label=f"{read.place} readings"
            )
            continue
        axes.plot([at], [read.measured], "X", color=VERMILION, markersize=7, label="likely wrong")
        axes.plot([at], [read.should], "o", markerfacecolor="white", color=BLUE, label="what it should read")
        arrow: dict[str, Any] = {"arrowstyle": "-|>", "color": VERMILION, "shrinkA": 4, "shrinkB": 3}
        axes.annotate("", (at, read.should), (at, read.measured), arrowprops=arrow)
        offset: dict[str, Any] = {"textcoords": "offset points", "xytext": (8, 4), "color": INK}
        axes.annotate(read.name, (at, read.measured), **offset, **PLAIN)
    axes.set_xlabel("distance from the base, mm (plate at the left, air at the right)")
    axes.set_ylabel("temperature, °C")
    handles = dict(zip(*reversed(axes.get_legend_handles_labels()), strict=True))
    axes.legend(handles.values(), handles.keys(), frameon=False, fontsize=8.5)
    return figure
