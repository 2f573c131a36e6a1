"""Spectral slopes in words, and the slope from the structure function in the form of the others."""

import numpy as np

from regimes.analysis import OtherCurves
from regimes.inference.slope import judged
from regimes.verdict.digits import km, km_interval
from regimes.verdict.digits import slope_text as alpha
from regimes.verdict.numbers import NOTHING, slope_record
from regimes.verdict.record import Slope

FROM_STRUCTURE = "structure_function"


def slope_text(slope: Slope) -> str:
    """A slope as far as it is known: an estimate with its 95 % interval, a bound, or why there is none."""
    value = slope.value
    if slope.kind == "estimate":
        return f"{alpha(value.median)} ({alpha(value.lo95)} to {alpha(value.hi95)})"
    if slope.kind == "lower_bound":
        return f"\u2265 {alpha(value.lo95)}"
    return f"\u2264 {alpha(value.hi95)}" if slope.kind == "upper_bound" else "none quoted"


def alpha_text(slope: Slope) -> str:
    """The same as a statement on alpha, with its level: for text and figures."""
    if slope.kind == "estimate":
        value = slope.value
        return f"\u03b1 = {alpha(value.median)} ({alpha(value.lo95)} to {alpha(value.hi95)}, 95 %)"
    return f"\u03b1 {slope_text(slope)} (95 %)"


def end_text(slope: Slope) -> str:
    """Where the spectrum may end, as far as it is known; empty where nothing is."""
    median, low, high = slope.outer_scale.median, slope.outer_scale.lo95, slope.outer_scale.hi95
    if np.isfinite(median):
        return f"the spectrum may end near {km_interval(median, low, high)}"
    if np.isfinite(low):
        return f"if the spectrum ends, then beyond {km(low)} km (95 %)"
    return f"if the spectrum ends, then below {km(high)} km (95 %)" if np.isfinite(high) else ""


def spectrum_slope(others: OtherCurves) -> Slope:
    """The slope of the spectrum from the structure function.

    Parameters
    ----------
    others : OtherCurves

    Returns
    -------
    Slope
        `low` and `high` are wavelengths [m], NaN where there is no slope. A bound keeps only its one-sided ends, from
        draws between 1 and 3, as over separations; the reason also says what its sampling lacks.
    """
    fit = others.spectrum
    nan = float("nan")
    if fit is None:
        return Slope(nan, nan, FROM_STRUCTURE, NOTHING, "none", others.spectrum_missing)
    said = [fit.reason] + ([] if fit.health.ok else [f"its sampling did not converge: {fit.health.reason}"])
    reason = "; ".join(text for text in said if text)
    if fit.kind == "none":
        return Slope(nan, nan, FROM_STRUCTURE, NOTHING, "none", reason)
    low, high = (float(end) for end in fit.wavelengths)
    found = slope_record(judged(low, high, fit.alpha), FROM_STRUCTURE)
    return Slope(low, high, FROM_STRUCTURE, found.value, found.kind, reason)
