"""Virtual deployments: they copy the design of the smaller set, and nothing of the larger one twice."""

from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest

from regimes.compare import Near, Side, side_of
from regimes.compare.common import coarsened, common_step, with_error
from regimes.compare.deployments import plan_of
from regimes.compare.drawing import Pools
from regimes.compare.launches import launches_of
from regimes.compare.taking import some_gaps
from regimes.errors import DataError
from regimes.geodesy import to_cartesian, to_geographic
from regimes.pairs import find_pairs
from regimes.units import DAY, HOUR, KM
from tests.compare_worlds import kernel_side, some


@pytest.fixture(scope="module")
def large() -> Side:
    return kernel_side(60, 1, duration_d=20.0, position_error_m=4.0)


@pytest.fixture(scope="module")
def small() -> Side:
    return kernel_side(9, 2, name="the observed case", loss_per_d=0.05, gap_probability=0.01, gap_h=24.0)


@pytest.fixture(scope="module")
def plan(small, large):
    return plan_of(small, large, Near(), 1)


def test_what_stands_for_a_launch_has_its_design(plan):
    own, own_pairs = plan.observed(np.random.default_rng(1))
    assert np.any(np.isnan(own.position))
    for unit, choices in enumerate(plan.choices):
        tracks, pairs = plan.stand_ins(unit, np.random.default_rng(2))
        mine = own_pairs.cluster[own_pairs.first] == unit
        rows = own.release == unit
        assert pairs.n_cluster == choices.launch.size
        for k in (0, pairs.n_cluster - 1):
            theirs = pairs.cluster[pairs.first] == k
            # the larger set lasts 20 days without a loss, and so do both
            assert np.array_equal(pairs.length[theirs], own_pairs.length[mine])
            ratio = np.log(pairs.start_separation[theirs] / own_pairs.start_separation[mine])
            assert np.max(np.abs(ratio)) < np.log(1.25) + 0.2  # errors of 10 m at 400 m, four standard deviations
            assert np.array_equal(blank(tracks, tracks.release == k), blank(own, rows))
    assert tracks.position_error == own.position_error == 10.0


def blank(tracks, chosen):
    """Missing steps of some tracks, one after the other."""
    number = np.repeat(np.arange(tracks.n_track), tracks.n_step)
    return np.isnan(tracks.position[chosen[number], 0])


def test_no_launch_stands_twice_in_a_deployment(plan):
    rows, launches = plan.pools.draw(200, np.random.default_rng(1))
    assert all(len(set(drawn)) == len(plan.launches) for drawn in launches)
    start = len(plan.launches) + np.cumsum([0, *(c.launch.size for c in plan.choices)])
    for unit, choices in enumerate(plan.choices):
        assert np.array_equal(choices.launch[rows[:, unit] - start[unit]], launches[:, unit])


def test_what_is_banned_is_not_drawn(plan):
    _, launches = plan.pools.draw(50, np.random.default_rng(1), banned=np.arange(30))
    assert launches.min() == 30


def test_every_launch_is_drawn_as_often_where_all_are_alike(plan):
    """9 x 200 draws of 60 launches: within 5 standard errors of 30 each, at most."""
    _, launches = plan.pools.draw(200, np.random.default_rng(3))
    used = np.bincount(launches.ravel(), minlength=60)
    assert np.max(np.abs(used - 30.0)) < 5 * np.sqrt(30.0)
    assert plan.pools.effective == pytest.approx(60, rel=0.15)


def test_choices_that_do_not_suffice():
    pools = Pools((np.array([4]), np.array([4])), (np.array([2]), np.array([3])), 5)
    with pytest.raises(DataError, match="2 groups that cannot all be given a group of their own of the larger case"):
        pools.draw(3, np.random.default_rng(1))


def test_records_are_cut_where_half_of_the_larger_set_ends(plan, small):
    own, _ = plan.observed(np.random.default_rng(1))
    assert plan.horizon == 20 * 8 + 1
    assert own.n_step.max() == plan.horizon < small.tracks.n_step.max()


def test_losses_and_gaps_of_the_larger_set_do_not_come_on_top(small):
    """A deployment keeps the pair days of the smaller set, and its share of missing steps."""
    lossy = kernel_side(150, 6, duration_d=30.0, loss_per_d=0.02, gap_probability=0.004, gap_h=24.0)
    plan = plan_of(small, lossy, Near(), 1)
    own, own_pairs = plan.observed(np.random.default_rng(1))
    length, missing, steps = 0.0, 0, 0
    for unit in range(len(plan.launches)):
        tracks, pairs = plan.stand_ins(unit, np.random.default_rng(unit))
        length += pairs.length.sum() / pairs.n_cluster
        missing += np.isnan(tracks.position[:, 0]).sum()
        steps += len(tracks.position)
    assert length == pytest.approx(own_pairs.length.sum(), rel=0.03)  # 2 % of each record may be missing
    assert 0.0 < plan.copied < 1.0
    assert missing / steps == pytest.approx(np.isnan(own.position[:, 0]).mean(), rel=0.15)


def test_gaps_are_kept_or_filled_whole():
    missing = np.array([3, 4, 5, 9, 20, 21])
    rng = np.random.default_rng(1)
    assert np.array_equal(some_gaps(missing, 1.0, rng), missing)
    assert some_gaps(missing, 0.0, rng).size == 0
    seen = {tuple(some_gaps(missing, 0.5, rng)) for _ in range(200)}
    gaps = ((3, 4, 5), (9,), (20, 21))
    assert seen == {sum(chosen, ()) for n in range(4) for chosen in combinations(gaps, n)}


def test_matching_by_start_separation(large):
    """Of releases that start 0.4 and 1.6 km apart only those as far apart are drawn."""
    wide = kernel_side(60, 5, duration_d=20.0)
    far = replace(wide.tracks, position=4.0 * wide.tracks.position)
    wide = side_of("wide", far, find_pairs(far, max_separation=4 * KM))[0]
    tracks = replace(
        large.tracks,
        position=np.concatenate([large.tracks.position, wide.tracks.position + 1e6]),
        offset=np.concatenate([large.tracks.offset, large.tracks.offset[-1] + wide.tracks.offset[1:]]),
        start_step=np.concatenate([large.tracks.start_step, wide.tracks.start_step]),
        labels=tuple(str(i) for i in range(360)),
        release=np.concatenate([large.tracks.release, 60 + wide.tracks.release]),
    )
    both = side_of("both", tracks, find_pairs(tracks, max_separation=4 * KM))[0]
    observed = some(wide, np.arange(8))
    plan = plan_of(observed, both, Near(), 1)
    assert {c.launch.size for c in plan.choices} == {60}
    assert plan.pools.effective == pytest.approx(60, rel=0.15)  # Monte Carlo of 1600 draws
    assert plan.cautions == ()
    assert plan.stand_ins(0, np.random.default_rng(1))[1].start_separation.min() > 1300.0


def test_starts_that_nothing_matches_are_said(small, large):
    far = replace(small.tracks, position=2.0 * small.tracks.position)
    observed = side_of("the observed case", far, find_pairs(far, max_separation=2 * KM))[0]
    plan = plan_of(some(observed, np.arange(4)), large, Near(), 1)
    assert any("fewer than 10 groups of the model start with pairs as far apart" in text for text in plan.cautions)


def test_groups_larger_than_any_of_the_other_set_lose_members_and_it_is_said(small, large):
    pairs = large.pairs
    twos = Side("the model", large.tracks, pairs.select((pairs.first % 3 != 2) & (pairs.second % 3 != 2)))
    plan = plan_of(small, twos, Near(), 1)
    assert plan.observed(np.random.default_rng(1))[1].n_pair <= len(plan.launches)
    assert any("without some of their members" in text for text in plan.cautions)


def test_a_caution_of_nothing_where_all_is_matched(plan):
    assert plan.cautions == ()


def test_too_few_groups(small):
    with pytest.raises(DataError, match=r"got 9 groups .* must have 3 times as many as the other"):
        plan_of(small, small, Near(), 1)


def test_season_chooses_among_launches(large):
    """Launches 12 h apart for 30 days: within 2 days of the year no other can be drawn."""
    observed = some(large, [10, 20, 30, 40, 50])
    plan = plan_of(observed, large, Near(season=2 * DAY), 1)
    begin = np.array([u.begin for u in plan.reservoir]) * large.tracks.step
    for launch, choices in zip(plan.launches, plan.choices, strict=True):
        apart = np.abs(begin[choices.launch] - launch.begin * large.tracks.step)
        assert apart.max() <= 2 * DAY
    assert 40 < plan.pools.effective < 60


def test_place_needs_the_same_kind_of_positions(small, large):
    globe = replace(large.tracks, planar=False)
    with pytest.raises(DataError, match="--same-place with positions on a plane in one case"):
        plan_of(small, replace(large, tracks=globe), Near(place=KM), 1)


def test_place_that_nothing_shares(small, large):
    away = replace(large.tracks, position=large.tracks.position + 1e6)
    with pytest.raises(DataError, match=r"got 9 of 9 groups with no group of the other case within 5 km; .* widen"):
        plan_of(small, replace(large, tracks=away), Near(place=5 * KM), 1)


def test_coarser_steps_keep_every_so_many_th_fix(small):
    tracks, pairs = coarsened(small.tracks, small.pairs, 4)
    assert tracks.step == 4 * small.tracks.step
    assert tracks.first_time % tracks.step == 0.0
    for number in range(0, tracks.n_track, 5):
        old = small.tracks.labels.index(tracks.labels[number])
        at = tracks.first_time + tracks.step * (tracks.start_step[number] + np.arange(tracks.n_step[number]))
        row = np.rint((at - small.tracks.first_time) / small.tracks.step).astype(int) - small.tracks.start_step[old]
        kept = tracks.position[tracks.offset[number] : tracks.offset[number + 1]]
        assert np.array_equal(kept, small.tracks.position[small.tracks.offset[old] + row], equal_nan=True)
    rows = [tracks.offset[m] + pairs.begin - tracks.start_step[m] for m in (pairs.first, pairs.second)]
    apart = np.linalg.norm(tracks.position[rows[0]] - tracks.position[rows[1]], axis=1)
    assert apart == pytest.approx(pairs.start_separation, rel=1e-12)  # round-off


def test_both_get_the_coarser_step(small, large):
    fine = replace(large, tracks=replace(large.tracks, step=1.5 * HOUR))
    one, two = common_step(small, fine)
    assert one is small
    assert two.tracks.step == small.tracks.step
    odd = replace(large, tracks=replace(large.tracks, step=2.0 * HOUR))
    with pytest.raises(DataError, match=r"got fixes every 2 h \(the model\) and 3 h; the coarser .* whole multiple"):
        common_step(small, odd)


def test_errors_lie_along_the_surface():
    place = np.repeat(to_cartesian([20.0], [60.0]), 4000, axis=0)
    moved = with_error(place, 100.0, False, np.random.default_rng(1))
    longitude, latitude = to_geographic(moved)
    east = np.radians(longitude - 20.0) * 6.378e6 * np.cos(np.radians(60.0))
    north = np.radians(latitude - 60.0) * 6.378e6
    up = np.sum((moved - place) * place, axis=1) / np.linalg.norm(place, axis=1)
    tolerance = 4 / np.sqrt(2 * 4000) + 0.005  # four standard errors, and a sphere for an ellipsoid
    assert east.std() == pytest.approx(100.0, rel=tolerance)
    assert north.std() == pytest.approx(100.0, rel=tolerance)
    assert np.max(np.abs(up)) < 1e-6
    flat = with_error(np.zeros((10, 3)), 5.0, True, np.random.default_rng(1))
    assert np.all(flat[:, 2] == 0.0)
    assert np.all(flat[:, :2] != 0.0)


def test_only_groups_that_start_together(small):
    chance = replace(small.pairs, kind=np.ones(small.pairs.n_pair, np.int8))
    with pytest.raises(DataError, match="none of them launched together; groups that start together are needed"):
        side_of("a model", small.tracks, chance)


def test_a_launch_begins_when_all_members_are_there(small):
    launches, left_out = launches_of(small.tracks, small.pairs)
    assert left_out == 0
    for launch in launches:
        rows = small.tracks.offset[launch.members] + launch.begin - small.tracks.start_step[launch.members]
        spot = small.tracks.position[rows]
        assert np.all(np.isfinite(spot))
        assert launch.apart == pytest.approx(np.linalg.norm(spot[:, None] - spot[None], axis=2))
