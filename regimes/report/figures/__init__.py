"""Every figure of the report: a function from an analysis to matplotlib Axes."""

from collections.abc import Callable

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from regimes.analysis import Analysis
from regimes.report.figures.by_separation import plot_regimes, plot_slope
from regimes.report.figures.dispersion import plot_dispersion, plot_mean_log, plot_passage
from regimes.report.figures.exponent import plot_exponent
from regimes.report.figures.posteriors import plot_slopes, plot_transitions
from regimes.report.figures.style import pdf, svg

FIGURES: dict[str, Callable[..., Axes]] = {
    "exponent": plot_exponent,
    "regimes": plot_regimes,
    "slope": plot_slope,
    "transitions": plot_transitions,
    "slopes": plot_slopes,
    "mean-log": plot_mean_log,
    "passage": plot_passage,
    "dispersion": plot_dispersion,
}

__all__ = [
    "FIGURES",
    "draw",
    "pdf",
    "plot_dispersion",
    "plot_exponent",
    "plot_mean_log",
    "plot_passage",
    "plot_regimes",
    "plot_slope",
    "plot_slopes",
    "plot_transitions",
    "svg",
]


def draw(name: str, analysis: Analysis) -> Figure:
    """The figure of that name in `FIGURES`, on its own."""
    return FIGURES[name](analysis).get_figure()
