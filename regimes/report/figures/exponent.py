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
NUDGE = {"richardson": 2, "ballistic": -2}  # points by which the names of neighbouring lines are moved apart
BELOW_LEGEND, ABOVE_FAN = 0.66, 0.44  # heights kept free of data, on the right and on the left, as shares of the axes
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
    ax.legend(loc="upper right", handlelength=1.6, borderaxespad=0.2, labelspacing=0.3)
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
    """Axes wide enough for points and bands, with room for the legend and, below, for the guide lines."""
    rates, bands = analysis.rates, analysis.bands
    rows = [rates.rate, rates.high95, rates.textbook]
    rows += [np.where(rates.resolved, rates.low95, np.nan)]
    separation = np.concatenate([np.tile(rates.thresholds[:-1], len(rows)), np.tile(bands.separation, 4)])
    value = np.concatenate([*rows, bands.rate_named[0], bands.rate_named[4], bands.rate_free[0], bands.rate_free[4]])
    show = np.isfinite(value) & (value > 0)
    x, y = np.log10(separation[show] / KM), np.log10(value[show] * DAY)
    x_low, x_high = x.min() - 0.1, x.max() + 0.1
    left, right = y[x < 0.5 * (x_low + x_high)], y[x > x_low + 0.45 * (x_high - x_low)]
    low, high = y.min() - 0.1, y.max() + 0.1
    for _ in range(20):
        if right.size:
            high = max(high, low + (right.max() - low) / BELOW_LEGEND)
        if left.size:
            low = min(low, (left.min() - ABOVE_FAN * high) / (1.0 - ABOVE_FAN))
    ax.set_xlim(10.0**x_low, 10.0**x_high)
    ax.set_ylim(10.0**low, 10.0**high)


def _fan(ax: Axes) -> None:
    """Guide lines of equal length from one point in the empty lower left corner, each named at its end."""
    (x_low, x_high), (y_low, y_high) = np.log10(ax.get_xlim()), np.log10(ax.get_ylim())
    aspect = ax.bbox.height / ax.bbox.width
    start = np.array([x_low + 0.05 * (x_high - x_low), y_low + 0.38 * (y_high - y_low)])
    for name, slope in SLOPES.items():
        run = np.array([1.0 / (x_high - x_low), slope * aspect / (y_high - y_low)])
        length = FAN_REACH / np.hypot(*run)
        end = start + length * np.array([1.0, slope])
        ax.plot(*10.0 ** np.stack([start, end], axis=1), color=COLOUR[name], ls=LINE[name], lw=1.6, zorder=1)
        ax.annotate(
            SLOPE_WORDS[name], 10.0**end, xytext=(4, NUDGE.get(name, 0)), textcoords="offset points", va="center",
            fontsize=9.5, color=INK,
        )  # fmt: skip
