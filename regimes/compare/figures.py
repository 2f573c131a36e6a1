"""Figures of a comparison: curves over the band of virtual deployments, ratio of exponents, same regime."""

from collections.abc import Callable

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure, SubFigure

from regimes.compare.ranks import LEVEL, CurveRank
from regimes.compare.record import Comparison
from regimes.compare.words import name_of
from regimes.report.figures.checks import HEIGHT, SCALES, SMALL, Scale
from regimes.report.figures.style import (
    BLUE,
    GREY,
    INK,
    VERMILION,
    figure_function,
    log_axis,
    panels,
    panels_function,
)
from regimes.report.words import p_text
from regimes.units import DAY, KM

SHOWN = SCALES | {
    "exponent": Scale("1/day", lambda v: v * DAY),
    "mean_log_growth": Scale("factor", np.exp),
}
_SHORT = {"separation_distribution": "separations"}  # names that leave a panel
_REACH = 30.0  # a band is cut where it lies so many times below its middle


@panels_function
def plot_curves(comparison: Comparison, figure: Figure | SubFigure | None = None) -> tuple[Axes, ...]:
    """The smaller case (points) over the 68 and 95 % bands of virtual deployments, a panel for each curve.

    Parameters
    ----------
    comparison : Comparison
    figure : matplotlib Figure or SubFigure, optional
        A new figure without it.

    Returns
    -------
    tuple of matplotlib Axes
    """
    curves = comparison.ranks.curves
    axes = panels(figure, len(curves), 2, HEIGHT)
    for ax, curve in zip(axes, curves, strict=True):
        _panel(ax, curve)
    axes[0].figure.align_ylabels(axes)
    return axes


def _panel(ax: Axes, curve: CurveRank) -> None:
    scale = SHOWN[curve.curve]
    unit, words = (KM, "separation (km)") if curve.axis_name == "separation" else (DAY, "time (days)")
    x, y, band = curve.axis / unit, scale.shown(curve.value), scale.shown(curve.band)
    ax.set_xscale("log")
    if scale.log:
        ax.set_yscale("log")
        band = np.maximum(band, band[2] / _REACH)
    for low, high, alpha in ((0, 4, 0.18), (1, 3, 0.28)):
        ax.fill_between(x, band[low], band[high], color=BLUE, alpha=alpha, lw=0)
    ax.plot(x, band[2], color=BLUE, lw=1.3)
    out = np.isin(curve.axis, curve.differs_at)
    ax.plot(x[~out], y[~out], "o", ms=3.8, color=INK, zorder=3)
    ax.plot(x[out], y[out], "D", ms=4.2, mfc="white", mec=VERMILION, mew=1.4, zorder=3)
    differs = curve.p_value < LEVEL
    said = "differs" if differs else "alike"
    title = f"{_SHORT.get(curve.curve, name_of(curve.curve))}\n{said}, p = {p_text(curve.p_value)}"
    ax.set_title(title, fontsize=SMALL, loc="left", fontweight="bold" if differs else "normal")
    ax.set_xlabel(words, fontsize=SMALL, labelpad=1.5)
    ax.set_ylabel(scale.label, fontsize=SMALL, labelpad=2.0)
    ax.tick_params(labelsize=SMALL)
    log_axis(ax.xaxis, sparse=True)
    if scale.log:
        log_axis(ax.yaxis, sparse=True)
    else:
        ax.set_ylim(0.0, None)


@figure_function
def plot_ratio(comparison: Comparison, ax: Axes) -> Axes:
    """Observed exponent over that of the model at each separation, with 95 % bars.

    Parameters
    ----------
    comparison : Comparison
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    fitted = comparison.fitted
    x, (median, low, high) = fitted.separation / KM, fitted.ratio
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.axhline(1.0, color=GREY, lw=0.9, ls=(0, (2, 2)))
    ax.errorbar(x, median, np.stack([median - low, high - median]), fmt="o", ms=4.8, color=INK, elinewidth=1.0)
    edge = 1.2 * max(2.0, np.max(median), 1.0 / np.min(median))
    ax.set_ylim(min(1.0 / edge, np.min(low)) if np.min(low) > 0.05 else 0.05, max(edge, min(np.max(high), 20.0)))
    log_axis(ax.xaxis)
    log_axis(ax.yaxis)
    ax.set_xlabel("separation (km)")
    ax.set_ylabel("exponent, observed over model")
    return ax


@figure_function
def plot_same(comparison: Comparison, ax: Axes) -> Axes:
    """Probability that the same named regime holds in both cases, at each separation.

    Parameters
    ----------
    comparison : Comparison
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    fitted = comparison.fitted
    edges = fitted.thresholds / KM
    ax.set_xscale("log")
    ax.stairs(fitted.same_regime, edges, baseline=None, color=BLUE, lw=2.0)
    ax.stairs(fitted.same_regime, edges, fill=True, color=BLUE, alpha=0.12, lw=0)
    ax.axhline(0.5, color=GREY, lw=0.8, ls=(0, (2, 2)))
    ax.set_xlim(edges[0], edges[-1])
    ax.set_ylim(0.0, 1.05)
    log_axis(ax.xaxis)
    ax.set_xlabel("separation (km)")
    ax.set_ylabel("probability of the same regime")
    return ax


FIGURES: dict[str, Callable[..., Axes | tuple[Axes, ...]]] = {
    "curves": plot_curves,
    "ratio": plot_ratio,
    "same": plot_same,
}


def draw(name: str, comparison: Comparison) -> Figure:
    """The figure of that name in `FIGURES`, on its own."""
    drawn = FIGURES[name](comparison)
    return (drawn if isinstance(drawn, Axes) else drawn[0]).get_figure()
