"""The slope of the spectrum from structure functions beside those that the kernels imply."""

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure, SubFigure

from regimes.analysis import Analysis, OtherCurves
from regimes.inference.spectrum_fit import SpectrumFit
from regimes.report.digits import significant, span
from regimes.report.figures.posteriors import alpha_axis, landmarks, slope_rows
from regimes.report.figures.style import BLUE, GREY, panels, panels_function
from regimes.report.slopes import alpha_text, spectrum_slope

HEIGHT = 2.5
BINS = np.linspace(1.0, 3.0, 41)


@panels_function
def plot_spectrum(analysis: Analysis, figure: Figure | SubFigure | None = None) -> tuple[Axes, ...]:
    """Posterior of the slope over wavelengths (top) and slopes over separations from the exit rates (bottom).

    Parameters
    ----------
    analysis : Analysis
        With a slope of the spectrum.
    figure : matplotlib Figure or SubFigure, optional
        A new figure without it.

    Returns
    -------
    tuple of matplotlib Axes
        Top, bottom; one axis of slopes for both.
    """
    top, bottom = panels(figure, 2, 1, HEIGHT)
    fit = analysis.others.spectrum
    landmarks(top)
    density = np.histogram(fit.alpha, BINS)[0] / fit.alpha.size / np.diff(BINS)
    top.stairs(density, BINS, fill=True, color=BLUE, alpha=0.25, lw=0, label=_found(analysis.others))
    top.stairs(density, BINS, color=BLUE, lw=1.6)
    top.set_ylim(0.0, 1.85 * density.max())
    top.set_yticks([])
    top.set_ylabel("probability density")
    _comparison(top, fit)
    top.legend(loc="upper left", borderaxespad=0.2, labelspacing=0.3, frameon=True, edgecolor="none")
    landmarks(bottom, named=False)
    slope_rows(bottom, [s for s in analysis.verdict.slopes if s.curve == "exit_rate"])
    for ax in (top, bottom):
        alpha_axis(ax)
    top.set_xlabel("")
    return top, bottom


def _found(others: OtherCurves) -> str:
    slope = spectrum_slope(others)
    return f"structure function, wavelengths {span(slope.low, slope.high)} km:\n{alpha_text(slope)}"


def _comparison(ax: Axes, fit: SpectrumFit) -> None:
    """A small mark at the slope of the structure function plus one, or at the side of the axes it lies beyond."""
    value = fit.slope_plus_one
    words = f"slope of the structure function + 1 = {significant(value)},\nfor comparison only"
    at = float(np.clip(value, 0.85, 3.3))
    ax.plot(at, 0.0, "^", ms=6, mfc="white", mec=GREY, mew=1.2, clip_on=False, zorder=5, label=words)
