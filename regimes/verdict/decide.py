"""The decision: supported, undecided or none fits, with its reasons and cautions."""

from dataclasses import dataclass

import numpy as np

from regimes.inference.record import Inference
from regimes.theory.regimes import REGIMES
from regimes.units import KM
from regimes.verdict.digits import bayes_factor, km, listed, p_value, percent, rounded_down
from regimes.verdict.finding import THREAT_WORDS, Finding
from regimes.verdict.record import BySeparation, Caution, Slope
from regimes.verdict.rule import CHALLENGE, PROBABLE, SPAN, Stretch, called, stretches

LEAST_P = 0.01  # posterior predictive p-value below which no kernel fits
FEW_CLUSTERS = 6.0  # below, spread between releases cannot be estimated
MANY_CLUSTERS = 30.0  # below, intervals rest on a small-sample correction
CONTRADICTED = 0.05  # probability that the second opinion leaves to a regime it contradicts


@dataclass(frozen=True, slots=True)
class Evidence:
    """What a decision rests on.

    Parameters
    ----------
    exit_rate : Inference
        The leading fit.
    separation : Inference or None
        The second opinion; None where the data did not allow it.
    leading, second : BySeparation
        Numbers of the two along the separation axis; `second` None with `separation`.
    fit_p_value, free_p_value : float
        Posterior predictive p-values of the exit rates under named sequences and free kernels.
    clusters : float
        Effective number of independent clusters.
    within_release : bool
        Whether errors could only be measured between particles of the same few releases.
    slopes : tuple of Slope
    position_error : float [m]
    zero_fraction : float
        Share of exits inside one sample at the lowest resolved separation.
    second_missing : str
        Why there is no second opinion; empty otherwise.
    releases_differ : bool
        Whether the scores of a cluster go together across separations, beyond chance.
    audit : tuple of Finding
        What could fake the result.
    """

    exit_rate: Inference
    separation: Inference | None
    leading: BySeparation
    second: BySeparation | None
    fit_p_value: float
    free_p_value: float
    clusters: float
    within_release: bool
    slopes: tuple[Slope, ...]
    position_error: float
    zero_fraction: float
    second_missing: str
    releases_differ: bool = False
    audit: tuple[Finding, ...] = ()


@dataclass(frozen=True, slots=True)
class Decision:
    """A decision with its reasons."""

    decision: str
    reasons: tuple[str, ...]
    supported: tuple[Stretch, ...]
    cautions: tuple[Caution, ...]


def decide(evidence: Evidence) -> Decision:
    """Apply the rule of "supported" and everything that stops it."""
    leading = evidence.leading
    mask = called(leading.probability, leading.exponent_lo95, leading.exponent_hi95)
    found = tuple(s for s in stretches(mask, leading.edges) if s.span >= SPAN * (1 - 1e-9))
    against = contradictions(found, evidence.second)
    cautions = _cautions(evidence, against)
    unhealthy = [
        f"the {curve} fit has not converged: {fit.health.reason}"
        for curve, fit in (("exit-rate", evidence.exit_rate), ("separation-distribution", evidence.separation))
        if fit is not None and not fit.health.ok
    ]
    if unhealthy:
        return Decision("undecided", tuple(unhealthy), (), cautions)
    if evidence.exit_rate.challenge > CHALLENGE:
        factor = bayes_factor(evidence.exit_rate.challenge)
        text = f"a free exponent is preferred to every named sequence by a Bayes factor of {factor} (20 is enough)"
        return Decision("none_fits", (text,), (), cautions)
    if evidence.fit_p_value < LEAST_P:
        text = (
            "the exit rates are improbable under the named sequences, weighed by probability "
            f"({p_value(evidence.fit_p_value)})"
        )
        if evidence.free_p_value < LEAST_P:
            text += (
                ", and under the kernels with free exponents too: the curve is not a power law in two or three pieces"
            )
        return Decision("none_fits", (text,), (), cautions)
    stops = [*against, *_unsafe(evidence.audit)]
    if evidence.within_release:
        stops.append(
            f"only {rounded_down(evidence.clusters, 1)} independent clusters: how much releases differ from one "
            "another cannot be estimated from so few"
        )
    if not found:
        stops += _why_nothing(leading, mask)
    return Decision("undecided", tuple(stops), (), cautions) if stops else Decision("supported", (), found, cautions)


def contradictions(found, second: BySeparation | None) -> list[str]:
    """Regimes that the exit rates support and the separation distribution rules out over half of their range."""
    if second is None:
        return []
    said = []
    for stretch in found:
        own = REGIMES[stretch.regime].exponent
        here = (second.separation >= stretch.low) & (second.separation <= stretch.high)
        improbable = second.probability[stretch.regime] < CONTRADICTED
        excluded = (second.exponent_lo95 > own) | (second.exponent_hi95 < own)
        if np.mean((improbable & excluded)[here]) >= 0.5:
            said.append(
                f"the exit rates support {REGIMES[stretch.regime].word} from {km(stretch.low)} to "
                f"{km(stretch.high)} km and the distribution of separations contradicts it there"
            )
    return said


def _unsafe(audit: tuple[Finding, ...]) -> list[str]:
    """Threats that are there and whose removal changes the verdict."""
    return [
        f"{THREAT_WORDS[f.threat]} may have made this result: the verdict is another one once it is allowed for (audit)"
        for f in audit
        if f.flag and f.verdict_changes
    ]


def _why_nothing(leading: BySeparation, mask) -> list[str]:
    """Which half of the rule failed, and where it came closest."""
    best = max(leading.probability, key=lambda name: float(np.max(leading.probability[name])))
    at = int(np.argmax(leading.probability[best]))
    p = leading.probability[best][at]
    low, high = leading.exponent_lo95[at], leading.exponent_hi95[at]
    if any(np.any(m) for m in mask.values()):
        widest = max(stretches(mask, leading.edges), key=lambda s: s.span)
        return [
            f"{REGIMES[widest.regime].word} meets the rule only from {km(widest.low)} to {km(widest.high)} km, less "
            f"than a factor {SPAN:g} of separation"
        ]
    share = percent(p) if p >= PROBABLE or p < 0.945 else "just under 95 %"
    text = f"the most probable regime anywhere is {REGIMES[best].word} near {km(leading.separation[at])} km ({share})"
    if p < PROBABLE:
        return [text + ", below the 95 % that the rule asks for"]
    inside = [r.word for r in REGIMES.values() if low <= r.exponent <= high]
    names = listed(inside) if inside else "none of the named regimes"
    return [text + f", but the free kernel exponent there, {low:.1f} to {high:.1f} (95 %), is consistent with {names}"]


def _cautions(evidence: Evidence, against: list[str]) -> tuple[Caution, ...]:
    return (*_of_the_data(evidence), *_of_the_fits(evidence, against))


def _of_the_data(evidence: Evidence) -> list[Caution]:
    out = []
    lowest = evidence.leading.edges[0]
    if evidence.within_release:
        out.append(
            Caution(
                "within_release",
                f"All errors are within release: {rounded_down(evidence.clusters, 1)} effective clusters are too few "
                "(under 6) to see how releases differ; particles took the place of releases as the independent unit.",
            )
        )
    elif evidence.clusters < MANY_CLUSTERS:
        out.append(
            Caution(
                "few_clusters",
                f"Intervals rest on {rounded_down(evidence.clusters, 0)} effective clusters, with a small-sample "
                "correction; 30 or more would make them firm.",
            )
        )
    if 0 < lowest < 30.0 * evidence.position_error:
        out.append(
            Caution(
                "position_error",
                f"The lowest separations, {lowest / KM:.2g} km and up, are within 30 position errors: the exponent "
                "there may be some 10 % off.",
            )
        )
    if evidence.zero_fraction > 0.05:
        out.append(
            Caution(
                "sampling_interval",
                f"{100 * evidence.zero_fraction:.0f} % of the exits at the lowest separation fall inside one "
                "sampling interval: the exponent there rests on the interpolation between fixes.",
            )
        )
    return out


def _of_the_fits(evidence: Evidence, against: list[str]) -> list[Caution]:
    out = []
    if evidence.releases_differ:
        out.append(
            Caution(
                "releases_differ",
                "What a release shows at one separation goes with what it shows at others, beyond chance: its pairs "
                "move together, or releases are fast or slow as a whole. Errors were widened for it. If rates differ, "
                "the fast releases alone reach large separations, and slopes come out too steep.",
            )
        )
    if evidence.second_missing:
        out.append(Caution("no_second_opinion", f"No second opinion: {evidence.second_missing}."))
    out += [Caution("second_opinion_differs", text[0].upper() + text[1:] + ".") for text in against]
    # The joint slope has the range of the separations' own: one caution will do.
    short = [s for s in evidence.slopes if s.kind == "estimate" and s.high / s.low < 10.0 and s.curve != "joint"]
    out += [
        Caution(
            f"audit_{f.threat}", f"The audit raises a flag for {THREAT_WORDS[f.threat]}; its row says what it does."
        )
        for f in evidence.audit
        if f.flag
    ]
    out += [_short_range(s) for s in short]
    if evidence.exit_rate.challenge > np.log(3.0):
        out.append(
            Caution(
                "free_exponent",
                f"A free exponent does better than every named sequence (Bayes factor "
                f"{bayes_factor(evidence.exit_rate.challenge)}; more than 20 overrules them).",
            )
        )
    return out


def _short_range(slope: Slope) -> Caution:
    return Caution(
        "short_range",
        f"The slope over {km(slope.low)} to {km(slope.high)} km rests on less than one decade; the bend at the ends of "
        "a finite spectrum may shift it by a few tenths.",
    )
