"""What a recipe adds to a synthetic survey: nothing at zero strength, else what closed forms say."""

from datetime import UTC, datetime

import numpy as np
import pytest
from scipy.special import j0

from regimes.errors import CaseError, DataError
from regimes.synthetic import recipe_from, simulate, truth
from regimes.synthetic.shear_diffusion import ShearDiffusion, shear_diffusion_tracks

SIGMAS = 4.5  # Monte Carlo tolerance in standard errors, fixed seeds
DAY = 86400.0
BASE = {
    "name": "invented strait",
    "seed": 11,
    "kernel": {
        "regimes": ["exponential", "richardson"],
        "transitions_km": [10.0],
        "rate_per_d": 1.0,
        "reference_km": 1.0,
    },
    "releases": {
        "number": 6,
        "particles": 3,
        "start_separation_km": 0.5,
        "first": datetime(2031, 5, 1, tzinfo=UTC),
        "interval_h": 30.0,
    },
    "records": {"duration_d": 4.0, "fix_interval_h": 3.0},
    "place": {"spread_km": 40.0, "drift_m_s": [0.1, -0.05]},
}
# Pairs that keep their separation to 1e-5: only what is added moves them.
STILL = {"regimes": ["exponential"], "transitions_km": [], "rate_per_d": 1e-14}
GLOBE = {"longitude": 179.8, "latitude": 52.0}


def recipe(**changes):
    """The base recipe with changed or added sections; None drops one."""
    content = {key: dict(value) if isinstance(value, dict) else value for key, value in BASE.items()}
    for key, value in changes.items():
        if value is None:
            del content[key]
        elif isinstance(value, dict) and key in content:
            content[key] |= value
        else:
            content[key] = value
    return recipe_from(content)


def paths(made):
    """Positions (n_release, n_member, n_fix, 2) of a survey without losses or gaps."""
    size = (made.releases.number, made.releases.particles, made.records.n_fix, 2)
    return simulate(made).position.reshape(size)


def added(changes, **more):
    """What sections add to the paths of the clean twin, on a plane."""
    return paths(recipe(**more, **changes)) - paths(recipe(**more))


def assert_mean(values, expected):
    error = np.std(values) / np.sqrt(len(values))
    assert abs(np.mean(values) - expected) < SIGMAS * error, (np.mean(values), expected, error)


def assert_same_bytes(one, two):
    assert one.time.tobytes() == two.time.tobytes()
    assert one.position.tobytes() == two.position.tobytes()
    assert one.labels == two.labels


OBSERVED = {"position_error_m": 20.0, "loss_per_d": 0.1, "gap_probability": 0.05}


@pytest.mark.parametrize("place", [{}, GLOBE])
@pytest.mark.parametrize(
    "nothing",
    [
        {"oscillation": {"speed_m_s": 0.0, "period_h": 15.0}},
        {"oscillation": {"speed_m_s": 0.0, "period_h": 15.0, "wavelength_km": 30.0}},
        {"shear": {"rate_per_d": 0.0, "direction_deg": 20.0}},
        {"convergence": {"rate_per_d": 0.0, "direction_deg": 20.0, "lasts_d": 1.0}},
        {"place": {"eddy_speed_m_s": 0.0, "eddy_time_d": 2.0}},
    ],
    ids=str,
)
def test_zero_strength_is_the_clean_twin(nothing, place):
    both = {"place": place, "records": OBSERVED}
    changed = {section: both.get(section, {}) | keys for section, keys in nothing.items()}
    assert_same_bytes(simulate(recipe(**both | changed)), simulate(recipe(**both)))


@pytest.mark.parametrize(
    "something",
    [
        {"oscillation": {"speed_m_s": 0.3, "period_h": 14.9}},
        {"oscillation": {"speed_m_s": 0.3, "period_h": 14.9, "wavelength_km": 30.0}},
        {"shear": {"rate_per_d": 0.5, "direction_deg": 20.0}},
        {"convergence": {"rate_per_d": 0.5, "direction_deg": 20.0, "lasts_d": 1.0}},
    ],
    ids=str,
)
def test_starts_stay_and_strength_moves(something):
    moved = added(something)
    assert np.all(moved[:, :, 0] == 0)
    assert np.all(np.hypot(*moved[:, :, 1:].reshape(-1, 2).T) > 0.1)


class TestOscillation:
    def test_speed_of_independent_phases(self):
        """Chords of a circle of radius u / omega, hourly: u sin(omega h / 2) / (omega h / 2), at every fix."""
        made = {"oscillation": {"speed_m_s": 0.4, "period_h": 20.0}}
        moved = added(made, records={"fix_interval_h": 1.0})
        half = np.pi / 20.0
        speed = np.linalg.norm(np.diff(moved, axis=2), axis=3) / 3600.0
        assert speed == pytest.approx(np.full(speed.shape, 0.4 * np.sin(half) / half), rel=1e-6)

    def test_speed_of_a_coherent_field(self):
        """Root mean square speed of a particle 0.4 m/s, of each component 0.4 / sqrt 2; chords as above."""
        made = {"oscillation": {"speed_m_s": 0.4, "period_h": 20.0, "wavelength_km": 30.0}}
        moved = added(made, kernel=STILL, releases={"number": 1500}, records={"duration_d": 1.0, "fix_interval_h": 1.0})
        half = np.pi / 20.0
        squared = (np.diff(moved, axis=2) / 3600.0) ** 2 * (half / np.sin(half)) ** 2
        for component in range(2):
            assert_mean(squared[..., component].mean(axis=(1, 2)), 0.4**2 / 2)

    def test_speed_in_a_world_without_memory_does_not_depend_on_the_fixes(self):
        """The world's own fix-to-fix speeds double from two hours to half an hour; those of the waves stay."""
        made = {"oscillation": {"speed_m_s": 0.4, "period_h": 20.0, "wavelength_km": 100.0}}
        for hours in (0.5, 2.0):
            records = {"duration_d": 10.0, "fix_interval_h": hours}
            moved = added(made, releases={"number": 200}, records=records)
            half = np.pi * hours / 20.0
            squared = np.sum((np.diff(moved, axis=2) / (3600.0 * hours)) ** 2, axis=3) * (half / np.sin(half)) ** 2
            mean = squared.mean(axis=(1, 2))
            # 0.03: particles wander through the waves; 1.02 and 1.04, both +-0.02, were found with 1000 releases
            assert np.mean(mean) == pytest.approx(0.4**2, abs=SIGMAS * mean.std() / np.sqrt(200) + 0.03 * 0.16)

    @pytest.mark.parametrize("wavelength", [2.0, 12.0])
    def test_coherence(self, wavelength):
        """At half a period particles r apart have moved apart by twice z1 - z2: 8 (u / omega)^2 (1 - J0(k r))."""
        made = {"oscillation": {"speed_m_s": 0.2, "period_h": 6.0, "wavelength_km": wavelength}}
        moved = added(made, kernel=STILL, releases={"number": 3000}, records={"duration_d": 0.125})
        apart = np.sum((moved[:, 1, 1] - moved[:, 0, 1]) ** 2, axis=1)
        radius = 0.2 * 6 * 3600 / (2 * np.pi)
        assert_mean(apart, 8 * radius**2 * (1 - j0(2 * np.pi * 0.5 / wavelength)))

    def test_particles_far_beyond_the_wavelength_are_as_independent_phases(self):
        far = {"kernel": STILL, "releases": {"number": 2000, "start_separation_km": 500.0}}
        far |= {"records": {"duration_d": 0.125}}
        radius = 0.2 * 6 * 3600 / (2 * np.pi)
        for wavelength in ({"wavelength_km": 20.0}, {}):
            moved = added({"oscillation": {"speed_m_s": 0.2, "period_h": 6.0} | wavelength}, **far)
            apart = np.sum((moved[:, 1, 1] - moved[:, 0, 1]) ** 2, axis=1)
            error = apart.std() / np.sqrt(2000)
            # J0 falls only as the root of the distance: sqrt(2 / (pi k r)) = 0.064 here at most
            assert np.mean(apart) == pytest.approx(8 * radius**2, abs=SIGMAS * error + 0.064 * 8 * radius**2)

    @pytest.mark.parametrize(("latitude", "turn"), [(40.0, -1.0), (-40.0, 1.0), (None, -1.0)])
    def test_turns_anticyclonically(self, latitude, turn):
        place = {} if latitude is None else {"longitude": 3.0, "latitude": latitude}
        made = recipe(place=place, oscillation={"speed_m_s": 0.3, "period_h": 24.0}, kernel=STILL)
        clean = recipe(place=place, kernel=STILL)
        velocity = np.diff(paths(made) - paths(clean), axis=2)
        one, two = velocity[:, :, :-1], velocity[:, :, 1:]
        assert np.all(np.sign(one[..., 0] * two[..., 1] - one[..., 1] * two[..., 0]) == turn)

    @pytest.mark.parametrize("latitude", [30.0, -52.0])
    def test_inertial_period(self, latitude):
        """Half a pendulum day, 11.967 h over the sine of latitude (common practice); after one all are back."""
        period = 11.967 / np.sin(np.radians(abs(latitude)))
        place = {"longitude": 3.0, "latitude": latitude, "drift_m_s": [0.0, 0.0]}
        records = {"duration_d": 3.0, "fix_interval_h": period}
        made = {"place": place, "records": records, "kernel": STILL}
        back = paths(recipe(oscillation={"speed_m_s": 0.5}, **made)) - paths(recipe(**made))
        # 1e-4: five printed digits of 11.967, over two or three periods; radius 7 km or less is 0.07 degrees
        assert np.abs(back).max() < 2 * np.pi * 1e-4 * 3 * 0.15
        half = paths(recipe(oscillation={"speed_m_s": 0.5, "period_h": 2 * period}, **made)) - paths(recipe(**made))
        assert np.abs(half).max() > 0.05

    def test_displacement_scales_with_speed_and_period(self):
        one = added({"oscillation": {"speed_m_s": 0.1, "period_h": 12.0}}, kernel=STILL)
        two = added({"oscillation": {"speed_m_s": 0.3, "period_h": 12.0}}, kernel=STILL)
        long = added({"oscillation": {"speed_m_s": 0.1, "period_h": 24.0}}, kernel=STILL, records={"fix_interval_h": 6})
        assert two == pytest.approx(3 * one, abs=1e-6)
        # the same angles at twice the times
        assert long == pytest.approx(2 * one[:, :, : long.shape[2]], abs=1e-6)


class TestLinearFlows:
    @pytest.mark.parametrize("direction", [0.0, 50.0, -120.0])
    def test_shear_of_still_pairs(self, direction):
        """Differences grow as S t times the distance to the left of the flow, along it alone."""
        made = {"shear": {"rate_per_d": 0.8, "direction_deg": direction}}
        clean = paths(recipe(kernel=STILL))
        moved = added(made, kernel=STILL)
        turn = np.exp(-1j * np.radians(direction))
        before, change = (turn * ((x[:, 1] - x[:, 0]) @ np.array([1, 1j])) for x in (clean, moved))
        days = np.arange(before.shape[1]) * 0.125
        assert change.real == pytest.approx(0.8 * days * before.imag, abs=0.02)
        assert change.imag == pytest.approx(np.zeros(change.shape), abs=1e-6)

    def test_shear_leaves_the_centroid_and_the_cross_axis(self):
        moved = added({"shear": {"rate_per_d": 2.0, "direction_deg": 90.0}})
        assert moved.mean(axis=1) == pytest.approx(np.zeros(moved.mean(axis=1).shape), abs=1e-5)
        assert np.abs(moved[..., 0]).max() < 1e-9
        assert np.abs(moved[..., 1]).max() > 500.0

    def test_shear_of_either_sign_and_strength(self):
        one, two = (added({"shear": {"rate_per_d": s}}) for s in (0.5, -1.0))
        assert two == pytest.approx(-2 * one, abs=1e-6)

    @pytest.mark.parametrize("direction", [0.0, 65.0])
    def test_convergence_of_still_pairs(self, direction):
        """exp(-gamma t) along the direction until it ends, between two fixes; nothing across it."""
        made = {"convergence": {"rate_per_d": 0.7, "direction_deg": direction, "lasts_d": 2.05}}
        moved, clean = (paths(recipe(kernel=STILL, **m)) for m in (made, {}))
        turn = np.exp(-1j * np.radians(direction))
        after, before = (turn * ((x[:, 1] - x[:, 0]) @ np.array([1, 1j])) for x in (moved, clean))
        days = np.minimum(np.arange(before.shape[1]) * 0.125, 2.05)
        assert after.real == pytest.approx(before.real * np.exp(-0.7 * days), abs=0.01)
        assert after.imag == pytest.approx(before.imag, abs=1e-6)

    def test_mean_squared_separation_under_convergence(self):
        """(1 + exp(-2 gamma t)) / 2 over all directions."""
        made = {"convergence": {"rate_per_d": 1.0, "direction_deg": 30.0, "lasts_d": 9.0}}
        where = paths(recipe(kernel=STILL, releases={"number": 2000, "particles": 2}, **made))
        apart = np.sum((where[:, 1, -1] - where[:, 0, -1]) ** 2, axis=1) / 500.0**2
        assert_mean(apart, (1 + np.exp(-8.0)) / 2)

    def test_balance_of_convergence_and_diffusion(self):
        """Constant relative diffusivity K against -gamma xi: variance of the separation along the axis K / gamma."""
        # K = r^2 / day / 2 at 1 km
        diffusive = {"regimes": ["diffusive"], "transitions_km": []}
        made = {"convergence": {"rate_per_d": 1.5, "direction_deg": 0.0, "lasts_d": 99.0}}
        size = {"number": 2000, "particles": 2}
        records = {"duration_d": 5.0, "fix_interval_h": 1.0}
        where = paths(recipe(kernel=diffusive, releases=size, records=records, **made))
        apart = where[:, 1, -1] - where[:, 0, -1]
        assert_mean(apart[:, 0] ** 2, 0.5e6 / 1.5 + 0.125e6 * np.exp(-15.0))
        assert_mean(apart[:, 1] ** 2, 0.125e6 + 2 * 0.5e6 * 5.0)

    def test_pairs_close_in_before_they_part(self):
        made = {"convergence": {"rate_per_d": 3.0, "direction_deg": 0.0, "lasts_d": 1.0}}
        slow = {"regimes": ["exponential"], "transitions_km": [], "rate_per_d": 0.05}
        size = {"number": 300, "particles": 2}
        where = paths(recipe(kernel=slow, releases=size, records={"duration_d": 20.0}, **made))
        apart = np.sqrt(np.mean(np.sum((where[:, 1] - where[:, 0]) ** 2, axis=2), axis=0))
        least = np.argmin(apart)
        assert 0.5 <= least * 0.125 <= 1.5
        assert apart[least] < 0.95 * apart[0]
        assert apart[-1] > 2 * apart[0]


class TestEddies:
    @pytest.mark.parametrize("hours", [6.0, 24.0])
    def test_centres_spread_as_taylor_says(self, hours):
        """2 u'^2 T (t - T (1 - exp(-t / T))) in each component, u' = speed / sqrt 2, at any fix interval."""
        made = {"place": {"eddy_speed_m_s": 0.3, "eddy_time_d": 2.0}}
        size = {"releases": {"number": 2000, "particles": 2}, "kernel": STILL}
        moved = added(made, records={"duration_d": 6.0, "fix_interval_h": hours}, **size)
        assert moved[:, 0] == pytest.approx(moved[:, 1], abs=1e-6)
        for day in (1, 6):
            expected = 0.09 * 2 * (day - 2 * (1 - np.exp(-day / 2))) * DAY**2
            for component in range(2):
                assert_mean(moved[:, 0, round(day * 24 / hours), component] ** 2, expected)

    def test_separations_do_not_know(self):
        made, clean = recipe(place={"eddy_speed_m_s": 0.3, "eddy_time_d": 2.0}), recipe()
        apart = (np.diff(paths(m), axis=1) for m in (made, clean))
        assert next(apart) == pytest.approx(next(apart), abs=1e-6)

    def test_velocity_remembers(self):
        """Correlation of mean velocities of successive intervals h << T: 1 - 2 h / (3 T), to first order."""
        made = {"place": {"eddy_speed_m_s": 0.3, "eddy_time_d": 5.0}}
        moved = added(made, records={"fix_interval_h": 3.0}, releases={"number": 1000, "particles": 2}, kernel=STILL)
        velocity = np.diff(moved[:, 0], axis=1) / 10800.0
        assert_mean(np.mean(velocity**2, axis=(1, 2)), 0.045 * (1 - 0.025 / 3))
        lost = np.mean((velocity[:, 1:] - velocity[:, :-1]) ** 2, axis=(1, 2))
        assert_mean(lost, 2 * 0.045 * (2 / 3) * 0.025)


def moments(where, direction):
    """Separations of the first two members in the frame of the flow: (X, Y), each (n_release, n_fix)."""
    turned = np.exp(-1j * np.radians(direction)) * ((where[:, 1] - where[:, 0]) @ np.array([1, 1j]))
    return turned.real, turned.imag


class TestShearDiffusion:
    @pytest.mark.parametrize(("hours", "direction"), [(48.0, 0.0), (4.0, 130.0)])
    def test_moments(self, hours, direction):
        """Okubo (1966), Young, Rhines & Garrett (1982), from memory: the t^3 law along the flow, at any step."""
        world = {"diffusivity_m2_s": 2.0, "rate_per_d": 0.9, "direction_deg": direction}
        size = {"number": 6000, "particles": 2, "start_separation_km": 1.0}
        records = {"duration_d": 4.0, "fix_interval_h": hours}
        x, y = moments(paths(recipe(kernel=None, shear_diffusion=world, releases=size, records=records)), direction)
        x0, y0 = x[:, 0], y[:, 0]
        for day in (2, 4):
            k, kt, s = round(day * 24 / hours), 2.0 * day * DAY, 0.9 * day
            assert_mean(y[:, k] ** 2, 0.5e6 + 4 * kt)
            assert_mean(x[:, k] ** 2, 0.5e6 * (1 + s**2) + 4 * kt + 4 / 3 * kt * s**2)
            assert_mean((x[:, k] - x0 - s * y0) * (y[:, k] - y0), 2 * kt * s)

    def test_late_growth_is_cubic(self):
        """Doubling the time multiplies <X^2> by 8, and X stays Gaussian: kurtosis 3."""
        world = {"diffusivity_m2_s": 5.0, "rate_per_d": 3.0}
        size = {"number": 5000, "particles": 2, "start_separation_km": 0.001}
        records = {"duration_d": 20.0, "fix_interval_h": 240.0}
        x, _ = moments(paths(recipe(kernel=None, shear_diffusion=world, releases=size, records=records)), 0.0)
        # relative errors of two independent variances, an upper bound: later motion shares the earlier one's
        expected = 8 * (1 + 3 / 60**2) / (1 + 3 / 30**2)
        assert np.mean(x[:, 2] ** 2) / np.mean(x[:, 1] ** 2) == pytest.approx(expected, rel=SIGMAS * np.sqrt(4 / 5000))
        kurtosis = np.mean(x[:, 2] ** 4) / np.mean(x[:, 2] ** 2) ** 2
        assert kurtosis == pytest.approx(3.0, abs=SIGMAS * np.sqrt(24 / 5000))

    def test_without_shear_pairs_diffuse_evenly(self):
        world = {"diffusivity_m2_s": 2.0, "rate_per_d": 0.0}
        size = {"number": 3000, "particles": 2, "start_separation_km": 1.0}
        x, y = moments(paths(recipe(kernel=None, shear_diffusion=world, releases=size)), 0.0)
        for z in (x, y):
            assert_mean(z[:, -1] ** 2, 0.5e6 + 4 * 2.0 * 4 * DAY)

    def test_scaling(self):
        """Lengths by a, times by b: kappa by a^2 / b and S by 1 / b give the same paths."""
        options = ((3, 4), 100.0, 10.0, 6, 5)
        one, _ = shear_diffusion_tracks(ShearDiffusion(2.0, 0.01, 33.0), *options)
        two, _ = shear_diffusion_tracks(ShearDiffusion(2.0 * 9 / 7, 0.01 / 7, 33.0), (3, 4), 300.0, 70.0, 6, 5)
        assert two.position == pytest.approx(3 * one.position, rel=1e-9, abs=1e-9)
        again, _ = shear_diffusion_tracks(ShearDiffusion(2.0, 0.01, 33.0), *options)
        assert again.position.tobytes() == one.position.tobytes()

    def test_truth(self):
        world = {"diffusivity_m2_s": 2.0, "rate_per_d": -0.9}
        found = truth(recipe(kernel=None, shear_diffusion=world))
        assert found == {"world": "shear_diffusion", "direction_deg": 0.0} | world

    @pytest.mark.parametrize("numbers", [(0.0, 1.0, 0.0), (1.0, np.nan, 0.0), (1.0, 1.0, np.inf)])
    def test_flows_that_cannot_be(self, numbers):
        with pytest.raises(DataError, match="diffusivity must be > 0 and all finite; correct the numbers"):
            ShearDiffusion(*numbers)

    def test_releases_of_one(self):
        with pytest.raises(DataError, match="got 1 particles in a release; must be 2 or more"):
            shear_diffusion_tracks(ShearDiffusion(1.0, 1.0), (3, 1), 1.0, 1.0, 5, 1)


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        (
            {"oscillation": {"speed_m_s": 0.1}},
            r"got \[oscillation\] on a plane without period_h; must give period_h, or longitude and latitude",
        ),
        (
            {"oscillation": {"speed_m_s": 0.1}, "place": {"longitude": 1.0, "latitude": -1.5}},
            r"without period_h at latitude -1.5; must give period_h within 2 degrees of the equator",
        ),
        ({"oscillation": {"speed_m_s": -0.1, "period_h": 9.0}}, r"oscillation.speed_m_s: got -0.1; must be >= 0"),
        ({"oscillation": {"period_h": 0.0}}, r"oscillation.speed_m_s: missing(.|\n)*oscillation.period_h: got 0.0"),
        ({"shear": {"rate_per_day": 0.1}}, r"shear.rate_per_day: unknown key; known: rate_per_d, .* did you mean rate"),
        ({"convergence": {"rate_per_d": -1.0, "lasts_d": 1.0}}, r"convergence.rate_per_d: got -1.0; must be >= 0"),
        ({"place": {"eddy_speed_m_s": 0.1}}, "got one of eddy_speed_m_s and eddy_time_d; must give both, or none"),
        (
            {"shear_diffusion": {"diffusivity_m2_s": 1.0, "rate_per_d": 0.1}},
            r"got 2 of \[kernel\], \[fourier\] and \[shear_diffusion\]; must give one world",
        ),
        (
            {"shear_diffusion": {"diffusivity_m2_s": 0.0}},
            r"diffusivity_m2_s: got 0.0; must be > 0(.|\n)*rate_per_d: miss",
        ),
        ({"convergence": {"rate_per_d": 1.0}}, r"convergence.lasts_d: missing; must be given"),
    ],
)
def test_bad_input(changes, message):
    with pytest.raises(CaseError, match=message):
        recipe(**changes)
