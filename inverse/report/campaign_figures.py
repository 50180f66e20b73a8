"""Pictures of a campaign: h, k and the joint from run to run, and h against the speed that the tables give.

Many runs are drawn as the median and the band of neighbours: thousands of dots are a blot, and a large file.
"""

from typing import Any

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from finback import summaries
from finback.campaign_digest import STEADY, Digest
from finback.report import phrases
from finback.report.figures import BLUE, FAINT, ORANGE, PLAIN, SKY, STYLE, Picture, picture
from finback.report.layout import WIDTH

Array = NDArray[np.float64]

HEIGHT = 2.3
MOST_WITH_BARS, MOST_DOTS = 150, 1500
"""Runs up to which each has its 95 % interval, and up to which each has its dot."""
STRIPS = 150
"""Parts of the horizontal axis in which a median and a band are taken of more runs."""
FEWEST_IN_STRIP = 3
BESIDE = "speed"
"""Name of the picture of h against the speed."""


def draw(digest: Digest) -> tuple[Picture, ...]:
    """Return the pictures of a campaign, named by their quantity; without those that no run tells."""
    with matplotlib.rc_context(STYLE):
        found = [_against_order(digest, name) for name in digest.followed]
        found.append(_against_speed(digest))
        return tuple(each for each in found if each is not None)


def _against_order(digest: Digest, name: str) -> Picture | None:
    values, sds = digest.series(name)
    if not np.isfinite(values).any():
        return None
    figure, axes = _axes(name)
    order = np.arange(1, len(values) + 1, dtype=np.float64)
    _plot(axes, order, values, sds)
    if name in STEADY:
        axes.axhline(float(np.nanmedian(values)), color=ORANGE, linewidth=1, linestyle=(0, (5, 2)), zorder=1)
    axes.set_xlabel("run, in the order of the tables")
    axes.set_xlim(0.5, len(values) + 0.5)
    return picture(name, figure)


def _against_speed(digest: Digest) -> Picture | None:
    values, sds = digest.series("h")
    speeds = np.asarray(digest.speeds)
    told = np.isfinite(values) & np.isfinite(speeds)
    if digest.speed_column is None or told.sum() < FEWEST_IN_STRIP or np.ptp(speeds[told]) == 0:
        return None
    figure, axes = _axes("h")
    _plot(axes, speeds[told], values[told], sds[told])
    axes.set_xlabel(phrases.clean(digest.speed_column, 60), **PLAIN)
    return picture(BESIDE, figure)


def _axes(name: str) -> tuple[Figure, Axes]:
    figure = Figure(figsize=(WIDTH, HEIGHT), layout="constrained")
    axes = figure.add_subplot()
    unit = phrases.pretty(summaries.describe(name)[1])
    axes.set_ylabel(f"{phrases.symbol(name)}, {unit}")
    axes.grid(visible=True, color="#e6e9ed", linewidth=0.6)
    axes.set_axisbelow(True)
    axes.ticklabel_format(axis="y", style="sci", scilimits=(-3, 5), useMathText=True)
    return figure, axes


def _plot(axes: Axes, x: Array, values: Array, sds: Array) -> None:
    told = np.isfinite(values)
    count = int(told.sum())
    if count > MOST_DOTS:
        _bands(axes, x[told], values[told])
        return
    if count <= MOST_WITH_BARS:
        widths: Any = 2 * np.nan_to_num(sds[told])
        axes.errorbar(x[told], values[told], yerr=widths, fmt="none", ecolor=FAINT, elinewidth=0.7)
    size = 3.5 if count <= MOST_WITH_BARS else 2.2
    axes.plot(x[told], values[told], "o", color=BLUE, markersize=size, markeredgewidth=0)
    low, high = (
        np.quantile(values[told], (0.005, 0.995)) if count > 50 else (values[told].min(), values[told].max())
    )
    margin = 0.25 * (high - low) + (2 * float(np.nanmedian(sds[told])) if count <= MOST_WITH_BARS else 0.0)
    if margin > 0:
        axes.set_ylim(float(low - margin), float(high + margin))


def _bands(axes: Axes, x: Array, values: Array) -> None:
    """Draw the median of neighbours and the band that holds nine of ten of them."""
    edges = np.linspace(x.min(), x.max(), STRIPS + 1)
    strip = np.clip(np.searchsorted(edges, x, side="right") - 1, 0, STRIPS - 1)
    middles, bands = [], []
    order = np.argsort(strip, kind="stable")
    for part in np.split(order, np.searchsorted(strip[order], np.arange(1, STRIPS))):
        if len(part) >= FEWEST_IN_STRIP:
            middles.append(float(np.median(x[part])))
            bands.append(np.quantile(values[part], (0.05, 0.5, 0.95)))
    if not bands:
        return
    low, median, high = np.array(bands).T
    axes.fill_between(middles, low, high, color=SKY, alpha=0.4, linewidth=0, label="90 % of the runs")
    axes.plot(middles, median, color=BLUE, linewidth=1.2, label="median")
    axes.legend(frameon=False, fontsize=8, loc="best")
