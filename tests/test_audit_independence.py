"""Independence of clusters: laws of influences and of the test for a shared flow, and what the finding says."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

from regimes.audit.improbable import improbable_pairs
from regimes.audit.independence import independence
from regimes.audit.influence import Influence, by_block, influence
from regimes.audit.shared_flow import SharedFlow, shared_flow
from regimes.audit.subject import Subject, subject_of
from regimes.curves import exit_statistics
from regimes.curves.credit import credited_exits
from regimes.fitting import Options
from regimes.fitting.rates import exit_rates
from regimes.units import DAY
from tests.audit_triplets import ODD, odd, survey


@pytest.fixture(scope="module")
def subject() -> Subject:
    return subject_of(*survey(1, spread_km=300.0), Options())


@pytest.fixture(scope="module")
def finding(subject):
    return independence(subject)


def copied(subject: Subject, copies: int) -> Subject:
    """Every release told as so many, at the same place and time, 100 m of noise apart."""
    tracks, pairs, rng = subject.tracks, subject.pairs, np.random.default_rng(1)
    n, rows = tracks.n_track, len(tracks.position)
    noise = np.zeros((copies * rows, 3))
    noise[:, :2] = 20.0 * rng.standard_normal((copies * rows, 2))
    again = replace(
        tracks,
        position=np.tile(tracks.position, (copies, 1)) + noise,
        offset=np.concatenate([tracks.offset[:-1] + k * rows for k in range(copies)] + [[copies * rows]]),
        start_step=np.tile(tracks.start_step, copies),
        labels=tuple(f"{label}/{k}" for k in range(copies) for label in tracks.labels),
        release=np.concatenate([tracks.release + k * (tracks.release.max() + 1) for k in range(copies)]),
    )
    more = replace(
        pairs,
        **{m: np.concatenate([getattr(pairs, m) + k * n for k in range(copies)]) for m in ("first", "second")},
        **{m: np.tile(getattr(pairs, m), copies) for m in ("begin", "length", "kind", "start_separation")},
        cluster=np.concatenate([pairs.cluster + k * pairs.n_cluster for k in range(copies)]),
        n_cluster=copies * pairs.n_cluster,
    )
    return subject_of(again, more, Options())


@pytest.fixture(scope="module")
def thrice(subject) -> Subject:
    return copied(subject, 3)


def test_influence_is_what_leaving_a_cluster_out_does(subject):
    own = influence(subject)
    everything, cut = subject.fit.rates.everything, subject.fit.rates.resolved.intervals
    exits, risk = subject.fit.rates.credited[:, cut], everything.time_at_risk[:, cut]
    whole = np.mean(np.log(exits.sum(axis=0) / risk.sum(axis=0)))
    level = own.sums(own.level, subject.pairs.cluster)
    for c in range(3):
        weight = np.ones((len(exits), 1))
        weight[c] = 1.0 - 1e-4
        less = np.mean(np.log((weight * exits).sum(axis=0) / (weight * risk).sum(axis=0)))
        # a ten-thousandth of the cluster: what is left out is of second order, a share of a cluster times 1e-4
        assert (whole - less) / 1e-4 == pytest.approx(level[c], rel=1e-3, abs=1e-4)


def test_influences_add_up_to_nothing(subject):
    own = influence(subject)
    assert own.level.sum() == pytest.approx(0.0, abs=1e-10)  # round-off
    assert own.slope.sum() == pytest.approx(0.0, abs=1e-10)


def test_errors_by_hand():
    """Two clusters of two particles and one couple between them."""
    own = Influence(
        first=np.array([0, 2, 1]),
        second=np.array([1, 3, 2]),
        level=np.array([3.0, -5.0, 2.0]),
        slope=np.zeros(3),
        exits=np.array([4.0, 4.0, 0.0]),
    )
    unit = np.array([0, 0, 1, 1])
    assert own.sums(own.level, unit) == pytest.approx([5.0, -3.0])
    # squares of the units less that of their couple, and two over one for two units
    assert own.errors(unit)[0] == pytest.approx(np.sqrt((25.0 + 9.0 - 4.0) * 2.0))
    assert own.pair_errors()[0] == pytest.approx(np.sqrt(38.0))
    assert own.effective(unit) == pytest.approx(2.0)
    assert own.shares(unit) == pytest.approx(np.array([25.0, 9.0]) / 34.0)


def test_units_and_their_couples_are_the_rows_of_the_curves(subject):
    """The same error from the rows in which the curves are summed, particles as units."""
    n = subject.tracks.n_track
    alone = replace(subject.pairs, cluster=np.arange(n), n_cluster=n)
    everything, cut = subject.fit.rates.everything, subject.fit.rates.resolved.intervals
    statistics = exit_statistics(subject.tracks, alone, everything.thresholds)
    exits, risk = credited_exits(statistics)[:, cut], statistics.time_at_risk[:, cut]
    psi = exits / (statistics.weight @ exits) - risk / (statistics.weight @ risk)
    square = statistics.weight @ psi.mean(axis=1) ** 2
    found = influence(subject).errors(np.arange(n))[0]
    assert found == pytest.approx(np.sqrt(square * n / (n - 1)), rel=1e-9)  # round-off


def test_blocks_at_one_place_are_neighbours_in_time():
    tracks, pairs = survey(2)
    block = by_block(tracks, pairs)
    assert block.n_cluster == -(-pairs.n_cluster // 3)
    when = [tracks.start_step[block.cluster == b] for b in range(block.n_cluster)]
    order = sorted(range(block.n_cluster), key=lambda b: when[b].min())
    assert all(when[a].max() < when[b].min() for a, b in pairwise(order))


def test_correlated_clusters_count_for_fewer():
    n, exits = 6, np.full(6, 5.0)
    near = np.triu(np.ones((n, n)), 1)
    assert SharedFlow(0.0, 0.0, 15, near).effective(exits) == pytest.approx(6.0)
    assert SharedFlow(9.0, 1.0, 15, near).effective(exits) == pytest.approx(1.0)
    assert SharedFlow(9.0, 0.5, 15, near).effective(exits) == pytest.approx(
        6.0 / (1.0 + 5 * 0.5)
    )  # Kish's design effect
    assert SharedFlow(9.0, 0.5, 0, 0.0 * near).effective(exits) == pytest.approx(6.0)


def test_independent_clusters_have_a_score_of_unit_spread():
    z = np.array([shared_flow(*survey(seed), 0.5 * DAY, 3e4).z for seed in range(24)])
    z = z[np.isfinite(z)]
    assert z.size > 12
    # four standard errors; the few couples that are near make it narrower than 1, never wider
    assert abs(z.mean()) < 4.0 / np.sqrt(z.size)
    assert z.std() < 1.0 + 4.0 / np.sqrt(2.0 * z.size)


def test_copies_share_a_flow(thrice):
    interval, near = 0.5 * DAY, 1e4
    found = shared_flow(thrice.tracks, thrice.pairs, interval, near)
    assert found.z > 5.0
    assert 0.3 < found.correlation <= 1.05
    assert found.effective(np.ones(thrice.pairs.n_cluster)) < 0.9 * thrice.pairs.n_cluster


def test_metres_and_names_do_not_matter_to_the_shared_flow(thrice):
    tracks, pairs = thrice.tracks, thrice.pairs
    one = shared_flow(tracks, pairs, 0.5 * DAY, 1e4)
    longer = shared_flow(replace(tracks, position=tracks.position * 8.0), pairs, 0.5 * DAY, 8e4)
    assert longer.z == pytest.approx(one.z, rel=1e-9)  # round-off
    names = np.random.default_rng(2).permutation(pairs.n_cluster)
    other = shared_flow(tracks, replace(pairs, cluster=names[pairs.cluster]), 0.5 * DAY, 1e4)
    assert other.z == pytest.approx(one.z, rel=1e-9)  # round-off


def test_copies_are_flagged_and_count_for_fewer(thrice):
    found = independence(thrice)
    assert found.flag
    assert found.size < 0.9 * thrice.pairs.n_cluster
    assert "they share a flow" in found.text
    assert "With blocks of neighbouring clusters" in found.text


def test_independent_clusters_are_not_flagged(finding):
    assert not finding.flag
    assert not np.isnan(finding.size)
    for unit in ("by pairs", "by clusters", "by particles", "by blocks"):
        assert unit in finding.text
    assert "has most influence" in finding.text


@pytest.mark.parametrize("name", list(ODD))
def test_odd_surveys_give_a_finding(name):
    found = independence(odd(name))
    assert found.threat == "independence"
    assert found.text.endswith(".")
    assert "nan" not in found.text
    if name == "few":
        assert found.flag
        assert found.size < 6.0
        assert "Few clusters carry the result" in found.text


def test_a_pair_that_jumps_is_named(subject):
    tracks, pairs = subject.tracks, subject.pairs
    position = np.array(tracks.position)
    p = int(np.argmax(pairs.length))
    a, b = (slice(tracks.offset[m], tracks.offset[m + 1]) for m in (pairs.first[p], pairs.second[p]))
    count = min(a.stop - a.start, b.stop - b.start)
    offset = np.where(np.arange(count) < 5, 500.0, 3e5)  # within one step from below the lowest threshold to 300 km
    position[b][:count] = position[a][:count] + np.outer(offset, [1.0, 0.0, 0.0])
    found = improbable_pairs(replace(subject, tracks=replace(tracks, position=position)))
    assert (tracks.labels[pairs.first[p]], tracks.labels[pairs.second[p]]) in found.pairs


def test_pairs_of_the_kernel_itself_are_seldom_named(subject):
    assert len(improbable_pairs(subject).pairs) <= 1  # 5 % for one, and under 0.2 % for two


def test_chance_pairs_give_a_finding(subject):
    apart = replace(subject.pairs, cluster=np.arange(subject.tracks.n_track), n_cluster=subject.tracks.n_track)
    rates = exit_rates(subject.tracks, apart, Options())
    found = independence(replace(subject, pairs=apart, fit=replace(subject.fit, rates=rates)))
    assert "no two are within" in found.text
