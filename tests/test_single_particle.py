"""Scales, diffusivity and dispersion of single particles: closed forms, known truth, laws, cautions."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import least_squares

from regimes.curves import dispersion_statistics
from regimes.errors import CaseError, DataError
from regimes.geodesy import to_cartesian
from regimes.particles import (
    MeanFlow,
    absolute_dispersion,
    eddy_velocities,
    exponential_dispersion,
    length_ratio,
    plateau_ratio,
    single_particle,
    standard_error,
)
from regimes.particles.cosine import decaying_cosine
from regimes.particles.dispersion import ballistic_limit, diffusive_limit
from regimes.particles.estimate import Estimate, estimate, resamples
from regimes.particles.scales import METHODS, integral_times, levelling
from regimes.particles.tensor import principal_axes
from regimes.synthetic.particles import Motion, drifting_particles
from regimes.tracks import Tracks
from regimes.units import DAY, HOUR, KM

STEP = 3 * HOUR
# u' = 0.2 m/s and two days: a diffusivity of 6900 m2/s.
MOTION = Motion(0.04, 1.0 / (2 * DAY))


def drifters(n=20, days=60, seed=2, motion=MOTION, step=STEP, **how) -> Tracks:
    return drifting_particles(motion, (n, 1), step, int(days * DAY / step), seed, **how)[0]


def near(found: Estimate, truth: float, k: float = 4.0) -> bool:
    """Monte Carlo: within k standard errors of the estimate's own interval, which test_particles_coverage checks."""
    return abs(found.value - truth) < k * standard_error(found)


# --- closed forms ---------------------------------------------------------------------------------------------------


def test_integral_times_of_an_exponential():
    lag = 0.01 * np.arange(1001)
    rho = np.exp(-lag)[None]
    # Mean over 5 to 10 of the running integral 1 - exp(-s); trapezia of the exponential are h^2/12 too large.
    long = 1.0 - (np.exp(-5.0) - np.exp(-10.0)) / 5.0
    assert integral_times(rho, 0.01, "long_window")[0] == pytest.approx(long, abs=2e-5)
    assert integral_times(rho, 0.01, "first_zero")[0] == pytest.approx(1.0 - np.exp(-10.0), abs=2e-5)
    assert integral_times(rho, 0.01, "decaying_cosine")[0] == pytest.approx(1.0, abs=1e-6)


def test_first_zero_by_hand():
    """Straight lines through 1, 0.5, -0.5 at steps of 2: zero at 3; a trapezium of 1.5 and a triangle of 0.25."""
    assert integral_times(np.array([[1.0, 0.5, -0.5, 9.0]]), 2.0, "first_zero")[0] == pytest.approx(1.75, rel=1e-12)


@pytest.mark.parametrize(("gamma", "omega"), [(0.7, 2.0), (0.2, 0.1), (0.05, 3.0)])
def test_integral_times_of_a_decaying_cosine(gamma, omega):
    """Closed integral to infinity, gamma / (gamma^2 + omega^2); quadrature to the first zero."""
    lag = 0.01 * np.arange(2001)
    rho = (np.exp(-gamma * lag) * np.cos(omega * lag))[None]
    whole = gamma / (gamma**2 + omega**2)
    assert integral_times(rho, 0.01, "decaying_cosine")[0] == pytest.approx(whole, rel=1e-5)
    zero = min(np.pi / (2 * omega), 20.0)
    first = quad(lambda s: np.exp(-gamma * s) * np.cos(omega * s), 0.0, zero)[0]
    assert integral_times(rho, 0.01, "first_zero")[0] == pytest.approx(first, abs=2e-4)  # trapezia


def test_decaying_cosine_against_scipy():
    rng = np.random.default_rng(5)
    lag = 0.1 * np.arange(120)
    rho = np.stack([np.exp(-g * lag) * np.cos(w * lag) for g, w in ((0.5, 1.0), (0.4, 0.0), (1.0, 2.0))])
    rho = rho + 0.05 * rng.standard_normal((3, 12)).repeat(10, axis=1)
    rho[1] = 0.5 * np.exp(-2.0 * lag) + 0.5 * np.exp(-lag / 3.0)  # slower than any cosine: omega is zero
    gamma, omega = decaying_cosine(rho, 0.1)
    assert omega[1] == 0.0
    for row, g, w in zip(rho, gamma, omega, strict=True):

        def rest(p, row=row):
            return np.exp(-p[0] * lag) * np.cos(p[1] * lag) - row

        starts = [(0.5, 1.0), (0.5, 0.0), (1.0, 2.0), (0.3, 0.1)]
        best = min((least_squares(rest, s, xtol=1e-12, ftol=1e-12) for s in starts), key=lambda f: f.cost)
        assert 0.5 * np.sum(rest((g, w)) ** 2) <= best.cost * (1 + 1e-6)
        assert g == pytest.approx(best.x[0], rel=1e-3)
        assert g / (g**2 + w**2) == pytest.approx(best.x[0] / np.sum(best.x**2), rel=1e-3)


def test_taylor_limits_and_the_law_between():
    """Mean square displacement is twice the integral of (t - s) R(s) (Taylor 1921), here by quadrature."""
    for t in (0.01, 1.0, 7.0, 300.0):
        true = quad(lambda s, t=t: 2.0 * (t - s) * 0.3 * np.exp(-s / 2.5), 0.0, t, limit=200)[0]
        assert exponential_dispersion(t, 0.3, 2.5) == pytest.approx(true, rel=1e-7)
    assert exponential_dispersion(1e-3, 0.3, 2.5) == pytest.approx(ballistic_limit(1e-3, 0.3), rel=2e-4)
    assert exponential_dispersion(1e5, 0.3, 2.5) == pytest.approx(diffusive_limit(1e5, 0.3, 2.5), rel=5e-5)


def test_principal_axes_against_numpy():
    tensor = np.random.default_rng(1).standard_normal((50, 3))
    major, minor, angle = principal_axes(tensor)
    for row, big, small, turn in zip(tensor, major, minor, angle, strict=True):
        values, vectors = np.linalg.eigh([[row[0], row[2]], [row[2], row[1]]])
        np.testing.assert_allclose([small, big], values, atol=1e-12)
        along = np.array([np.cos(np.radians(turn)), np.sin(np.radians(turn))])
        assert abs(along @ vectors[:, 1]) == pytest.approx(1.0, abs=1e-9)


# --- known truth ----------------------------------------------------------------------------------------------------


def test_scales_of_particles_that_forget_exponentially():
    found = single_particle(drifters(n=60, step=2 * HOUR, position_error=100.0))
    assert found.converges
    assert found.cautions == ()
    # Differencing takes 2 step / (3 T_L) = 2.8 % of the variance and gives it to T_L (see eddy_velocities).
    smoothing = 2 * 2 / (3 * 48)
    assert abs(found.velocity.value - 0.2 * (1 - smoothing / 2)) < 4 * standard_error(found.velocity)
    for scale in found.scales:
        assert near(scale.time, MOTION.integral_time * (1 + smoothing))
        assert near(scale.length, 0.2 * MOTION.integral_time)
    assert near(found.diffusivity.mean, MOTION.diffusivity)
    assert standard_error(found.scale().time) < 0.1 * MOTION.integral_time


def test_scales_of_rotating_particles():
    motion = Motion(0.04, 1.0 / (2 * DAY), rotation=2 * np.pi / (5 * DAY))
    found = single_particle(drifters(n=60, motion=motion, step=HOUR))
    assert near(found.scale("decaying_cosine").time, motion.integral_time)
    assert near(found.scale("long_window").time, motion.integral_time)
    assert near(found.diffusivity.mean, motion.diffusivity)
    assert found.scale("first_zero").time.low > 1.5 * motion.integral_time  # it stops at the first zero


def test_removing_record_means_leaves_no_bias():
    """Ten times more data than any one survey: the diffusivity of 40-day records is right to a few per cent."""
    found = single_particle(drifters(n=400, days=40, seed=8), window=8 * DAY)
    # The mean over 4 to 8 days of the running integral 1 - exp(-s / 2 d).
    level = 1.0 - (np.exp(-2.0) - np.exp(-4.0)) / 2.0
    assert near(found.diffusivity.mean, level * MOTION.diffusivity)
    assert standard_error(found.diffusivity.mean) < 0.04 * MOTION.diffusivity


def sheared(n=300, shear=4e-7, **how):
    motion = Motion(0.04, 1.0 / (0.5 * DAY), shear=shear)
    return motion, drifters(n=n, days=30, motion=motion, step=HOUR, **how)


def test_dispersion_in_a_shear():
    """Okubo 1966, Saffman 1962 in diffusivity kappa: 2 kappa t + (2/3) G^2 kappa t^3 along, 2 kappa t across.

    Memory enters through the exact law across, and a double integral of its covariance along.
    """
    motion, tracks = sheared()
    t = np.array([5.0, 15.0, 29.0]) * DAY
    curves = absolute_dispersion(eddy_velocities(tracks, mean="none"), t)
    variance, memory, g = motion.variance, motion.integral_time, motion.shear
    across = exponential_dispersion(t, variance, memory)
    assert np.all(np.abs(curves.north.value - across) < 4 * curves.north.standard_error)
    # <y(a) y(b)> = [y2(a) + y2(b) - y2(b - a)] / 2 for stationary velocities.
    for k, end in enumerate(t):
        nodes, weights = np.polynomial.legendre.leggauss(80)
        a, w = 0.5 * end * (nodes + 1.0), 0.5 * end * weights
        grid = 0.5 * (
            exponential_dispersion(a[:, None], variance, memory)
            + exponential_dispersion(a[None], variance, memory)
            - exponential_dispersion(np.abs(a[:, None] - a[None]), variance, memory)
        )
        along = across[k] + g**2 * (w @ grid @ w)
        assert abs(curves.east.value[k] - along) < 4 * curves.east.standard_error[k]
    limit = 2 * motion.diffusivity * t + 2 / 3 * g**2 * motion.diffusivity * t**3
    assert along == pytest.approx(limit[-1], rel=0.1)  # order memory / t
    total = curves.east.value + curves.north.value
    np.testing.assert_allclose(curves.total.value, total, rtol=1e-12)


def test_tensor_in_a_shear():
    r"""Long after the memory, from <u(t) [x(t) - x(t - s)]> with u = u' + G y and y diffusing since the release:

    xx = kappa + G^2 kappa s (2 t - s - T_L), xy = G kappa s, yy = kappa; the mean of t over a record of length L is
    (L + s) / 2. They follow from <y(a) y(b)> = [V(a) + V(b) - V(b - a)] / 2 with V = 2 kappa (t - T_L), and
    <v(t) y(t - a)> = kappa exp(-a / T_L).
    """
    motion, tracks = sheared(shear=2e-6)
    found = single_particle(tracks, mean="none", window=5 * DAY)
    s = found.diffusivity.lag
    late = s[s.size // 2 :]
    kappa, g = motion.diffusivity, motion.shear
    along = np.mean(kappa + g**2 * kappa * late * (30 * DAY - motion.integral_time))
    mixed = np.mean(g * kappa * late)
    tensor = found.diffusivity
    # Error of each component from the intervals of the axes (the larger of the two bounds them).
    error = max(standard_error(tensor.major), standard_error(tensor.minor))
    np.testing.assert_allclose(tensor.tensor, [[along, mixed], [mixed, kappa]], atol=4 * error)
    assert near(tensor.angle, np.degrees(0.5 * np.arctan2(2 * mixed, along - kappa)))
    assert tensor.angle.low > 0.0  # an axis seen, not zero
    assert not found.converges  # sheared particles have no integral time


def test_mean_flow_grid_takes_a_shear_away():
    motion, tracks = sheared(n=100)
    x, y = np.array([-1e7, 1e7]), np.array([-2e6, 2e6])
    flow = MeanFlow(x, y, motion.shear * np.tile(y[:, None], (1, 2)), np.zeros((2, 2)), planar=True)
    found = single_particle(tracks, mean="grid", flow=flow)
    assert near(found.diffusivity.mean, motion.diffusivity)
    assert found.diffusivity.angle.high - found.diffusivity.angle.low == pytest.approx(180.0)
    assert found.converges


def test_axes_of_stretched_particles():
    """Positions stretched by 2 along 30 degrees: diffusivities 4 to 1 along and across, by the chain rule."""
    tracks = drifters(n=100)
    turn = np.radians(30.0)
    rotation = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    position = tracks.position.copy()
    position[:, :2] = position[:, :2] * [2.0, 1.0] @ rotation.T
    found = single_particle(replace(tracks, position=position)).diffusivity
    assert near(found.major, 4 * MOTION.diffusivity)
    assert near(found.minor, MOTION.diffusivity)
    assert near(found.angle, 30.0)
    assert found.angle.high - found.angle.low < 30.0


def test_pairs_of_independent_particles_separate_by_taylors_law():
    """D2 = r0^2 + 8 u'^2 T^2 (t/T - 1 + exp(-t/T)): two independent particles (Taylor 1921 for each)."""
    tracks, pairs = drifting_particles(MOTION, (400, 2), STEP, 161, 4, start_separation=5 * KM)
    times = np.array([0.125, 1.0, 4.0, 20.0]) * DAY
    curve = dispersion_statistics(tracks, pairs, times).relative_dispersion()
    x = times / (2 * DAY)
    true = (5 * KM) ** 2 + 8 * 0.04 * (2 * DAY) ** 2 * (x - 1 + np.exp(-x))
    assert np.all(np.abs(curve.value - true) < 4 * curve.standard_error)


def test_plateau_of_independent_pairs_is_twice_the_single_diffusivity():
    """For a flat kernel K, D2 = 4 K t in two dimensions (theory of diffusion); K = 2 kappa for independent pairs."""
    tracks, pairs = drifting_particles(MOTION, (200, 2), STEP, 481, 4, start_separation=5 * KM)
    curve = dispersion_statistics(tracks, pairs, np.array([15.0, 45.0]) * DAY).relative_dispersion()
    growth, spread = np.diff(curve.value)[0], curve.covariance
    error = np.sqrt(spread[0, 0] + spread[1, 1] - 2 * spread[0, 1])
    kappa = single_particle(tracks).diffusivity.mean
    per = 4 * 30 * DAY
    ratio = plateau_ratio(growth / per, error / per, kappa.value, standard_error(kappa))
    assert abs(np.log(ratio.value)) < 4 / 1.96 * np.log(ratio.high / ratio.value)
    assert ratio.high / ratio.value < 1.5


def test_energetic_seas_are_within_the_usual_range():
    # Common practice, no source: 1.5 to 3 x 10^4 m2/s where eddies are strong; u' = 0.3 m/s over 2 days.
    motion = Motion(0.09, 1.0 / (2 * DAY))
    assert motion.diffusivity == pytest.approx(1.6e4, rel=0.05)
    found = single_particle(drifters(n=60, motion=motion))
    assert 1.2e4 < found.diffusivity.mean.value < 2.1e4
    assert 1.5 * DAY < found.scale().time.value < 2.6 * DAY


def test_surface_drifters_remember_for_two_to_four_days():
    # Common practice, no source: integral times of 2 to 4 days at the surface; every method must find 3 days there.
    found = single_particle(drifters(n=60, motion=Motion(0.04, 1.0 / (3 * DAY))))
    assert all(2 * DAY < found.scale(method).time.value < 4 * DAY for method in METHODS)


def test_members_of_one_release_are_one_unit():
    """Particles that move as one are one particle: the error by releases is that of the releases alone."""
    motion = replace(MOTION, shared=1.0)
    tracks, _ = drifting_particles(motion, (15, 4), STEP, 480, 3)
    alone, _ = drifting_particles(motion, (15, 1), STEP, 480, 3)
    honest, hopeful = single_particle(tracks), single_particle(tracks, unit="particle")
    assert (honest.n_unit, hopeful.n_unit, honest.n_particle) == (15, 60, 60)
    ratio = standard_error(honest.diffusivity.mean) / standard_error(hopeful.diffusivity.mean)
    # sqrt 4, and the stretch for 15 units against 60; 600 resamples give an interval to 5 %.
    assert ratio == pytest.approx(2.0 * 1.11 / 1.03, rel=0.2)
    assert single_particle(alone).n_unit == 15


# --- laws -----------------------------------------------------------------------------------------------------------


def all_numbers(found) -> np.ndarray:
    rows = [found.velocity, found.diffusivity.major, found.diffusivity.minor, found.diffusivity.mean]
    for scale in found.scales:
        rows += [scale.time, scale.length]
    return np.array([[e.value, e.median, e.low, e.high] for e in rows])


@pytest.fixture(scope="module")
def base():
    tracks = drifters(n=12, days=30, position_error=200.0)
    return tracks, single_particle(tracks)


def test_scaling_of_lengths_and_times(base):
    tracks, found = base
    scaled = replace(
        tracks, position=3.0 * tracks.position, step=2.0 * tracks.step, position_error=3.0 * tracks.position_error
    )
    powers = np.array([1.5, 4.5, 4.5, 4.5] + [2.0, 3.0] * 3)  # m/s, m2/s, then s and m
    np.testing.assert_allclose(all_numbers(single_particle(scaled)), powers[:, None] * all_numbers(found), rtol=1e-7)


def test_rotation_mirror_and_shift(base):
    tracks, found = base
    turn = np.radians(20.0)
    position = tracks.position.copy()
    rotation = np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])
    position[:, :2] = position[:, :2] @ rotation + [1e5, -2e5]
    turned = single_particle(replace(tracks, position=position))
    np.testing.assert_allclose(all_numbers(turned), all_numbers(found), rtol=1e-6)
    angle = turned.diffusivity.angle.value - found.diffusivity.angle.value
    assert np.cos(np.radians(2 * (angle - 20.0))) == pytest.approx(1.0, abs=1e-9)
    mirrored = single_particle(replace(tracks, position=tracks.position * [-1.0, 1.0, 1.0]))
    np.testing.assert_allclose(all_numbers(mirrored), all_numbers(found), rtol=1e-6)
    assert mirrored.scale().east_time == found.scale().east_time


def test_plane_and_ellipsoid_agree(base):
    """On the equator a metre is 1/a radian of longitude and 1/(a (1 - e2)) of latitude (geodesy, from memory)."""
    tracks, found = base
    x, y = 0.01 * tracks.position[:, :2].T  # within 10 km, where the plane is good to (10 / 6378)^2
    a, e2 = 6378137.0, 0.00669437999014
    lon, lat = np.degrees(x / a) + 179.99, np.degrees(y / (a * (1 - e2)))
    place = replace(tracks, position=to_cartesian(lon, lat), planar=False, position_error=2.0)
    powers = np.array([0.01, 1e-4, 1e-4, 1e-4] + [1.0, 0.01] * 3)
    np.testing.assert_allclose(all_numbers(single_particle(place)), powers[:, None] * all_numbers(found), rtol=1e-4)


def test_order_of_tracks_does_not_change_values(base):
    tracks, found = base
    order = np.random.default_rng(1).permutation(tracks.n_track)
    rows = np.concatenate([np.arange(tracks.offset[k], tracks.offset[k + 1]) for k in order])
    moved = replace(
        tracks,
        position=tracks.position[rows],
        offset=np.append(0, np.cumsum(tracks.n_step[order])),
        release=tracks.release[order],
        labels=tuple("x" + tracks.labels[k] for k in order),
    )
    # Rows of units are in the order of releases, so that even the resamples are the same.
    np.testing.assert_allclose(all_numbers(single_particle(moved)), all_numbers(found), rtol=1e-9)


def test_twins_in_their_own_release_change_nothing(base):
    tracks, found = base
    twins = replace(
        tracks,
        position=np.concatenate([tracks.position] * 2),
        offset=np.append(tracks.offset, tracks.offset[1:] + tracks.offset[-1]),
        start_step=np.tile(tracks.start_step, 2),
        release=np.tile(tracks.release, 2),
        labels=tuple(f"{k}{side}" for side in "ab" for k in tracks.labels),
    )
    np.testing.assert_allclose(all_numbers(single_particle(twins)), all_numbers(found), rtol=1e-9)
    apart = single_particle(twins, unit="particle")
    np.testing.assert_allclose(all_numbers(apart)[:, 0], all_numbers(found)[:, 0], rtol=1e-9)
    ratio = standard_error(found.diffusivity.mean) / standard_error(apart.diffusivity.mean)
    # sqrt 2, and the stretch of 12 units (1.173) against that of 24 (1.078); resampling noise.
    assert ratio == pytest.approx(np.sqrt(2.0) * 1.173 / 1.078, rel=0.15)


def test_same_seed_same_numbers_and_no_way_back(base):
    tracks, found = base
    np.testing.assert_array_equal(all_numbers(single_particle(tracks)), all_numbers(found))
    with pytest.raises(ValueError, match="read-only"):
        found.correlation.both[0] = 2.0
    with pytest.raises(ValueError, match="read-only"):
        found.diffusivity.east[0] = 2.0


# --- estimates and judgement ----------------------------------------------------------------------------------------


def test_interval_of_a_mean_is_students():
    """For the mean of a few normal numbers the stretched bootstrap interval is close to Student's."""
    values = np.random.default_rng(3).standard_normal(8)
    draws = resamples(8, 20_000, 1)
    found = estimate(draws @ values / draws.sum(axis=1), 8)
    half = 2.3646 * values.std(ddof=1) / np.sqrt(8)  # t table, 7 degrees of freedom
    assert found.value == pytest.approx(values.mean(), abs=1e-12)
    # The bootstrap distribution of eight numbers is a few per cent shorter than normal in its tails.
    assert 0.5 * (found.high - found.low) == pytest.approx(half, rel=0.06)


def test_positive_numbers_have_intervals_symmetric_in_the_logarithm():
    draws = np.append(2.0, 2.0 * np.exp(0.3 * np.random.default_rng(1).standard_normal(200_000)))
    found = estimate(draws, 1000, positive=True)
    assert found.high / 2.0 == pytest.approx(2.0 / found.low, rel=1e-12)
    # 1.96 standard deviations of the logarithm; t with 999 degrees of freedom is 0.1 % more.
    assert np.log(found.high / 2.0) == pytest.approx(1.96 * 0.3 * 1.0017, rel=0.01)
    # No logarithm of what comes close to zero.
    near_zero = estimate(draws - 1.9, 1000, positive=True)
    assert near_zero == estimate(draws - 1.9, 1000)
    assert near_zero.low < 0.0 < near_zero.high


def test_a_slow_decline_does_not_level_off():
    lag = np.linspace(0.0, 10.0, 101)
    flat, rising = np.exp(-lag)[None], (1.0 / (1.0 + lag))[None]
    falling = (np.exp(-lag) - 0.15)[None]
    assert levelling(flat, 0.1, 1).converges
    for rho, sign in ((rising, r"\+"), (falling, "-")):
        found = levelling(rho, 0.1, 1)
        assert not found.converges
        assert found.reason.startswith("over the second half of the window the running integral changes by " + sign[-1])
    noisy = np.exp(-lag) + 0.4 * np.random.default_rng(1).standard_normal((200, 1)) * (lag > 5)
    noisy[0] = flat[0]
    assert levelling(noisy, 0.1, 20).reason.startswith("whether it levels off is known to +-")
    assert "not positive" in levelling(-flat, 0.1, 1).reason


def test_one_drifter_has_numbers_without_intervals():
    found = single_particle(drifters(n=1))
    assert found.n_unit == 1
    assert np.isnan(found.velocity.low)
    assert found.velocity.value > 0.1
    assert "one independent unit says nothing of the scatter between units: no intervals" in found.cautions
    assert "(no interval)" in found.summary()
    assert np.isnan(found.numbers()["diffusivity_m2_s"]["mean"]["lo95"])
    assert "3 independent units only: intervals are rough" in single_particle(drifters(n=3)).cautions


def test_cautions_of_step_noise_and_mean():
    coarse = single_particle(drifters(n=12, step=12 * HOUR))
    assert any(c.startswith("velocities are differences over two steps of 12 h") for c in coarse.cautions)
    restless = single_particle(drifters(n=12, days=10, step=HOUR, motion=Motion(0.04, 2.0 / HOUR)))
    assert any(c.startswith("velocities are forgotten within two steps of 1 h") for c in restless.cautions)
    assert near(restless.diffusivity.mean, 0.04 * HOUR / 2)  # the diffusivity is right all the same
    noisy = single_particle(drifters(n=12, step=HOUR, position_error=1100.0))
    assert any(c.startswith("position errors make more velocity variance") for c in noisy.cautions)
    assert near(noisy.velocity, 0.2)  # and yet the noise is taken out
    slow = single_particle(drifters(n=12), mean="lowpass", period=20 * DAY)
    assert any(c.startswith("a low-pass mean removes the slow part") for c in slow.cautions)
    assert "velocities left out, their mean is unknown" in slow.summary()


def test_short_tracks_have_no_part():
    tracks = drifters(n=13)
    short = tracks.offset[-1] - 400
    cut = replace(tracks, position=tracks.position[:short], offset=np.append(tracks.offset[:-1], short))
    found = single_particle(cut)
    assert (found.n_particle, found.n_short) == (12, 1)
    assert "1 tracks left out as too short" in found.summary()


def test_errors():
    with pytest.raises(DataError, match=r"typical tracks have 8 velocities in a row; at least 15 are needed"):
        single_particle(drifters(n=3, days=1.25))
    with pytest.raises(CaseError, match=r"window: got 40 days; must be 0.625 to 19.88 days, a third"):
        single_particle(drifters(n=3), window=40 * DAY)
    with pytest.raises(CaseError, match=r"window: got nan days"):
        single_particle(drifters(n=3), window=np.nan)
    with pytest.raises(DataError, match=r"position errors alone give a velocity variance of 0.214 m2/s2"):
        single_particle(replace(drifters(n=3), position_error=0.3 / np.sqrt(0.21) * 1e4 * 1.08))
    v = eddy_velocities(drifters(n=3))
    for times in ([1.0, 2.0], [-2 * STEP], [100 * DAY], []):
        with pytest.raises(DataError, match=r"absolute dispersion: got times .* must rise from step to step"):
            absolute_dispersion(v, np.array(times))
    with pytest.raises(DataError, match="motion: got variance 0 m2/s2"):
        Motion(0.0, 1.0)
    with pytest.raises(DataError, match=r"drifting particles: got shape \(0, 1\), 5 steps"):
        drifting_particles(MOTION, (0, 1), 1.0, 5, 1)


def test_summary_table_and_numbers(base):
    _, found = base
    text, table, numbers = found.summary(), found._repr_html_(), found.numbers()
    assert "12 particles in 12 independent units, mean of each record removed" in text
    assert f"{found.diffusivity.mean.value:.3g} m2/s" in text
    assert f"{found.diffusivity.mean.value:.3g} m2/s" in table
    assert set(numbers["integral_time_d"]) == set(METHODS) == set(numbers["integral_length_km"])
    time = found.scale("first_zero").time
    assert numbers["integral_time_d"]["first_zero"]["median"] == pytest.approx(time.median / DAY)
    assert numbers["integral_time_d"]["first_zero"]["value"] == pytest.approx(time.value / DAY)
    assert numbers["integral_length_km"]["long_window"]["hi95"] == pytest.approx(found.scales[0].length.high / KM)
    assert set(numbers["diffusivity_m2_s"]) == {"major", "minor", "mean"}
    assert numbers["converges"] is found.converges
    # Taylor's limits of both components together: 2 u'^2 t^2 and 4 kappa t.
    assert found.ballistic_limit(10.0) == pytest.approx(200.0 * found.velocity.value**2)
    assert found.diffusive_limit(10.0) == pytest.approx(40.0 * found.diffusivity.mean.value)


# --- cross-checks ---------------------------------------------------------------------------------------------------


def test_plateau_against_twice_the_single_diffusivity():
    fine = plateau_ratio(10_000.0, 1_000.0, 5_500.0, 500.0)
    assert fine.agrees
    assert fine.value == pytest.approx(10 / 11)
    # Relative errors add in squares; 1.96 of them in the logarithm (delta method, standard).
    assert np.log(fine.high / fine.value) == pytest.approx(1.96 * np.hypot(0.1, 1 / 11), rel=1e-4)
    assert fine.summary().endswith("expected 1: agrees")
    wrong = plateau_ratio(20_000.0, 1_000.0, 5_000.0, 500.0)
    assert not wrong.agrees
    assert wrong.summary().endswith("does not agree")
    with pytest.raises(DataError, match=r"got values 0 and 1e\+04 with errors 1 and 2"):
        plateau_ratio(0.0, 1.0, 5_000.0, 1.0)


def test_length_against_a_deformation_radius():
    found = length_ratio("integral length", 35_000.0, 3_500.0, 30_000.0)
    assert found.value == pytest.approx(35 / 30)
    assert np.isnan(found.expected)
    assert found.summary() == "integral length over the deformation radius: 1.17 (0.959 to 1.42)"
    with pytest.raises(DataError, match="integral length over the deformation radius: got values"):
        length_ratio("integral length", 35_000.0, 3_500.0, -1.0)
