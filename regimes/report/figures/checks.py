"""Every curve held against what the fitted kernels predict: one small panel each."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure, SubFigure

from regimes.analysis import Analysis
from regimes.checks import Check
from regimes.report.figures.style import BLUE, GREY, INK, VERMILION, log_axis, panels, panels_function
from regimes.report.words import checked, p_text
from regimes.units import DAY, KM

HEIGHT = 1.72  # inches of a row of panels
SMALL = 9.5


@dataclass(frozen=True, slots=True)
class Scale:
    """How the values of a curve are shown.

    Parameters
    ----------
    label : str
        Of the vertical axis.
    shown : callable
        From the unit of the check to that of the axis.
    log : bool
    """

    label: str
    shown: Callable[[np.ndarray], np.ndarray]
    log: bool = True


SCALES = {
    "relative_dispersion": Scale("km\u00b2", lambda v: v / KM**2),
    "mean_log_separation": Scale("km", lambda v: np.exp(v) / KM),
    "kurtosis": Scale("ratio", lambda v: v),
    "relative_diffusivity": Scale("m\u00b2/s", lambda v: v),
    "residence_time": Scale("days", lambda v: v / DAY),
    "triplet_area": Scale("km\u00b2", lambda v: np.exp(v) / KM**2),
    "separation_distribution": Scale("distance", lambda v: v, log=False),
    "structure_function": Scale("m\u00b2/s\u00b2", lambda v: v),
}


@panels_function
def plot_checks(analysis: Analysis, figure: Figure | SubFigure | None = None) -> tuple[Axes, ...]:
    """Data (points) over the 68 and 95 % bands of their posterior predictive distribution, a panel for each curve.

    Parameters
    ----------
    analysis : Analysis
        With checks.
    figure : matplotlib Figure or SubFigure, optional
        A new figure without it.

    Returns
    -------
    tuple of matplotlib Axes
        In the order of the checks.
    """
    checks = analysis.others.checks
    axes = panels(figure, len(checks), 2, HEIGHT)
    for ax, check in zip(axes, checks, strict=True):
        _panel(ax, check)
    return axes


def _panel(ax: Axes, check: Check) -> None:
    scale = SCALES[check.curve]
    unit, words = (KM, "separation (km)") if check.axis_name == "separation" else (DAY, "time (days)")
    x, y, band = check.axis / unit, scale.shown(check.value), scale.shown(check.band)
    ax.set_xscale("log")
    if scale.log and np.all(y > 0) and np.all(band[2] > 0):
        ax.set_yscale("log")
        floor = 0.5 * min(y.min(), band[band > 0].min(), band[2].min() / 3.0)
        band = np.maximum(band, floor)
        low = np.minimum(y, np.maximum(band[0], band[2] / 20.0))
        ax.set_ylim(low.min() / 1.3, np.maximum(y, band[4]).max() * 1.3)
    for low, high, alpha in ((0, 4, 0.18), (1, 3, 0.28)):
        ax.fill_between(x, band[low], band[high], color=BLUE, alpha=alpha, lw=0)
    ax.plot(x, band[2], color=BLUE, lw=1.3)
    out = check.outside
    ax.plot(x[~out], y[~out], "o", ms=3.8, color=INK, zorder=3)
    ax.plot(x[out], y[out], "D", ms=4.2, mfc="white", mec=VERMILION, mew=1.4, zorder=3)
    _dress(ax, check, words, scale.label)


def _dress(ax: Axes, check: Check, words: str, label: str) -> None:
    said = "agrees" if check.agrees else "dissents"
    ax.set_title(
        f"{checked(check.curve)}\n{said}, p = {p_text(check.p_value)}", fontsize=SMALL, loc="left", y=1.03,
        fontweight="normal" if check.agrees else "bold",
    )  # fmt: skip
    ax.set_xlabel(words, fontsize=SMALL, labelpad=1.5)
    ax.set_ylabel(label, fontsize=SMALL, labelpad=2.0)
    ax.tick_params(labelsize=SMALL)
    log_axis(ax.xaxis, sparse=True)
    if ax.get_yscale() == "log":
        log_axis(ax.yaxis, sparse=True)
    else:
        ax.set_ylim(min(0.0, ax.get_ylim()[0]), None)
        ax.axhline(0.0, color=GREY, lw=0.8)
