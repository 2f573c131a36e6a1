"""The finite-scale Lyapunov exponent against separation."""

import numpy as np
from matplotlib.axes import Axes

from regimes.analysis import Analysis, RateTable
from regimes.report.figures.style import BLUE, COLOUR, GREY, INK, LINE, ORANGE, figure_function, log_axis
from regimes.units import DAY, KM

SLOPES = {"exponential": 0.0, "richardson": -2.0 / 3.0, "ballistic": -1.0, "diffusive": -2.0}
SLOPE_WORDS = {
    "exponential": "exponential $r^{0}$",
    "richardson": "Richardson $r^{-2/3}$",
    "ballistic": "ballistic $r^{-1}$",
    "diffusive": "diffusive $r^{-2}$",
}
REACH = 5.0
ABOVE_FAN = 0.45  # height kept free of data on the left, as a share of the axes
LINE_POINTS = 12.0  # between the names of the guide lines
FAN_REACH = 0.27  # length of the guide lines as a share of the width of the axes


@figure_function
def plot_exponent(analysis: Analysis, ax: Axes) -> Axes:
    """Exponents with 95 % bars, what the fitted kernels predict, and guide lines of the four regimes.

    Parameters
    ----------
    analysis : Analysis
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    bands = analysis.bands
    x = bands.separation / KM
    ax.set_xscale("log")
    ax.set_yscale("log")
    named, free = bands.rate_named * DAY, bands.rate_free * DAY
    ax.fill_between(x, named[0], named[4], color=BLUE, alpha=0.22, lw=0, label="named regimes, 95 %")
    ax.plot(x, named[2], color=BLUE, lw=1.6)
    for row, label in ((0, "free exponents, 95 %"), (4, None)):
        ax.plot(x, free[row], color=ORANGE, lw=1.4, ls=(0, (4, 1.5)), label=label)
    _points(ax, analysis.rates)
    _limits(ax, analysis)
    _fan(ax)
    log_axis(ax.xaxis)
    log_axis(ax.yaxis)
    ax.set_xlabel("separation (km)")
    ax.set_ylabel("exponent (1/day)")
    place = {"loc": "lower left", "bbox_to_anchor": (0.0, 1.0), "borderaxespad": 0.0}
    ax.legend(ncol=2, handlelength=1.6, labelspacing=0.3, columnspacing=1.5, **place)
    return ax


def _points(ax: Axes, rates: RateTable) -> None:
    """Resolved exponents filled, the others hollow, the textbook estimate as crosses."""
    x = rates.thresholds[:-1] / KM
    for used, face, label in (
        (rates.resolved, INK, "data, 95 %"),
        (~rates.resolved, "white", "not resolved"),
    ):
        show = used & np.isfinite(rates.rate) & (rates.rate > 0)
        if not np.any(show):
            continue
        y = rates.rate[show] * DAY
        bars = np.abs(np.stack([rates.low95[show], rates.high95[show]]) * DAY - y)
        ax.errorbar(
            x[show], y, np.nan_to_num(bars), fmt="o", ms=4.8, mfc=face, mec=INK,
            ecolor=INK if face == INK else GREY, elinewidth=1.0, label=label, zorder=3,
        )  # fmt: skip
    show = np.isfinite(rates.textbook) & (rates.textbook > 0)
    ax.plot(
        x[show],
        rates.textbook[show] * DAY,
        "x",
        color=GREY,
        ms=4.5,
        mew=1.0,
        label="textbook estimate",
        zorder=2,
    )


def _limits(ax: Axes, analysis: Analysis) -> None:
    """Axes wide enough for points and bands, with room for the guide lines below the left part.

    Ends of bars and bands beyond a factor `REACH` of their middle do not widen the axes.
    """
    rates, bands = analysis.rates, analysis.bands
    rows = [(rates.thresholds[:-1], rates.rate, rates.low95, rates.high95)]
    rows += [(bands.separation, band[2], band[0], band[4]) for band in (bands.rate_named, bands.rate_free)]
    rows += [(rates.thresholds[:-1], rates.textbook, rates.textbook, rates.textbook)]
    separation, middle, low, high = np.concatenate([np.stack(row) for row in rows], axis=1)
    show = np.isfinite(middle) & (middle > 0)
    x, y = np.log10(separation[show] / KM), np.log10(middle[show] * DAY)
    down, up = (np.log10(np.clip(end[show] / middle[show], 1.0 / REACH, REACH)) for end in (low, high))
    x_low, x_high = x.min() - 0.1, x.max() + 0.1
    bottom, top = np.min(y + np.nan_to_num(down)) - 0.1, np.max(y + np.nan_to_num(up)) + 0.1
    left = (y + np.nan_to_num(down))[x < 0.5 * (x_low + x_high)]
    if left.size:
        bottom = min(bottom, (left.min() - ABOVE_FAN * top) / (1.0 - ABOVE_FAN))
    ax.set_xlim(10.0**x_low, 10.0**x_high)
    ax.set_ylim(10.0**bottom, 10.0**top)


def _fan(ax: Axes) -> None:
    """Guide lines of equal length from one point in the empty lower left corner, each named at its end."""
    (x_low, x_high), (y_low, y_high) = np.log10(ax.get_xlim()), np.log10(ax.get_ylim())
    aspect = ax.bbox.height / ax.bbox.width
    start = np.array([x_low + 0.05 * (x_high - x_low), y_low + 0.38 * (y_high - y_low)])
    point = (y_high - y_low) / (72.0 * ax.bbox.height / ax.get_figure().dpi)  # of a letter, in decades
    free = np.inf
    for name, slope in SLOPES.items():
        run = np.array([1.0 / (x_high - x_low), slope * aspect / (y_high - y_low)])
        end = start + FAN_REACH / np.hypot(*run) * np.array([1.0, slope])
        ax.plot(*10.0 ** np.stack([start, end], axis=1), color=COLOUR[name], ls=LINE[name], lw=1.6, zorder=1)
        height = min(end[1], free)
        free = height - LINE_POINTS * point
        ax.annotate(
            SLOPE_WORDS[name], 10.0**end, xytext=(4, (height - end[1]) / point), textcoords="offset points",
            va="center", fontsize=9.5, color=INK,
        )  # fmt: skip
