"""Posteriors of single numbers: transition separations and spectral slopes."""

from collections.abc import Sequence
from textwrap import fill

import numpy as np
from matplotlib.axes import Axes

from regimes.analysis import Analysis
from regimes.report.digits import probability, span
from regimes.report.figures.style import (
    BLACK,
    BLUE,
    GREY,
    INK,
    ORANGE,
    PURPLE,
    SKY,
    figure_function,
    log_axis,
)
from regimes.report.words import sequence
from regimes.units import KM
from regimes.verdict.digits import slope_text
from regimes.verdict.record import Slope

LEAST = 0.05  # transitions less probable than this are left out
BINS = 48
SHADES = (
    (BLUE, "-"),
    (ORANGE, (0, (5, 1.6))),
    (PURPLE, (0, (1.2, 1.2))),
    (BLACK, (0, (6, 1.5, 1, 1.5))),
    (SKY, "-"),
)
SHORT = {"exit_rate": "exit rates", "separation": "fixed times", "joint": "both"}
MARKS = {"exit_rate": ("o", INK), "separation": ("s", "white"), "joint": ("D", GREY)}  # shape and filling
LANDMARKS = ((5 / 3, "5/3"), (2.0, "2"), (3.0, "3"))


@figure_function
def plot_transitions(analysis: Analysis, ax: Axes) -> Axes:
    """Posterior of each transition separation; the area under a curve is the probability of the transition.

    Parameters
    ----------
    analysis : Analysis
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    ax.set_xscale("log")
    low, high = analysis.verdict.resolved
    ax.set_xlim(low / KM, high / KM)
    log_axis(ax.xaxis)
    ax.set_xlabel("transition separation (km)")
    ax.set_ylabel("probability density of ln separation")
    shown = [t for t in _transitions(analysis) if t.probability > LEAST]
    edges = np.geomspace(low, high, BINS + 1)
    for transition, (colour, line) in zip(shown, SHADES, strict=False):
        density = np.histogram(transition.draws, edges)[0] / transition.draws.size / np.log(edges[1] / edges[0])
        label = f"{sequence((transition.lower, transition.upper))} ({probability(transition.probability)})"
        y = density * transition.probability
        ax.stairs(y, edges / KM, color=colour, ls=line, lw=1.6, label=label)
        ax.stairs(y, edges / KM, fill=True, color=colour, alpha=0.15, lw=0)
    if shown:
        ax.set_ylim(0, ax.get_ylim()[1] * (1.15 + 0.09 * len(shown)))
        ax.legend(loc="upper left", borderaxespad=0.2, labelspacing=0.3)
    else:
        ax.set_yticks([])
        ax.annotate(
            f"no transition is more probable than {LEAST:g}",
            (0.5, 0.5),
            xycoords="axes fraction",
            ha="center",
        )
    return ax


def _transitions(analysis: Analysis):
    inference = analysis.fits.get("exit_rate")
    return () if inference is None else inference.transitions()


@figure_function
def plot_slopes(analysis: Analysis, ax: Axes) -> Axes:
    """Spectral slopes over ranges of separation: median, 68 and 95 % intervals; arrows for bounds.

    Parameters
    ----------
    analysis : Analysis
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    landmarks(ax)
    slope_rows(ax, analysis.verdict.slopes)
    alpha_axis(ax)
    return ax


def landmarks(ax: Axes, named: bool = True) -> None:
    """Dotted lines at slopes that theories name, the numbers on top if `named`."""
    for value, words in LANDMARKS:
        ax.axvline(value, color=GREY, lw=0.8, ls=(0, (2, 2)), zorder=0)
        if named:
            ax.annotate(words, (value, 1.0), xycoords=("data", "axes fraction"), ha="center", va="bottom", fontsize=9.5)


def alpha_axis(ax: Axes) -> None:
    """The horizontal axis of slopes."""
    ax.set_xlim(0.8, 3.35)
    ax.set_xticks([1, 1.5, 2, 2.5, 3], ["≤ 1", "1.5", "2", "2.5", "≥ 3"])
    ax.set_xlabel("spectral slope α")


def slope_rows(ax: Axes, slopes: Sequence[Slope]) -> None:
    """A row for each slope, from the top down, with its range and curve on the left."""
    for row, slope in enumerate(slopes):
        _slope_row(ax, row, slope)
    ax.set_yticks(range(len(slopes)), [_range_words(s) for s in slopes])
    ax.set_ylim(max(len(slopes), 1) - 0.5, -0.6)


def _range_words(slope: Slope) -> str:
    return f"{span(slope.low, slope.high)} km\n{SHORT[slope.curve]}"


def _slope_row(ax: Axes, row: int, slope: Slope) -> None:
    value, (mark, face) = slope.value, MARKS[slope.curve]
    if slope.kind == "none":
        ax.annotate(
            fill(slope.reason, 44),
            (2.0, row),
            ha="center",
            va="center",
            fontsize=9.5,
            bbox={"fc": "white", "ec": "none", "pad": 1.5},
        )
    elif slope.kind == "estimate":
        ax.plot([value.lo95, value.hi95], [row, row], color=INK, lw=1.2)
        ax.plot([value.lo68, value.hi68], [row, row], color=INK, lw=3.5)
        ax.plot(value.median, row, mark, ms=7, mfc=face, mec=INK)
    else:
        at, to, word = (value.lo95, 3.3, "≥") if slope.kind == "lower_bound" else (value.hi95, 0.85, "≤")
        ax.annotate("", (to, row), (at, row), arrowprops={"arrowstyle": "->", "color": INK, "lw": 1.4, "shrinkA": 0})
        ax.plot(at, row, "|", ms=12, mew=1.8, color=INK)
        ax.annotate(
            f"α {word} {slope_text(at)} (95 %)", ((at + to) / 2, row), xytext=(0, 5), textcoords="offset points",
            ha="center", fontsize=9.5, bbox={"fc": "white", "ec": "none", "pad": 1.0},
        )  # fmt: skip
