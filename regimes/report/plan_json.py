"""The plan as a plain document and as a table; `plan.schema.json` describes the document."""

import csv
import io
import json
from typing import Any

from regimes.plan import Plan, Summary
from regimes.plan.summary import Mean, Share
from regimes.report.plan_words import plan_sentence
from regimes.report.verdict_json import plain
from regimes.units import HOUR, KM

SCHEMA = 1
SHARES = ("told", "right", "wrong", "fitted", "found")
_KEYS = {"told": "aim_reached", "right": "right_verdict", "wrong": "wrong_supported", "found": "transition_found"}


def plan_document(plan: Plan) -> dict[str, Any]:
    """Everything a plan says, in plain types; lengths in km, intervals in hours, None for what is not determined."""
    rules, target, best = plan.planned.plan, plan.target, plan.best
    return plain({
        "schema": SCHEMA,
        "name": plan.planned.name,
        "seed": plan.planned.seed,
        "versions": dict(plan.versions),
        "input": {"sha256": plan.input_sha256, "case_sha256": plan.case_sha256},
        "sentence": plan_sentence(plan),
        "aim": {
            "regime": target.regime,
            "against": target.against,
            "range_km": [target.low / KM, target.high / KM],
            "probability": target.probability,
        },
        "kernel": None if rules.kernel is None else rules.kernel.model_dump(mode="json"),
        "probability_of_regime": plan.probability,
        "survey": {
            "particles": rules.particles,
            "start_separation_km": rules.start_separation_km,
            "position_error_m": rules.position_error_m,
            "duration_d": rules.duration_d,
            "loss_per_d": rules.loss_per_d,
        },
        "designs": [_design(s) for s in plan.summaries],
        "reached": None if best is None else _point(best),
    })  # fmt: skip


def plan_text(plan: Plan) -> str:
    """`plan_document` as JSON text."""
    return json.dumps(plan_document(plan), indent=1, allow_nan=False, ensure_ascii=False) + "\n"


def plan_table(plan: Plan) -> str:
    """One line a design, as CSV; nothing stands for what is not determined."""
    rows = [_flat(design) for design in plan_document(plan)["designs"]]
    text = io.StringIO()
    writer = csv.DictWriter(text, list(rows[0]), lineterminator="\n")
    writer.writeheader()
    writer.writerows({k: "" if v is None else v for k, v in row.items()} for row in rows)
    return text.getvalue()


def _point(summary: Summary) -> dict[str, Any]:
    return {"releases": summary.point.releases, "fix_interval_h": summary.point.interval / HOUR}


def _design(summary: Summary) -> dict[str, Any]:
    shares = {_KEYS.get(name, name): _share(getattr(summary, name)) for name in SHARES}
    return _point(summary) | {"campaigns": summary.campaigns} | shares | {
        "regime_probability": _mean(summary.probability),
        "alpha_width": _mean(summary.alpha_width),
        "transition_factor": _mean(summary.transition_factor),
        "resolved_from_km": _mean(summary.low, KM),
        "resolved_to_km": _mean(summary.high, KM),
    }  # fmt: skip


def _share(share: Share) -> dict[str, float]:
    return {"share": share.value, "lo95": share.low, "hi95": share.high}


def _mean(mean: Mean, scale: float = 1.0) -> dict[str, float]:
    return {"mean": mean.value / scale, "error": mean.error}


def _flat(design: dict[str, Any]) -> dict[str, Any]:
    out = {}
    for key, value in design.items():
        out |= {f"{key}_{part}": v for part, v in value.items()} if isinstance(value, dict) else {key: value}
    return out
