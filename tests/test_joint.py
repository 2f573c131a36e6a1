"""Both curves in one likelihood: what it adds up, how it is tempered, and whether its intervals hold."""

from dataclasses import dataclass, replace

import numpy as np
import pytest
from scipy.special import logsumexp

from regimes.curves.groups import make_groups, place_of_rows
from regimes.curves.passage import from_passage
from regimes.errors import FitError
from regimes.fitting.rates import exit_rates
from regimes.inference.fit import Posterior, exit_rate_space
from regimes.inference.importance import climbed
from regimes.inference.models import Model
from regimes.likelihood.joint import JointLikelihood
from regimes.likelihood.sandwich import magnitude
from regimes.pairs import Pairs
from regimes.pipeline import Options, analyse_pairs
from regimes.pipeline.assemble import joint_cautions
from regimes.pipeline.joint import NO_SEPARATION, joint_fit, joint_likelihood
from regimes.pipeline.opinion import separation_likelihood
from tests.slope_candidates import held, held_words
from tests.test_verdict import BAD, inference
from tests.worlds import in_parallel, kernel, lossy_pairs

FREE = Model(("free",))


def likelihoods(exponent, rate, days, n_pair, seed, clusters=None):
    """Joint likelihood of a kernel world, not tempered for what its parts share, and the space of its models."""
    tracks, pairs = lossy_pairs(kernel([exponent], [], rate), n_pair, days, seed)
    if clusters is not None:
        pairs = replace(pairs, cluster=clusters(pairs), n_cluster=int(clusters(pairs).max()) + 1)
    rates = exit_rates(tracks, pairs, Options())
    moved = from_passage(tracks, rates.pairs, rates.resolved.low)
    space = exit_rate_space(rates.likelihood)
    return joint_likelihood(rates, moved, separation_likelihood(tracks, rates, moved)), space


def peak(evaluate, space):
    """Parameters of the maximum of one free power law."""
    rates = np.mean(space.log_rate) + np.arange(-1.0, 1.1, 0.1)
    starts = np.stack([g.ravel() for g in np.meshgrid(rates, np.arange(1.1, 3.0, 0.2))], axis=1)  # beyond 3 all is flat
    return climbed(Posterior(evaluate, FREE, space), starts)[0]


@pytest.fixture(scope="module")
def world():
    joint, space = likelihoods(4 / 3, 1.0, 20, 40, 3)
    return joint, space, peak(joint.evaluator(FREE, space), space)


@pytest.fixture(scope="module")
def dyads():
    """Members of pairs in two of ten clusters, so that couples of clusters carry negative weight."""
    return likelihoods(4 / 3, 1.0, 20, 40, 3, lambda pairs: np.arange(pairs.cluster.size) * 7 % 10)


# what it adds up


@pytest.mark.parametrize("which", ["world", "dyads"])
def test_rows_sum_to_the_two_likelihoods(which, request):
    """Weighted sum over rows: the joint likelihood; exit rates and separations by their own evaluators."""
    joint, space = request.getfixturevalue(which)[:2]
    assert np.any(joint.rows.weight < 0) == (which == "dyads")
    for theta in ([np.mean(space.log_rate), 1.5], [np.mean(space.log_rate) + 0.3, 2.1]):
        parts = joint.exit_rate.batch(FREE, theta, space)[0] + joint.separation.evaluator(FREE, space)(theta)[0]
        assert joint.evaluator(FREE, space)(theta)[0] == pytest.approx(parts, rel=1e-12)  # round-off
        assert joint.rows.weight @ joint.row_values(FREE, theta, space) == pytest.approx(parts, rel=1e-9)


def test_rows_of_some_pairs_among_those_of_all():
    """Against the names of the rows: cluster c, or couple of clusters (c, d)."""
    rng = np.random.default_rng(2)
    ends = np.sort(rng.choice(24, (60, 2)), axis=1)
    ends = ends[ends[:, 0] < ends[:, 1]]
    n = len(ends)
    zero = np.zeros(n, int)
    every = Pairs(ends[:, 0], ends[:, 1], zero, zero + 5, zero, np.ones(n), np.arange(24) % 7, 7)
    some = every.select(rng.permutation(n)[: n // 3])

    def names(pairs):
        found = dict(enumerate(range(7)))
        groups = make_groups(pairs)
        for row, a, b in zip(groups.row_dyad, groups.row_a, groups.row_b, strict=True):
            if row >= 0:
                found[int(row)] = tuple(sorted((int(a), int(b))))
        return [found[i] for i in range(groups.n_row)]

    of_all = names(every)
    assert [of_all[i] for i in place_of_rows(some, every)] == names(some)
    assert len(names(some)) < len(of_all)


# tempering


@dataclass(frozen=True)
class Copy:
    """In place of the separations: the exit rates once more."""

    joint: JointLikelihood
    tempering: float = 1.0

    def row_values(self, model, theta, space):
        rows = self.joint.rows
        times = model.kernel(theta, space).exit_times(self.joint.exit_rate.thresholds)
        return -(rows.exits @ np.log(times) + rows.risk @ (1.0 / times)) / self.joint.exit_rate.dispersion


def test_the_same_twice_counts_once_and_two_worlds_count_twice(world):
    """A copy in the same clusters halves c; a copy in clusters of its own leaves it, but for C / (C - 1)."""
    joint, space, theta = world
    copy, rows = Copy(joint), joint.rows
    alone = magnitude(lambda t: copy.row_values(FREE, t, space), rows.weight, theta, "exits")
    n = rows.weight.size
    twice = replace(joint, separation=copy, place=np.arange(n)).tempered(FREE, theta, space).tempering
    assert twice == pytest.approx(0.5 * alone, rel=1e-9)
    more = replace(
        rows,
        exits=np.pad(rows.exits, ((0, n), (0, 0))),
        risk=np.pad(rows.risk, ((0, n), (0, 0))),
        weight=np.ones(2 * n),
    )
    apart = replace(joint, separation=copy, rows=more, place=n + np.arange(n))
    found = magnitude(lambda t: apart.row_values(FREE, t, space), more.weight, theta, "two worlds")
    assert found == pytest.approx(alone * (n / (n - 1)) / (2 * n / (2 * n - 1)), rel=1e-9)


def test_curves_of_the_same_pairs_share_some_of_what_they_say(world):
    joint, space, theta = world
    separation = joint.separation.tempered(FREE, peak(joint.separation.evaluator(FREE, space), space), space)
    c = replace(joint, separation=separation).tempered(FREE, theta, space).tempering
    assert 0.35 < c < 0.9  # 0.43 to 0.76 in 200 replicates of 30 pairs


def test_magnitude_of_a_mean():
    """Rows -(x - t)^2 / 2: H is the number of rows, J its sample variance times it, so c = 1 / s^2 exactly."""
    x = np.random.default_rng(1).standard_normal(30) * 1.7
    found = magnitude(lambda t: -0.5 * (x - t[0]) ** 2, np.ones(30), [x.mean()], "mean")
    assert found == pytest.approx(1.0 / np.var(x, ddof=1), rel=1e-9)  # differences of a parabola are exact


def test_magnitude_with_couples_of_clusters():
    """J against the plain sum over all pairs of pairs that share a cluster, by loops."""
    rng = np.random.default_rng(4)
    ends = np.array([rng.choice(6, 2, replace=False) for _ in range(40)])
    x = rng.standard_normal(6)[ends].sum(axis=1) + rng.standard_normal(40)
    couples = sorted({tuple(sorted(e)) for e in ends.tolist()})
    member = np.array(
        [[c in e for e in ends] for c in range(6)] + [[tuple(sorted(e)) == d for e in ends.tolist()] for d in couples]
    )
    weight = np.append(np.ones(6), -np.ones(len(couples)))
    score = x - x.mean()
    shared = sum(score[i] * score[j] for i in range(40) for j in range(40) if set(ends[i]) & set(ends[j]))
    found = magnitude(lambda t: member @ (-0.5 * (x - t[0]) ** 2), weight, [x.mean()], "couples")
    assert found == pytest.approx(40.0 / (shared * 6 / 5), rel=1e-8)


def test_no_maximum_no_tempering():
    with pytest.raises(FitError, match=r"flat: F has no definite maximum; cannot be tempered"):
        magnitude(lambda t: np.array([1.0, -1.0]) * t[0], np.ones(2), [0.3], "flat: F")


def test_no_separation_fit_no_joint_fit():
    assert joint_fit(None, None, None, None, ([], []), {}) == (None, NO_SEPARATION)


def test_what_is_said_of_a_joint_fit():
    """Nothing where it is well; a caution, but no other decision, where it is missing or has not converged."""
    assert joint_cautions(inference("joint"), "") == ()
    (missing,) = joint_cautions(None, "no luck")
    assert (missing.code, missing.text) == ("no_joint_fit", "No fit of both curves together: no luck.")
    (sick,) = joint_cautions(inference("joint", health=BAD), "")
    assert sick.code == "joint_not_converged"
    assert "split R-hat 1.200" in sick.text


@pytest.mark.slow
def test_joint_fit_of_a_whole_run():
    """One run: the fit has the models that matter to the exit rates, says what they say, and its slope is quoted."""
    tracks, pairs = lossy_pairs(kernel([2.0, 4 / 3], [8.0], 0.5), 60, 40, 1)
    options = Options(regimes=("exponential", "richardson"), most_transitions=1, slope_range=(1e4, 1e5))
    found = analyse_pairs(tracks, pairs, options)
    joint, alone = found.fits["joint"], found.fits["exit_rate"]
    share = {f.model.pieces: p for f, p in zip(alone.named, alone.sequence_probability(), strict=True)}
    assert {f.model.pieces for f in joint.named} == {pieces for pieces, p in share.items() if p >= 0.01}
    assert 1.0 <= joint.dispersion <= 2.5
    assert joint.health.ok
    ranges = {s.curve: (s.low, s.high) for s in found.verdict.slopes if s.kind != "none"}
    assert ranges["joint"] == ranges["separation"]
    assert not {"no_joint_fit", "joint_not_converged"} & {c.code for c in found.verdict.cautions}


# coverage


def slope_quantiles(evaluate, space) -> np.ndarray:
    """Quantiles of alpha under one free power law: midpoints of alpha, ln rate within 2.2 of the maximum."""
    width = 0.04
    alpha = np.concatenate(([0.5], np.arange(1.0 + width / 2, 3.0, width), [3.5]))  # atoms for the saturated ends
    mass = np.concatenate(([1.0], np.full(alpha.size - 2, width), [1.0]))
    log_rate = peak(evaluate, space)[0] + np.linspace(-2.2, 2.2, 45)
    grid = np.stack([g.ravel() for g in np.meshgrid(log_rate, alpha)], axis=1)
    log_p = logsumexp(evaluate(grid).reshape(alpha.size, -1), axis=1) + np.log(mass)
    upper = np.clip(alpha + np.where((alpha > 1) & (alpha < 3), width / 2, 0.0), 1.0, 3.0)
    share = np.cumsum(np.exp(log_p - logsumexp(log_p)))
    return np.interp((0.025, 0.16, 0.5, 0.84, 0.975), share, upper)


def one(arguments):
    """c, and quantiles of alpha by exit rates, separations and both."""
    joint, space = likelihoods(*arguments)
    separation = joint.separation
    separation = separation.tempered(FREE, peak(separation.evaluator(FREE, space), space), space)
    joint = replace(joint, separation=separation)
    both = joint.tempered(FREE, peak(joint.evaluator(FREE, space), space), space)
    curves = (lambda t: joint.exit_rate.batch(FREE, t, space), separation.evaluator(FREE, space))
    return both.tempering, [slope_quantiles(e, space) for e in (*curves, both.evaluator(FREE, space))]


@pytest.mark.slow
@pytest.mark.parametrize(("exponent", "rate", "days", "truth"), [(4 / 3, 1.0, 30, 5 / 3), (1.8, 0.5, 20, 2.6)])
def test_joint_intervals_hold_the_truth(exponent, rate, days, truth):
    """Bars, 200 replicates of 30 independent pairs: 95 % intervals hold alpha in 91-98 %, 68 % ones in 61-75 %."""
    found = in_parallel(one, [(exponent, rate, days, 30, seed) for seed in range(200)])
    c, quantiles = (np.array(part) for part in zip(*found, strict=True))
    text = f"alpha {truth:.2f}, 30 pairs: c {c.mean():.2f} ({c.min():.2f} to {c.max():.2f})"
    for i, name in enumerate(("exit rates", "separations", "both")):
        text += f"\n  {name}: {held_words(quantiles[:, i], truth)}"
    print(text)
    in68, in95 = held(quantiles[:, 2], truth)
    assert 0.91 <= in95 <= 0.98, text
    assert 0.61 <= in68 <= 0.75, text
