"""Predictive checks: the same survey again, what agrees, what dissents."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.checks import Check, predictive_checks, structure_check
from regimes.checks.predictive import grid_for
from regimes.checks.structure import RESOLVED, resolves_velocities
from regimes.curves import dispersion_statistics
from regimes.curves.passage import from_passage
from regimes.curves.structure import separation_bins, structure_statistics
from regimes.errors import DataError
from regimes.inference.fit import exit_rate_space
from regimes.inference.predict import mixed_kernels
from regimes.likelihood.structure import StructureLikelihood, structure_likelihood
from regimes.pairs import CHANCE
from regimes.pipeline import Options, quick_fit
from regimes.pipeline.singles import with_releases
from regimes.synthetic.fourier_flow import fourier_tracks
from regimes.synthetic.kernel_flow import kernel_pairs
from regimes.synthetic.kernel_groups import release_tracks
from regimes.synthetic.likeness import design_of, likeness
from regimes.synthetic.spectrum import Spectrum
from regimes.units import DAY, HOUR
from tests.worlds import kernel

EXPONENTIAL = kernel([2.0], [], 0.15)
RICHARDSON = kernel([4 / 3], [], 1.0)
THRESHOLDS = 1000.0 * 2.0 ** (0.5 * np.arange(16))


def holed(tracks, seed=3):
    """The same tracks with some steps missing."""
    position = np.array(tracks.position)
    position[np.random.default_rng(seed).random(len(position)) < 0.05] = np.nan
    position[tracks.offset[:-1]] = tracks.position[tracks.offset[:-1]]
    return replace(tracks, position=position)


def survey(truth, seed, n=15):
    return release_tracks(truth, (n, 3), 700.0, 3 * HOUR, 240, seed)


def checked(tracks, pairs, kernels, seed=1, jobs=1, shared=1.0):
    moved = from_passage(tracks, pairs, 1000.0)
    grid = grid_for(tracks, moved, 1000.0, 2 * DAY, THRESHOLDS)
    return {c.curve: c for c in predictive_checks(tracks, pairs, kernels, grid, shared, (seed, jobs, None))}


def test_a_design_keeps_starts_lengths_gaps_and_clusters():
    tracks, pairs = survey(EXPONENTIAL, 1)
    tracks = holed(tracks)
    short = replace(pairs, length=np.where(np.arange(pairs.n_pair) % 2, pairs.length, 50))
    again, others = likeness(design_of(tracks, short), EXPONENTIAL, 5)
    assert np.array_equal(others.length, short.length)
    assert np.array_equal(others.cluster, pairs.cluster)
    assert np.allclose(others.start_separation, pairs.start_separation, rtol=1e-12)
    assert np.array_equal(np.isnan(again.position[:, 0]), np.isnan(tracks.position[:, 0]))
    first = again.position[again.offset[others.second]] - again.position[again.offset[others.first]]
    assert np.allclose(np.hypot(first[:, 0], first[:, 1]), pairs.start_separation, rtol=1e-9)


def test_the_same_seed_gives_the_same_bytes_and_another_seed_does_not():
    design = design_of(*survey(EXPONENTIAL, 1, 4))
    one, two, other = (likeness(design, EXPONENTIAL, seed)[0].position for seed in (7, 7, 8))
    assert one.tobytes() == two.tobytes()
    assert one.tobytes() != other.tobytes()


@pytest.mark.parametrize("whole", [True, False])
def test_repetitions_separate_by_the_kernel(whole):
    """Mean ln r in the exponential regime: ln r0 + 2 (K / r2) t (Lundgren 1981, J. Fluid Mech. 111, 27)."""
    tracks, pairs = survey(EXPONENTIAL, 2)
    if not whole:
        pairs = replace(pairs, kind=np.full(pairs.n_pair, CHANCE, np.int8))
    design = design_of(tracks, pairs)
    assert design.whole is whole
    times = np.array([5.0, 20.0]) * DAY
    runs = [likeness(design, EXPONENTIAL, s) for s in range(60)]
    found = np.array([dispersion_statistics(*run, times).mean_log_separation().value for run in runs])
    expected = np.log(700.0) + 2 * 0.15 * times / DAY
    assert np.all(np.abs(found.mean(axis=0) - expected) < 3.5 * found.std(axis=0) / np.sqrt(60) + 0.02)


def test_position_errors_are_part_of_the_design():
    tracks, pairs = kernel_pairs(EXPONENTIAL, 200, 700.0, HOUR, 3, 1, position_error=200.0)
    design = design_of(tracks, pairs)
    extra = []
    for seed in range(20):
        again, others = likeness(design, kernel([2.0], [], 1e-9), seed)
        r = again.position[again.offset[others.second]] - again.position[again.offset[others.first]]
        extra.append(np.mean(r[:, 0] ** 2 + r[:, 1] ** 2) - np.mean(others.start_separation**2))
    # 4 s2 for two particles and two coordinates
    assert np.mean(extra) == pytest.approx(4 * 200.0**2, abs=3.5 * np.std(extra) / np.sqrt(20))


def test_the_kernel_that_made_the_data_agrees_and_another_one_dissents():
    tracks, pairs = survey(EXPONENTIAL, 11)
    same = checked(tracks, pairs, [EXPONENTIAL] * 99)
    assert set(same) == {
        "relative_dispersion",
        "mean_log_separation",
        "kurtosis",
        "relative_diffusivity",
        "residence_time",
        "triplet_area",
        "separation_distribution",
    }
    assert min(c.p_value for c in same.values()) > 0.02
    other = checked(tracks, pairs, [RICHARDSON] * 99)
    assert other["mean_log_separation"].p_value == pytest.approx(0.01)  # the least that 99 repetitions can say
    assert other["mean_log_separation"].where.size > 0


def test_releases_of_six_are_repeated_as_a_whole_and_agree():
    tracks, pairs = release_tracks(EXPONENTIAL, (8, 6), 700.0, 3 * HOUR, 240, 2)
    assert design_of(tracks, pairs).whole
    found = checked(tracks, pairs, [EXPONENTIAL] * 99)
    assert "triplet_area" in found
    assert min(c.p_value for c in found.values()) > 0.01


def test_pairs_repeated_one_by_one_have_no_triplets_and_wider_predictions():
    tracks, pairs = survey(EXPONENTIAL, 4, 6)
    chance = replace(pairs, kind=np.full(pairs.n_pair, CHANCE, np.int8))
    narrow, wide = (checked(tracks, chance, [EXPONENTIAL] * 60, shared=shared) for shared in (1.0, 4.0))
    assert "triplet_area" not in narrow
    for name in ("mean_log_separation", "relative_diffusivity"):
        widths = [np.ptp(c[name].band, axis=0) for c in (narrow, wide)]
        assert np.allclose(widths[1], 2.0 * widths[0], rtol=1e-6)
        assert wide[name].p_value >= narrow[name].p_value


def test_a_pair_that_starts_late_does_not_change_how_its_release_is_repeated():
    tracks, pairs = survey(EXPONENTIAL, 1, 4)
    late = np.arange(pairs.n_pair) == 0
    begun = replace(pairs, begin=pairs.begin + 20 * late, length=pairs.length - 20 * late)
    design = design_of(tracks, begun)
    assert design.whole
    assert design.pairs.begin[:3].tolist() == [20, 20, 20]


def test_threads_do_not_change_the_answer():
    tracks, pairs = survey(EXPONENTIAL, 4, 5)
    one, two = (checked(tracks, pairs, [EXPONENTIAL] * 20, jobs=jobs) for jobs in (1, 2))
    assert {k: c.p_value for k, c in one.items()} == {k: c.p_value for k, c in two.items()}
    assert all(np.array_equal(one[k].band, two[k].band) for k in one)


def test_pairs_too_short_for_a_check_are_refused():
    tracks, pairs = survey(EXPONENTIAL, 4, 5)
    moved = from_passage(tracks, pairs, 1000.0)
    with pytest.raises(DataError, match=r"got 15 pairs that last .* must go beyond 2\.5 exit times"):
        grid_for(tracks, replace(moved, length=np.full(moved.n_pair, 5)), 1000.0, 2 * DAY, THRESHOLDS)


def test_a_check_says_where_data_leave_the_band():
    band = np.array([[1.0, 1.0], [2.0, 2.0], [3.0, 3.0], [4.0, 4.0], [5.0, 5.0]])
    check = Check("kurtosis", "time", np.array([10.0, 20.0]), np.array([3.0, 6.0]), band, 0.009, "1")
    assert check.where.tolist() == [20.0]
    assert not check.agrees
    assert replace(check, p_value=0.01).agrees


def flow_survey(seed):
    spectrum = Spectrum(np.array([5 / 3]), np.array([]), 1000.0, 600e3, 0.3)
    return fourier_tracks(spectrum, (12, 3), 1500.0, HOUR, 480, seed)


def test_velocities_are_resolved_in_a_flow_with_memory_and_not_without():
    edges = separation_bins(500.0, 200e3)
    with_memory = resolves_velocities(structure_statistics(*flow_survey(1), edges))
    without = resolves_velocities(structure_statistics(*survey(EXPONENTIAL, 1), edges))
    assert with_memory > 0.95
    assert without == pytest.approx(0.5, abs=0.05)
    assert without < RESOLVED < with_memory


def likelihood_of(value, r):
    return StructureLikelihood(r, value, np.full(r.size, 25.0), 0.5, 0.0, 20.0)


def test_structure_function_follows_the_kernel_and_waves_on_top_dissent():
    """K ~ r^(4/3) means S2 ~ r^(2/3) (theory of Kolmogorov and Richardson; Bennett 1984, J. Atmos. Sci. 41, 1881)."""
    r = np.geomspace(1e3, 60e3, 10)
    law = np.exp(2.45) * (2.0 * RICHARDSON(r) / r) ** 2
    assert np.allclose(np.diff(np.log(law)) / np.diff(np.log(r)), 2 / 3)
    plain = structure_check(likelihood_of(law, r), [RICHARDSON], 1)
    waves = structure_check(likelihood_of(law + 0.5 * law[-1], r), [RICHARDSON], 1)
    assert plain.p_value > 0.5
    assert plain.where.size == 0
    assert waves.p_value < 0.01
    assert waves.where[0] == r[0]


def test_structure_check_does_not_depend_on_units():
    """Lengths times 10, velocities times 10: the same kernel rate, the same p-value."""
    r = np.geomspace(1e3, 60e3, 8)
    value = 0.02 * (r / 1e4) ** 0.6
    small = structure_check(likelihood_of(value, r), [RICHARDSON], 1)
    scaled = kernel([4 / 3], [], 1.0, 10.0)
    large = structure_check(likelihood_of(100.0 * value, 10.0 * r), [scaled], 1)
    assert small.p_value == pytest.approx(large.p_value, abs=1e-3)


def test_structure_of_a_flow_agrees_with_a_kernel_of_its_slope():
    tracks, pairs = flow_survey(2)
    likelihood = structure_likelihood(structure_statistics(tracks, pairs, separation_bins(750.0, 400e3)))
    fit = quick_fit(tracks, pairs, Options(most_transitions=0))
    kernels = mixed_kernels(fit.free, exit_rate_space(fit.rates.likelihood), 50, np.random.default_rng(1))
    assert structure_check(likelihood, kernels, 1).agrees
    assert not structure_check(likelihood, [replace(k, rate=k.rate / 4.0) for k in kernels], 1).agrees


def test_without_named_releases_the_clusters_of_the_pairs_take_their_place():
    tracks, pairs = survey(EXPONENTIAL, 1, 4)
    nameless = replace(tracks, release=np.full(tracks.n_track, -1))
    assert np.array_equal(with_releases(nameless, pairs).release, pairs.cluster)
    assert with_releases(tracks, pairs) is tracks
