"""Relative dispersion against time."""

import numpy as np
from matplotlib.axes import Axes

from regimes.analysis import Analysis
from regimes.report.figures.bars import errorbars, log_bars, seen
from regimes.report.figures.style import COLOUR, GREEN, INK, LINE, VERMILION, figure_function, log_axis
from regimes.units import DAY, KM

LAWS = {
    "richardson": (3.0, "Richardson $t^{3}$", "bottom"),
    "ballistic": (2.0, "ballistic $t^{2}$", "center"),
    "diffusive": (1.0, "diffusive $t$", "top"),
}


@figure_function
def plot_dispersion(analysis: Analysis, ax: Axes) -> Axes:
    """Relative dispersion since the start of each pair, total and by component, with cluster errors.

    Parameters
    ----------
    analysis : Analysis
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    statistics = analysis.dispersion
    _axes(ax, "time since the start of the pair (days)", "relative dispersion (km²)")
    for curve, marker, colour, label, shift in (
        (statistics.east(), "^", VERMILION, "east", 0.97),
        (statistics.north(), "s", GREEN, "north", 1.03),
        (statistics.relative_dispersion(), "o", INK, "total, 95 %", 1.0),
    ):
        show = seen(curve)
        value = curve.value[show] / KM**2
        bars = log_bars(value, curve.standard_error[show] / KM**2)
        looks = {"marker": marker, "colour": colour, "mfc": colour if marker == "o" else "white", "label": label}
        errorbars(ax, curve.axis[show] * shift / DAY, value, bars, looks)
    _finish(ax)
    _laws(ax)
    return ax


def _axes(ax: Axes, x: str, y: str) -> None:
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_xlabel(x)
    ax.set_ylabel(y)


def _finish(ax: Axes) -> None:
    ax.autoscale_view()
    log_axis(ax.xaxis)
    log_axis(ax.yaxis)
    ax.legend(loc="upper left", borderaxespad=0.2, labelspacing=0.3)


def _laws(ax: Axes) -> None:
    """Slopes of the late laws of three regimes as a fan in the empty lower right corner."""
    (x_low, x_high), (y_low, y_high) = np.log10(ax.get_xlim()), np.log10(ax.get_ylim())
    start = np.array([x_high - 0.47 * (x_high - x_low), y_low + 0.05 * (y_high - y_low)])
    aspect = ax.bbox.height / ax.bbox.width
    for name, (slope, words, side) in LAWS.items():
        run = np.array([1.0 / (x_high - x_low), slope * aspect / (y_high - y_low)])
        end = start + 0.25 / np.hypot(*run) * np.array([1.0, slope])
        ax.plot(*10.0 ** np.stack([start, end], axis=1), color=COLOUR[name], ls=LINE[name], zorder=1)
        ax.annotate(words, 10.0**end, xytext=(4, 0), textcoords="offset points", va=side, fontsize=9.5)
