"""Captions that stand alone, and descriptions for those who cannot see the figures."""

from collections.abc import Callable

from regimes.analysis import Analysis, SinglesOnly
from regimes.report import every_captions, single
from regimes.report.digits import count, probability, significant, span
from regimes.report.words import DECISIONS, DISPLAY
from regimes.units import KM

_PARTS = (every_captions, single)
TITLES = (
    {
        "exponent": "Exponent against separation",
        "regimes": "Which regime holds at each separation",
        "slope": "Local spectral slope",
        "transitions": "Transition separations",
        "slopes": "Spectral slope over ranges of separation",
        "dispersion": "Relative dispersion since the start of the pairs",
    }
    | every_captions.TITLES
    | single.TITLES
)


def caption(name: str, analysis: Analysis | SinglesOnly) -> str:
    """Caption of the figure of that name, to be read without the text around it."""
    part = next((part for part in _PARTS if name in part.TITLES), None)
    return _CAPTIONS[name](analysis) if part is None else part.caption(name, analysis)


def description(name: str, analysis: Analysis | SinglesOnly) -> str:
    """What the figure shows, in words, for readers who cannot see it."""
    part = next((part for part in _PARTS if name in part.TITLES), None)
    said = _SHOWN[name](analysis) if part is None else part.shown(name, analysis)
    return f"{TITLES[name]}. {said}"


FEW = (
    "Times with fewer than 5 pairs are left out; a point has no bar where the scatter between clusters cannot be "
    "estimated."
)


def _who(analysis: Analysis) -> str:
    origin = analysis.provenance
    return f"{count(origin.n_pairs)} pairs in {count(origin.n_clusters)} clusters"


def _resolved(analysis: Analysis) -> str:
    return f"{span(*analysis.verdict.resolved)} km"


def _exponent(analysis: Analysis) -> str:
    return (
        f"Finite-scale Lyapunov exponent against separation ({_who(analysis)}). Points: exits over time "
        "at risk, with unfinished passages counted; bars are 95 % intervals of one pooled dispersion, "
        f"clusters being independent. Filled points entered the fit ({_resolved(analysis)}); hollow points did not. "
        "Shading and line: 95 % interval and median of the sequences of named regimes; dashed: 95 % "
        "interval of kernels with free exponents. Grey crosses: the textbook estimate from completed "
        "exits alone (common practice), biased where records end. Short lines: slopes of the four "
        "regimes."
    )


def _regimes(analysis: Analysis) -> str:
    return (
        "Probability of each named regime at each separation, summed over all sequences of regimes. Bars "
        "on top mark separations where a regime is supported: probability of at least 0.95 (dotted line) "
        "and a free exponent whose 95 % interval contains that regime and no other. Resolved range "
        f"{_resolved(analysis)}."
    )


def _slope(analysis: Analysis) -> str:
    return (
        "Local slope α of the energy spectrum E(k) ∝ k^{-α} that the free-exponent kernels imply at each "
        "separation: median (line) and 95 % interval (shading). Exponents cannot tell slopes of 3 and "
        "steeper apart, nor of 1 and flatter; where the kernel is diffusive (grey strip) no spectrum is "
        "implied. A separation feels a broad band of wavelengths, so the slope is that of a range, not "
        "of one wavenumber. Dotted: slopes expected of nonlocal stirring (3), fronts (2), Richardson "
        "(5/3) and ballistic motion (1)."
    )


def _transitions(_analysis: Analysis) -> str:
    return (
        "Posterior of each transition separation between named regimes with probability above 0.05 (in "
        "brackets). The area under a curve is the probability of the transition."
    )


def _slopes(_analysis: Analysis) -> str:
    return (
        "Spectral slope α implied over ranges of separation, from exit rates (black), from separations at fixed "
        "times (white) and from both together (grey). Mark: median; thick line: 68 %; thin line: 95 %. An arrow "
        "starts at the 95 % bound where only a bound is known. Dotted lines: slopes 5/3, 2 and 3."
    )


def _dispersion(analysis: Analysis) -> str:
    return (
        f"Relative dispersion since the start of each pair ({_who(analysis)}), total and east and north "
        "parts (x and y on a plane), with 95 % cluster intervals of the logarithm. Short lines: late power "
        "laws of three regimes, reached only long after the start; the exponential regime has none. " + FEW
    )


def _see_exponent(analysis: Analysis) -> str:
    rates = analysis.rates
    rate = rates.rate[rates.resolved] * 86400.0
    if rate.size == 0:
        return "No exponent is resolved."
    return (
        f"Over {_resolved(analysis)} the exponent goes from {significant(rate[0])} per day at the "
        f"smallest to {significant(rate[-1])} per day at the largest separation."
    )


def _see_regimes(analysis: Analysis) -> str:
    found = [f"{DISPLAY[s.regime]} from {span(s.low, s.high)} km" for s in analysis.verdict.supported]
    said = f"Decision: {DECISIONS[analysis.verdict.decision].lower()}. "
    return said + ("Supported: " + "; ".join(found) + "." if found else "No regime is supported anywhere.")


def _see_slope(analysis: Analysis) -> str:
    by = analysis.verdict.by_separation
    ends = ["no spectrum" if a < 1 else significant(a) for a in (by.slope_median[0], by.slope_median[-1])]
    return f"Median at the smallest separation {ends[0]}, at the largest {ends[1]}."


def _see_transitions(analysis: Analysis) -> str:
    found = [
        f"{DISPLAY[t.lower]} to {DISPLAY[t.upper]} near {significant(t.scale.median / KM)} km "
        f"(probability {probability(t.probability)})"
        for t in analysis.verdict.transitions
        if t.probability > 0.05
    ]
    return "; ".join(found) + "." if found else "No transition has a probability above 0.05."


def _see_slopes(analysis: Analysis) -> str:
    return f"{len(analysis.verdict.slopes)} ranges; their numbers are in the table of slopes."


def _see_check(_analysis: Analysis) -> str:
    return "Data points with bars over the predicted band; the numbers are in curves.csv and curves.nc."


_CAPTIONS: dict[str, Callable[[Analysis], str]] = {
    "exponent": _exponent,
    "regimes": _regimes,
    "slope": _slope,
    "transitions": _transitions,
    "slopes": _slopes,
    "dispersion": _dispersion,
}
_SHOWN: dict[str, Callable[[Analysis], str]] = {
    "exponent": _see_exponent,
    "regimes": _see_regimes,
    "slope": _see_slope,
    "transitions": _see_transitions,
    "slopes": _see_slopes,
    "dispersion": _see_check,
}
