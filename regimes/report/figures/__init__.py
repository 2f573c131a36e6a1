"""Every figure of the report: a function from an analysis to matplotlib Axes."""

from collections.abc import Callable

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from regimes.analysis import Analysis, SinglesOnly
from regimes.report.figures.bars import seen
from regimes.report.figures.by_separation import plot_regimes, plot_slope
from regimes.report.figures.checks import plot_checks
from regimes.report.figures.dispersion import plot_dispersion
from regimes.report.figures.exponent import plot_exponent
from regimes.report.figures.kinds import plot_kinds
from regimes.report.figures.posteriors import plot_slopes, plot_transitions
from regimes.report.figures.single import plot_absolute, plot_correlation
from regimes.report.figures.spectrum import plot_spectrum
from regimes.report.figures.structure import plot_structure
from regimes.report.figures.style import pdf, svg
from regimes.report.figures.triplets import plot_triplets

FIGURES: dict[str, Callable[..., Axes | tuple[Axes, ...]]] = {
    "exponent": plot_exponent,
    "regimes": plot_regimes,
    "slope": plot_slope,
    "transitions": plot_transitions,
    "slopes": plot_slopes,
    "dispersion": plot_dispersion,
    "checks": plot_checks,
    "structure": plot_structure,
    "spectrum": plot_spectrum,
    "kinds": plot_kinds,
    "triplets": plot_triplets,
    "correlation": plot_correlation,
    "absolute": plot_absolute,
}
OF_EVERY_CURVE = ("checks", "structure", "spectrum", "kinds", "triplets")
OF_SINGLES = ("correlation", "absolute")

__all__ = [
    "FIGURES",
    "OF_EVERY_CURVE",
    "OF_SINGLES",
    "draw",
    "names_of",
    "pdf",
    "plot_absolute",
    "plot_checks",
    "plot_correlation",
    "plot_dispersion",
    "plot_exponent",
    "plot_kinds",
    "plot_regimes",
    "plot_slope",
    "plot_slopes",
    "plot_spectrum",
    "plot_structure",
    "plot_transitions",
    "plot_triplets",
    "svg",
]


def names_of(analysis: Analysis | SinglesOnly) -> tuple[str, ...]:
    """Names of the figures that can be drawn, in order of appearance."""
    left_out = set() if analysis.single is not None else set(OF_SINGLES)
    if isinstance(analysis, SinglesOnly):
        return tuple(name for name in OF_SINGLES if name not in left_out)
    others = analysis.others
    there = {
        "checks": bool(others.checks),
        "structure": bool(np.any(seen(others.structure.total()))),
        "spectrum": others.spectrum is not None and others.spectrum.kind != "none",
        "kinds": others.diffusivity is not None and bool(np.any(seen(others.diffusivity.from_velocity))),
        "triplets": others.triplets is not None,
    }
    left_out |= {name for name, drawn in there.items() if not drawn}
    return tuple(name for name in FIGURES if name not in left_out)


def draw(name: str, analysis: Analysis | SinglesOnly) -> Figure:
    """The figure of that name in `FIGURES`, on its own."""
    drawn = FIGURES[name](analysis)
    return (drawn if isinstance(drawn, Axes) else drawn[0]).get_figure()
