"""The picture of a correlation: runs and laws on logarithmic axes, their ratios to the fitted law beneath."""

import warnings
from typing import Any

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
from numpy.typing import NDArray

from finback.correlate import OUTLYING, Correlation
from finback.quantity import pretty_unit
from finback.report.figures import (
    BLUE,
    FAINT,
    GREEN,
    INK,
    ORANGE,
    PURPLE,
    SKY,
    STYLE,
    VERMILION,
    Picture,
    picture,
)
from finback.report.layout import WIDTH

Array = NDArray[np.float64]

NAME = "correlation"
MOST_WITH_BARS = 80
"""Runs up to which each has its error bars."""

MOST_DRAWN = 5000
"""Runs that do not stand out that are drawn; more would be a blot."""

LINES: tuple[tuple[str, Any], ...] = (
    (ORANGE, (0, (6, 2))),
    (GREEN, (0, (2, 2))),
    (PURPLE, (0, (6, 2, 1.5, 2))),
    ("#000000", (0, (1, 1.5))),
)
"""Colour and dashes of the published laws, in turn."""

AXES = {
    "reynolds": ("Re", "Nu / Pr$^{1/3}$"),
    "rayleigh": ("Ra", "Nu"),
    "speed": (f"speed, {pretty_unit('m/s')}", f"h, {pretty_unit('W/(m^2 K)')}"),
}
LEAST_RATIO = 0.1
"""Half the height of the lower panel, at least, as a share of the law."""


def draw(found: Correlation) -> Picture:
    """Return the picture of a correlation."""
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph .* missing from", UserWarning)
        return picture(NAME, _figure(found))


def _figure(found: Correlation) -> Figure:
    figure = Figure(figsize=(WIDTH, 5.4))
    axes = figure.add_axes((0.105, 0.36, 0.875, 0.62))
    below = figure.add_axes((0.105, 0.09, 0.875, 0.23), sharex=axes)
    _draw_law(axes, below, found)
    _draw_published(axes, below, found)
    _draw_runs(axes, below, found)
    axes.set_xscale("log")
    axes.set_yscale("log")
    _frame(axes, below, found)
    across, up = AXES[found.form]
    axes.set_ylabel(up)
    below.set_xlabel(across)
    below.set_ylabel("ratio to the law")
    axes.legend(frameon=False, fontsize=8, loc="upper left", handlelength=2.8)
    return figure


def _draw_law(axes: Axes, below: Axes, found: Correlation) -> None:
    band = found.band
    new: dict[str, Any] = {"color": SKY, "alpha": 0.25, "linewidth": 0}
    own: dict[str, Any] = {"color": SKY, "alpha": 0.6, "linewidth": 0}
    axes.fill_between(band.x, band.new_low95, band.new_high95, label="95 % of new runs", **new)
    axes.fill_between(band.x, band.low95, band.high95, label="95 % band of the law", **own)
    line: dict[str, Any] = {"color": BLUE, "linewidth": 1.5, "zorder": _above(found)}
    axes.plot(band.x, band.median, label="law, median", **line)
    below.fill_between(band.x, band.new_low95 / band.median, band.new_high95 / band.median, **new)
    below.fill_between(band.x, band.low95 / band.median, band.high95 / band.median, **own)
    below.axhline(1.0, **line)


def _above(found: Correlation) -> int:
    """Return the layer of the lines: below the runs while these can be told apart, else above them."""
    return 2 if len(found.x) <= MOST_WITH_BARS else 4


def _draw_published(axes: Axes, below: Axes, found: Correlation) -> None:
    for one, (colour, dashes) in zip(found.compared, LINES, strict=False):
        curve = found.curves[one.correlation]
        style: dict[str, Any] = {
            "color": colour,
            "linestyle": dashes,
            "linewidth": 1.2,
            "zorder": _above(found),
        }
        axes.plot(found.curve_x, curve, label=one.name.partition(",")[0], **style)
        below.plot(found.curve_x, curve / found.band.median, **style)


def _draw_runs(axes: Axes, below: Axes, found: Correlation) -> None:
    """Draw the runs, those that belong as dots and others as crosses, bars of two standard deviations."""
    outlying = found.outlying >= OUTLYING
    inlying = np.flatnonzero(~outlying)
    if len(inlying) > MOST_DRAWN:
        inlying = inlying[np.linspace(0, len(inlying) - 1, MOST_DRAWN).astype(int)]
    bars = len(found.x) <= MOST_WITH_BARS
    kinds = (
        (inlying, "o", INK, f"runs{' ± 2 sd' if bars else ''}"),
        (np.flatnonzero(outlying)[:MOST_DRAWN], "X", VERMILION, "outlying runs"),
    )
    for some, marker, colour, label in kinds:
        if not len(some):
            continue
        style: dict[str, Any] = {"fmt": marker, "color": colour, "label": label}
        style["markersize"] = (4 if marker == "o" else 7) if bars else (2 if marker == "o" else 5)
        style |= {"elinewidth": 0.7, "ecolor": FAINT if marker == "o" else colour, "zorder": 3}
        spans: dict[str, Any] = {}
        up: dict[str, Any] = {}
        if bars:
            spans = {"xerr": _arms(found.x, found.x_sd, some), "yerr": _arms(found.y, found.y_sd, some)}
            up = {"yerr": _arms(found.ratio, found.ratio * found.error, some)}
        axes.errorbar(found.x[some], found.y[some], **spans, **style)
        ratio = found.ratio[some]
        below.errorbar(found.x[some], ratio, **up, **style)


def _arms(value: Array, sd: Array, some: NDArray[np.intp]) -> Array:
    """Return the arms of error bars (2, n) of two standard deviations in logarithms."""
    factor = np.exp(2 * sd[some] / value[some])
    return np.stack([value[some] * (1 - 1 / factor), value[some] * (factor - 1)])


def _frame(axes: Axes, below: Axes, found: Correlation) -> None:
    """Set limits and ticks; an outlying run beyond the lower panel is drawn at its edge as an arrow."""
    for axis in (axes.xaxis, axes.yaxis):
        low, high = axis.get_view_interval()
        few = np.log10(high / low) < 2.5
        axis.set_major_locator(LogLocator(10, (1, 2, 5) if few else (1,)))
        axis.set_major_formatter(FuncFormatter(_plain))
        axis.set_minor_formatter(NullFormatter())
    inlying = found.outlying < OUTLYING
    reach = np.abs(found.ratio[inlying] - 1) if inlying.any() else np.zeros(1)
    half = max(1.5 * float(np.quantile(reach, 0.99)), LEAST_RATIO)
    below.set_ylim(max(1 - half, 0), 1 + half)
    for x, ratio in zip(found.x[~inlying][:MOST_DRAWN], found.ratio[~inlying][:MOST_DRAWN], strict=True):
        if abs(ratio - 1) > half:
            edge, marker = (1 + half, "^") if ratio > 1 else (max(1 - half, 0), "v")
            below.plot([x], [edge], marker, color=VERMILION, markersize=7, clip_on=False)
    axes.tick_params(labelbottom=False)


def _plain(value: float, _: float) -> str:
    return f"{value:g}" if 1e-3 <= value < 1e5 else f"$10^{{{np.log10(value):.0f}}}$"
