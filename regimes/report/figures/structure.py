"""Structure functions of relative velocities, with the spectrum that was fitted to them."""

import numpy as np
from matplotlib.axes import Axes

from regimes.analysis import Analysis, OtherCurves
from regimes.curves import Curve
from regimes.inference.predict import QUANTILES
from regimes.report.figures.bars import errorbars, log_bars, seen, widen
from regimes.report.figures.style import BLUE, GREEN, GREY, INK, VERMILION, figure_function, log_axis
from regimes.units import KM


@figure_function
def plot_structure(analysis: Analysis, ax: Axes) -> Axes:
    """Total, longitudinal and transverse structure function with cluster errors, and the band of the fitted spectrum.

    Parameters
    ----------
    analysis : Analysis
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    others = analysis.others
    structure = others.structure
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_xlabel("separation (km)")
    ax.set_ylabel("structure function (m\u00b2/s\u00b2)")
    _band(ax, others)
    total = structure.total()
    used = np.any(np.isclose(total.axis[:, None], entered(others), rtol=1e-9), axis=1)  # sums differ in round-off
    shown = []
    for curve, bins, marker, colour, mfc, label, shift in (
        (structure.longitudinal(), True, "^", VERMILION, "white", "longitudinal", 0.97),
        (structure.transverse(), True, "s", GREEN, "white", "transverse", 1.03),
        (total, used, "o", INK, INK, "total, 95 %", 1.0),
        (total, ~used, "o", INK, "white", "total, not used", 1.0),
    ):
        looks = {"marker": marker, "colour": colour, "mfc": mfc, "label": label}
        shown.append(_points(ax, curve, seen(curve) & bins, shift, looks))
    widen(ax, shown, headroom=0.15)
    if structure.noise_floor() > ax.get_ylim()[0]:
        ax.axhline(structure.noise_floor(), color=GREY, lw=1.0, ls=(0, (4, 2)), label="position errors", zorder=0)
    log_axis(ax.xaxis)
    log_axis(ax.yaxis)
    ax.legend(loc="upper left", borderaxespad=0.2, labelspacing=0.3)
    return ax


def entered(others: OtherCurves) -> np.ndarray:
    """Separations [m] of the bins that the spectrum, or else the check of the structure function, rests on."""
    if others.spectrum is not None:
        return others.spectrum.likelihood.separation
    found = [check.axis for check in others.checks if check.curve == "structure_function"]
    return found[0] if found else np.empty(0)


def _points(ax: Axes, curve: Curve, show: np.ndarray, shift: float, looks: dict) -> tuple[np.ndarray, np.ndarray]:
    value = curve.value[show]
    bars = log_bars(value, curve.standard_error[show])
    if value.size:
        errorbars(ax, curve.axis[show] * shift / KM, value, bars, looks)
    return value, bars


def _band(ax: Axes, others: OtherCurves) -> None:
    if others.spectrum is None:
        return
    x = others.spectrum.likelihood.separation / KM
    low, _, middle, _, high = np.quantile(others.spectrum.predicted(), QUANTILES, axis=0)
    ax.fill_between(x, low, high, color=BLUE, alpha=0.25, lw=0, label="fitted spectrum, 95 %")
    ax.plot(x, middle, color=BLUE, lw=1.4)
