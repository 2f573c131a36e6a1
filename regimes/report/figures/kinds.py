"""Relative diffusivity against separation: from velocities, from growth, and as the kernels predict it."""

import numpy as np
from matplotlib.axes import Axes

from regimes.analysis import Analysis, OtherCurves
from regimes.report.figures.bars import errorbars, log_bars, seen, widen
from regimes.report.figures.style import BLUE, INK, ORANGE, figure_function, log_axis
from regimes.units import KM


@figure_function
def plot_kinds(analysis: Analysis, ax: Axes) -> Axes:
    """Relative diffusivity by two routes against the root of the relative dispersion, with the predicted median.

    Parameters
    ----------
    analysis : Analysis
        With relative diffusivities.
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    found = analysis.others.diffusivity
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_xlabel("root of the relative dispersion D (km)")
    ax.set_ylabel("relative diffusivity (m\u00b2/s)")
    shown = []
    for curve, distance, marker, mfc, label in (
        (found.from_velocity, found.separation, "o", INK, "from velocities, 95 %"),
        (found.from_growth, _between(found.separation, found), "s", "white", "from growth, 95 %"),
    ):
        show = seen(curve) & np.isfinite(distance)
        value = curve.value[show]
        bars = log_bars(value, curve.standard_error[show])
        shown.append((value, bars))
        if value.size:
            looks = {"marker": marker, "colour": INK if mfc == INK else ORANGE, "mfc": mfc, "label": label}
            errorbars(ax, distance[show] / KM, value, bars, looks)
    distance, value = predicted(analysis.others)
    if value.size:
        ax.plot(distance / KM, value, color=BLUE, label="predicted, median", zorder=1)
        shown.append((value, np.zeros((2, value.size))))
    widen(ax, shown)
    log_axis(ax.xaxis)
    log_axis(ax.yaxis)
    ax.legend(loc="upper left", borderaxespad=0.2, labelspacing=0.3)
    return ax


def _between(distance: np.ndarray, found) -> np.ndarray:
    """D at the middles of the times, interpolated in its logarithm and that of time."""
    at, middle = np.log(found.from_velocity.axis), np.log(found.from_growth.axis)
    return np.exp(np.interp(middle, at, np.log(distance)))


def predicted(others: OtherCurves) -> tuple[np.ndarray, np.ndarray]:
    """D [m] and K [m2/s]: medians of the predictive checks at the same times; empty where these were not made."""
    checks = {check.curve: check for check in others.checks}
    if not {"relative_dispersion", "relative_diffusivity"} <= set(checks):
        return np.empty(0), np.empty(0)
    growth, square = checks["relative_diffusivity"], checks["relative_dispersion"]
    distance = np.sqrt(np.exp(np.interp(np.log(growth.axis), np.log(square.axis), np.log(square.band[2]))))
    positive = growth.band[2] > 0
    return distance[positive], growth.band[2][positive]
