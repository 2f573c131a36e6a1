"""What a recipe adds to a synthetic survey: nothing at zero strength, else what closed forms say."""

from datetime import UTC, datetime

import numpy as np
import pytest
from scipy import stats
from scipy.special import j0

from regimes.errors import CaseError, DataError
from regimes.synthetic import recipe_from, simulate, truth
from regimes.synthetic.linear_flow import convergence_displacement
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
WIDE = {"diffusivity_m2_s": 5.0, "rate_per_d": 0.0}
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
        {"records": {"error_memory_h": 0.0}},
        {"records": {"error_tail": 3.0, "error_memory_h": 9.0, "position_error_m": 0.0}},
        {"records": {"loss_per_d_apart": 0.0, "apart_km": 1.0}},
        {"instruments": {"slip_share": 0.0, "slip_m_s": [0.1, 0.0]}},
        {"instruments": {"slip_share": 0.5, "slip_m_s": [0.0, 0.0]}},
        {"faults": {"lashed": 0, "grounded": 0, "picked_up": 0}},
    ],
    ids=str,
)
def test_zero_strength_is_the_clean_twin(nothing, place):
    error = nothing.get("records", {}).get("position_error_m", 20.0)
    both = {"place": place, "records": OBSERVED | {"position_error_m": error}}
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


def test_contaminations_draw_from_streams_of_their_own():
    """What several add is the sum of what each adds, and none of them changes which fixes arrive."""
    each = [
        {"oscillation": {"speed_m_s": 0.3, "period_h": 14.9}},
        {"instruments": {"slip_share": 0.4, "slip_m_s": [0.1, 0.02]}},
        {"place": {"eddy_speed_m_s": 0.2, "eddy_time_d": 2.0}},
        {"records": {"position_error_m": 20.0, "error_tail": 4.0, "error_memory_h": 5.0}},
    ]
    together = {section: keys for one in each for section, keys in one.items()}
    assert added(together) == pytest.approx(sum(added(one) for one in each), abs=1e-6)
    made = together | {"records": together["records"] | OBSERVED}
    assert simulate(recipe(**made)).time.tobytes() == simulate(recipe(records=OBSERVED)).time.tobytes()


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

    @pytest.mark.parametrize("world", [{}, {"kernel": None, "shear_diffusion": WIDE}])
    def test_shear_leaves_the_centroid_and_the_cross_axis(self, world):
        """Whether the world keeps the centroid of a release at its centre or lets it diffuse."""
        moved = added({"shear": {"rate_per_d": 2.0, "direction_deg": 90.0}}, **world)
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

    def test_convergence_of_pairs_that_part_evenly(self):
        """d xi' / dt = v - gamma xi': xi0 exp(-gamma t) + v (1 - exp(-gamma t)) / gamma, exact at coarse fixes."""
        t = np.arange(8) * 40.0
        local = np.zeros((1, 2, 8, 2))
        local[0, :, :, 0] = np.outer([-0.5, 0.5], 6.0 + 0.3 * t)
        moved = local + convergence_displacement(local, 40.0, 0.02, 0.0, 200.0)
        apart, end = moved[0, 1, :, 0] - moved[0, 0, :, 0], np.minimum(t, 200.0)
        exact = 6.0 * np.exp(-0.02 * end) + 0.3 * (1 - np.exp(-0.02 * end)) / 0.02 + 0.3 * (t - end)
        assert apart == pytest.approx(exact, rel=1e-12)

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


NOISY = {"position_error_m": 20.0, "duration_d": 20.0, "fix_interval_h": 6.0}


class TestErrors:
    def errors(self, **options):
        """Errors (n_release, n_member, n_fix, 2) in units of their stated standard deviation."""
        size = {"number": 60, "particles": 3}
        noisy, clean = (
            paths(recipe(kernel=STILL, releases=size, records=NOISY | more))
            for more in (options, {"position_error_m": 0.0})
        )
        return (noisy - clean) / 20.0

    @pytest.mark.parametrize("freedom", [3.5, 8.0])
    def test_heavy_tails_are_those_of_student(self, freedom):
        """Scaled by sqrt((nu - 2) / nu): standard deviation one. A fix is bad in both coordinates or in none."""
        found = self.errors(error_tail=freedom)
        law = stats.t(freedom, scale=np.sqrt((freedom - 2) / freedom))
        for component in range(2):
            assert stats.kstest(found[..., component].ravel(), law.cdf).pvalue > 1e-4
        far = np.abs(found) > 3.0
        share = law.sf(3.0) * 2
        assert np.mean(far[..., 0] & far[..., 1]) > 3 * share**2
        assert abs(np.mean(far) - share) < SIGMAS * np.sqrt(2 * share / far.size)

    def test_tails_end_at_the_normal_law(self):
        plain, wide = self.errors(), self.errors(error_tail=1e9)
        assert wide == pytest.approx(plain, abs=1e-3)

    @pytest.mark.parametrize("tail", [{}, {"error_tail": 5.0}])
    def test_memory(self, tail):
        """Correlation exp(-h / tau) at one fix, exp(-2 h / tau) at two; the variance stays, from the first fix on."""
        found = self.errors(error_memory_h=9.0, **tail)
        for lag in (0, 1, 2):
            product = found[:, :, : found.shape[2] - lag] * found[:, :, lag:]
            assert_mean(product.mean(axis=(2, 3)).ravel(), np.exp(-lag * 6 / 9))
        assert_mean(np.mean(found[:, :, 0] ** 2, axis=2).ravel(), 1.0)

    def test_errors_leave_losses_and_gaps_alone(self):
        plain = simulate(recipe(records=OBSERVED))
        other = simulate(recipe(records=OBSERVED | {"error_tail": 3.0, "error_memory_h": 5.0}))
        assert np.array_equal(plain.time, other.time)
        assert np.array_equal(plain.particle, other.particle)
        assert np.median(np.abs(plain.position - other.position)) > 1.0


class TestLosses:
    def test_extra_losses_apart(self):
        """Particles 0.5 / sqrt 3 = 0.289 km from the centroid: within 0.3 km none is lost, beyond 0.28 km exp(-a t)."""
        size = {"number": 400, "particles": 3}
        for apart, rate in ((0.3, 0.0), (0.28, 0.4)):
            records = {"loss_per_d_apart": 0.4, "apart_km": apart}
            fixes = simulate(recipe(kernel=STILL, releases=size, records=records))
            days = np.bincount(fixes.particle) * 0.125
            for day in (1.0, 3.0):
                expected = np.exp(-rate * day)
                error = np.sqrt(expected * (1 - expected) / 1200)
                assert abs(np.mean(days > day) - expected) <= SIGMAS * error

    def test_losses_add(self):
        size = {"number": 400, "particles": 3}
        both = {"loss_per_d": 0.1, "loss_per_d_apart": 0.3, "apart_km": 0.1}
        added_up, plain = (
            simulate(recipe(kernel=STILL, releases=size, records=r)) for r in (both, {"loss_per_d": 0.4})
        )
        assert np.array_equal(np.bincount(added_up.particle), np.bincount(plain.particle))

    def test_pairs_that_stay_together_are_recorded_longer(self):
        made = {"records": {"duration_d": 20.0, "loss_per_d_apart": 1.0, "apart_km": 5.0}, "releases": {"number": 100}}
        clean = paths(recipe(records={"duration_d": 20.0}, releases={"number": 100}))
        fixes = simulate(recipe(**made))
        length = np.bincount(fixes.particle)
        apart = np.linalg.norm(clean - clean.mean(axis=1, keepdims=True), axis=3).reshape(300, -1)
        until = np.where((apart > 5e3).any(axis=1), np.argmax(apart > 5e3, axis=1), apart.shape[1] - 1)
        assert np.all(length > until), "no loss before the particle is apart"
        assert np.mean(length - 1 - until) * 0.125 < 3.0


class TestInstruments:
    def test_the_second_type_slips(self):
        """A third of 18 particles moves by 0.05 m/s x 4 d = 17.28 km east, the rest does not know."""
        moved = added({"instruments": {"slip_share": 1 / 3, "slip_m_s": [0.05, 0.0]}})
        end = moved[:, :, -1].reshape(18, 2)
        assert np.sort(end[:, 0]) == pytest.approx([0.0] * 12 + [17280.0] * 6, abs=1e-5)
        assert np.all(end[:, 1] == 0)
        half = moved[:, :, 16].reshape(18, 2)
        assert half == pytest.approx(end / 2, abs=1e-5)

    def test_a_larger_share_keeps_the_smaller(self):
        few, most = (
            added({"instruments": {"slip_share": s, "slip_m_s": [0.0, 0.1]}})[:, :, -1, 1] > 1.0 for s in (0.2, 0.7)
        )
        assert few.sum() == round(0.2 * 18)
        assert most.sum() == round(0.7 * 18)
        assert np.all(most[few])


class TestFaults:
    @pytest.mark.parametrize("number", [2, 6])
    def test_lashed_pairs_keep_their_vector(self, number):
        clean, made = paths(recipe()), paths(recipe(faults={"lashed": number}))
        apart = made[:, 1] - made[:, 0]
        together = np.all(np.abs(apart - apart[:, :1]) < 1e-6, axis=(1, 2))
        assert together.sum() == number
        assert np.array_equal(made[:, [0, 2]], clean[:, [0, 2]])
        assert np.array_equal(made[~together], clean[~together])
        assert np.linalg.norm(apart[together], axis=2) == pytest.approx(np.full((number, 33), 500.0), rel=1e-6)

    @pytest.mark.parametrize("place", [{}, GLOBE])
    def test_grounded_particles_stay(self, place):
        """From some fix on the same place, though the centre drifts; before that the clean path."""
        clean, made = (
            paths(recipe(place=place, **more)).reshape(18, 33, 2) for more in ({}, {"faults": {"grounded": 5}})
        )
        changed = np.flatnonzero(np.any(clean != made, axis=(1, 2)))
        for i in changed:
            stop = np.argmax(np.all(clean[i] != made[i], axis=1)) - 1
            assert np.array_equal(made[i, : stop + 1], clean[i, : stop + 1])
            assert np.all(made[i, stop:] == made[i, stop])
        assert 3 <= len(changed) <= 5, "one that stops at its last fix shows no change"

    def test_grounded_particles_report_with_error(self):
        records = {"duration_d": 40.0, "position_error_m": 15.0}
        made = paths(recipe(records=records, faults={"grounded": 18})).reshape(18, -1, 2)
        steps = np.diff(made, axis=1)
        # after the stop differences have variance 2 sigma^2; half of all fixes are after it
        late = steps[:, -20:][np.all(np.abs(steps[:, -20:]) < 150.0, axis=(1, 2))]
        assert len(late) >= 12
        squared = np.mean(late**2, axis=(1, 2))
        assert abs(np.mean(squared) - 2 * 15.0**2) < SIGMAS * np.std(squared) / np.sqrt(len(late))

    def test_moments_of_grounding_are_even(self):
        size = {"number": 300, "particles": 2}
        made, clean = (paths(recipe(kernel=STILL, releases=size, faults=f)) for f in ({"grounded": 600}, {}))
        same = np.sum(np.all(made == clean, axis=3), axis=2).ravel()  # fixes up to and with the stop
        assert stats.kstest(same - np.random.default_rng(0).random(600), "uniform", args=(0, 33)).pvalue > 1e-4

    def test_boats(self):
        """5 m/s for the last 9 h of the record, after the clean path, in a straight line."""
        clean, made = (paths(recipe(faults=f)).reshape(18, 33, 2) for f in ({}, {"picked_up": 4, "boat_h": 9.0}))
        taken = np.any(made != clean, axis=(1, 2))
        assert taken.sum() == 4
        assert np.array_equal(made[:, :30], clean[:, :30])
        velocity = np.diff(made[taken], axis=1)[:, 29:] / 10800.0
        assert np.linalg.norm(velocity, axis=2) == pytest.approx(np.full((4, 3), 5.0), rel=1e-9)
        still = {"kernel": STILL, "place": {"drift_m_s": [0.0, 0.0]}}
        rest = paths(recipe(faults={"picked_up": 18, "boat_speed_m_s": 7.0}, **still))
        speed = np.linalg.norm(np.diff(rest, axis=2), axis=3) / 10800.0
        assert speed[..., -2:] == pytest.approx(np.full((6, 3, 2), 7.0), rel=1e-6)
        assert np.all(speed[..., :-2] < 1e-6)

    def test_boats_come_at_the_end_of_short_records(self):
        records = {"loss_per_d": 0.5}
        still = {"kernel": STILL, "place": {"drift_m_s": [0.0, 0.0]}}
        fixes = simulate(recipe(records=records, faults={"picked_up": 18, "boat_h": 3.0}, **still))
        speed = np.linalg.norm(np.diff(fixes.position, axis=0), axis=1) / 10800.0
        ends = np.append(np.flatnonzero(np.diff(fixes.particle)), fixes.n_fix - 1) - 1
        ends = ends[np.bincount(fixes.particle) > 1]
        assert len(ends) > 9
        assert speed[ends] == pytest.approx(np.full(len(ends), 5.0), rel=1e-6)

    def test_no_particle_is_aground_and_aboard(self):
        still = {"kernel": STILL, "records": {"duration_d": 40.0}}
        made = paths(recipe(faults={"grounded": 9, "picked_up": 9}, **still))
        speed = np.linalg.norm(np.diff(made, axis=2), axis=3)[..., -1] / 10800.0
        assert np.sum(np.abs(speed - 5.0) < 0.01) == 9
        assert np.sum(speed == 0) == 9, "the centres drift, so those that are afloat do not stand still"


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
        ({"records": {"error_tail": 2.0}}, r"records.error_tail: got 2.0; must be > 2"),
        ({"records": {"error_memory_h": -1.0}}, r"records.error_memory_h: got -1.0; must be >= 0"),
        ({"records": {"apart_km": 3.0}}, "got one of loss_per_d_apart and apart_km; must give both, or none"),
        ({"faults": {"lashed": 7}}, r"got \[faults\] with lashed = 7; must be 6, the releases, at most"),
        (
            {"faults": {"grounded": 17, "picked_up": 2}},
            r"grounded \+ picked_up = 17 \+ 2; must be 18, the particles, at",
        ),
        ({"faults": {"grounded": 1.5}}, r"faults.grounded: got 1.5; must be a whole number"),
        ({"instruments": {"slip_share": 1.1, "slip_m_s": [0.1, 0.0]}}, r"slip_share: got 1.1; must be <= 1"),
        ({"instruments": {"slip_share": 0.1, "slip_m_s": [0.1]}}, r"slip_m_s: got \[0.1\]; must be a list of 2"),
        ({"convergence": {"rate_per_d": 1.0}}, r"convergence.lasts_d: missing; must be given"),
    ],
)
def test_bad_input(changes, message):
    with pytest.raises(CaseError, match=message):
        recipe(**changes)
