"""Every figure of the report: a function from an analysis to matplotlib Axes."""

from collections.abc import Callable

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from regimes.analysis import Analysis, SinglesOnly
from regimes.report.figures.by_separation import plot_regimes, plot_slope
from regimes.report.figures.dispersion import plot_dispersion
from regimes.report.figures.exponent import plot_exponent
from regimes.report.figures.posteriors import plot_slopes, plot_transitions
from regimes.report.figures.single import plot_absolute, plot_correlation
from regimes.report.figures.style import pdf, svg

FIGURES: dict[str, Callable[..., Axes]] = {
    "exponent": plot_exponent,
    "regimes": plot_regimes,
    "slope": plot_slope,
    "transitions": plot_transitions,
    "slopes": plot_slopes,
    "dispersion": plot_dispersion,
    "correlation": plot_correlation,
    "absolute": plot_absolute,
}
OF_SINGLES = ("correlation", "absolute")

__all__ = [
    "FIGURES",
    "OF_SINGLES",
    "draw",
    "names_of",
    "pdf",
    "plot_absolute",
    "plot_correlation",
    "plot_dispersion",
    "plot_exponent",
    "plot_regimes",
    "plot_slope",
    "plot_slopes",
    "plot_transitions",
    "svg",
]


def names_of(analysis: Analysis | SinglesOnly) -> tuple[str, ...]:
    """Names of the figures that can be drawn, in order of appearance."""
    left_out = () if analysis.single is not None else OF_SINGLES
    names = OF_SINGLES if isinstance(analysis, SinglesOnly) else tuple(FIGURES)
    return tuple(name for name in names if name not in left_out)


def draw(name: str, analysis: Analysis | SinglesOnly) -> Figure:
    """The figure of that name in `FIGURES`, on its own."""
    return FIGURES[name](analysis).get_figure()
