"""Numbers printed to the digits that their uncertainty supports."""

import math

from regimes.verdict.digits import km

SIGNIFICANT = 2  # digits of the uncertainty that are printed; common practice, no source
THIN_SPACE = "\u202f"
MISSING = "not determined"


def decimals(uncertainty: float) -> int:
    """Decimal places that leave two significant digits of an uncertainty; negative rounds to tens and so on.

    Parameters
    ----------
    uncertainty : float
        Positive and finite.
    """
    exponent = int(f"{uncertainty:.{SIGNIFICANT - 1}e}".split("e")[1])
    return SIGNIFICANT - 1 - exponent


def fixed(value: float, places: int) -> str:
    """`value` with so many decimal places; a negative number rounds to tens, hundreds, ..."""
    if not math.isfinite(value):
        return MISSING
    text = f"{round(value, places):.{max(places, 0)}f}"
    return text[1:] if text.startswith("-") and float(text) == 0 else text


def significant(value: float, digits: int = SIGNIFICANT) -> str:
    """`value` to so many significant digits, never in powers of ten."""
    if not math.isfinite(value):
        return MISSING
    if value == 0:
        return "0"
    exponent = int(f"{abs(value):.{digits - 1}e}".split("e")[1])
    return fixed(value, digits - 1 - exponent)


def span(low: float, high: float) -> str:
    """A range of separations [m] in km, in the digits of the verdict's sentences: ``"1.2 to 150"``."""
    return f"{km(low)} to {km(high)}"


def probability(value: float) -> str:
    """A probability to two places; near the ends ``"> 0.99"`` and ``"< 0.01"``."""
    if not math.isfinite(value):
        return MISSING
    if value > 0.99:
        return "> 0.99"
    return "< 0.01" if value < 0.01 else f"{value:.2f}"


def count(number: int) -> str:
    """A whole number in groups of three from five digits on."""
    text = f"{number:,}"
    return text.replace(",", "" if abs(number) < 10_000 else THIN_SPACE)
