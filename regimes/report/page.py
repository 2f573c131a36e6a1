"""The report page: one HTML file that needs nothing else."""

import math
import re
from importlib import resources
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup, escape

from regimes.analysis import Analysis
from regimes.report.captions import TITLES, caption, description
from regimes.report.convergence import compared_rows, convergence_rows, not_shown, opinion_rows
from regimes.report.digits import count, fixed, probability, significant, span
from regimes.report.tables import slope_text
from regimes.report.words import CURVES, DECISIONS, DISPLAY, sequence
from regimes.units import DAY, HOUR, KM
from regimes.verdict.digits import km
from regimes.verdict.record import Slope, TransitionScale
from regimes.verdict.rule import CHALLENGE

SEQUENCES_SHOWN = 6
TRANSITIONS_FROM, TRANSITIONS_SHOWN = 0.05, 8
SIGNS = {"supported": "\u25cf", "undecided": "\u25d0", "none_fits": "\u25cb"}


def page(analysis: Analysis, figures: dict[str, str]) -> str:
    """The report as HTML text.

    Parameters
    ----------
    analysis : Analysis
    figures : dict of str to str
        SVG text of each figure by name, in order of appearance.

    Returns
    -------
    str
        Self-contained: style and figures inside, no script, no network.
    """
    loader = PackageLoader("regimes.report", "")
    environment = Environment(loader=loader, autoescape=True, undefined=StrictUndefined)
    environment.trim_blocks = environment.lstrip_blocks = True
    environment.filters["typeset"] = typeset
    style = resources.files("regimes.report").joinpath("page.css").read_text(encoding="utf-8")
    return environment.get_template("page.html.j2").render(style=Markup(style), **_content(analysis, figures))


def typeset(text: object) -> Markup:
    """Text for the page: ``k^{-2}`` with a raised exponent, a true minus sign before a number."""
    safe = re.sub(r"(?<![\w.])-(?=[\d.])", "\u2212", str(escape(text)))
    return Markup(re.sub(r"\^\{([^{}]*)\}", r"<sup>\1</sup>", safe).replace("<sup>-", "<sup>\u2212"))


def _content(analysis: Analysis, figures: dict[str, str]) -> dict[str, Any]:
    verdict, origin = analysis.verdict, analysis.provenance
    sentence, reasons = _headline(analysis)
    likely = [t for t in verdict.transitions if t.probability > TRANSITIONS_FROM]
    return {
        "case": origin.case,
        "decision": verdict.decision,
        "decision_word": DECISIONS[verdict.decision],
        "sign": SIGNS[verdict.decision],
        "verdict": verdict,
        "sentence": sentence,
        "reasons": reasons,
        "facts": _facts(analysis),
        "supported": [(DISPLAY[s.regime], f"{span(s.low, s.high)} km") for s in verdict.supported],
        "sequences": [(sequence(s.regimes), probability(s.probability)) for s in verdict.sequences[:SEQUENCES_SHOWN]],
        "more_sequences": max(len(verdict.sequences) - SEQUENCES_SHOWN, 0),
        "transitions": [_transition(t) for t in likely[:TRANSITIONS_SHOWN]],
        "more_transitions": max(len(likely) - TRANSITIONS_SHOWN, 0),
        "slopes": [_slope(s) for s in verdict.slopes],
        "bayes_factor": fixed(verdict.log_bayes_factor, 1),
        "challenge": fixed(CHALLENGE, 1),
        "figures": [
            {
                "name": name,
                "title": TITLES[name],
                "svg": _inline(svg, name, analysis),
                "caption": caption(name, analysis),
            }
            for name, svg in figures.items()
        ],
        "opinions": opinion_rows(analysis),
        "curves": [CURVES[name] for name in analysis.fits],
        "compared": compared_rows(analysis),
        "convergence": convergence_rows(analysis),
        "more_models": not_shown(analysis),
        "cleaning": [(reason, count(n), note) for reason, n, note in origin.cleaning],
        "provenance": _provenance(analysis),
    }


def _headline(analysis: Analysis) -> tuple[str, list[str]]:
    """The sentence without the decision's word, which the badge shows, and the reasons it does not hold already."""
    verdict = analysis.verdict
    sentence = verdict.sentence.removeprefix(DECISIONS[verdict.decision] + ": ")
    return sentence[:1].upper() + sentence[1:], [r for r in verdict.reasons if r not in verdict.sentence]


def _facts(analysis: Analysis) -> list[tuple[str, str, str]]:
    verdict, origin = analysis.verdict, analysis.provenance
    together = "released together" if origin.kind == "launched" else "near one another at the start"
    limits = "below: {}; above: {}".format(*verdict.limited_by)
    return [
        ("pairs", count(origin.n_pairs), origin.kind if origin.kind != "both" else "launched and chance"),
        ("clusters", count(origin.n_clusters), together),
        ("resolved separations", f"{span(*verdict.resolved)} km", limits),
        ("predictive check", f"p = {probability(verdict.fit_p_value)}", "of the exit rates"),
        ("convergence", "good" if verdict.healthy else "not good", "of the sampling"),
    ]


def _transition(transition: TransitionScale) -> tuple[str, str, str, str, str]:
    scale = transition.scale
    return (
        sequence((transition.lower, transition.upper)),
        km(scale.median),
        f"{km(scale.lo68)} to {km(scale.hi68)}",
        f"{km(scale.lo95)} to {km(scale.hi95)}",
        probability(transition.probability),
    )


def _slope(slope: Slope) -> tuple[str, str, str, str]:
    return (
        f"{span(slope.low, slope.high)} km",
        CURVES[slope.curve],
        slope_text(slope),
        slope.reason,
    )


def _provenance(analysis: Analysis) -> list[tuple[str, str]]:
    origin = analysis.provenance
    start = (significant(r / KM) for r in (origin.median_start, origin.start_p90))
    gap = f"{origin.longest_gap / HOUR:g} h" if math.isfinite(origin.longest_gap) else "not recorded"
    return [
        ("case", origin.case),
        ("fixes", f"{count(origin.n_fixes)} of {count(origin.n_particles)} particles, from {origin.source}"),
        ("SHA-256 of the input", origin.sha256 or "none: the data came from memory"),
        ("pairs", f"{count(origin.n_pairs)}, {origin.kind}"),
        ("limit of the separation at the start", f"{origin.max_separation / KM:.3g} km"),
        ("separation at the start", "median {} km, 90th percentile {} km".format(*start)),
        ("duration of the pairs", f"median {significant(origin.median_duration / DAY)} d"),
        ("common time step", f"{origin.step / HOUR:g} h"),
        ("longest gap bridged", gap),
        ("position error", f"{origin.position_error:g} m"),
        ("random seed", str(origin.seed)),
        *((f"version of {name}", version) for name, version in origin.versions.items()),
    ]  # fmt: skip


def _inline(svg: str, name: str, analysis: Analysis) -> Markup:
    """SVG as part of the page: no header, scalable, with a name and a description."""
    drawing = svg[svg.index("<svg") :]
    drawing = re.sub(r"<metadata>.*?</metadata>\s*", "", drawing, flags=re.DOTALL)
    head, body = drawing.split(">", 1)
    head = re.sub(r'\s(width|height)="[^"]*"', "", head)
    words = escape(description(name, analysis))
    label = f"{name}-words"
    return Markup(f'{head} role="img" aria-labelledby="{label}"><title id="{label}">{words}</title>{body}')
