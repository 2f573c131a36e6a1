"""Structure functions: transforms against closed forms and quadrature, velocities by hand, likelihood, fit."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from pyproj import Geod
from scipy.integrate import quad
from scipy.special import j0, j1
from scipy.stats import gamma

from regimes.curves.structure import StructureStatistics, separation_bins, structure_statistics
from regimes.errors import DataError
from regimes.geodesy import to_cartesian
from regimes.inference.spectrum_fit import fit_spectrum
from regimes.inference.spectrum_models import SpectrumModel, SpectrumPosterior, make_space
from regimes.inference.spectrum_range import constrained_wavenumbers, divergent_share, slope_information
from regimes.likelihood.structure import StructureLikelihood, structure_likelihood, usable_bins
from regimes.pairs import LAUNCHED, Pairs
from regimes.synthetic.fourier_flow import fourier_tracks
from regimes.synthetic.spectrum import Spectrum
from regimes.theory.structure_functions import (
    helmholtz_split,
    kernels,
    log_broken_power_law,
    make_transform,
    power_law_constant,
)
from regimes.tracks import Tracks
from regimes.units import HOUR

# ---------------------------------------------------------------------------------------------- transforms


@pytest.mark.parametrize(
    ("slope", "constant", "total", "longitudinal"),
    [  # c, S / E0, S_LL / E0: closed form, all printed digits; 2.149368 is the "2.15" of Lindborg (1999)
        (5 / 3, 1.432912, 5.731649, 2.149368),
        (2.0, 1.0, 4.0, 1.333333),
        (2.5, 0.929822, 3.719288, 1.062654),
    ],
)
def test_endless_power_laws(slope, constant, total, longitudinal):
    assert power_law_constant(slope) == pytest.approx(constant, abs=5.01e-7)  # printed digits
    r = np.array([1.0])
    transform = make_transform(r, 1e-12, 1e9)
    energy = np.exp(-slope * transform.log_wavenumber)
    # Round-off of the quadrature and the ends of the grid: (1e-12)^(3 - slope) and (1e9)^(1 - slope).
    assert transform.total(energy)[0] == pytest.approx(total, rel=5e-6)
    assert transform.longitudinal(energy)[0] == pytest.approx(longitudinal, rel=5e-6)
    assert transform.transverse(energy)[0] / transform.longitudinal(energy)[0] == pytest.approx(slope, rel=5e-6)


# Local slope of S_LL in the middle of 1, 2, 3, 4 decades without energy outside; derived from the transform by
# quadrature independently of this code, digits as printed there.
FINITE = {
    5 / 3: ("1.68", "0.945", "0.774", "0.713"),
    2.0: ("1.72", "1.156", "1.044", "1.013"),
    2.5: ("1.78", "1.481", "1.466", "1.477"),
    3.0: ("1.84", "1.746", "1.794", "1.833"),
    4.0: ("1.93", "1.965", "1.989", "1.996"),
}


@pytest.mark.parametrize("slope", FINITE)
@pytest.mark.parametrize("decades", [1, 2, 3, 4])
def test_slope_of_a_finite_range(slope, decades):
    half = 10 ** (decades / 2)
    r = np.exp([-1e-3, 1e-3])
    transform = make_transform(r, 1 / half, half)
    value = transform.longitudinal(np.exp(-slope * transform.log_wavenumber))
    printed = FINITE[slope][decades - 1]
    tolerance = 0.5 * 10.0 ** -len(printed.split(".")[1])
    assert np.log(value[1] / value[0]) / 2e-3 == pytest.approx(float(printed), abs=1.2 * tolerance)


def by_quadrature(energy, edges, r):
    """S_LL and S_TT + S_LL by adaptive quadrature in ln k."""

    def integral(kernel):
        fine = np.unique(np.concatenate([np.linspace(a, b, 60) for a, b in pairwise(edges)]))
        parts = [
            quad(lambda x: np.exp(x) * energy(np.exp(x)) * kernel(np.exp(x) * r), a, b, epsrel=1e-9, limit=200)[0]
            for a, b in pairwise(fine)
        ]
        return sum(parts)

    return integral(lambda x: 2 - 4 * j1(x) / x), integral(lambda x: 4 - 4 * j0(x))


@pytest.mark.parametrize("shift", [0.0, 0.013, 0.029, 0.047])
def test_breaks_between_nodes(shift):
    """Against adaptive quadrature (scipy); 1e-4 is the accuracy that `Transform` states."""
    breaks, slopes = np.array([[np.log(0.05) + shift, np.log(0.7) + shift]]), np.array([[-1.0, 3.0, 5 / 3]])
    low, high = np.log(1e-3), np.log(1e2)

    def energy(k):
        return np.exp(log_broken_power_law(np.log(np.atleast_1d(k)), breaks, slopes))[0, 0]

    r = np.array([0.3, 2.0, 30.0])
    transform = make_transform(r, np.exp(low), np.exp(high))
    grid = np.exp(log_broken_power_law(transform.log_wavenumber, breaks, slopes))
    for i, at in enumerate(r):
        along, total = by_quadrature(energy, [low, *breaks[0], high], at)
        assert transform.longitudinal(grid)[0, i] == pytest.approx(along, rel=1e-4)
        assert transform.total(grid)[0, i] == pytest.approx(total, rel=1e-4)


def test_transverse_is_the_derivative_and_divergence_exchanges():
    """S_TT = d(r S_LL)/dr without divergence (Lindborg 1999); irrotational motion has the two exchanged."""
    r = np.exp(np.linspace(-0.01, 0.01, 3))
    transform = make_transform(r, 1e-3, 1e3)
    energy = np.exp(log_broken_power_law(transform.log_wavenumber, [[-2.0]], [[-1.0, 2.2]]))
    along, across = transform.longitudinal(energy)[0], transform.transverse(energy)[0]
    slope = (r[2] * along[2] - r[0] * along[0]) / (r[2] - r[0])
    assert slope == pytest.approx(across[1], rel=1e-4)  # centred difference, error (0.01)^2
    assert transform.longitudinal(energy, [1.0])[0] == pytest.approx(across)
    mixed = transform.longitudinal(energy, [0.3]) + transform.transverse(energy, [0.3])
    assert mixed == pytest.approx(transform.total(energy))


def test_kernels_join_their_series():
    below, above = kernels(0.02 * (1 - 1e-9)), kernels(0.02 * (1 + 1e-9))
    assert below[0] == pytest.approx(float(above[0]), rel=1e-8)  # neglected terms (0.02)^4 / 1000
    assert below[1] == pytest.approx(float(above[1]), rel=1e-6)


def test_helmholtz_split():
    """No divergent part without divergence, and the power-law ratio S_TT / S_LL = alpha (Lindborg 2015)."""
    r = np.geomspace(1.0, 100.0, 400)
    for slope in (5 / 3, 2.0):
        along = r ** (slope - 1)
        rotational, divergent = helmholtz_split(r, along, slope * along)
        assert np.max(np.abs(divergent) / along) < 1e-3  # trapezoidal rule, spacing 1 %
        assert rotational == pytest.approx((1 + slope) * along, rel=1e-3)
        turned, rest = helmholtz_split(r, slope * along, along)
        assert np.max(np.abs(turned) / along) < 1e-3
        assert rest == pytest.approx((1 + slope) * along, rel=1e-3)


def test_transforms_refuse():
    with pytest.raises(DataError, match=r"got separations \[0.\]; must be finite and > 0"):
        make_transform([0.0], 1.0, 2.0)
    with pytest.raises(DataError, match="at least a factor 2 apart"):
        make_transform([1.0], 1.0, 1.5)
    with pytest.raises(DataError, match="got 5 nodes a decade; must be >= 10"):
        make_transform([1.0], 1.0, 1e3, 5)


# ------------------------------------------------------------------------------------- velocities of pairs


def records(paths, step=100.0, error=0.0, planar=True, cluster=None):
    """Tracks and pairs from (n_pair, 2, n_time, 3) positions; each pair its own cluster unless given."""
    n_pair, _, n_time, _ = paths.shape
    tracks = Tracks(
        position=paths.reshape(-1, 3),
        offset=n_time * np.arange(2 * n_pair + 1),
        start_step=np.zeros(2 * n_pair, int),
        step=step,
        first_time=0.0,
        planar=planar,
        labels=tuple(str(i) for i in range(2 * n_pair)),
        release=np.repeat(np.arange(n_pair), 2),
        position_error=error,
    )
    first = 2 * np.arange(n_pair)
    cluster = np.arange(n_pair) if cluster is None else np.asarray(cluster)
    return tracks, Pairs(
        first=first,
        second=first + 1,
        begin=np.zeros(n_pair, int),
        length=np.full(n_pair, n_time),
        kind=np.full(n_pair, LAUNCHED),
        start_separation=np.linalg.norm(paths[:, 1, 0] - paths[:, 0, 0], axis=-1),
        cluster=np.repeat(cluster, 2),
        n_cluster=int(cluster.max()) + 1,
    )


def walks(seed, n_pair=5, n_time=60):
    """Smooth random paths near one another, a gap in one of them."""
    rng = np.random.default_rng(seed)
    velocity = np.cumsum(rng.standard_normal((n_pair, 2, n_time, 2)), axis=2) * 0.02
    paths = np.zeros((n_pair, 2, n_time, 3))
    paths[..., :2] = np.cumsum(velocity, axis=2) * 100.0
    paths[:, 1, :, 0] += 300.0
    paths[0, 1, 20:23] = np.nan
    return paths


def test_sums_against_a_plain_loop():
    paths = walks(1)
    tracks, pairs = records(paths, cluster=[0, 0, 1, 2, 2])
    edges = separation_bins(50.0, 3000.0)
    found = structure_statistics(tracks, pairs, edges)
    count, along, across = (np.zeros(edges.size - 1) for _ in range(3))
    for w in paths[:, 1, :, :2] - paths[:, 0, :, :2]:
        for t in range(1, len(w) - 1):
            before, after = (w[t] - w[t - 1]) / 100.0, (w[t + 1] - w[t]) / 100.0
            side = w[t] / np.hypot(*w[t])
            b = np.searchsorted(edges, np.hypot(*w[t]), side="right") - 1
            if np.isfinite([before, after]).all() and 0 <= b < count.size:
                count[b] += 1
                for sums, axis in ((along, side), (across, np.array([-side[1], side[0]]))):
                    u, v = before @ axis, after @ axis
                    sums[b] += 2 / 3 * (u * u + v * v) - (u + v) ** 2 / 12
    assert np.array_equal(found.n_sample, count)
    filled = count > 0
    assert found.longitudinal().value[filled] == pytest.approx(along[filled] / count[filled], rel=1e-10)
    assert found.transverse().value[filled] == pytest.approx(across[filled] / count[filled], rel=1e-10)
    assert found.total().value[filled] == pytest.approx((along + across)[filled] / count[filled], rel=1e-10)


def test_turning_pair():
    """A pair that turns at rate w has |u| = r w; differences shrink it by sinc, whose first term is removed."""
    step, r, angle = 100.0, 1000.0, 0.4
    t = np.arange(200)
    paths = np.zeros((1, 2, t.size, 3))
    paths[0, 1, :, 0], paths[0, 1, :, 1] = r * np.cos(angle * t), r * np.sin(angle * t)
    found = structure_statistics(*records(paths, step), np.array([500.0, 2000.0]))
    speed2 = (r * angle / step) ** 2
    one, two = (np.sinc(x / np.pi) ** 2 for x in (angle / 2, angle))
    assert found.one_step().value[0] == pytest.approx(speed2 * one, rel=1e-10)
    assert found.two_steps().value[0] == pytest.approx(speed2 * two, rel=1e-10)
    # sinc^2 x = 1 - x^2/3 + 2 x^4/45: what remains is -2/45 angle^4 / 4 to leading order
    assert found.total().value[0] / speed2 - 1 == pytest.approx(-(angle**4) / 90, rel=0.1)
    assert found.mean_longitudinal().value[0] == pytest.approx(0.0, abs=1e-12)


def test_noise_floor():
    """Pairs at rest: 8 s^2/dt^2 from one-step and 2 s^2/dt^2 from two-step differences (exact), their mix 10."""
    rng = np.random.default_rng(3)
    s, step = 5.0, 100.0
    paths = np.zeros((200, 2, 50, 3))
    paths[:, 1, :, 0] = 5000.0
    paths[..., :2] += s * rng.standard_normal(paths[..., :2].shape)
    found = structure_statistics(*records(paths, step, s), np.array([4000.0, 6000.0]))
    for curve, name, factor in (
        (found.one_step(), "short", 8),
        (found.two_steps(), "long", 2),
        (found.total(), "extrapolated", 10),
    ):
        assert found.noise_floor(name) == pytest.approx(factor * (s / step) ** 2)
        assert abs(curve.value[0] - found.noise_floor(name)) < 4 * curve.standard_error[0]
    with pytest.raises(DataError, match="got 'centred'; known: short, long, extrapolated"):
        found.noise_floor("centred")


def test_on_the_globe():
    """The same paths laid out at 50 N along geodesics (PROJ) give the same structure functions.

    Tolerance: geodesics from one point shrink distances across them by (d / R)^2 / 6 = 3e-7; curvature of the
    parallel frame enters with the mean drift times r tan(latitude) / R, below 1e-3 of these velocities.
    """
    paths = walks(2)
    geod = Geod(ellps="WGS84")
    flat = paths.reshape(-1, 3)
    lon, lat, _ = geod.fwd(
        np.full(len(flat), 7.0),
        np.full(len(flat), 50.0),
        np.degrees(np.arctan2(flat[:, 0], flat[:, 1])),
        np.hypot(flat[:, 0], flat[:, 1]),
    )
    globe = to_cartesian(lon, lat).reshape(paths.shape)
    edges = separation_bins(50.0, 3000.0)
    plane = structure_statistics(*records(paths), edges)
    sphere = structure_statistics(*records(globe, planar=False), edges)
    filled = plane.n_sample > 0
    assert np.array_equal(plane.n_sample, sphere.n_sample)
    for name in ("longitudinal", "transverse", "total", "mean_longitudinal"):
        a, b = getattr(plane, name)().value[filled], getattr(sphere, name)().value[filled]
        assert b == pytest.approx(a, rel=2e-3, abs=1e-4)


def test_units_rotation_and_order():
    """Lengths x 3 and times x 2: squared velocities x 9/4; a turned plane and exchanged members change nothing."""
    paths, edges = walks(4), separation_bins(50.0, 3000.0)
    plain = structure_statistics(*records(paths), edges).total()
    scaled = structure_statistics(*records(3 * paths, 200.0), 3 * edges).total()
    filled = plain.weight @ plain.denominator > 0
    assert scaled.value[filled] == pytest.approx(2.25 * plain.value[filled], rel=1e-9)
    c, s = np.cos(1.1), np.sin(1.1)
    turned = paths @ np.array([[c, s, 0], [-s, c, 0], [0, 0, 1.0]])
    for other in (turned, paths[:, ::-1]):
        again = structure_statistics(*records(np.ascontiguousarray(other)), edges).total()
        assert again.value[filled] == pytest.approx(plain.value[filled], rel=1e-9)


def test_select_and_merge():
    paths, edges = walks(5), separation_bins(50.0, 3000.0)
    whole = structure_statistics(*records(paths), edges)
    one = structure_statistics(*records(paths[:2]), edges)
    two = structure_statistics(*records(paths[2:]), edges)
    both = one.merge(two)
    assert np.array_equal(both.total().numerator, whole.total().numerator)
    part = whole.select(slice(2, 6))
    assert np.array_equal(part.total().numerator, whole.total().numerator[:, 2:6])
    assert np.array_equal(part.edges, edges[2:7])
    with pytest.raises(DataError, match="merge of structure functions: got 12 and 4 bins"):
        whole.merge(part)


def test_structure_statistics_refuse():
    tracks, pairs = records(walks(6))
    with pytest.raises(DataError, match="evenly spaced in their logarithm"):
        structure_statistics(tracks, pairs, np.array([1.0, 2.0, 3.0]))
    with pytest.raises(DataError, match="got no pairs"):
        structure_statistics(tracks, pairs.select(np.zeros(pairs.n_pair, bool)), np.array([1.0, 2.0]))
    with pytest.raises(DataError, match="need 0 < low < high"):
        separation_bins(2.0, 1.0)


# ------------------------------------------------------------------------------------------------ likelihood


def a_likelihood(rho):
    values, shapes = np.array([1.0, 2.0, 3.0]), np.array([30.0, 40.0, 50.0])
    return StructureLikelihood(np.array([1e3, 2e3, 4e3]), values, shapes, rho, 0.0, 20)


def test_without_correlation_it_is_a_gamma_likelihood():
    """Differences of ln L against scipy's gamma density of shape n and mean mu."""
    like = a_likelihood(0.0)
    means = np.array([[1.1, 1.7, 3.3], [0.9, 2.2, 2.5]])
    expected = gamma.logpdf(like.value, like.shape, scale=means / like.shape).sum(axis=1)
    found = like(means)
    assert found[0] - found[1] == pytest.approx(expected[0] - expected[1], rel=1e-12)
    assert like(like.value) == pytest.approx(0.0, abs=1e-12)


def test_correlation_is_that_of_the_stated_matrix():
    like = a_likelihood(0.45)
    mean = np.array([1.2, 1.8, 3.5])
    ratio = like.value / mean
    d = np.sign(ratio - 1) * np.sqrt(2 * like.shape * (ratio - 1 - np.log(ratio)))
    matrix = 0.45 ** np.abs(np.subtract.outer(np.arange(3), np.arange(3)))
    assert like(mean) == pytest.approx(-0.5 * d @ np.linalg.solve(matrix, d), rel=1e-12)


def made_up(n_cluster=40, n_bin=12, seed=0, start=1.0, scatter=0.4, rho=0.5):
    """Statistics of clusters with correlated log-normal scatter about S ~ r; one-step equal to two-step."""
    rng = np.random.default_rng(seed)
    edges = 1000.0 * 2 ** (np.arange(n_bin + 1) / 2)
    noise = np.empty((n_cluster, n_bin))
    noise[:, 0] = rng.standard_normal(n_cluster)
    for b in range(1, n_bin):
        noise[:, b] = rho * noise[:, b - 1] + np.sqrt(1 - rho**2) * rng.standard_normal(n_cluster)
    middle = np.sqrt(edges[1:] * edges[:-1])
    value = 1e-6 * middle * np.exp(scatter * noise)
    count = np.full((n_cluster, n_bin), 50.0)
    half = 0.5 * value * count
    zero = np.zeros_like(count)
    return StructureStatistics(
        edges, count, count * np.log(middle), zero, half, half, half, half, zero, np.ones(n_cluster), HOUR, 0.0, start
    )


def test_dispersion_and_correlation_are_found():
    """Relative variance of a log-normal, exp(s^2) - 1 (closed form), over clusters; mean of 30 sets."""
    found = [structure_likelihood(made_up(seed=i)) for i in range(30)]
    relative = np.array([np.mean(1 / f.shape) for f in found])
    expected = (np.exp(0.4**2) - 1) / 40
    assert abs(relative.mean() - expected) < 4 * relative.std() / np.sqrt(30)
    # Correlation of log-normals: (exp(rho s^2) - 1) / (exp(s^2) - 1)
    rho = np.array([f.correlation for f in found])
    assert abs(rho.mean() - np.expm1(0.5 * 0.16) / np.expm1(0.16)) < 4 * rho.std() / np.sqrt(30)


def test_usable_bins():
    whole = made_up()
    assert usable_bins(whole) == slice(0, 12)
    assert usable_bins(replace(whole, start=1000.0)) == slice(1, 12)
    count = np.array(whole.count)
    count[:7, 8:] = 0.0  # 33 of 40 is 82 %
    unseen = {n: np.where(count > 0, getattr(whole, n), 0.0) for n in ("along_short", "along_long", "log_r")}
    lost = replace(whole, count=count, **unseen, across_short=unseen["along_short"], across_long=unseen["along_long"])
    assert usable_bins(lost) == slice(0, 8)
    with pytest.raises(DataError, match="4 in a row are needed"):
        usable_bins(replace(whole, start=20e3))
    noisy = replace(whole, position_error=np.sqrt(whole.total().value[5] / 20) * HOUR)
    assert usable_bins(noisy).start == 6
    alike = made_up(scatter=0.0)
    with pytest.raises(DataError, match="clusters that are all alike"):
        structure_likelihood(alike)


# ------------------------------------------------------------------------------------------------------- fit


def test_models_are_broken_power_laws():
    likelihood = structure_likelihood(made_up())
    space = make_space(likelihood)
    grid = space.transform.log_wavenumber
    model = SpectrumModel(2, True)
    theta = model.parameters(np.zeros((1, model.size)), space)
    named = dict(zip(model.names, theta[0], strict=True))
    assert named["alpha"] == pytest.approx(2.5)  # the middle of the prior
    local = -np.diff(model.log_energy(theta, grid)[0]) / np.diff(grid)
    middle = 0.5 * (grid[1:] + grid[:-1])
    step = grid[1] - grid[0]
    between = (middle > named["ln_k0"] + step) & (middle < named["ln_k1"] - step)
    assert local[between] == pytest.approx(named["alpha_out"], abs=1e-2)  # the end at k_c is felt a little
    assert local[middle < named["ln_k0"] - step] == pytest.approx(-named["p"], abs=1e-3)
    assert model.inner_start(theta)[0] == named["ln_k1"]
    extremes = model.parameters(np.array([[8.0] * model.size, [-8.0] * model.size]), space)
    assert np.all(extremes[:, 5] - extremes[:, 1] >= np.log(2) - 1e-9)
    noise = SpectrumPosterior(model, space, replace(likelihood, floor=1e-3)).mean(theta)
    clean = SpectrumPosterior(SpectrumModel(2, False), space, likelihood).mean(theta[:, :-1])
    assert noise[0, 6] == pytest.approx(clean[0, 6], rel=1e-9)  # the middle is the datum in both


def a_spectrum(statistics, alpha=2.0):
    """Model, repeated draws of one spectrum, space and likelihood for the bins of some statistics."""
    likelihood = structure_likelihood(statistics)
    space = make_space(likelihood)
    theta = SpectrumModel(1, False).parameters(np.zeros((50, 5)), space)
    theta[:, 0] = alpha
    return SpectrumModel(1, False), theta, space, likelihood


def test_information_grows_with_clusters_and_lies_at_the_separations():
    few, many = (a_spectrum(made_up(n_cluster=n)) for n in (15, 150))
    _, gain = slope_information(*many)
    assert np.all(gain >= 0)
    assert gain.max() > slope_information(*few)[1].max() + 0.3
    low, high = constrained_wavenumbers(*many)
    r = many[3].separation
    # A separation feels wavelengths around 2 pi r: inside the range, and not decades beyond it.
    assert low < np.log(1 / r[-3]) < np.log(1 / r[2]) < high
    assert low > np.log(0.05 / r[-1])
    assert high < np.log(20 / r[0])
    wide = constrained_wavenumbers(*few[:3], replace(few[3], shape=np.full(r.size, 1e-3)))
    assert wide[0] == wide[1]


@pytest.mark.parametrize("share", [0.0, 0.4, 1.0])
def test_divergent_share_of_exact_components(share):
    whole = made_up(n_cluster=200, scatter=0.05)
    model, theta, space, _ = a_spectrum(whole)
    energy = np.exp(model.log_energy(theta[:1], space.transform.log_wavenumber))
    parts = [f(energy, [share])[0] for f in (space.transform.longitudinal, space.transform.transverse)]
    ratio = whole.along_short / whole.along_short.mean(axis=0)
    sums = {}
    for name, value in zip(("along", "across"), parts, strict=True):
        sums |= {f"{name}_short": 50.0 * value * ratio, f"{name}_long": 50.0 * value * ratio}
    low, middle, high = divergent_share(replace(whole, **sums), model, theta, space, np.random.default_rng(0))
    assert middle == pytest.approx(share, abs=0.01)  # scatter is common to both components
    assert low <= middle <= high


@pytest.fixture(scope="module")
def fourier_fit():
    """Releases in a random-Fourier flow of slope 2 (Fung et al. 1992), 30 days."""
    spectrum = Spectrum(np.array([2.0]), np.empty(0), 300.0, 600e3, 0.3)
    tracks, pairs = fourier_tracks(spectrum, (20, 3), 1500.0, HOUR, 30 * 24, 7)
    return fit_spectrum(structure_statistics(tracks, pairs, separation_bins(750.0, 400e3)), 1, 3000)


def test_slope_of_a_known_spectrum(fourier_fit):
    """The coverage test counts; here one realisation, at the nominal 95 %."""
    low95, low68, middle, high68, high95 = fourier_fit.quantiles
    assert fourier_fit.kind == "estimate"
    assert low95 < low68 < middle < high68 < high95
    assert low95 < 2.0 < high95
    assert high95 - low95 < 0.8
    short, long = fourier_fit.wavelengths
    assert 2e3 < short < 10e3 < 50e3 < long < 1200e3
    assert "spectral slope" in fourier_fit.summary()
    assert "km" in fourier_fit.summary()


def test_predictions_pass_through_the_data(fourier_fit):
    like = fourier_fit.likelihood
    pull = (fourier_fit.predicted().mean(axis=0) / like.value - 1) * np.sqrt(like.shape)
    assert np.max(np.abs(pull)) < 4  # standard errors


def test_same_seed_same_draws():
    once, again = (fit_spectrum(made_up(n_bin=8), 3, 400) for _ in range(2))
    assert np.array_equal(once.alpha, again.alpha)


def test_steep_is_a_lower_bound():
    """S ~ r^2 comes from every slope of 3 or more."""
    steep = made_up(seed=4, scatter=0.2)
    middle = np.sqrt(steep.edges[1:] * steep.edges[:-1])
    grown = {
        n: getattr(steep, n) * middle / middle[0] for n in ("along_short", "along_long", "across_short", "across_long")
    }
    fit = fit_spectrum(replace(steep, **grown), 0, 600)
    assert fit.kind == "lower_bound"
    assert "at least" in fit.summary()
    assert fit.quantiles[0] > 2.3


def test_too_few_bins_give_no_slope():
    """Three octaves of separations with wide scatter leave every slope possible, or no range."""
    fit = fit_spectrum(made_up(n_cluster=8, n_bin=4, scatter=1.0), 0, 600)
    assert fit.kind in ("none", "lower_bound", "upper_bound")
    if fit.kind == "none":
        assert fit.reason
        assert np.all(np.isnan(fit.wavelengths))
        assert "no spectral slope" in fit.summary()
