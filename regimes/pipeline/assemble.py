"""From fits to the analysis: numbers, decision, words, bands."""

from dataclasses import replace

import numpy as np

from regimes.analysis import Analysis, Bands, Provenance
from regimes.curves import DispersionStatistics, default_times, dispersion_statistics
from regimes.fitting.options import Options
from regimes.fitting.rates import Rates, rate_table
from regimes.inference.predict import fit_p_value, mixed_kernels, rate_band
from regimes.inference.record import Inference
from regimes.inference.slope import TOO_FEW, mixed_slope_over
from regimes.inference.slope_mixture import slope_of_either
from regimes.pairs import Pairs
from regimes.pipeline.origin import provenance
from regimes.pipeline.other_curves import dissents
from regimes.pipeline.singles import cross_checks
from regimes.tracks import Tracks
from regimes.verdict.decide import Evidence, decide
from regimes.verdict.numbers import by_separation, either_record, sequences, slope_record, transition_scales
from regimes.verdict.record import Caution, Slope, Supported, Verdict
from regimes.verdict.rule import CHALLENGE
from regimes.verdict.words import methods_text, verdict_sentence


def put_together(tracks, pairs, options: Options, rates: Rates, fits, beside) -> Analysis:
    """The analysis from its parts.

    `fits` is (leading, second or None, why there is no second, pairs from passage, (joint or None, why there is none)),
    `beside` (what `single_side` gives, what `other_curves` gives, the findings of the audit).
    """
    leading, second, missing, moved, (joint, no_joint) = fits
    rng = np.random.default_rng(options.seed)
    others = {name: fit for name, fit in (("separation", second), ("joint", joint)) if fit is not None}
    slopes = quoted_slopes(rates, leading, others, options, rng)
    (single, missing_single), seen, audit = beside
    evidence = replace(_evidence(tracks, rates, (leading, second, missing), slopes, options.seed), audit=audit)
    record = provenance(tracks, pairs, options.seed)
    passage = dispersion_of(tracks, moved)
    spread = bands(leading, rates, rng)
    extra = dissents(seen) + joint_cautions(joint, no_joint)
    verdict = _verdict(evidence, rates, _facts(record, rates, options), extra)
    radius = options.single.deformation_radius
    return Analysis(
        provenance=record,
        rates=rate_table(rates),
        exponent=rates.everything.curve(),
        dispersion=dispersion_of(tracks, pairs),
        passage_dispersion=passage,
        passage_separation=rates.resolved.low,
        fits={"exit_rate": leading} | others,
        bands=spread,
        verdict=verdict,
        single=single,
        single_missing=missing_single,
        ratios=cross_checks(single, tracks, pairs, verdict.transitions, radius),
        others=seen,
        audit=audit,
    )


def _evidence(tracks: Tracks, rates: Rates, fits, slopes: tuple[Slope, ...], seed: int) -> Evidence:
    leading, second, missing = fits
    edges = rates.likelihood.thresholds
    zero = rates.everything.zero_fraction[rates.resolved.intervals][0]
    return Evidence(
        exit_rate=leading,
        separation=second,
        leading=by_separation(leading, edges, seed),
        second=by_separation(second, edges, seed) if second is not None else None,
        fit_p_value=fit_p_value(rates.likelihood, leading.named_posteriors(), leading.space, seed),
        free_p_value=fit_p_value(rates.likelihood, leading.free_posteriors(), leading.space, seed),
        clusters=rates.spread.clusters,
        within_release=rates.within_release,
        slopes=slopes,
        position_error=tracks.position_error,
        zero_fraction=float(np.nan_to_num(zero)),
        second_missing=missing,
        releases_differ=rates.spread.releases_differ,
    )


def _verdict(evidence: Evidence, rates: Rates, facts: dict, dissents: tuple[Caution, ...]) -> Verdict:
    decision, leading, slopes = decide(evidence), evidence.exit_rate, evidence.slopes
    moves = transition_scales(leading)
    sentence = verdict_sentence(decision, moves, [s for s in slopes if s.curve == "exit_rate"])
    resolved = (rates.resolved.low, rates.resolved.high)
    healths = [f.health for f in (leading, evidence.separation) if f is not None]
    return Verdict(
        decision=decision.decision,
        reasons=decision.reasons,
        sentence=sentence,
        methods=methods_text(facts, leading, decision, sentence, resolved),
        supported=tuple(Supported(s.regime, s.low, s.high) for s in decision.supported),
        sequences=sequences(leading),
        by_separation=evidence.leading,
        log_bayes_factor=float(leading.challenge),
        challenger_preferred=bool(leading.challenge > CHALLENGE),
        transitions=moves,
        slopes=slopes,
        resolved=resolved,
        limited_by=rates.resolved.limited_by,
        fit_p_value=evidence.fit_p_value,
        healthy=all(h.ok for h in healths),
        health_reason="; ".join(h.reason for h in healths if h.reason),
        rhat_max=max(h.rhat_max for h in healths),
        ess_min=min(h.ess_min for h in healths),
        cautions=decision.cautions + dissents,
    )


def dispersion_of(tracks: Tracks, pairs: Pairs) -> DispersionStatistics:
    return dispersion_statistics(tracks, pairs, default_times(pairs, tracks.step))


def joint_cautions(joint: Inference | None, missing: str) -> tuple[Caution, ...]:
    """What a reader must know of the joint fit, on which the decision does not rest."""
    if joint is None:
        return (Caution("no_joint_fit", f"No fit of both curves together: {missing}."),)
    if joint.health.ok:
        return ()
    return (Caution("joint_not_converged", f"The joint fit has not converged: {joint.health.reason}."),)


def quoted_slopes(rates: Rates, leading: Inference, others, options: Options, rng) -> tuple[Slope, ...]:
    """Slopes over the wished range and over each range of the best sequence that is not diffusive.

    `others` are the fits by curve that have no likelihood of a sub-range.
    """
    low, high = rates.resolved.low, rates.resolved.high
    best = leading.named[int(np.argmax(leading.sequence_probability()))]
    moves = best.posterior.draws[:, 1 + best.model.n_free :]
    inner = np.exp(np.quantile(moves, 0.16, axis=0)) if moves.size else np.empty(0)
    outer = np.exp(np.quantile(moves, 0.84, axis=0)) if moves.size else np.empty(0)
    starts, ends = np.append(low, outer), np.append(inner, high)
    ranges = [] if options.slope_range is None else [options.slope_range]
    ranges += [
        (float(a), float(b))
        for piece, a, b in zip(best.model.pieces, starts, ends, strict=True)
        if piece != "diffusive" and b > a
    ]
    out = []
    for a, b in ranges:
        wished = (a, b) == options.slope_range
        found = slope_of_either(rates.likelihood, a, b, rng)
        if found.slope.reason == TOO_FEW and not wished:
            continue
        out.append(either_record(found))
        inside = (max(a, low), min(b, high))
        if inside[1] > 2.0 * inside[0]:
            out += [slope_record(mixed_slope_over(f.free_posteriors(), *inside, rng), c) for c, f in others.items()]
    return tuple(out)


def bands(leading: Inference, rates: Rates, rng) -> Bands:
    space = leading.space
    ratio = float(np.exp(rates.everything.log_ratio.mean()))
    grid = np.exp(np.linspace(np.log(space.lowest), np.log(space.highest / ratio), 80))
    named = mixed_kernels(leading.named_posteriors(), space, 400, rng)
    free = mixed_kernels(leading.free_posteriors(), space, 400, rng)
    return Bands(grid, rate_band(named, grid, ratio), rate_band(free, grid, ratio))


def _facts(record: Provenance, rates: Rates, options: Options) -> dict:
    """What the methods text mentions."""
    return {
        "n_pairs": record.n_pairs,
        "n_particles": record.n_particles,
        "n_clusters": record.n_clusters,
        "clusters": rates.spread.clusters,
        "kind": record.kind,
        "max_separation": record.max_separation,
        "median_duration": record.median_duration,
        "step": record.step,
        "ratio": options.ratio,
        "within_release": rates.within_release,
        "version": record.versions["regimes"],
    }
