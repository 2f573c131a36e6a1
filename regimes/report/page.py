"""The report page: one HTML file that needs nothing else."""

import re
from importlib import resources
from typing import Any

import numpy as np
from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup, escape

from regimes.analysis import Analysis
from regimes.report.captions import TITLES, caption, description
from regimes.report.convergence import convergence_rows, opinion_rows
from regimes.report.digits import between, count, fixed, probability, rounded, significant, span, spread
from regimes.report.tables import slope_text
from regimes.report.words import CURVES, DECISIONS, DISPLAY, sequence
from regimes.units import DAY, HOUR, KM
from regimes.verdict.record import Slope, TransitionScale

SEQUENCES_SHOWN = 6
TRANSITIONS_FROM = 0.05
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
    environment = Environment(loader=loader, autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    style = resources.files("regimes.report").joinpath("page.css").read_text(encoding="utf-8")
    return environment.get_template("page.html.j2").render(style=Markup(style), **_content(analysis, figures))  # noqa: S704


def _content(analysis: Analysis, figures: dict[str, str]) -> dict[str, Any]:
    verdict, origin = analysis.verdict, analysis.provenance
    return {
        "case": origin.case,
        "decision": verdict.decision,
        "decision_word": DECISIONS[verdict.decision],
        "sign": SIGNS[verdict.decision],
        "verdict": verdict,
        "facts": _facts(analysis),
        "supported": [(DISPLAY[s.regime], f"{span(s.low / KM, s.high / KM)} km") for s in verdict.supported],
        "sequences": [(sequence(s.regimes), probability(s.probability)) for s in verdict.sequences[:SEQUENCES_SHOWN]],
        "more_sequences": max(len(verdict.sequences) - SEQUENCES_SHOWN, 0),
        "transitions": [_transition(t) for t in verdict.transitions if t.probability > TRANSITIONS_FROM],
        "slopes": [_slope(s) for s in verdict.slopes],
        "bayes_factor": fixed(verdict.log_bayes_factor, 1),
        "figures": [
            {"name": name, "title": TITLES[name], "svg": _inline(svg, name, analysis), "caption": caption(name, analysis)}
            for name, svg in figures.items()
        ],
        "opinions": opinion_rows(analysis),
        "convergence": convergence_rows(analysis),
        "cleaning": [(reason, count(n), note) for reason, n, note in origin.cleaning],
        "provenance": _provenance(analysis),
    }


def _facts(analysis: Analysis) -> list[tuple[str, str]]:
    verdict, origin = analysis.verdict, analysis.provenance
    low, high = (end / KM for end in verdict.resolved)
    return [
        ("pairs", count(origin.n_pairs)),
        ("independent clusters", count(origin.n_clusters)),
        ("resolved separations", f"{span(low, high)} km"),
        ("limited below by", verdict.limited_by[0]),
        ("limited above by", verdict.limited_by[1]),
        ("predictive check", f"p = {probability(verdict.fit_p_value).replace('= <', '<')}"),
        ("convergence", "good" if verdict.healthy else "not good"),
    ]


def _transition(transition: TransitionScale) -> tuple[str, str, str, str, str]:
    scale = transition.scale
    sigma = spread(scale.lo68, scale.hi68) / KM
    return (
        sequence((transition.lower, transition.upper)),
        rounded(scale.median / KM, sigma),
        between(scale.lo68 / KM, scale.hi68 / KM, sigma),
        between(scale.lo95 / KM, scale.hi95 / KM, sigma),
        probability(transition.probability),
    )


def _slope(slope: Slope) -> tuple[str, str, str, str]:
    return (f"{span(slope.low / KM, slope.high / KM)} km", CURVES[slope.curve], slope_text(slope), slope.reason)


def _provenance(analysis: Analysis) -> list[tuple[str, str]]:
    origin = analysis.provenance
    return [
        ("case", origin.case),
        ("fixes", f"{count(origin.n_fixes)} of {count(origin.n_particles)} particles, from {origin.source}"),
        ("SHA-256 of the input", origin.sha256),
        ("pairs", f"{count(origin.n_pairs)}, {origin.kind}, at most {significant(origin.max_separation / KM, 3)} km apart at the start"),
        ("separation at the start", f"median {significant(origin.median_start / KM)} km, 90th percentile {significant(origin.start_p90 / KM)} km"),
        ("duration of the pairs", f"median {significant(origin.median_duration / DAY)} d"),
        ("common time step", f"{significant(origin.step / HOUR, 3)} h"),
        ("longest gap bridged", f"{significant(origin.longest_gap / HOUR, 3)} h"),
        ("position error", f"{significant(origin.position_error, 3)} m"),
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
    label = f'{name}-words'
    return Markup(f'{head} role="img" aria-labelledby="{label}"><title id="{label}">{words}</title>{body}')  # noqa: S704
