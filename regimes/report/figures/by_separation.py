"""What holds at each separation: probability of each regime, and the local spectral slope."""

import numpy as np
from matplotlib.axes import Axes

from regimes.analysis import Analysis
from regimes.report.figures.style import BLUE, COLOUR, GREY, HATCH, INK, LINE, PALE, figure_function, log_axis
from regimes.report.words import DISPLAY
from regimes.units import KM
from regimes.verdict.record import BySeparation, Supported

PROBABLE = 0.95
SHOWN = 0.1  # a regime that stays below this probability gets no name of its own
BAR = 1.09  # height at which supported stretches are drawn
FLOOR = 0.45  # where a diffusive kernel, which has no slope, is drawn
LANDMARKS = (
    (1.0, "\u2264 1", "ballistic"),
    (5 / 3, "5/3", "Richardson"),
    (2.0, "2", "frontal"),
    (3.0, "\u2265 3", "nonlocal"),
)


@figure_function
def plot_regimes(analysis: Analysis, ax: Axes) -> Axes:
    """Probability of each named regime at each separation, with the supported stretches as bars on top.

    Parameters
    ----------
    analysis : Analysis
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    by = analysis.verdict.by_separation
    _separation_axis(ax, by)
    taken: list[tuple[float, float]] = []
    for name, p in by.probability.items():
        ax.stairs(p, by.edges / KM, baseline=None, color=COLOUR[name], ls=LINE[name], lw=2.0, zorder=3)
        ax.stairs(p, by.edges / KM, fill=True, color=COLOUR[name], alpha=0.10, lw=0)
        _name_at_peak(ax, by, name, p, taken)
    ax.axhline(PROBABLE, color=GREY, lw=0.8, ls=(0, (2, 2)))
    _supported(ax, analysis.verdict.supported)
    ax.set_ylim(0, 1.22)
    ax.set_yticks([0, 0.2, 0.4, 0.6, 0.8, PROBABLE], ["0", "0.2", "0.4", "0.6", "0.8", "0.95"])
    ax.set_ylabel("probability")
    return ax


def _supported(ax: Axes, stretches: tuple[Supported, ...]) -> None:
    """Bars over the separations at which a regime is supported."""
    for stretch in stretches:
        ends = np.array([stretch.low, stretch.high]) / KM
        ax.fill_between(
            ends, BAR - 0.025, BAR + 0.025, facecolor=COLOUR[stretch.regime], hatch=HATCH[stretch.regime],
            edgecolor="white", lw=0,
        )  # fmt: skip
        _name(ax, np.sqrt(ends.prod()), BAR + 0.04, DISPLAY[stretch.regime], va="bottom", fontsize=9.5)
    if stretches:
        ax.annotate(
            "supported",
            (-0.02, BAR),
            xycoords=("axes fraction", "data"),
            ha="right",
            va="center",
            fontsize=9.5,
        )


def _separation_axis(ax: Axes, by: BySeparation) -> None:
    ax.set_xscale("log")
    ax.set_xlim(by.edges[0] / KM, by.edges[-1] / KM)
    log_axis(ax.xaxis)
    ax.set_xlabel("separation (km)")


def _name_at_peak(ax: Axes, by: BySeparation, name: str, p: np.ndarray, taken: list[tuple[float, float]]) -> None:
    """Name a curve where it is highest and no other name (place along the axis, height) stands near."""
    if np.max(p) < SHOWN:
        return
    low, high = np.log(ax.get_xlim())
    place = (np.log(by.separation / KM) - low) / (high - low)
    crowded = np.zeros(p.size, dtype=bool)
    for along, height in taken:
        crowded |= (np.abs(place - along) < 0.25) & (np.abs(p - height) < 0.1)
    value = np.where(crowded, p - 1.0, p)
    best = np.flatnonzero(value >= np.max(value) - 0.03 * np.max(p))
    best = best[np.argsort(np.abs(place[best] - np.mean(place[best])))[0]]
    taken.append((place[best], p[best]))
    box = {"boxstyle": "round,pad=0.15", "fc": "white", "ec": COLOUR[name], "lw": 0.8, "alpha": 0.9}
    _name(ax, by.separation[best] / KM, p[best] - 0.03, DISPLAY[name], va="top", bbox=box)


def _name(ax: Axes, x: float, y: float, words: str, **looks) -> None:
    """Words centred at `x`, but never across the sides of the axes."""
    low, high = np.log(ax.get_xlim())
    margin = 0.017 * len(words)
    place = np.clip((np.log(x) - low) / (high - low), margin, 1.0 - margin)
    ax.annotate(words, (place, y), xycoords=("axes fraction", "data"), ha="center", color=INK, zorder=4, **looks)


@figure_function
def plot_slope(analysis: Analysis, ax: Axes) -> Axes:
    """Local spectral slope of the free-exponent kernels: median and 95 % interval at each separation.

    Parameters
    ----------
    analysis : Analysis
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    by = analysis.verdict.by_separation
    _separation_axis(ax, by)
    low, middle, high = (_drawn(a) for a in (by.slope_lo95, by.slope_median, by.slope_hi95))
    x = by.edges / KM
    ax.axhspan(FLOOR - 0.15, FLOOR + 0.15, color=PALE, lw=0, zorder=0)
    ax.annotate(
        "diffusive: no spectrum implied", (0.03, FLOOR), xycoords=("axes fraction", "data"), va="center",
        fontsize=9.5,
    )  # fmt: skip
    for value, _, words in LANDMARKS:
        ax.axhline(value, color=GREY, lw=0.8, ls=(0, (2, 2)), zorder=1)
        ax.annotate(words, (1.01, value), xycoords=("axes fraction", "data"), va="center", fontsize=9.5)
    ax.stairs(high, x, baseline=low, fill=True, color=BLUE, alpha=0.22, lw=0, label="95 %")
    ax.stairs(middle, x, baseline=None, color=BLUE, lw=2.2, label="median", zorder=3)
    ax.set_ylim(FLOOR - 0.15, 3.35)
    ax.set_yticks([value for value, _, _ in LANDMARKS], [number for _, number, _ in LANDMARKS])
    ax.set_ylabel("spectral slope α")
    ax.legend(loc="lower left", bbox_to_anchor=(0.0, 1.0), ncol=2, borderaxespad=0.0)
    return ax


def _drawn(alpha: np.ndarray) -> np.ndarray:
    """Slopes as drawn: a diffusive kernel, marked by a value below 1, stands in the strip at the bottom."""
    return np.where(alpha < 1.0, FLOOR, alpha)
