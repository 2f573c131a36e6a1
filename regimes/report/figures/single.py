"""Velocity correlation and absolute dispersion of single particles."""

import numpy as np
from matplotlib.axes import Axes

from regimes.analysis import Analysis, SinglesOnly
from regimes.curves import Curve
from regimes.particles import SingleParticle
from regimes.particles.scales import Correlation
from regimes.report.figures.bars import errorbars, log_bars, seen
from regimes.report.figures.style import (
    BLUE,
    COLOUR,
    GREEN,
    GREY,
    INK,
    LINE,
    ORANGE,
    VERMILION,
    figure_function,
    log_axis,
)
from regimes.units import DAY, KM

REACH = 3.0  # beyond the crossing of Taylor's limits, each is drawn over this factor in time


@figure_function
def plot_correlation(analysis: Analysis | SinglesOnly, ax: Axes) -> Axes:
    """Velocity autocorrelation against lag (left) and its running integral (right).

    Parameters
    ----------
    analysis : Analysis or SinglesOnly
        With single particles.
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    found = analysis.single.correlation
    lag = found.lag / DAY
    ax.axhline(0.0, color=GREY, lw=0.8)
    ax.fill_between(lag, found.low, found.high, color=BLUE, alpha=0.25, lw=0)
    ax.plot(lag, found.both, color=BLUE, label="both")
    ax.plot(lag, found.east, color=VERMILION, ls=(0, (5, 1.6)), lw=1.2, label="east")
    ax.plot(lag, found.north, color=GREEN, ls=(0, (1.2, 1.2)), lw=1.2, label="north")
    ax.set_xlim(0.0, lag[-1])
    ax.set_xlabel("lag (days)")
    ax.set_ylabel("velocity autocorrelation")
    _running_integral(ax, lag, found)
    ax.legend(loc="upper right", borderaxespad=0.2, labelspacing=0.3)
    return ax


def _running_integral(ax: Axes, lag: np.ndarray, found: Correlation) -> None:
    """Integral from zero to each lag on an axis of its own, zero level with that of the correlation."""
    right = ax.twinx()
    right.fill_between(lag, found.integral_low / DAY, found.integral_high / DAY, color=ORANGE, alpha=0.22, lw=0)
    right.plot(lag, found.integral / DAY, color=INK, lw=1.4, ls=(0, (7, 1.5, 1, 1.5)))
    right.spines["right"].set_visible(True)
    right.set_ylabel("running integral (days, dash-dotted)")
    low = min(0.0, float(np.nanmin([found.both, found.east, found.north])), float(np.nanmin([found.low, found.both])))
    ends = np.concatenate([found.integral, found.integral_low, found.integral_high]) / DAY
    top, under = 1.45 * float(np.nanmax(ends)), float(np.nanmin(np.append(ends, 0.0)))
    depth = 1.05 * max(-low, -under / top)  # share of the height above zero that both need below it
    ax.set_ylim(-depth, 1.05)
    right.set_ylim(-depth * top / 1.05, top)


@figure_function
def plot_absolute(analysis: Analysis | SinglesOnly, ax: Axes) -> Axes:
    """Absolute dispersion since the first position, with Taylor's early and late limits.

    Parameters
    ----------
    analysis : Analysis or SinglesOnly
        With single particles.
    ax : matplotlib Axes, optional
        A new figure without it.

    Returns
    -------
    matplotlib Axes
    """
    single = analysis.single
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_xlabel("time since the first position (days)")
    ax.set_ylabel("absolute dispersion (km²)")
    moved = single.dispersion
    for curve, marker, colour, label, shift in (
        (moved.east, "^", VERMILION, "east", 0.97),
        (moved.north, "s", GREEN, "north", 1.03),
        (moved.total, "o", INK, "total, 95 %", 1.0),
    ):
        x, y, bars = _points(curve, last_shown(single))
        looks = {"marker": marker, "colour": colour, "mfc": colour if marker == "o" else "white", "label": label}
        errorbars(ax, x * shift / DAY, y / KM**2, bars / KM**2, looks)
    time = moved.total.axis[(moved.total.axis > 0) & (moved.total.axis <= last_shown(single))]
    kappa, variance = single.diffusivity.mean.value, single.velocity.value**2
    if kappa > 0.0:
        crossing = 2.0 * kappa / variance
        _limit(ax, time[time <= REACH * crossing], single.ballistic_limit, "ballistic", "early limit")
        _limit(ax, time[time >= crossing / REACH], single.diffusive_limit, "diffusive", "late limit")
    ax.autoscale_view()
    log_axis(ax.xaxis)
    log_axis(ax.yaxis)
    ax.legend(loc="upper left", borderaxespad=0.2, labelspacing=0.3)
    return ax


def last_shown(single: SingleParticle) -> float:
    """Last time of the figure [s]: with record means removed, a third of the time that half of the particles reach.

    Displacements less the mean of the record are back at zero at its end; a share t / L is lost of the late limit.
    """
    curve = single.dispersion.total
    seen = curve.weight @ curve.denominator
    reached = curve.axis[seen >= 0.5 * seen.max()][-1]
    return float(reached / 3.0 if single.mean == "record" else curve.axis[-1])


def _points(curve: Curve, last: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Times, values and bars of the logarithm's 95 % interval; times that few particles reach are left out."""
    show = seen(curve) & (curve.axis <= last)
    value = curve.value[show]
    return curve.axis[show], value, log_bars(value, curve.standard_error[show])


def _limit(ax: Axes, time: np.ndarray, limit, regime: str, words: str) -> None:
    ax.plot(time / DAY, limit(time) / KM**2, color=COLOUR[regime], ls=LINE[regime], zorder=1, label=words)
