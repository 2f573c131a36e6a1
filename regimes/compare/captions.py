"""Captions that stand alone, and descriptions for those who cannot see the figures."""

import numpy as np

from regimes.compare.ranks import LEVEL
from regimes.compare.record import Comparison
from regimes.compare.words import name_of, place
from regimes.report.digits import count, significant
from regimes.report.words import p_text
from regimes.verdict.digits import km

TITLES = {
    "curves": "Curves of the smaller case among virtual deployments of the larger one",
    "ratio": "Ratio of exponents",
    "same": "Where both are in the same regime",
}
_CAPTIONS = {
    "ratio": "Exponent of the observed case over that of the model at each separation that both resolve, from all data "
    "of both within the common length of records; bars are 95 % intervals, groups being independent. Dotted: equal.",
    "same": "Probability that the same named regime holds in both cases, from the probabilities of each case alone. "
    "Dotted: one half.",
}


def caption(name: str, comparison: Comparison) -> str:
    """Caption of the figure of that name, to be read without the text around it."""
    if name != "curves":
        return _CAPTIONS[name]
    design = comparison.design
    smaller, larger = ("model", "observed case") if design.larger == "observed" else ("observed case", "model")
    return (
        f"Points: {smaller}, {count(design.groups_small)} groups. Shading and line: 68 and 95 % of "
        f"{count(design.deployments)} virtual deployments of the {larger}, sampled alike, about their middle, "
        "each held against others that share no group with it. Diamonds: where a curve of p under 0.05 differs. Times "
        "count from the first passage of the smallest separation, those of the mean log growth (of r over that at the "
        "start) from the start. The last panel shows distances (Kolmogorov-Smirnov) from the separations of all "
        "deployments together, of which only large ones count."
    )


def description(name: str, comparison: Comparison) -> str:
    """What the figure shows, in words, for readers who cannot see it."""
    return f"{TITLES[name]}. {_SHOWN[name](comparison)}"


def _curves(comparison: Comparison) -> str:
    said = []
    for c in comparison.ranks.curves:
        where = f" at {place(c)}" if place(c) else ""
        said.append(
            f"{name_of(c.curve)}: {'differs' if c.p_value < LEVEL else 'alike'}{where}, p = {p_text(c.p_value)}"
        )
    return "; ".join(said) + "."


def _ratio(comparison: Comparison) -> str:
    fitted = comparison.fitted
    ratio = fitted.ratio[0]
    ends = (km(fitted.separation[0]), km(fitted.separation[-1]))
    return (
        f"The observed exponent is {significant(ratio[0])} times that of the model at {ends[0]} km and "
        f"{significant(ratio[-1])} times at {ends[1]} km."
    )


def _same(comparison: Comparison) -> str:
    fitted = comparison.fitted
    at = int(np.argmin(fitted.same_regime))
    return f"It is lowest, {fitted.same_regime[at]:.2f}, at {km(fitted.separation[at])} km."


_SHOWN = {"curves": _curves, "ratio": _ratio, "same": _same}
