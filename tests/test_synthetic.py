"""Synthetic worlds: closed forms of the theory, other integrators, and laws that any such flow obeys."""

from dataclasses import replace
from datetime import datetime
from itertools import pairwise

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic
from scipy import stats
from scipy.integrate import quad, solve_ivp
from scipy.sparse.csgraph import minimum_spanning_tree
from scipy.spatial.distance import pdist, squareform
from scipy.special import gamma as gamma_function
from scipy.special import hyp1f1, j0, j1

from regimes.curves import dispersion_statistics, exit_statistics
from regimes.errors import CaseError, DataError
from regimes.fixes import Columns, read_fixes, write_fixes
from regimes.synthetic import (
    Spectrum,
    fourier_release,
    fourier_tracks,
    kernel_pairs,
    load_recipe,
    recipe_from,
    release_tracks,
    simulate,
    truth,
)
from regimes.synthetic.kernel_groups import GROUP_SUBSTEP, _span
from regimes.synthetic.spectrum import fourier_modes
from regimes.theory.kernel import Kernel

SIGMAS = 4.5  # Monte Carlo tolerance in standard errors; about 60 such checks here, all fixed seeds


def power_law(exponent):
    """K(r) = r^a in units of 1 m and 1 s."""
    return Kernel([exponent], [], 1.0, 1.0)


def separations(tracks, pairs, step):
    """Separation of all pairs after `step` steps."""
    vectors = (tracks.position[tracks.offset[m] + step, :2] for m in (pairs.second, pairs.first))
    return np.hypot(*(next(vectors) - next(vectors)).T)


def assert_mean(values, expected):
    error = np.std(values) / np.sqrt(len(values))
    assert abs(np.mean(values) - expected) < SIGMAS * error, (np.mean(values), expected, error)


def exact_moment(order, time, exponent, start):
    """<r^n> of the 2-D Fokker-Planck equation with K = r^a from r0 (theory: confluent hypergeometric form)."""
    q = 2.0 - exponent
    scale = q * q * time
    size = scale ** (order / q) * gamma_function((order + 2) / q) / gamma_function(2 / q)
    return size * hyp1f1(-order / q, 2 / q, -(start**q) / scale)


class TestKernelPairs:
    @pytest.mark.parametrize("exponent", [0.0, 0.5, 1.0, 4 / 3, 1.8])
    def test_moments_of_power_laws(self, exponent):
        tracks, pairs = kernel_pairs(power_law(exponent), 30000, 1.0, 0.5, 3, seed=1)
        for step in (1, 2):
            r = separations(tracks, pairs, step)
            for order in (2 - exponent, 1.0, -0.5):
                assert_mean(r**order, exact_moment(order, 0.5 * step, exponent, 1.0))

    def test_richardson_dispersion_is_the_exact_cubic(self):
        """LaCasce (2010) J. Mar. Res. 68, 433; coefficients 20/3, 320/27, 3840/729."""
        tracks, pairs = kernel_pairs(power_law(4 / 3), 60000, 1.0, 0.3, 2, seed=2)
        t = 0.3
        assert_mean(separations(tracks, pairs, 1) ** 2, 1 + 20 / 3 * t + 320 / 27 * t**2 + 3840 / 729 * t**3)

    def test_exponential_regime_is_log_normal(self):
        """Lundgren (1981) J. Fluid Mech. 111, 27: ln r drifts by 2 t / T with variance 2 t / T, D2 = exp(8 t / T)."""
        tracks, pairs = kernel_pairs(power_law(2.0), 40000, 1.0, 0.1, 4, seed=3)
        r = separations(tracks, pairs, 3)
        assert stats.kstest(np.log(r), "norm", args=(0.6, np.sqrt(0.6))).pvalue > 1e-4
        assert_mean(separations(tracks, pairs, 1) ** 2, np.exp(0.8))

    @pytest.mark.parametrize("exponent", [0.0, 1.0, 4 / 3])
    def test_distribution_from_a_point(self, exponent):
        """r^q ~ Gamma(2 / q, q^2 t), the self-similar solution (Bennett 1984, J. Atmos. Sci. 41, 1881)."""
        tracks, pairs = kernel_pairs(power_law(exponent), 4000, 1e-3, 1.0, 2, seed=4)
        q = 2.0 - exponent
        law = stats.gamma(2 / q, scale=q * q)
        assert stats.kstest(separations(tracks, pairs, 1) ** q, law.cdf).pvalue > 1e-4

    def test_separation_vector_is_a_martingale(self):
        """In a homogeneous incompressible flow without memory the mean separation vector never changes."""
        for exponent in (2.0, 4 / 3):
            tracks, pairs = kernel_pairs(power_law(exponent), 60000, 1.0, 0.1, 3, seed=5)
            start, later = (
                tracks.position[tracks.offset[pairs.second] + k] - tracks.position[tracks.offset[pairs.first] + k]
                for k in (0, 2)
            )
            assert_mean(np.sum(start * later, axis=1), 1.0)

    def test_directions_at_the_start_are_even(self):
        tracks, _ = kernel_pairs(power_law(2.0), 4000, 1.0, 0.1, 2, seed=6)
        first = tracks.position[tracks.offset[1:-1:2]]
        angle = np.arctan2(first[:, 1], first[:, 0])
        assert stats.kstest(angle, "uniform", args=(-np.pi, 2 * np.pi)).pvalue > 1e-4

    @pytest.mark.parametrize(
        ("exponent", "level"),
        [(4 / 3, 1.77784), (1.0, 1.67341), (0.0, 1.38629), (2.0, 2.0)],
    )
    def test_exit_rates_of_power_laws(self, exponent, level):
        """lambda delta^(2-a) for ratio sqrt 2, closed form of Artale et al. (1997), Phys. Fluids 9, 3162."""
        step, exits, risk = 1e-3, 0.0, 0.0
        for seed in range(6):
            tracks, pairs = kernel_pairs(power_law(exponent), 1000, 1.0, step, 3000, seed=seed)
            found = exit_statistics(tracks, pairs, np.array([1 + 1e-9, np.sqrt(2)]))
            exits, risk = exits + found.exits.sum(), risk + found.time_at_risk.sum()
        assert exits > 5950, "records must outlast nearly all passages"
        error = 1 / np.sqrt(exits * np.log(2) / 2)  # inverse-Gaussian passages
        # Samples see crossings late by 0.5826 standard deviations of a step (Siegmund), 0.12 more at the start.
        late = 0.5826 * np.sqrt(2 * step)
        allowed = SIGMAS * error + late * (2 - exponent) + 0.2 * late / (np.log(2) / 2)
        assert exits / risk * np.log(2) / 2 == pytest.approx(level, rel=allowed)

    def test_mean_exit_times_across_transitions(self):
        """Integral of r / (2 K) by quadrature of the kernel."""
        kernel = Kernel([2.0, 4 / 3, 0.0], [2.0, 6.0], 1.0, 1.0)
        thresholds = 1.2 * 2.0 ** (np.arange(8) / 2)
        exits = risk = 0.0
        for seed in range(3):
            tracks, pairs = kernel_pairs(kernel, 2000, 1.0, 0.004, 1500, seed=seed)
            found = exit_statistics(tracks, pairs, thresholds)
            exits, risk = exits + found.exits.sum(axis=0), risk + found.time_at_risk.sum(axis=0)
        expected = [
            quad(lambda r: r / (2 * kernel(r)), low, high, points=[2.0, 6.0])[0] for low, high in pairwise(thresholds)
        ]
        error = 1 / np.sqrt(exits * np.log(2) / 2)
        # one sample in 0.004 s moves ln r by 0.09; where the rate falls with r, that delays exits by up to 4 %
        assert np.all(np.abs(risk / exits / expected - 1) < SIGMAS * error + 0.04)

    def test_two_runs_of_one_seed_agree_to_the_byte(self):
        one, two, other = (kernel_pairs(power_law(4 / 3), 5, 1.0, 0.1, 20, seed=s)[0].position for s in (7, 7, 8))
        assert one.tobytes() == two.tobytes()
        assert one.tobytes() != other.tobytes()

    def test_position_error_adds_its_variance(self):
        tracks, pairs = kernel_pairs(power_law(2.0), 20000, 1e-6, 1e-3, 2, seed=9, position_error=3.0)
        assert_mean(separations(tracks, pairs, 0) ** 2, 4 * 3.0**2)
        assert tracks.position_error == 3.0

    def test_pairs_that_touch_do_not_stall(self):
        """In a flat kernel pairs come as close as they like, where substeps would shrink without end."""
        tracks, pairs = kernel_pairs(power_law(0.0), 50, 1e-5, 10.0, 200, seed=10)
        assert np.isfinite(tracks.position).all()
        assert_mean(separations(tracks, pairs, 199) ** 2, 4 * 1990.0)


class TestReleases:
    def test_every_pair_of_a_triplet_obeys_the_kernel(self):
        """Mean squared separation exp(8 t / T) and mean ln r 2 t / T for all three sides."""
        tracks, pairs = release_tracks(power_law(2.0), (4000, 3), 1.0, 0.1, 3, seed=1)
        for k in range(3):
            side = pairs.select(np.arange(k, pairs.n_pair, 3))
            r = separations(tracks, side, 2)
            assert_mean(np.log(r), 0.4)
            assert_mean(r**1.0, np.exp(3 * 0.2))

    @pytest.mark.parametrize(("exponent", "n"), [(4 / 3, 4), (1.0, 5), (0.0, 10)])
    def test_moments_in_larger_groups(self, exponent, n):
        tracks, pairs = release_tracks(power_law(exponent), (600, n), 1.0, 0.2, 2, seed=2)
        sides = pairs.select(pairs.start_separation < 1.0 + 1e-9)
        r = separations(tracks, sides, 1).reshape(600, -1)
        assert r.shape[1] == n
        assert_mean(np.mean(r**2, axis=1), exact_moment(2, 0.2, exponent, 1.0))

    def test_exit_times_of_triplets_across_transitions(self):
        kernel = Kernel([2.0, 4 / 3, 0.0], [2.0, 6.0], 1.0, 1.0)
        thresholds = 1.2 * 2.0 ** (np.arange(8) / 2)
        tracks, pairs = release_tracks(kernel, (800, 3), 1.0, 0.004, 1500, seed=3)
        curve = exit_statistics(tracks, pairs, thresholds).curve()
        expected = [
            np.log(2) / 2 / quad(lambda r: r / (2 * kernel(r)), low, high, points=[2.0, 6.0])[0]
            for low, high in pairwise(thresholds)
        ]
        late = 0.04  # as for pairs
        assert np.all(np.abs(curve.value / expected - 1) < SIGMAS * curve.standard_error / curve.value + late)

    def test_triangles_keep_their_area_where_the_flow_is_smooth(self):
        """A linear incompressible flow stretches lines and keeps areas (Batchelor 1952, Proc. R. Soc. A 213, 349)."""
        tracks, pairs = release_tracks(power_law(2.0), (300, 3), 1.0, 0.5, 5, seed=4)
        corners = tracks.position.reshape(300, 3, 5, 3)[..., :2]
        a, b = corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]
        area = np.abs(a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0])
        change = np.log(area[:, -1] / area[:, 0])
        stretch = np.log(separations(tracks, pairs, 4))
        assert np.mean(stretch) > 3.0
        # An Euler step h changes the area by the determinant of the gradient: mean 0, variance 48 h^2 for the
        # gradient variances 2 h, 6 h and covariance -2 h of an isotropic incompressible flow.
        expected = 48 * GROUP_SUBSTEP * 2.0
        assert np.var(change) == pytest.approx(expected, rel=SIGMAS * np.sqrt(2 / 300))
        assert_mean(change, -expected / 2)

    def test_start_is_a_regular_polygon_about_the_centroid(self):
        for n in (2, 3, 7):
            tracks, pairs = release_tracks(power_law(2.0), (3, n), 5.0, 0.1, 2, seed=5)
            start = tracks.position[tracks.offset[:-1]].reshape(3, n, 3)
            side = np.linalg.norm(np.diff(start, axis=1, append=start[:, :1]), axis=2)
            assert side == pytest.approx(np.full((3, n), 5.0), rel=1e-12)
            assert start.mean(axis=1) == pytest.approx(np.zeros((3, 3)), abs=1e-12)
            assert pairs.n_pair == 3 * n * (n - 1) // 2
            assert np.array_equal(pairs.cluster[pairs.first], pairs.cluster[pairs.second])

    def test_tree_is_the_shortest(self):
        """scipy's minimum spanning tree of the same points."""
        rng = np.random.default_rng(0)
        for n in (2, 3, 6, 10):
            points = rng.standard_normal((n, 2))
            tree = np.empty((n - 1, 2), dtype=np.int64)
            _span(points, tree, np.empty((n, 2)))
            found = np.linalg.norm(points[tree[:, 0]] - points[tree[:, 1]], axis=1).sum()
            assert found == pytest.approx(minimum_spanning_tree(squareform(pdist(points))).sum(), rel=1e-12)
            assert sorted([0, *tree[:, 0]]) == list(range(n))

    def test_two_runs_of_one_seed_agree_to_the_byte(self):
        one, two = (release_tracks(power_law(1.0), (3, 4), 1.0, 0.1, 5, seed=6)[0].position for _ in range(2))
        assert one.tobytes() == two.tobytes()

    def test_a_kernel_that_no_flow_has_is_refused(self):
        with pytest.raises(DataError, match=r"of the covariance that no flow with this kernel has, in groups of 10"):
            release_tracks(Kernel([2.0, 0.0], [1.0], 1.0, 1.0), (3, 10), 1.0, 0.1, 20, seed=7)

    @pytest.mark.parametrize("n", [1, 11])
    def test_group_sizes(self, n):
        with pytest.raises(DataError, match=f"got {n} particles in a release; must be 2 to 10"):
            release_tracks(power_law(2.0), (3, n), 1.0, 0.1, 5, seed=1)

    @pytest.mark.parametrize("change", [{"n_pair": 0}, {"start_separation": 0.0}, {"step": -1.0}, {"n_step": 1}])
    def test_numbers_out_of_range(self, change):
        options = {"n_pair": 2, "start_separation": 1.0, "step": 1.0, "n_step": 5, "seed": 1} | change
        with pytest.raises(DataError, match="need at least 1 group, 2 steps and positive lengths"):
            kernel_pairs(power_law(2.0), **options)


BROKEN = Spectrum([3.0, 1.5], [40.0], 5.0, 300.0, 0.3)


class TestSpectrum:
    def test_energy_integrates_to_half_the_squared_speed(self):
        ends = 2 * np.pi / BROKEN.wavelengths
        total = sum(quad(BROKEN.energy, low, high)[0] for low, high in zip(ends[1:], ends[:-1], strict=True))
        assert total == pytest.approx(0.3**2 / 2, rel=1e-8)

    def test_slopes_and_continuity(self):
        k = 2 * np.pi / np.array([6.0, 7.0, 50.0, 60.0])
        steep, flat = (np.log(BROKEN.energy(k[i + 1]) / BROKEN.energy(k[i])) / np.log(k[i + 1] / k[i]) for i in (0, 2))
        assert [steep, flat] == pytest.approx([-3.0, -1.5], rel=1e-12)
        at = 2 * np.pi / 40.0
        assert BROKEN.energy(at * (1 - 1e-9)) == pytest.approx(BROKEN.energy(at * (1 + 1e-9)), rel=1e-7)
        assert BROKEN.energy(2 * np.pi / np.array([4.0, 400.0])).tolist() == [0.0, 0.0]

    def test_slope_of_one_has_a_logarithmic_integral(self):
        flat = Spectrum([1.0], [], 1.0, np.e, 1.0)
        assert flat.energy(2 * np.pi / np.e) * 2 * np.pi / np.e == pytest.approx(0.5, rel=1e-12)

    @pytest.mark.parametrize("fraction", [0.0, 0.3, 1.0])
    def test_structure_functions_of_the_modes(self, fraction):
        """S_LL = 2 int E (1 - 2 J1(kr)/(kr)) dk and S = 4 int E (1 - J0(kr)) dk without divergence, parts
        exchanged in purely divergent motion (LaCasce 2016, Fluids 1, 33; Lindborg 2015, J. Fluid Mech. 762)."""
        spectrum = replace(BROKEN, divergent_fraction=fraction)
        rng = np.random.default_rng(1)
        r = np.array([3.0, 20.0, 100.0])
        along, across = np.empty((2, 4000, 3))
        heading = np.array([np.cos(0.6), np.sin(0.6)])
        for i in range(4000):
            modes = fourier_modes(spectrum, rng)
            phase = np.outer(r, modes[:, :2] @ heading)
            change = (np.cos(phase) - 1) @ modes[:, 3:5] + np.sin(phase) @ modes[:, 5:7]
            along[i] = (change @ heading) ** 2
            across[i] = np.sum(change**2, axis=1) - along[i]
        ends = 2 * np.pi / BROKEN.wavelengths
        for j in range(3):

            def integral(shape, x=r[j]):
                pieces = zip(ends[1:], ends[:-1], strict=True)
                return sum(quad(lambda k: BROKEN.energy(k) * shape(k * x), a, b, limit=400)[0] for a, b in pieces)

            total = 4 * integral(lambda z: 1 - j0(z))
            smooth = 2 * integral(lambda z: 1 - 2 * j1(z) / z)
            expected = (1 - fraction) * smooth + fraction * (total - smooth)
            assert_mean(along[:, j], expected)
            assert_mean(across[:, j], total - expected)

    def test_frequencies_are_those_of_the_eddy_turnover(self):
        spectrum = replace(BROKEN, persistence=0.5)
        modes = fourier_modes(spectrum, np.random.default_rng(2))
        k = np.hypot(modes[:, 0], modes[:, 1])
        assert modes[:, 2] == pytest.approx(0.5 * np.sqrt(k**3 * spectrum.energy(k)), rel=1e-12)
        assert len(k) == round(np.log2(60) * 6)
        assert np.all(np.diff(k) > 0)
        assert k[0] > 2 * np.pi / 300
        assert k[-1] < 2 * np.pi / 5

    @pytest.mark.parametrize(
        "change",
        [{"slopes": [3.0]}, {"breaks": [400.0]}, {"shortest": 0.0}, {"longest": 30.0}, {"slopes": [3.0, np.nan]}],
    )
    def test_wavelengths_out_of_order(self, change):
        with pytest.raises(DataError, match="need one slope for each interval of positive, rising wavelengths"):
            replace(BROKEN, **change)

    @pytest.mark.parametrize(
        "change",
        [{"speed": 0.0}, {"divergent_fraction": 1.5}, {"persistence": -1.0}, {"modes_per_octave": 0}],
    )
    def test_numbers_out_of_range(self, change):
        with pytest.raises(DataError, match="need speed > 0, fraction 0 to 1, persistence >= 0"):
            replace(BROKEN, **change)


class TestFourierFlow:
    def test_paths_agree_with_another_integrator(self):
        """scipy's adaptive Dormand-Prince of order 8 on the same modes, velocity written out in numpy."""
        times = np.arange(0.0, 400.0, 20.0)
        found = fourier_release(3, 8.0, BROKEN, times, seed=1)
        modes = fourier_modes(BROKEN, np.random.default_rng(1))

        def velocity(t, flat):
            points = flat.reshape(3, 2)
            phase = (points - points.mean(axis=0)) @ modes[:, :2].T + modes[:, 2] * t
            return (np.cos(phase) @ modes[:, 3:5] + np.sin(phase) @ modes[:, 5:7]).ravel()

        exact = solve_ivp(velocity, (0, times[-1]), found[:, 0].ravel(), "DOP853", times, rtol=1e-9, atol=1e-9)
        moved = np.linalg.norm(found[:, -1] - found[:, 0], axis=1)
        assert moved.min() > 1.0
        paths = found.transpose(1, 0, 2).reshape(times.size, 6).T
        # a fourth-order step of 0.3 turnovers errs by 0.3^4 / 120 per step, here over a few turnovers
        assert paths == pytest.approx(exact.y, abs=1e-3 * moved.max())

    def test_small_separations_grow_exponentially_beneath_the_shortest_wave(self):
        """Below all waves the flow is smooth: ln r grows at one rate whatever the separation."""
        times = np.linspace(0, 300.0, 4)
        growth = []
        for scale in (1e-3, 1e-5):
            tracks, pairs = fourier_tracks(BROKEN, (20, 2), scale, times[1], 4, seed=2)
            growth.append(np.log(separations(tracks, pairs, 3) / separations(tracks, pairs, 0)))
        assert np.mean(growth[0]) > 0.3
        assert growth[0] == pytest.approx(growth[1], rel=1e-2)

    def test_particles_far_apart_move_independently(self):
        """Relative velocity at long range: twice the mean squared speed."""
        tracks, _ = fourier_tracks(BROKEN, (3000, 2), 3e4, 1.0, 2, seed=3)
        change = np.diff(tracks.position.reshape(3000, 2, 2, 3)[..., :2], axis=2)[:, :, 0]
        assert_mean(np.sum((change[:, 1] - change[:, 0]) ** 2, axis=1), 2 * 0.3**2)

    def test_two_runs_of_one_seed_agree_to_the_byte(self):
        one, two, other = (fourier_tracks(BROKEN, (2, 3), 1.0, 20.0, 5, seed=s)[0].position for s in (4, 4, 5))
        assert one.tobytes() == two.tobytes()
        assert one.tobytes() != other.tobytes()

    @pytest.mark.parametrize("change", [{"n": 1}, {"start_separation": 0.0}, {"times": [0.0]}, {"times": [1.0, 1.0]}])
    def test_numbers_out_of_range(self, change):
        options = {"n": 2, "start_separation": 1.0, "spectrum": BROKEN, "times": [0.0, 1.0], "seed": 1} | change
        with pytest.raises(DataError, match="need 2 particles, a positive separation and 2 times that increase"):
            fourier_release(**options)

    @pytest.mark.slow
    @pytest.mark.parametrize("slope", [5 / 3, 2.2])
    def test_exponents_fall_with_the_slope_that_the_spectrum_implies(self, slope):
        """lambda ~ delta^((alpha - 3) / 2) (Bennett 1984) well inside the range of waves, release frame."""
        spectrum = Spectrum([slope], [], 300.0, 600e3, 0.4)
        tracks, pairs = fourier_tracks(spectrum, (150, 3), 300.0, 1800.0, 48 * 40, seed=6)
        curve = exit_statistics(tracks, pairs, 1500.0 * 2.0 ** (np.arange(13) / 2)).curve()
        width = np.log(curve.axis) - np.log(curve.axis).mean()

        def fitted(values):
            return np.log(values) @ width / np.sum(width**2)

        left = np.array([fitted(v) for v in curve.leave_one_out()])
        error = np.sqrt((len(left) - 1) / len(left) * np.sum((left - left.mean()) ** 2))
        # 0.05: the finite range of waves steepens the slope; -0.692 and -0.450 were found for -0.667 and -0.400
        assert abs(fitted(curve.value) - (slope - 3) / 2) < SIGMAS * error + 0.05
        assert error < 0.06


BASE = {
    "name": "invented bank",
    "seed": 5,
    "kernel": {
        "regimes": ["exponential", "richardson", "diffusive"],
        "transitions_km": [10.0, 120.0],
        "rate_per_d": 1.0,
        "reference_km": 1.0,
    },
    "releases": {
        "number": 8,
        "particles": 3,
        "start_separation_km": 0.5,
        "first": "2031-05-01T00:00:00Z",
        "interval_h": 30.0,
    },
    "records": {"duration_d": 4.0, "fix_interval_h": 3.0},
    "place": {"longitude": 179.8, "latitude": 52.0, "spread_km": 40.0, "drift_m_s": [0.1, -0.05]},
}
FOURIER = {
    "spectral_slopes": [3.0, 5 / 3],
    "break_wavelengths_km": [20.0],
    "shortest_km": 2.0,
    "longest_km": 200.0,
    "speed_m_s": 0.2,
}


def recipe(**changes):
    """The base recipe with changed sections; None drops one."""
    content = {key: dict(value) if isinstance(value, dict) else value for key, value in BASE.items()}
    content["releases"]["first"] = datetime.fromisoformat("2031-05-01T00:00:00+00:00")
    for key, value in changes.items():
        if value is None:
            del content[key]
        elif isinstance(value, dict) and key in content:
            content[key] |= value
        else:
            content[key] = value
    return recipe_from(content)


class TestSurvey:
    def test_separations_on_the_globe_are_those_on_the_plane(self):
        """Geodesic distances by geographiclib against plane distances of the same seed, without a place."""
        globe, plane = simulate(recipe()), simulate(recipe(place=None))
        assert not globe.planar
        assert plane.planar
        assert np.array_equal(globe.time, plane.time)
        n_fix = np.sum(globe.particle == 0)
        for i in range(0, 24, 3):
            for k in (0, n_fix // 2, n_fix - 1):
                a, b = (i * n_fix + k, (i + 2) * n_fix + k)
                (lon1, lat1), (lon2, lat2) = globe.position[a], globe.position[b]
                found = Geodesic.WGS84.Inverse(lat1, lon1, lat2, lon2)["s12"]
                # (r / 6371 km)^2 / 6 for r up to 100 km from the centroid
                assert found == pytest.approx(np.hypot(*(plane.position[a] - plane.position[b])), rel=4e-5)

    def test_date_line_and_drift(self):
        """Centroids drift by 0.1 m/s x 4 d = 34.56 km east and 17.28 km south; 40 km x 1/sqrt(8) of spread cancel."""
        fixes = simulate(recipe(releases={"number": 40}))
        lon, lat = fixes.position.reshape(40, 3, -1, 2).transpose(3, 0, 1, 2)
        assert (lon > 179).any()
        assert (lon < -179).any()
        east = np.degrees(np.unwrap(np.radians(lon), axis=2))
        moved = (east[..., -1] - east[..., 0]).mean(axis=1) * 111.32 * np.cos(np.radians(lat[:, 0, 0]))
        assert np.median(moved) == pytest.approx(34.56, rel=0.02)
        assert np.median((lat[..., -1] - lat[..., 0]).mean(axis=1)) * 111.2 == pytest.approx(-17.28, rel=0.02)

    def test_times_and_names(self):
        fixes = simulate(recipe())
        assert fixes.time[0] == np.datetime64("2031-05-01T00:00:00").astype("datetime64[s]").astype(float)
        assert fixes.labels[:4] == ("L1-1", "L1-2", "L1-3", "L2-1")
        assert fixes.release.tolist() == np.repeat(np.arange(8), 3).tolist()
        starts = fixes.time[np.flatnonzero(np.diff(fixes.particle, prepend=-1))]
        assert np.diff(starts[::3]).tolist() == [30 * 3600.0] * 7
        assert np.sum(fixes.particle == 0) == 33

    def test_losses_are_exponential(self):
        fixes = simulate(recipe(releases={"number": 400}, records={"loss_per_d": 0.3}))
        length = np.bincount(fixes.particle) * 3 / 24  # days
        for day in (1.0, 3.0):
            share, expected = np.mean(length > day), np.exp(-0.3 * day)
            assert abs(share - expected) < SIGMAS * np.sqrt(expected * (1 - expected) / 1200)

    def test_gaps_leave_the_paths_alone(self):
        whole, holes = simulate(recipe()), simulate(recipe(records={"gap_probability": 0.2, "gap_h": 9.0}))
        assert holes.n_fix < 0.9 * whole.n_fix
        rows = {(p, t): tuple(x) for p, t, x in zip(whole.particle, whole.time, whole.position, strict=True)}
        for p, t, x in zip(holes.particle, holes.time, holes.position, strict=True):
            assert rows[p, t] == tuple(x)
        first = np.flatnonzero(np.diff(holes.particle, prepend=-1))
        starts = whole.time[np.flatnonzero(np.diff(whole.particle, prepend=-1))]
        assert holes.time[first].tolist() == starts.tolist(), "the launch itself is always recorded"

    def test_gaps_last_as_long_as_asked(self):
        """Gaps start with probability p and last 1 + floor(exponential of mean m) fixes: mean 1 + 1/(e^(1/m) - 1)."""
        fixes = simulate(recipe(releases={"number": 300}, records={"gap_probability": 0.002, "gap_h": 9.0}))
        missing = np.diff(fixes.time)[np.diff(fixes.particle) == 0] / 10800.0 - 1
        gaps = missing[missing > 0]
        expected = 1 + 1 / np.expm1(1 / 3)
        # 0.1: gaps that overlap, or run past the end of a record and are not seen
        assert np.mean(gaps) == pytest.approx(expected, abs=SIGMAS * gaps.std() / np.sqrt(gaps.size) + 0.1)

    def test_share_of_missing_fixes(self):
        """A fix is there if no gap that began k fixes ago lasts k more: product of 1 - p exp(-k / m)."""
        p, m = 0.01, 3.0
        made = recipe(releases={"number": 2000}, records={"gap_probability": p, "gap_h": 3.0 * m})
        fixes = simulate(made)
        late = np.sum(fixes.time - np.repeat(np.arange(2000), 3)[fixes.particle] * 108000.0 > 16 * 10800 + 1935360000)
        missing, expected = 1 - late / (6000 * 16), 1 - np.prod(1 - p * np.exp(-np.arange(40) / m))
        error = np.sqrt(expected * 2 * (1 + m) / (6000 * 16))  # fixes are lost in runs of 1 + m or so
        assert abs(missing - expected) < SIGMAS * error

    def test_position_error(self):
        clean, noisy = simulate(recipe(place=None)), simulate(recipe(place=None, records={"position_error_m": 20.0}))
        error = (noisy.position - clean.position).ravel()
        assert stats.kstest(error, "norm", args=(0.0, 20.0)).pvalue > 1e-4
        assert noisy.position_error == 20.0

    def test_wandering_spreads_the_centres(self):
        """2 kappa t per component: 4 x 500 m2/s x 4 d."""
        fixes = simulate(
            recipe(releases={"number": 600}, place={"spread_km": 0.0, "drift_m_s": [0.0, 0.0], "wandering_m2_s": 500.0})
        )
        ends = fixes.position.reshape(600, 3, -1, 2)[:, :, -1]
        x = np.radians(np.mod(ends[..., 0], 360.0) - 179.8).mean(axis=1) * 6378137 * np.cos(np.radians(52))
        y = np.radians(ends[..., 1] - 52.0).mean(axis=1) * 6371000
        assert np.mean(x**2 + y**2) == pytest.approx(4 * 500 * 4 * 86400, rel=SIGMAS / np.sqrt(600) + 0.01)

    @pytest.mark.parametrize("suffix", [".csv", ".csv.gz"])
    def test_written_and_read_again(self, tmp_path, suffix):
        fixes = simulate(recipe(records={"position_error_m": 5.0, "loss_per_d": 0.1}))
        paths = [tmp_path / f"{name}{suffix}" for name in "ab"]
        write_fixes(fixes, paths[0])
        write_fixes(simulate(recipe(records={"position_error_m": 5.0, "loss_per_d": 0.1})), paths[1])
        assert paths[0].read_bytes() == paths[1].read_bytes()
        columns = Columns(
            particle="particle", time="time", longitude="longitude", latitude="latitude", release="release"
        )
        again = read_fixes(paths[0], columns, 5.0)
        known = np.isin(np.array(fixes.labels)[fixes.particle], again.labels)
        assert again.position == pytest.approx(fixes.position[known], abs=0.5001e-6)
        assert np.array_equal(again.time, fixes.time[known])

    def test_fourier_world(self):
        made = recipe(kernel=None, fourier=FOURIER)
        fixes = simulate(made)
        assert fixes.n_particle == 24
        assert truth(made) == {
            "world": "fourier",
            "exponents": pytest.approx([2.0, 4 / 3]),
            "spectral_slopes": pytest.approx([3.0, 5 / 3]),
            "break_wavelengths_km": [20.0],
            "wavelengths_km": [2.0, 200.0],
        }

    def test_kernel_world(self):
        assert truth(recipe()) == {
            "world": "kernel",
            "exponents": pytest.approx([2.0, 4 / 3, 0.0]),
            "spectral_slopes": [None, pytest.approx(5 / 3), None],
            "regimes": ["exponential", "richardson", "diffusive"],
            "transitions_km": pytest.approx([10.0, 120.0]),
            "rate_per_d": 1.0,
            "reference_km": 1.0,
        }
        free = recipe(kernel={"regimes": [], "exponents": [1.5], "transitions_km": []})
        assert truth(free)["regimes"] == [None]
        assert truth(free)["spectral_slopes"] == [2.0]

    def test_rate_is_the_exponent_at_the_reference_separation(self):
        """In the exponential regime lambda = 2 / T at any separation: D2 grows by exp(4 lambda t)."""
        made = recipe(
            kernel={"regimes": ["exponential"], "transitions_km": []},
            releases={"number": 4000, "particles": 2},
            records={"duration_d": 0.25, "fix_interval_h": 6.0},
            place=None,
        )
        fixes = simulate(made)
        corners = fixes.position.reshape(4000, 2, 2, 2)
        assert_mean(np.sum((corners[:, 1, 1] - corners[:, 0, 1]) ** 2, axis=1) / 500.0**2, np.exp(4 * 0.25))


class TestRecipes:
    def test_file(self, tmp_path):
        path = tmp_path / "recipe.toml"
        path.write_text(
            'name = "x"\nseed = 1\n[kernel]\nregimes = ["ballistic"]\nrate_per_d = 1.0\nreference_km = 1.0\n'
            "[releases]\nnumber = 2\nparticles = 2\nstart_separation_km = 1.0\nfirst = 2031-05-01T00:00:00\n"
            "[records]\nduration_d = 1.0\nfix_interval_h = 1.0\n"
        )
        made = load_recipe(path)
        assert made.place.planar
        assert made.records.n_fix == 25
        assert made.releases.first_time == 1935360000.0  # date -u -d 2031-05-01 +%s

    def test_all_problems_at_once(self, tmp_path):
        path = tmp_path / "recipe.toml"
        path.write_text(
            'name = "x"\nseed = 1\n[kernel]\nregimes = ["exponentail"]\nrate_per_d = -1.0\nreference_km = 1.0\n'
            "[releases]\nnumber = 2\nparticles = 12\nstart_separation_km = 1.0\nfirst = 2031-05-01\n"
            "[records]\nduration_d = 1.0\nfix_interval = 1.0\n"
        )
        with pytest.raises(CaseError) as caught:
            load_recipe(path)
        text = str(caught.value)
        for line in (
            r"recipe.toml has 6 problems",
            'kernel.regimes: got "exponentail"; known: ballistic, exponential, richardson, diffusive; did you mean',
            "kernel.rate_per_d: got -1.0; must be > 0",
            "releases.particles: got 12; must be <= 10",
            "records.fix_interval_h: missing; must be given",
            "records.fix_interval: unknown key; known: duration_d, fix_interval_h",
        ):
            assert line in text

    @pytest.mark.parametrize(
        ("changes", "message"),
        [
            ({"fourier": FOURIER}, r"got 2 of \[kernel\], \[fourier\] and \[shear_diffusion\]; must give one world"),
            ({"kernel": None}, r"got none of \[kernel\], \[fourier\] and \[shear_diffusion\]; must give one world"),
            ({"kernel": {"exponents": [2.0]}}, "got both or neither; must give either regimes or exponents"),
            ({"kernel": {"transitions_km": [10.0]}}, "got 3 pieces; must be one more than transitions_km"),
            ({"kernel": {"transitions_km": [120.0, 10.0]}}, r"must rise \(transitions_km\)"),
            ({"kernel": None, "fourier": FOURIER | {"longest_km": 10.0}}, "must rise from shortest_km over"),
            ({"records": {"duration_d": 0.01}}, "got 0.01 d at 3 h; must give two fixes at least"),
            ({"place": {"longitude": None}}, "must give both, or none for a plane"),
        ],
    )
    def test_rules(self, changes, message):
        with pytest.raises(CaseError, match=message):
            recipe(**changes)

    def test_files_that_cannot_be_read(self, tmp_path):
        with pytest.raises(CaseError, match=r"none.toml: no such file; give the path of a recipe"):
            load_recipe(tmp_path / "none.toml")
        (tmp_path / "bad.toml").write_text("name = \n")
        with pytest.raises(CaseError, match=r"bad.toml: no valid TOML: .*line 1"):
            load_recipe(tmp_path / "bad.toml")
        (tmp_path / "binary.toml").write_bytes(b"\xff\xfe\x00")
        with pytest.raises(CaseError, match=r"binary.toml: cannot be read .*must be a text file in UTF-8"):
            load_recipe(tmp_path / "binary.toml")


def test_dispersion_of_triplets_counts_releases_as_clusters():
    tracks, pairs = release_tracks(power_law(2.0), (50, 3), 1.0, 0.1, 5, seed=8)
    curve = dispersion_statistics(tracks, pairs, [0.1, 0.4]).relative_dispersion()
    assert curve.n_cluster.tolist() == [50, 50]
