"""Single particles, and a run without a pair, as parts of the verdict document."""

from typing import Any

from regimes.analysis import Analysis, SinglesOnly
from regimes.particles import Ratio


def single_part(found: Analysis | SinglesOnly) -> dict[str, Any]:
    """Numbers of single particles with what was removed and what to be careful about, or why there are none."""
    single = found.single
    if single is None:
        return {"single_particle": None, "single_particle_reason": found.single_missing}
    rest = {
        "mean_removed": single.mean,
        "n_particles": single.n_particle,
        "n_units": single.n_unit,
        "cautions": list(single.cautions),
        "ratios": [_ratio(r) for r in found.ratios],
    }
    return {"single_particle": single.numbers() | rest, "single_particle_reason": ""}


def without_pairs(found: SinglesOnly) -> dict[str, Any]:
    """What the document says of pairs where there is none: lists are empty, numbers undetermined."""
    band = {"median": [], "lo95": [], "hi95": []}
    nothing = {"edges_km": [], "separation_km": [], "probability": {}, "slope": band, "exponent": band}
    return {
        "decision": "undecided",
        "reasons": list(found.reasons),
        "sentence": found.sentence,
        "methods": "",
        "supported": [],
        "resolved_km": [],
        "limited_by": [],
        "sequences": [],
        "by_separation": nothing,
        "challenger": {"log_bayes_factor": None, "preferred": False},
        "transitions": [],
        "slopes": [],
        "fit_p_value": None,
        "health": {"ok": True, "reason": "nothing was sampled", "rhat_max": None, "ess_min": None},
        "cautions": [],
    }


def _ratio(ratio: Ratio) -> dict[str, Any]:
    return {
        "name": ratio.name,
        "value": ratio.value,
        "lo95": ratio.low,
        "hi95": ratio.high,
        "expected": ratio.expected,
    }
