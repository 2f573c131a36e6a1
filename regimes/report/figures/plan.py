"""What designs show, against the number of releases: one line for each fix interval."""

from collections.abc import Callable

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from regimes.plan import Plan, Summary
from regimes.report.figures.bars import NORMAL95
from regimes.report.figures.style import (
    BLACK,
    BLUE,
    GREEN,
    GREY,
    INK,
    ORANGE,
    PURPLE,
    SKY,
    STYLE,
    VERMILION,
    log_axis,
    new_axes,
)
from regimes.units import HOUR, KM

_LOOKS = tuple(zip((BLUE, VERMILION, GREEN, ORANGE, PURPLE, SKY, BLACK), "osD^vP*", strict=True))
_APART = 0.02  # ln of the factor by which lines of different intervals are shifted, so that bars stay apart
_MOST_TICKS = 7

Values = Callable[[Summary], tuple[float, float, float]]


def plan_figures(plan: Plan) -> dict[str, Figure]:
    """Every figure of a plan by its name, in order of appearance."""
    with matplotlib.rc_context(STYLE):
        drawn = {"aim": _shares(plan, "told", "campaigns that reach the aim")}
        if plan.target.against is not None:
            drawn["right"] = _shares(plan, "right", "campaigns with a right verdict")
        if any(np.isfinite(s.alpha_width.value) for s in plan.summaries):
            drawn["alpha"] = _plain(plan, lambda s: _linear(s.alpha_width), "width of the 95 % interval of $\\alpha$")
        if any(np.isfinite(s.transition_factor.value) for s in plan.summaries):
            words = "ratio of the 95 % ends of the transition"
            drawn["transition"] = _plain(plan, lambda s: _logarithmic(s.transition_factor), words, log=True)
        drawn["resolved"] = _resolved(plan)
    return {name: ax.get_figure() for name, ax in drawn.items()}


def _shares(plan: Plan, name: str, words: str) -> Axes:
    ax = new_axes()
    _lines(ax, plan, lambda s: (getattr(s, name).value, getattr(s, name).low, getattr(s, name).high))
    if name == "told":
        ax.axhline(plan.target.probability, color=GREY, lw=1.2, ls=(0, (4, 2)), zorder=1)
        ax.annotate(
            "aim", (0.0, plan.target.probability), xycoords=("axes fraction", "data"), xytext=(3, -3),
            textcoords="offset points", ha="left", va="top", fontsize=9.5, color=INK,
        )  # fmt: skip
    ax.set_ylim(-0.03, 1.03)
    return _finished(ax, plan, words)


def _plain(plan: Plan, values: Values, words: str, log: bool = False) -> Axes:
    ax = new_axes()
    if log:
        ax.set_yscale("log")
    _lines(ax, plan, values)
    if log:
        log_axis(ax.yaxis)
    else:
        ax.set_ylim(bottom=0.0)
    return _finished(ax, plan, words)


def _resolved(plan: Plan) -> Axes:
    ax = new_axes()
    ax.set_yscale("log")
    _lines(ax, plan, lambda s: tuple(v / KM for v in _logarithmic(s.low)))
    _lines(ax, plan, lambda s: tuple(v / KM for v in _logarithmic(s.high)), named=False)
    for end in (plan.target.low, plan.target.high):
        ax.axhline(end / KM, color=GREY, lw=1.2, ls=(0, (4, 2)), zorder=1)
    log_axis(ax.yaxis)
    return _finished(ax, plan, "resolved from, to (km)")


def _lines(ax: Axes, plan: Plan, values: Values, named: bool = True) -> None:
    """A line of points with 95 % bars for each fix interval."""
    intervals = sorted({s.point.interval for s in plan.summaries})
    for i, interval in enumerate(intervals):
        mine = [s for s in plan.summaries if s.point.interval == interval]
        x = np.array([s.point.releases for s in mine]) * np.exp(_APART * (i - 0.5 * (len(intervals) - 1)))
        middle, low, high = np.array([values(s) for s in mine]).T
        colour, marker = _LOOKS[i % len(_LOOKS)]
        bars = np.nan_to_num(np.stack([middle - low, high - middle]))
        ax.errorbar(
            x, middle, np.maximum(bars, 0.0), fmt=marker, ls="-" if i < len(_LOOKS) else "--", lw=1.2, ms=4.8,
            color=colour, elinewidth=0.9, label=f"{interval / HOUR:.4g} h" if named else None,
        )  # fmt: skip


def _finished(ax: Axes, plan: Plan, words: str) -> Axes:
    ax.set_xscale("log")
    releases = sorted({s.point.releases for s in plan.summaries})
    ax.set_xlim(releases[0] / 1.3, releases[-1] * 1.3)
    log_axis(ax.xaxis)
    if len(releases) <= _MOST_TICKS:
        ax.set_xticks(releases, [str(n) for n in releases])
        ax.set_xticks([], minor=True)
    ax.set_xlabel("releases")
    ax.set_ylabel(words)
    place = {"loc": "lower left", "bbox_to_anchor": (0.0, 1.0), "borderaxespad": 0.0}
    ax.legend(title="a fix every", ncol=5, handlelength=1.6, columnspacing=1.2, title_fontsize=9.5, **place)
    return ax


def _linear(mean) -> tuple[float, float, float]:
    bar = NORMAL95 * mean.error
    return mean.value, mean.value - bar, mean.value + bar


def _logarithmic(mean) -> tuple[float, float, float]:
    factor = np.exp(NORMAL95 * mean.error)
    return mean.value, mean.value / factor, mean.value * factor
