"""Captions and descriptions of the figures of every curve."""

from collections.abc import Callable

import numpy as np

from regimes.analysis import Analysis
from regimes.checks.structure import RESOLVED
from regimes.report.digits import count, significant, span
from regimes.report.slopes import alpha_text, spectrum_slope
from regimes.report.words import checked
from regimes.units import DAY, KM
from regimes.verdict.digits import km, listed

TITLES = {
    "checks": "Every curve against its prediction",
    "structure": "Structure functions of relative velocity",
    "spectrum": "Slope of the spectrum: wavelengths and separations",
    "kinds": "Relative diffusivity by two routes",
    "triplets": "Triplets: area and shape",
}


def caption(name: str, analysis: Analysis) -> str:
    """Caption of the figure of that name."""
    return _CAPTIONS[name](analysis)


def shown(name: str, analysis: Analysis) -> str:
    """What the figure shows, in words."""
    return _SHOWN[name](analysis)


def _passage(analysis: Analysis) -> str:
    return f"first passage of {km(analysis.passage_separation)} km"


def _checks(analysis: Analysis) -> str:
    text = (
        "Data (points) and what the same releases do when repeated under kernels drawn from the fit to the exit rates "
        "(line: median; bands: 68 and 95 %). Only the kernel was fitted, to none of these curves. p: probability, "
        "under the prediction, of a curve that leaves it as far as the data do anywhere; below 0.01 the curve "
        "dissents (bold). Hollow diamonds: points outside the 95 % band, of which some occur by chance. Times count "
        f"from the {_passage(analysis)}. Means of logarithms are shown as geometric means; the distance of a "
        "distribution is that of Kolmogorov and Smirnov from all repetitions together."
    )
    if any(check.curve == "structure_function" for check in analysis.others.checks):
        text += (
            " The structure function is predicted from the kernel up to a level that random-Fourier flows of many "
            "spectra have in common."
        )
    return text


def _structure(analysis: Analysis) -> str:
    others = analysis.others
    text = (
        "Mean squared relative velocity of pairs against separation, total and along and across the separation, with "
        "95 % cluster intervals of the logarithm; from differences over one and two steps, corrected for averaging "
        "over them. Dashed, if not far below: what position errors add to the total. "
    )
    if others.spectrum is not None:
        text += (
            "Band and line: 95 % interval and median of the spectra fitted to the total; filled points entered that "
            "fit. The others lie too near the start of the pairs, or were not reached by enough clusters."
        )
    else:
        text += "No spectrum was fitted; filled points entered the check, if there was one."
    if not others.velocity_ratio >= RESOLVED:
        text += " The sampling does not resolve these velocities: the values depend on the interval between fixes."
    return text


def _spectrum(analysis: Analysis) -> str:
    return (
        "Spectral slope \u03b1. Top: posterior from the structure function over the wavelengths that it constrains; "
        "the ends stand for 1 or flatter and 3 or steeper. Bottom: slopes that the exit rates imply over ranges of "
        "separations (mark: median; thick line: 68 %; thin line: 95 %; arrow: from a 95 % bound). A separation feels "
        "a broad band of wavelengths, so the two need not agree where the spectrum bends. Triangle, for comparison "
        "only: the slope of the structure function plus one, which is wrong where the spectrum ends or bends near by. "
        "Dotted: 5/3, 2 and 3."
    )


def _kinds(analysis: Analysis) -> str:
    return (
        "Half the growth rate of the relative dispersion against its root, from relative velocities at one time and "
        "from growth between times, with 95 % cluster intervals of the logarithm; values that are not positive are "
        f"left out. Times count from the {_passage(analysis)}. Line: medians of what the fitted kernels predict, both "
        "quantities at the same times."
    )


def _triplets(analysis: Analysis) -> str:
    found = analysis.others.triplets
    left = f" ({count(found.n_left_out)} more were left out)" if found.n_left_out else ""
    return (
        f"Triangles of particles released together ({count(found.n_triplet)}{left}, in "
        f"{count(found.area.weight.size)} releases): mean area and mean square side (top), mean aspect (bottom), "
        "with 95 % cluster intervals. The aspect is 1 for an equilateral triangle, 0 for three points in line and "
        "1/2 on average for particles that wander independently. Areas below the position error times the longest "
        "side are noise."
    )


def _see_checks(analysis: Analysis) -> str:
    parts = [f"{checked(c.curve)} {'agrees' if c.agrees else 'dissents'}" for c in analysis.others.checks]
    said = listed(parts)
    return f"{said[:1].upper()}{said[1:]}; the numbers are in curves.csv and curves.nc."


def _see_structure(analysis: Analysis) -> str:
    total = analysis.others.structure.total()
    good = np.flatnonzero(np.isfinite(total.value) & (total.value > 0))
    ends = [f"{total.value[i]:.2g} at {km(total.axis[i])} km" for i in (good[0], good[-1])]
    return f"The total goes from {ends[0]} to {ends[1]}, in square metres per square second."


def _see_spectrum(analysis: Analysis) -> str:
    slope = spectrum_slope(analysis.others)
    return f"From the structure function {alpha_text(slope)} over wavelengths of {span(slope.low, slope.high)} km."


def _see_kinds(analysis: Analysis) -> str:
    found = analysis.others.diffusivity
    value, distance = found.from_growth.value, found.separation
    good = np.flatnonzero(np.isfinite(value) & (value > 0))
    if good.size == 0:
        return "Growth between times is nowhere positive, so that only the values from velocities are shown."
    ends = [significant(value[i]) for i in (good[0], good[-1])]
    return (
        f"From growth it goes from {ends[0]} to {ends[1]} square metres per second, while the root of the relative "
        f"dispersion goes to {significant(float(np.nanmax(distance)) / KM)} km."
    )


def _see_triplets(analysis: Analysis) -> str:
    found = analysis.others.triplets
    good = np.flatnonzero(np.isfinite(found.aspect.value))
    first, last = good[0], good[-1]
    return (
        f"The mean aspect is {found.aspect.value[first]:.2f} after {significant(found.aspect.axis[first] / DAY)} days "
        f"and {found.aspect.value[last]:.2f} after {significant(found.aspect.axis[last] / DAY)} days."
    )


_CAPTIONS: dict[str, Callable[[Analysis], str]] = {
    "checks": _checks,
    "structure": _structure,
    "spectrum": _spectrum,
    "kinds": _kinds,
    "triplets": _triplets,
}
_SHOWN: dict[str, Callable[[Analysis], str]] = {
    "checks": _see_checks,
    "structure": _see_structure,
    "spectrum": _see_spectrum,
    "kinds": _see_kinds,
    "triplets": _see_triplets,
}
