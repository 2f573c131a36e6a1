"""The sentences of the verdict."""

from itertools import pairwise

from regimes.inference.record import Inference
from regimes.theory.regimes import REGIMES
from regimes.units import DAY, HOUR
from regimes.verdict.decide import Decision
from regimes.verdict.digits import km, km_interval, listed, percent, rounded_down, slope_text
from regimes.verdict.record import Slope


def slope_words(slope: Slope) -> str:
    """A slope as words: an estimate, a bound, or nothing."""
    where = f"{km(slope.low)} to {km(slope.high)} km"
    v = slope.value
    if slope.kind == "estimate":
        return (
            f"the implied spectral slope over {where} is {slope_text(v.median)} "
            f"({slope_text(v.lo95)} to {slope_text(v.hi95)}, 95 %)"
        )
    if slope.kind == "lower_bound":
        return f"the implied spectral slope over {where} is at least {slope_text(v.lo95)} (95 %)"
    if slope.kind == "upper_bound":
        return f"the implied spectral slope over {where} is at most {slope_text(v.hi95)} (95 %)"
    return f"no spectral slope is implied over {where}: {slope.reason}"


def verdict_sentence(decision: Decision, transitions, slopes) -> str:
    """The verdict in a few sentences.

    Parameters
    ----------
    decision : Decision
    transitions : sequence of TransitionScale
    slopes : sequence of Slope
        Exit-rate slopes, the one to quote first.
    """
    quoted = next((s for s in slopes if s.kind != "none"), None)
    slope = ("; " + slope_words(quoted)) if quoted else ""
    if decision.decision == "supported":
        parts = [f"only {REGIMES[s.regime].word} from {km(s.low)} to {km(s.high)} km" for s in decision.supported]
        text = f"Supported: of the four regimes the data are consistent with {listed(parts)}"
        return text + _moves(decision, transitions) + slope + "."
    if decision.decision == "none_fits":
        return f"None of the named regimes fits: {listed(decision.reasons)}{slope}."
    return f"Undecided: {listed(decision.reasons)}{slope}."


def _moves(decision: Decision, transitions) -> str:
    """Transitions between neighbouring supported regimes."""
    said = []
    held = decision.supported
    for one, two in pairwise(held):
        match = next((t for t in transitions if (t.lower, t.upper) == (one.regime, two.regime)), None)
        if match is not None and match.probability >= 0.5:
            scale = match.scale
            said.append(
                f"{REGIMES[one.regime].word} gives way to {REGIMES[two.regime].word} at "
                + km_interval(scale.median, scale.lo95, scale.hi95)
            )
    return "; " + "; ".join(said) if said else ""


def methods_text(facts: dict, fit: Inference, decision: Decision, sentence: str, resolved) -> str:
    """Methods-and-result text ready to quote.

    Parameters
    ----------
    facts : dict
        n_pairs, n_particles, n_clusters, clusters (effective), kind, max_separation [m], step [s], ratio,
        version.
    fit : Inference
    decision : Decision
    sentence : str
    resolved : (float, float) [m]
    """
    top = max(zip(fit.sequence_probability(), fit.named, strict=True), key=lambda p: p[0])
    names = ", ".join(REGIMES[p].word for p in top[1].model.pieces)
    days = facts["median_duration"] / DAY
    shape = "1 cluster" if facts["n_clusters"] == 1 else f"{facts['n_clusters']} clusters"
    unit = "release" if facts["kind"] == "launched" else "cluster"
    return (
        f"Separations of {facts['n_pairs']} {_kind(facts['kind'])}pairs of {facts['n_particles']} particles in {shape} "
        f"({rounded_down(facts['clusters'], 1)} effective; pairs start within {km(facts['max_separation'])} km, "
        f"median record {days:.2g} d, {facts['step'] / HOUR:.3g} h sampling) were reduced to exit rates between "
        f"thresholds of ratio {facts['ratio']:.3g} from {km(resolved[0])} to {km(resolved[1])} km, counting time at "
        "risk and crediting unfinished passages. Sequences of named regimes and kernels with free exponents were "
        "compared by "
        f"their evidence under a quasi-likelihood whose dispersion ({fit.dispersion:.2g}) comes from "
        f"the scatter between {'particles' if facts['within_release'] else unit + 's'} (regimes {facts['version']}). "
        f"The most probable sequence is {names} ({percent(top[0])}). {sentence}"
    )


def _kind(kind: str) -> str:
    return {"launched": "launched ", "chance": "chance ", "both": "launched and chance "}[kind]
