"""Numbers to the digits that their uncertainty supports."""

import math

from regimes.units import KM


def places(low: float, high: float) -> int:
    """Decimals that show an interval to two significant digits of its half width."""
    half = abs(high - low) / 2.0
    if not half > 0 or not math.isfinite(half):
        return 2
    return 1 - math.floor(math.log10(half))


def rounded(value: float, decimals: int) -> str:
    """Text of a number with so many decimals, negative ones rounding to tens and hundreds."""
    if decimals > 0:
        return f"{value:.{decimals}f}"
    return f"{round(value, decimals):.0f}"


def km(metres: float) -> str:
    """A separation in km, two significant digits."""
    value = metres / KM
    return rounded(value, max(1 - math.floor(math.log10(value)), 0) if value > 0 else 0)


def km_interval(median: float, low: float, high: float) -> str:
    """Separation with its interval, for instance "8.0 km (5.0 to 13, 95 %)"; arguments in m."""
    return f"{km(median)} km ({km(low)} to {km(high)}, 95 %)"


def slope_text(value: float) -> str:
    """A spectral slope: two decimals are never supported by separations, one is."""
    return f"{value:.1f}"


def percent(probability: float) -> str:
    """A probability in words of percent, never 0 or 100."""
    if probability > 0.99:
        return "over 99 %"
    if probability < 0.01:
        return "under 1 %"
    return f"{100 * probability:.0f} %"
