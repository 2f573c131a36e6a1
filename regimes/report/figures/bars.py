"""Points with bars that reach as far as 95 % intervals of the logarithm."""

import numpy as np
from matplotlib.axes import Axes

from regimes.curves import Curve

NORMAL95 = 1.96
REACH = 5.0  # bars longer than this factor do not widen the axes
LEAST = 5  # pairs or samples behind a point; common practice, no source


def seen(curve: Curve) -> np.ndarray:
    """(n,) bool array: bins with enough behind them to be worth a point on logarithmic axes."""
    count = curve.weight @ curve.denominator
    enough = count >= min(LEAST, count.max())
    return enough & np.isfinite(curve.value) & (curve.value > 0) & (curve.axis > 0)


def log_bars(value: np.ndarray, error: np.ndarray) -> np.ndarray:
    """(2, n) lengths of the bars below and above; none where there is no error."""
    factor = np.exp(NORMAL95 * np.nan_to_num(error) / value)
    return np.stack([value - value / factor, value * factor - value])


def errorbars(ax: Axes, x: np.ndarray, y: np.ndarray, bars: np.ndarray, looks: dict) -> None:
    """Points of one kind; `looks` holds marker, colour, mfc (inside of the marker) and label."""
    ax.errorbar(
        x, y, bars, fmt=looks["marker"], color=looks["colour"], mec=looks["colour"], mfc=looks["mfc"],
        label=looks["label"], ms=4.2, elinewidth=0.9,
    )  # fmt: skip


def widen(ax: Axes, rows: list[tuple[np.ndarray, np.ndarray]], headroom: float = 0.0) -> None:
    """Limits of the vertical axis from points and their bars, with a share of it kept free on top for the legend."""
    low = min(float(np.min(np.maximum(y - bars[0], y / REACH))) for y, bars in rows if y.size)
    high = max(float(np.max(np.minimum(y + bars[1], y * REACH))) for y, bars in rows if y.size)
    span = np.log(high / low)
    ax.set_ylim(low * np.exp(-0.05 * span), high * np.exp((0.05 + headroom / (1.0 - headroom)) * span))
