"""Numbers to the digits that their uncertainty supports."""

import math

from regimes.units import KM


def rounded(value: float, decimals: int) -> str:
    """Text of a number with so many decimals, 0 or more."""
    return f"{value:.{decimals}f}"


def rounded_down(value: float, decimals: int) -> str:
    """The same, rounded down: for a number that is below a limit and must not seem to reach it."""
    scale = 10.0**decimals
    return rounded(math.floor(value * scale) / scale, decimals)


def km(metres: float) -> str:
    """A separation in km: two significant digits, from 100 km on whole km; `metres` > 0."""
    value = metres / KM
    decimals = 1 - math.floor(math.log10(value))
    if round(value, decimals) >= 10.0 ** (2 - decimals):  # 9.96 is 10, not 10.0
        decimals -= 1
    return rounded(value, max(decimals, 0))


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


def bayes_factor(log_factor: float) -> str:
    """A Bayes factor from its ln: one decimal below 25, whole numbers above, "over 1000" from there on."""
    if log_factor >= math.log(1000.0):
        return "over 1000"
    factor = math.exp(log_factor)
    return rounded(factor, 1) if factor < 25.0 else rounded_down(factor, 0)


def p_value(value: float) -> str:
    """A predictive p-value with one significant digit, never 0."""
    return f"predictive p = {value:.1g}" if value >= 1e-6 else "predictive p < 1e-6"


def listed(parts) -> str:
    """Words as a list: "a", "a and b", "a, b and c"; with "; and" where a part has commas of its own."""
    parts = list(parts)
    if len(parts) <= 1:
        return "".join(parts)
    return ", ".join(parts[:-1]) + ("; and " if any("," in p for p in parts) else " and ") + parts[-1]
