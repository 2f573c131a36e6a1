"""The verdict as a plain document for other programs; `verdict.schema.json` describes it."""

import json
from typing import Any

from regimes.analysis import Analysis, Provenance, SinglesOnly
from regimes.report.audit import audit_part
from regimes.report.every_json import every_part
from regimes.report.plain import plain
from regimes.report.single_json import single_part, without_pairs
from regimes.units import KM
from regimes.verdict.record import BySeparation, Interval, Slope, TransitionScale, Verdict

SCHEMA = 1
_LEVELS = ("median", "lo68", "hi68", "lo95", "hi95")


def verdict_document(analysis: Analysis | SinglesOnly) -> dict[str, Any]:
    """Everything the verdict says, in plain types.

    Parameters
    ----------
    analysis : Analysis or SinglesOnly

    Returns
    -------
    dict
        Only dicts, lists, strings, booleans, finite numbers and None (for what is not determined). Lengths in
        km; slopes and exponents as in the report.
    """
    said = without_pairs(analysis) if isinstance(analysis, SinglesOnly) else _said(analysis.verdict)
    audited = {"audit": audit_part(analysis)}
    return plain(_header(analysis.provenance) | said | every_part(analysis) | audited | single_part(analysis))


def _header(origin: Provenance) -> dict[str, Any]:
    counts = ("n_fixes", "n_particles", "n_pairs", "n_clusters")
    return {
        "schema": SCHEMA,
        "case": origin.case,
        "case_sha256": origin.case_sha256,
        "seed": origin.seed,
        "versions": dict(origin.versions),
        "input": {"source": origin.source, "sha256": origin.sha256} | {name: getattr(origin, name) for name in counts},
    }


def _said(verdict: Verdict) -> dict[str, Any]:
    return {
        "decision": verdict.decision,
        "reasons": list(verdict.reasons),
        "sentence": verdict.sentence,
        "methods": verdict.methods,
        "supported": [{"regime": s.regime, "low_km": s.low / KM, "high_km": s.high / KM} for s in verdict.supported],
        "resolved_km": [end / KM for end in verdict.resolved],
        "limited_by": list(verdict.limited_by),
        "sequences": [{"regimes": list(s.regimes), "probability": s.probability} for s in verdict.sequences],
        "by_separation": _by_separation(verdict.by_separation),
        "challenger": {
            "log_bayes_factor": verdict.log_bayes_factor,
            "preferred": verdict.challenger_preferred,
        },
        "transitions": [_transition(t) for t in verdict.transitions],
        "slopes": [_slope(s) for s in verdict.slopes],
        "fit_p_value": verdict.fit_p_value,
        "health": {
            "ok": verdict.healthy,
            "reason": verdict.health_reason,
            "rhat_max": verdict.rhat_max,
            "ess_min": verdict.ess_min,
        },
        "cautions": [{"code": c.code, "text": c.text} for c in verdict.cautions],
    }


def verdict_text(analysis: Analysis | SinglesOnly) -> str:
    """`verdict_document` as JSON text."""
    return json.dumps(verdict_document(analysis), indent=1, allow_nan=False, ensure_ascii=False) + "\n"


def _by_separation(by: BySeparation) -> dict[str, Any]:
    return {
        "edges_km": by.edges / KM,
        "separation_km": by.separation / KM,
        "probability": dict(by.probability),
        "slope": {"median": by.slope_median, "lo95": by.slope_lo95, "hi95": by.slope_hi95},
        "exponent": {"median": by.exponent_median, "lo95": by.exponent_lo95, "hi95": by.exponent_hi95},
    }


def _levels(interval: Interval, suffix: str = "", scale: float = 1.0) -> dict[str, float]:
    return {level + suffix: getattr(interval, level) / scale for level in _LEVELS}


def _transition(transition: TransitionScale) -> dict[str, Any]:
    return {
        "from": transition.lower,
        "to": transition.upper,
        **_levels(transition.scale, "_km", KM),
        "probability": transition.probability,
    }


def _slope(slope: Slope) -> dict[str, Any]:
    return {
        "range_km": [slope.low / KM, slope.high / KM],
        "curve": slope.curve,
        **_levels(slope.value),
        "kind": slope.kind,
        "reason": slope.reason,
        "outer_scale_km": {level: getattr(slope.outer_scale, level) / KM for level in ("median", "lo95", "hi95")},
        "log_bayes_factor_end": slope.log_bayes_factor_end,
    }
