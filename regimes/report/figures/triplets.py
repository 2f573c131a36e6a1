"""Area and shape of triangles of particles released together."""

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure, SubFigure

from regimes.analysis import Analysis
from regimes.report.figures.bars import NORMAL95, errorbars, log_bars, seen, widen
from regimes.report.figures.style import GREY, INK, VERMILION, log_axis, panels, panels_function
from regimes.units import DAY, KM

HEIGHT = 2.6
INDEPENDENT = 0.5  # aspect of particles that wander independently


@panels_function
def plot_triplets(analysis: Analysis, figure: Figure | SubFigure | None = None) -> tuple[Axes, ...]:
    """Mean area and mean square side (top) and aspect (bottom) against time, with cluster errors.

    Parameters
    ----------
    analysis : Analysis
        With triplets.
    figure : matplotlib Figure or SubFigure, optional
        A new figure without it.

    Returns
    -------
    tuple of matplotlib Axes
        Top, bottom; one axis of times for both.
    """
    top, bottom = panels(figure, 2, 1, HEIGHT)
    found = analysis.others.triplets
    shown = []
    for curve, marker, colour, mfc, label in (
        (found.side_square, "s", VERMILION, "white", "mean square side, 95 %"),
        (found.area, "o", INK, INK, "mean area, 95 %"),
    ):
        show = seen(curve)
        value = curve.value[show]
        bars = log_bars(value, curve.standard_error[show]) / KM**2
        looks = {"marker": marker, "colour": colour, "mfc": mfc, "label": label}
        errorbars(top, curve.axis[show] / DAY, value / KM**2, bars, looks)
        shown.append((value / KM**2, bars))
    top.set_yscale("log")
    widen(top, shown)
    top.set_ylabel("area, squared side (km\u00b2)")
    top.legend(loc="upper left", borderaxespad=0.2, labelspacing=0.3)
    _aspect(bottom, found.aspect)
    for ax in (top, bottom):
        ax.set_xscale("log")
        ax.set_xlim(_times(found.aspect))
        log_axis(ax.xaxis)
    log_axis(top.yaxis)
    bottom.set_xlabel("time since the last of the three started (days)")
    return top, bottom


def _aspect(ax: Axes, aspect) -> None:
    show = seen(aspect)
    value, error = aspect.value[show], np.nan_to_num(aspect.standard_error[show])
    looks = {"marker": "o", "colour": INK, "mfc": INK, "label": "aspect, 95 %"}
    errorbars(ax, aspect.axis[show] / DAY, value, np.stack([NORMAL95 * error] * 2), looks)
    for level, words in ((1.0, "equilateral"), (INDEPENDENT, "independent"), (0.0, "in line")):
        ax.axhline(level, color=GREY, lw=0.8, ls=(0, (2, 2)), zorder=0)
        ax.annotate(words, (1.01, level), xycoords=("axes fraction", "data"), va="center", fontsize=9.0)
    ax.set_ylim(-0.04, 1.14)
    ax.set_ylabel("aspect")


def _times(curve) -> tuple[float, float]:
    """Ends of the axis of times, a little beyond the first and last point."""
    shown = curve.axis[seen(curve)] / DAY
    return 0.8 * shown[0], 1.25 * shown[-1]
