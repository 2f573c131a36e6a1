"""The page of a comparison: one HTML file that needs nothing else."""

from typing import Any

import numpy as np

from regimes.compare.captions import TITLES, caption, description
from regimes.compare.record import Comparison, Input
from regimes.compare.words import TELLS, WORDS, name_of, place, plateau_text
from regimes.report.digits import count, fixed, significant
from regimes.report.render import inline, render
from regimes.report.words import p_text, sequence
from regimes.units import DAY, HOUR
from regimes.verdict.digits import km

BADGES = {"consistent": "supported", "different": "none_fits", "undecided": "undecided"}
SIGNS = {"consistent": "\u25cf", "different": "\u25cb", "undecided": "\u25d0"}


def page(comparison: Comparison, figures: dict[str, str]) -> str:
    """The page as HTML text.

    Parameters
    ----------
    comparison : Comparison
    figures : dict of str to str
        SVG text of each figure by name, in order of appearance.

    Returns
    -------
    str
        Self-contained: style and figures inside, no script, no network.
    """
    return render("comparison.html.j2", _content(comparison, figures), "regimes.compare")


def _content(comparison: Comparison, figures: dict[str, str]) -> dict[str, Any]:
    decision, fitted = comparison.same_flow, comparison.fitted
    said = comparison.sentence.removeprefix(WORDS[decision] + ": ")
    span = f"{km(fitted.alpha_range[0])} to {km(fitted.alpha_range[1])} km"
    why = f" No difference: {fitted.alpha_reason}." if fitted.alpha_reason else ""
    return {
        "case": f"{comparison.observed.case} against {comparison.model.case}",
        "badge": BADGES[decision],
        "sign": SIGNS[decision],
        "decision_word": WORDS[decision],
        "sentence": said[:1].upper() + said[1:],
        "facts": _facts(comparison),
        "cautions": comparison.cautions,
        "figures": [
            {
                "number": number,
                "title": TITLES[name],
                "svg": inline(svg, name, description(name, comparison)),
                "caption": caption(name, comparison),
            }
            for number, (name, svg) in enumerate(figures.items(), 1)
        ],
        "curves": [(name_of(c.curve), p_text(c.p_value), place(c)) for c in comparison.ranks.curves],
        "slope_words": f"Both cases fitted in one way; spectral slope over {span}.{why}",
        "slopes": _slopes(comparison),
        "plateau": plateau_text(fitted),
        "alike": _alike(comparison),
        "tells": significant(TELLS, 1),
        "provenance": _provenance(comparison),
    }


def _facts(comparison: Comparison) -> list[tuple[str, str, str]]:
    design, ranks, thresholds = comparison.design, comparison.ranks, comparison.fitted.thresholds
    smaller, larger = ("model", "observed case") if design.larger == "observed" else ("observed case", "model")
    return [
        ("over all curves", f"p = {p_text(ranks.p_value)}", "of the smaller case among virtual deployments"),
        ("groups", f"{count(design.groups_small)} and {count(design.groups_large)}", f"{smaller} and {larger}"),
        ("deployments", count(design.deployments), f"of the {larger}, each like the {smaller}"),
        ("separations", f"{km(thresholds[0])} to {km(thresholds[-1])} km", "resolved by both"),
        ("would be seen", f"a factor {significant(ranks.factor)}", "in all exponents, in four of five cases"),
    ]


def _slopes(comparison: Comparison) -> list[tuple[str, str, str]]:
    fitted = comparison.fitted
    rows = [
        ("spectral slope, observed case", fitted.alpha[0]),
        ("spectral slope, model", fitted.alpha[1]),
        ("difference of slopes, observed less model", fitted.alpha_difference),
    ]
    rows += [
        (f"transition {sequence((t.lower, t.upper))}, observed over model", np.array(t.ratio))
        for t in fitted.transitions
    ]
    return [_row(name, values) for name, values in rows]


def _row(name: str, values: np.ndarray) -> tuple[str, str, str]:
    if not np.all(np.isfinite(values)):
        return name, "not determined", ""
    median, low, high = (fixed(v, 2) for v in values)
    return name, median, f"{low} to {high}"


def _alike(comparison: Comparison) -> str:
    design = comparison.design
    larger = "observed case" if design.larger == "observed" else "model"
    return (
        f"From the {larger}, {count(design.deployments)} virtual deployments were drawn. Each has as many groups as "
        "the smaller case, with as many members, that start as far apart, are followed as long and are missed at the "
        f"same times; no group is used twice in one. Both have fixes every {design.step / HOUR:g} h, position errors "
        f"of {design.position_error:g} m, and records of {design.horizon / DAY:.3g} days at most."
    )


def _provenance(comparison: Comparison) -> list[tuple[str, str]]:
    rows = []
    for role, known in (("observed", comparison.observed), ("model", comparison.model)):
        rows += [(f"{role}: case", known.case), (f"{role}: data", _data(known))]
        rows.append((f"{role}: SHA-256 of the input", known.sha256 or "none: the data came from memory"))
    rows.append(("random seed", str(comparison.seed)))
    return rows + [(f"version of {name}", version) for name, version in comparison.versions.items()]


def _data(known: Input) -> str:
    return (
        f"{count(known.n_pairs)} pairs of {count(known.n_particles)} particles in {count(known.n_groups)} groups, from "
        f"{known.source}"
    )
