"""The comparison as a plain document for other programs; `comparison.schema.json` describes it."""

import json
from typing import Any

import numpy as np

from regimes.compare.ranks import CurveRank
from regimes.compare.record import Comparison, Input
from regimes.report.plain import plain
from regimes.units import DAY, KM

SCHEMA = 1
_LEVELS = ("median", "lo95", "hi95")


def document(comparison: Comparison) -> dict[str, Any]:
    """Everything a comparison says, in plain types; separations in km, times in days, None for what is not known."""
    fitted, ranks, design = comparison.fitted, comparison.ranks, comparison.design
    return plain(
        {
            "schema": SCHEMA,
            "cases": {"observed": _case(comparison.observed), "model": _case(comparison.model)},
            "same_flow": comparison.same_flow,
            "sentence": comparison.sentence,
            "p_value": ranks.p_value,
            "curves": [_curve(c) for c in ranks.curves],
            "factor_seen": ranks.factor,
            "unmatched_p_value": comparison.unmatched_p,
            "exponent_ratio": {"separation_km": fitted.separation / KM} | _levels(fitted.ratio),
            "same_regime": {"separation_km": fitted.separation / KM, "probability": fitted.same_regime},
            "alpha": {
                "range_km": [end / KM for end in fitted.alpha_range],
                "observed": _levels_or_none(fitted.alpha[0]),
                "model": _levels_or_none(fitted.alpha[1]),
                "reason": fitted.alpha_reason,
            },
            "alpha_difference": _levels_or_none(fitted.alpha_difference),
            "transition_ratios": [
                {"from": t.lower, "to": t.upper} | _levels(np.array(t.ratio)) for t in fitted.transitions
            ],
            "plateau_km": _levels_or_none(fitted.plateau / KM),
            "plateau_reason": fitted.plateau_reason,
            "design": {
                "larger": design.larger,
                "groups_small": design.groups_small,
                "groups_large": design.groups_large,
                "groups_effective": design.groups_effective,
                "deployments": design.deployments,
                "step_h": design.step / 3600.0,
                "horizon_d": design.horizon / DAY,
                "position_error_m": design.position_error,
            },
            "cautions": list(comparison.cautions),
            "seed": comparison.seed,
            "versions": dict(comparison.versions),
        }
    )


def text_of(comparison: Comparison) -> str:
    """`document` as JSON text."""
    return json.dumps(document(comparison), indent=1, allow_nan=False, ensure_ascii=False) + "\n"


def _case(known: Input) -> dict[str, Any]:
    names = ("case", "source", "sha256", "n_particles", "n_pairs", "n_groups")
    return {name: getattr(known, name) for name in names}


def _curve(curve: CurveRank) -> dict[str, Any]:
    unit, name = (KM, "separation_km") if curve.axis_name == "separation" else (DAY, "time_d")
    return {
        "curve": curve.curve,
        "p_value": curve.p_value,
        "axis": name,
        "differs_at": curve.differs_at / unit,
        "at": curve.axis / unit,
        "value": curve.value,
        "unit": curve.unit,
        "median": curve.band[2],
        "lo95": curve.band[0],
        "hi95": curve.band[4],
        "rank": curve.rank,
    }


def _levels(values: np.ndarray) -> dict[str, Any]:
    return dict(zip(_LEVELS, values, strict=True))


def _levels_or_none(values: np.ndarray) -> dict[str, Any] | None:
    return _levels(values) if np.all(np.isfinite(values)) else None
