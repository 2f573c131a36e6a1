"""Records that end early: laws of the score test, an independent route, and what the finding says."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from regimes.audit.endings import early_ends, endings
from regimes.audit.record_ends import record_ends
from regimes.audit.subject import subject_of
from regimes.fitting import Options
from tests.audit_triplets import ODD, odd, survey

LOSSES = {"loss_per_d": 0.02, "loss_per_d_apart": 0.6, "apart_km": 3.0}


@pytest.fixture(scope="module")
def lossy():
    return survey(1, **LOSSES)


@pytest.fixture(scope="module")
def finding(lossy):
    return record_ends(subject_of(*lossy, Options()))


def test_losses_of_pairs_apart_are_seen(lossy):
    found = endings(*lossy)
    assert found.z > 2.5
    assert found.growth > 1.2


def test_losses_at_any_separation_have_a_score_of_unit_spread():
    z = np.array([endings(*survey(seed, loss_per_d=0.04)).z for seed in range(40)])
    # four standard errors of the mean and of the standard deviation of 40 values of Student's t, 11 degrees of freedom
    assert abs(z.mean()) < 4 * 1.1 / np.sqrt(40)
    assert abs(z.std() - 1.1) < 4 * 1.1 / np.sqrt(2 * 39)


def test_metres_do_not_matter(lossy):
    tracks, pairs = lossy
    longer = replace(tracks, position=tracks.position * 50.0)
    one, two = endings(tracks, pairs), endings(longer, replace(pairs, start_separation=pairs.start_separation * 50.0))
    assert two.z == pytest.approx(one.z, rel=1e-9)  # round-off
    assert two.exponent == pytest.approx(one.exponent, rel=1e-6)  # where Newton's steps end


def test_the_order_of_pairs_and_the_names_of_clusters_do_not_matter(lossy):
    tracks, pairs = lossy
    rng = np.random.default_rng(3)
    names = rng.permutation(pairs.n_cluster)
    other = replace(pairs.select(rng.permutation(pairs.n_pair)), cluster=names[pairs.cluster])
    assert endings(tracks, other).z == pytest.approx(endings(tracks, pairs).z, rel=1e-9)  # round-off


def test_twins_in_their_own_cluster_change_nothing(lossy):
    tracks, pairs = lossy
    twice = pairs.select(np.repeat(np.arange(pairs.n_pair), 2))
    one, two = endings(tracks, pairs), endings(tracks, twice)
    assert two.z == pytest.approx(one.z, rel=1e-9)  # round-off
    assert two.lost == 2 * one.lost


def test_score_and_exponent_by_brute_force(lossy):
    tracks, pairs = lossy
    lost = early_ends(tracks, pairs)

    def log_r(i, age):
        rows = [tracks.offset[m] + pairs.begin[i] - tracks.start_step[m] for m in (pairs.first[i], pairs.second[i])]
        return np.log(np.hypot(*(tracks.position[rows[1] + age] - tracks.position[rows[0] + age])[:2]))

    sets = []
    for i in np.flatnonzero(lost):
        age = pairs.length[i] - 1
        sets.append((log_r(i, age), np.array([log_r(j, age) for j in np.flatnonzero(pairs.length > age)])))

    def negative(beta):
        return -sum(beta * own - np.log(np.sum(np.exp(beta * others))) for own, others in sets)

    best = minimize_scalar(negative, bounds=(-3, 3), method="bounded", options={"xatol": 1e-8}).x
    assert endings(tracks, pairs).exponent == pytest.approx(best, abs=1e-5)  # where both searches end


def test_ends_with_the_survey_are_planned():
    tracks, pairs = survey(2)
    assert not np.any(early_ends(tracks, pairs))
    found = record_ends(subject_of(tracks, pairs, Options()))
    assert not found.flag
    assert np.isnan(found.size)
    assert "last as long as the survey" in found.text


def test_the_finding_tells_from_where_to_mistrust(finding):
    assert finding.flag
    assert finding.size > 1.2
    assert finding.separations is not None
    assert finding.separations[0] < finding.separations[1]
    assert "sooner where pairs are farther apart" in finding.text
    assert "Find out why contact is lost" in finding.text


def test_losses_at_random_are_not_flagged():
    found = record_ends(subject_of(*survey(4, loss_per_d=0.03), Options()))
    assert not found.flag
    assert not found.verdict_changes
    assert "the verdict stands" in found.text


@pytest.mark.parametrize("name", list(ODD))
def test_odd_surveys_give_a_finding(name):
    found = record_ends(odd(name))
    assert found.threat == "record_ends"
    assert found.text.endswith(".")
    assert "nan" not in found.text


def test_a_single_lost_cluster_says_too_few():
    tracks, pairs = survey(8, number=8)
    short = np.where(pairs.cluster[pairs.first] == 0, 100, pairs.length)
    keep = np.ones(len(tracks.position), bool)
    lost = tracks.release == tracks.release[0]
    for i in np.flatnonzero(lost):
        keep[tracks.offset[i] + 101 : tracks.offset[i + 1]] = False
    count = np.where(lost, 101, tracks.n_step)
    cut = replace(tracks, position=tracks.position[keep], offset=np.concatenate([[0], np.cumsum(count)]))
    found = record_ends(subject_of(cut, replace(pairs, length=np.minimum(pairs.length, short)), Options()))
    assert not found.flag
    assert "Too few clusters" in found.text


def test_chance_pairs_have_rows_of_two_clusters(lossy):
    tracks, pairs = lossy
    apart = replace(pairs, cluster=np.arange(tracks.n_track), n_cluster=tracks.n_track)
    assert np.isfinite(endings(tracks, apart).z)
