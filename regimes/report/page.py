"""The report page: one HTML file that needs nothing else."""

from typing import Any

from regimes.analysis import Analysis
from regimes.report.audit import audit_fact, audit_rows
from regimes.report.convergence import compared_rows, convergence_rows, not_shown, opinion_rows
from regimes.report.digits import count, fixed, probability, span
from regimes.report.every_curve import agreement_fact, every_curve
from regimes.report.figures import OF_EVERY_CURVE, OF_SINGLES
from regimes.report.provenance import cleaning_rows, provenance_rows
from regimes.report.render import figures_content, render
from regimes.report.singles_page import single_content
from regimes.report.slopes import end_text, slope_text
from regimes.report.words import CURVES, DECISIONS, DISPLAY, sequence
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
    return render("page.html.j2", _content(analysis, figures))


def _content(analysis: Analysis, figures: dict[str, str]) -> dict[str, Any]:
    verdict, origin = analysis.verdict, analysis.provenance
    drawn = figures_content(analysis, figures)
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
        "figures": [figure for name, figure in drawn.items() if name not in (*OF_EVERY_CURVE, *OF_SINGLES)],
        "every": every_curve(analysis, drawn),
        "audit": audit_rows(analysis),
        "single": single_content(analysis, drawn),
        "opinions": opinion_rows(analysis),
        "curves": [CURVES[name] for name in analysis.fits],
        "compared": compared_rows(analysis),
        "convergence": convergence_rows(analysis),
        "more_models": not_shown(analysis),
        "cleaning": cleaning_rows(origin),
        "provenance": provenance_rows(origin),
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
        agreement_fact(analysis.others),
        audit_fact(analysis),
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
        "; ".join(text for text in (slope.reason, end_text(slope)) if text),
    )
