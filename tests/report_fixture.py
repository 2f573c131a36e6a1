"""A plausible analysis made by hand: curves of kernel pairs of known truth, posteriors drawn around it.

The numbers that a sampler would find are replaced by normal draws, so that the report can be tested without a
fit; the curves, the exit rates and the predicted bands are the real ones.
"""

from dataclasses import replace
from functools import cache

import numpy as np
from scipy.stats import gamma

from regimes.analysis import Analysis, Bands, Provenance, RateTable, SinglesOnly
from regimes.curves import default_times, dispersion_statistics, exit_statistics
from regimes.inference.average import local_exponents, mixed_slopes, range_slopes
from regimes.inference.health import Health
from regimes.inference.models import Model, Space
from regimes.inference.record import Fit, Inference
from regimes.pairs import Pairs
from regimes.particles import SingleParticle, length_ratio, plateau_ratio, single_particle
from regimes.report import files
from regimes.report.figures import FIGURES, draw, svg
from regimes.synthetic.kernel_flow import kernel_pairs
from regimes.synthetic.particles import Motion, drifting_particles
from regimes.theory.kernel import Kernel
from regimes.verdict import record as vr
from regimes.verdict.finding import THREATS, Finding
from regimes.verdict.rule import called, stretches
from tests.other_curves_fixture import demo_others

KM, DAY = 1e3, 86400.0
QUANTILES = (2.5, 16, 50, 84, 97.5)
TRUTH = Kernel([2.0, 4 / 3, 0.0], [8 * KM, 80 * KM], 0.12 / DAY, 20 * KM)
SPACE = Space(1.2 * KM, 150 * KM, np.log(np.sqrt(2)), (np.log(1e-8), np.log(1e-3)))
RHO = np.sqrt(2)
_RATIOS = (
    plateau_ratio(13_000.0, 1_300.0, 6_900.0, 700.0),
    length_ratio("Lagrangian length", 34.0 * KM, 3.0 * KM, 30.0 * KM),
)


def _fit(pieces, log_evidence, slopes=(), breaks=(), seed=0, health=None):
    """A fit whose draws scatter around the given slopes and transitions [km]."""
    model = Model(pieces)
    rng = np.random.default_rng(seed)
    centre = np.array([np.log(TRUTH.rate), *slopes, *np.log(np.multiply(breaks, KM))])
    width = np.array([0.12, *[0.18] * len(slopes), *[0.22] * len(breaks)])
    draws = centre + width * rng.standard_normal((16, 60, model.size))
    score = -0.5 * np.sum(((draws - centre) / width) ** 2, axis=2)
    health = health or Health(1.004, 1300.0, 83.0)
    return Fit(model, log_evidence, 0.04, log_evidence - 0.2, draws, score, health)


def _screened(pieces, log_evidence):
    model = Model(pieces)
    return Fit(model, log_evidence, np.nan, log_evidence, np.empty((0, 0, model.size)), np.empty((0, 0)), None)


def _inference(curve, shift):
    named = (
        _fit(("exponential", "richardson", "diffusive"), -100.0, (), (8 * shift, 78), 1),
        _fit(("richardson", "diffusive"), -105.9 + shift, (), (72,), 2),
        _fit(("exponential", "ballistic", "diffusive"), -102.4, (), (17, 88), 3),
        _fit(("exponential", "diffusive"), -105.8, (), (30,), 4),
        _screened(("ballistic",), -171.0),
    )
    free = (
        _fit(("free", "free", "diffusive"), -101.1, (2.8, 1.72), (9, 80), 5),
        _fit(("exponential", "free"), -104.0, (1.1,), (11,), 6),
        _fit(("free", "diffusive"), -107.0, (2.15,), (65,), 7),
        _screened(("free",), -140.0),
    )
    return Inference(curve, SPACE, named, free, {"exit_rate": 2.9, "separation": 1.6, "joint": 1.8}[curve])


def _rate_table(stats):
    exits, risk = stats.exits.sum(0), stats.time_at_risk.sum(0)
    rate = np.where(exits > 0, stats.log_ratio * exits / np.where(risk > 0, risk, np.nan), np.nan)
    shape = np.maximum(exits, 0.5) / 2.9
    limits = [rate * gamma.ppf(q, shape) / shape for q in (0.16, 0.84, 0.025, 0.975)]
    textbook = rate * (1.15 + 0.6 * np.linspace(0, 1, rate.size) ** 3)
    used = (stats.thresholds[:-1] >= 1.1 * KM) & (exits >= 5)
    args = (stats.n_pair, stats.n_cluster, stats.zero_fraction, used)
    return RateTable(stats.thresholds, rate, *limits, textbook, exits.astype(int), stats.passages, *args)


def _kernels(fits, n, seed):
    """Kernels drawn from all sampled fits in proportion to their evidence."""
    rng = np.random.default_rng(seed)
    sampled = [f for f in fits if f.sampled]
    weight = np.exp([f.log_evidence + 100.0 for f in sampled])
    kernels = []
    for fit, count in zip(sampled, rng.multinomial(n, weight / weight.sum()), strict=True):
        flat = fit.posterior.draws
        kernels += [fit.model.kernel(theta, SPACE) for theta in flat[rng.integers(len(flat), size=count)]]
    return kernels


def _rates(kernels, separation):
    ends = np.stack([separation, RHO * separation], axis=1)
    rates = [[np.log(RHO) / k.exit_times(pair)[0] for pair in ends] for k in kernels]
    return np.percentile(rates, QUANTILES, axis=0)


def _bands(inference):
    named, free = (_kernels(fits, 120, 7) for fits in (inference.named, inference.free))
    separation = np.geomspace(SPACE.lowest, SPACE.highest / RHO, 40)
    return Bands(separation, _rates(named, separation), _rates(free, separation))


def _since_passage(tracks, pairs, separation):
    """The pairs from the step at which each first reaches `separation`."""
    kept, begin, start = [], [], []
    for i in range(pairs.first.size):
        one, two = (tracks.position[tracks.offset[m] : tracks.offset[m + 1]] for m in (pairs.first[i], pairs.second[i]))
        r = np.linalg.norm(one - two, axis=1)
        reached = np.flatnonzero(r >= separation)
        if reached.size and reached[0] < r.size - 2:
            kept.append(i)
            begin.append(reached[0])
            start.append(r[reached[0]])
    kept, begin = np.array(kept), np.array(begin)
    length = pairs.length[kept] - begin
    return Pairs(
        pairs.first[kept],
        pairs.second[kept],
        begin,
        length,
        pairs.kind[kept],
        np.array(start),
        pairs.cluster,
        pairs.n_cluster,
    )


def _interval(draws):
    low95, low68, median, high68, high95 = np.percentile(draws, QUANTILES)
    return vr.Interval(median, low68, high68, low95, high95)


def _by_separation(inference, edges):
    middle = np.sqrt(edges[1:] * edges[:-1])
    slopes = mixed_slopes([f.posterior for f in inference.free if f.sampled], middle, 800, np.random.default_rng(3))
    shown = np.where(np.isnan(slopes), -1.0, np.clip(slopes, 1.0, 3.0))
    alpha = np.percentile(shown, (50, 2.5, 97.5), axis=0, method="nearest")
    exponent = np.percentile(local_exponents(slopes), (50, 2.5, 97.5), axis=0)
    return vr.BySeparation(edges, middle, inference.regime_probability(middle), *alpha, *exponent), slopes


def _slopes(inference, by, slopes):
    def over(low, high):
        inside = (by.separation >= low) & (by.separation < high)
        return _interval(range_slopes(slopes[:, inside]))

    nothing = vr.Interval(*[np.nan] * 5)
    steep = "a nonlocal range: every slope of 3 or steeper gives the same exponents"
    return (
        vr.Slope(SPACE.lowest, 7 * KM, inference.curve, over(SPACE.lowest, 7 * KM), "lower_bound", steep),
        vr.Slope(11 * KM, 60 * KM, inference.curve, over(11 * KM, 60 * KM), "estimate", ""),
        vr.Slope(95 * KM, SPACE.highest, inference.curve, nothing, "none", "the range is diffusive"),
    )


def _verdict(fits):
    first = fits["exit_rate"]
    edges = np.geomspace(SPACE.lowest, SPACE.highest, 29)
    by, draws = _by_separation(first, edges)
    second, second_draws = _by_separation(fits["separation"], edges)
    found = stretches(called(by.probability, by.exponent_lo95, by.exponent_hi95), by.edges)
    order = np.argsort(-first.sequence_probability())
    return vr.Verdict(
        decision="supported",
        reasons=("The rule for supported is met from 1.2 to 5.7 km, a factor of 4.7.",),
        sentence="Of the four regimes, only exponential is consistent with the data from 1.2 to 5.7 km; slopes of "
        "2.4 and steeper are possible there.",
        methods="Exit rates of 60 pairs in 60 clusters between 1.2 and 150 km were compared with sequences of "
        "power-law separation kernels. Errors treat clusters, not pairs, as independent.",
        supported=tuple(vr.Supported(s.regime, s.low, s.high) for s in found),
        sequences=tuple(
            vr.Sequence(first.named[i].model.pieces, float(first.sequence_probability()[i])) for i in order
        ),
        by_separation=by,
        log_bayes_factor=first.challenge,
        challenger_preferred=False,
        transitions=tuple(
            vr.TransitionScale(t.lower, t.upper, _interval(t.draws), t.probability) for t in first.transitions()
        ),
        slopes=_slopes(first, by, draws) + _slopes(fits["separation"], second, second_draws),
        resolved=(SPACE.lowest, SPACE.highest),
        limited_by=("position error", "pairs left"),
        fit_p_value=0.41,
        healthy=True,
        health_reason="",
        rhat_max=1.004,
        ess_min=1300.0,
        cautions=(
            vr.Caution(
                "infinite-range",
                "The kernel pieces assume ranges without ends; slopes near a transition are blurred.",
            ),
        ),
    )


@cache
def demo_analysis(n_pair: int = 60) -> Analysis:
    """An analysis of `n_pair` invented pairs, exponential to 8 km, Richardson to 80 km, diffusive beyond."""
    tracks, pairs = kernel_pairs(TRUTH, n_pair, 600.0, 7200.0, 1200, seed=11)
    stats = exit_statistics(tracks, pairs, 0.6 * KM * RHO ** np.arange(18))
    fits = {
        name: _inference(name, shift) for name, shift in (("exit_rate", 1.0), ("separation", 1.12), ("joint", 1.06))
    }
    passed = _since_passage(tracks, pairs, SPACE.lowest)
    times = default_times(passed, tracks.step, 30)
    provenance = Provenance(
        case="invented bank", seed=20, versions={"regimes": "0.1.0", "python": "3.11.2", "numpy": "2.4.0"},
        source="fixes.csv", sha256="0" * 60 + "beef", n_fixes=144000, n_particles=2 * n_pair, n_pairs=n_pair,
        n_clusters=n_pair, kind="launched", step=7200.0, longest_gap=21600.0, position_error=10.0,
        max_separation=2000.0, median_start=600.0, start_p90=600.0, median_duration=100 * DAY,
        cleaning=(
            ("speed above 3 m/s", 12, "from the previous and to the next fix"), ("same time twice", 0, "")
        ),
    )  # fmt: skip
    return Analysis(
        provenance=provenance,
        rates=_rate_table(stats),
        exponent=stats.curve(),
        dispersion=dispersion_statistics(tracks, pairs, default_times(pairs, tracks.step)),
        passage_dispersion=dispersion_statistics(tracks, passed, times),
        passage_separation=SPACE.lowest,
        fits=fits,
        bands=_bands(fits["exit_rate"]),
        verdict=_verdict(fits),
        single=_single(),
        single_missing="",
        ratios=_RATIOS,
        others=demo_others(tracks, pairs, passed),
        audit=demo_audit(),
    )


def demo_audit() -> tuple[Finding, ...]:
    """One finding for each threat; two of them flagged, one of which changes the verdict."""
    shown = {"oscillation": (True, 3.1, False), "range": (True, 0.6, True), "pairs": (False, np.nan, False)}
    found = []
    for threat in THREATS:
        flag, size, changes = shown.get(threat, (False, 0.2, False))
        where = (2 * KM, 9 * KM) if flag else None
        text = f"What {threat} does here is said in one or two sentences. The verdict is looked at again."
        found.append(Finding(threat, flag, size, "size in some unit", where, changes, text))
    return tuple(found)


def _single() -> SingleParticle:
    """Invented particles of known memory, in releases of three as in a real survey."""
    motion = Motion(0.04, 1.0 / (2.0 * DAY), shared=0.5)
    return single_particle(drifting_particles(motion, (12, 3), 21600.0, 241, 4)[0])


def singles_only(single: bool = True) -> SinglesOnly:
    """What a survey without a pair gives, with and without enough velocities."""
    nothing = float("nan")
    why = "no launched pair among 36 particles: the smallest start separation within 6 h is 250 km; must be at most 1"
    missing = "typical tracks have 4 velocities in a row; at least 15 are needed"
    return SinglesOnly(
        provenance=replace(
            demo_analysis().provenance, n_particles=36, n_pairs=0, n_clusters=0, kind="none", median_start=nothing,
            start_p90=nothing, median_duration=nothing,
        ),
        single=_single() if single else None,
        single_missing="" if single else missing,
        ratios=_RATIOS[1:2] if single else (),
        sentence=f"Undecided: no pair statistics exist, for want of a pair to compare. {why.capitalize()}.",
        reasons=(why,) if single else (why, missing),
    )  # fmt: skip


@cache
def _drawings() -> dict[str, str]:
    return {name: svg(draw(name, demo_analysis()), name) for name in FIGURES}


def use_drawings_made_before(monkeypatch) -> None:
    """Make reports quick where it is the folder or the command line that is tested."""
    monkeypatch.setattr(files, "draw", lambda name, analysis: name)
    monkeypatch.setattr(files, "svg", lambda figure, name: _drawings()[name])
    monkeypatch.setattr(files, "pdf", lambda figure, name: b"%PDF")


def with_verdict(analysis: Analysis, **changes) -> Analysis:
    """The same analysis with other words or numbers in its verdict."""
    return replace(analysis, verdict=replace(analysis.verdict, **changes))
