"""Pairs that are not what they should be: each fault is found, nothing else is, and the finding says which."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.audit import subject_of
from regimes.audit.pairs import pairs
from regimes.audit.suspects import suspects, without
from regimes.audit.vectors import separation_vectors
from regimes.fitting import Options
from regimes.pairs import find_pairs
from regimes.synthetic import recipe_from, simulate
from regimes.tracks import make_tracks
from regimes.units import DAY, HOUR
from tests.audit_small import clean, odd, on_plane, small
from tests.audit_worlds import audited

RATE = 0.4 / DAY


def survey(**faults):
    tracks = make_tracks(simulate(recipe_from(on_plane(small(5, faults=faults)))), HOUR, 3 * HOUR)
    return tracks, find_pairs(tracks, "launched", 1000.0, 6 * HOUR)


def look(tracks, found):
    return suspects(tracks, found, separation_vectors(tracks, found), RATE)


def test_nothing_is_suspected_without_a_fault():
    tracks, found = survey()
    seen = look(tracks, found)
    assert seen.number == 0
    assert np.array_equal(seen.ends, tracks.n_step)
    assert np.array_equal(without(found, tracks, seen).length, found.length)


def test_lashed_particles_are_tied():
    tracks, found = survey(lashed=3)
    seen = look(tracks, found)
    assert seen.tied.size == 3
    assert not seen.aground.size
    assert not seen.aboard.size
    r = separation_vectors(tracks, found)
    lengths = [np.hypot(*r.place[r.offset[p] : r.offset[p + 1]].T) for p in seen.tied]
    assert all(np.nanmax(np.abs(one - np.nanmedian(one))) < 100.0 for one in lengths)
    left = without(found, tracks, seen)
    assert left.n_pair == found.n_pair - 6  # the pair itself, and that of its second member with the third


def test_grounded_particles_are_found_and_their_pairs_cut():
    tracks, found = survey(grounded=4)
    seen = look(tracks, found)
    assert 1 <= seen.aground.size <= 4  # those that drift until the last day are not
    assert not seen.aboard.size
    assert not seen.tied.size
    for i in seen.aground:
        rest = tracks.position[tracks.offset[i] + seen.ends[i] : tracks.offset[i + 1]]
        assert np.nanmax(np.linalg.norm(rest - np.nanmedian(rest, axis=0), axis=1)) < 1000.0
    left = without(found, tracks, seen)
    last = tracks.start_step + seen.ends
    assert np.all(left.begin + left.length <= np.minimum(last[left.first], last[left.second]))


def test_particles_on_board_are_found_where_the_boat_came():
    tracks, found = survey(picked_up=4)
    seen = look(tracks, found)
    assert seen.aboard.size == 4
    assert not seen.aground.size
    assert not seen.tied.size
    assert np.all(np.abs(tracks.n_step[seen.aboard] - 1 - 6 - seen.ends[seen.aboard]) <= 1)


def test_metres_and_the_order_of_pairs_do_not_matter():
    tracks, found = survey(lashed=2, grounded=3, picked_up=3)
    one = look(tracks, found)
    longer = replace(tracks, position=5.0 * tracks.position, position_error=5.0 * tracks.position_error)
    order = np.random.default_rng(1).permutation(found.n_pair)
    mixed = found.select(order)
    two = look(longer, replace(mixed, start_separation=5.0 * mixed.start_separation))
    assert np.array_equal(one.ends, two.ends)
    assert np.array_equal(np.sort(order[two.tied]), one.tied)


def test_a_clean_survey_is_not_flagged():
    found = pairs(clean())
    assert not found.flag
    assert found.size == 0
    assert "None of 30 particles" in found.text


def test_suspects_are_named_and_the_verdict_is_tried_without_them():
    found = pairs(audited(small(5, faults={"lashed": 2, "picked_up": 2})))
    assert found.flag
    assert found.size == 4
    assert "keep their separation as if tied" in found.text
    assert "leave fast and straight" in found.text
    assert "Without what does not drift" in found.text


def test_a_velocity_at_the_start_is_seen():
    subject = clean()
    tracks, own = subject.tracks, subject.pairs
    # every second member drifts away from the first at 0.3 m/s along their first separation
    position = np.array(tracks.position)
    for first, second in zip(own.first, own.second, strict=True):
        a, b = (position[tracks.offset[i]] for i in (first, second))
        rows = slice(tracks.offset[second], tracks.offset[second + 1])
        way = 0.1 * HOUR * (b - a) / np.linalg.norm(b - a)
        position[rows] += np.arange(rows.stop - rows.start)[:, None] * way
    found = pairs(subject_of(replace(tracks, position=position), own, Options(seed=5)))
    assert found.flag
    assert "start moving apart" in found.text


@pytest.fixture(scope="module")
def both_kinds():
    """Half of the launched pairs declared chance pairs: the same population under two names."""
    subject = audited(small(5, releases={"number": 16}))
    kind = (np.asarray(subject.pairs.cluster[subject.pairs.first]) % 2).astype(np.int8)
    return subject_of(subject.tracks, replace(subject.pairs, kind=kind), subject.options)


def test_kinds_of_one_population_do_not_differ(both_kinds):
    found = pairs(both_kinds)
    assert "chance pairs do not differ" in found.text
    assert not found.flag


def test_kinds_of_two_populations_differ(both_kinds):
    tracks, own = both_kinds.tracks, both_kinds.pairs
    # half of the clusters move at an eighth of their speed
    position = np.array(tracks.position)
    for i in np.union1d(own.first[own.kind == 1], own.second[own.kind == 1]):
        rows = slice(tracks.offset[i], tracks.offset[i + 1])
        index = np.arange(rows.stop - rows.start)
        seen = np.isfinite(position[rows, 0])
        slow = np.stack([np.interp(index / 8.0, index[seen], part[seen]) for part in position[rows].T], axis=1)
        position[rows] = np.where(seen[:, None], slow, np.nan)
    subject = subject_of(replace(tracks, position=position), own, both_kinds.options)
    found = pairs(subject)
    assert "chance pairs differ" in found.text
    assert found.flag


@pytest.mark.parametrize("kind", ["few pairs", "planar", "gaps", "short"])
def test_odd_surveys_get_a_finding(kind):
    found = pairs(odd()[kind])
    assert found.threat == "pairs"
    assert found.text.endswith(".")
    assert "nan" not in found.text
