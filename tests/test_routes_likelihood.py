"""The exit-rate likelihood and its dispersion by other routes: a regression library, loops, quadrature."""

from itertools import pairwise

import numpy as np
import pytest
import statsmodels.api as sm
from scipy.integrate import quad
from scipy.optimize import minimize
from scipy.stats import gamma

from regimes.errors import DataError
from regimes.inference.models import Model, Space
from regimes.likelihood.dispersion import Dispersion, measure_dispersion, rate_intervals, scores
from regimes.likelihood.exit_rate import ExitRateLikelihood

THRESHOLDS = 1e3 * 2.0 ** (np.arange(11) / 2)
X = np.log(THRESHOLDS[:-1])
SPACE = Space(THRESHOLDS[0], THRESHOLDS[-1], 0.5 * np.log(2.0), (-30.0, 10.0))


def world(n_cluster, seed, phi=2.9, slope=-0.6):
    """Exits and times at risk (n_cluster, 10) of clusters of one to four pairs; phi per exit, exponent slope given."""
    rng = np.random.default_rng(seed)
    size = rng.integers(1, 5, n_cluster)[:, None]
    exits = rng.binomial(size, np.linspace(1.0, 0.6, 10))
    mean = 2e5 * (THRESHOLDS[:-1] / 1e3) ** -slope
    shape = np.maximum(exits, 1) / phi
    risk = np.where(exits > 0, rng.gamma(shape) * phi, rng.exponential(0.3, exits.shape)) * mean
    return exits.astype(float), risk


def likelihood(exits, risk, phi):
    return ExitRateLikelihood(THRESHOLDS, exits.sum(axis=0), risk.sum(axis=0), phi)


def glm(exits, risk, **how):
    design = sm.add_constant(np.broadcast_to(X, exits.shape).ravel())
    model = sm.GLM(exits.ravel(), design, family=sm.families.Poisson(), offset=np.log(risk.ravel()))
    return model.fit(tol=1e-12, **how)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_one_free_power_law_is_a_poisson_regression(seed):
    """Estimate and error of the slope: GLM of E on ln delta with offset ln S, errors scaled by phi."""
    exits, risk = world(60, seed)
    phi = measure_dispersion(exits, risk, np.ones(60)).total
    target, model = likelihood(exits, risk, phi), Model(("free",))
    regression = glm(exits.sum(axis=0), risk.sum(axis=0))
    found = minimize(
        lambda t: -target.batch(model, t, SPACE)[0],
        [-12.0, 1.8],
        method="Nelder-Mead",
        options={"xatol": 1e-9, "fatol": 1e-12, "maxfev": 2000},
    ).x
    assert (found[1] - 3.0) / 2.0 == pytest.approx(regression.params[1], abs=1e-6)
    h = np.diag([1e-3, 1e-3])
    value = lambda shift: target.batch(model, found + shift, SPACE)[0]  # noqa: E731
    hessian = [
        [(value(a + b) - value(a - b) - value(b - a) + value(-a - b)) / (4e-6) for a in h] for b in h
    ]  # of the tempered log-likelihood
    error = 0.5 * np.sqrt(np.linalg.inv(-np.array(hessian))[1, 1])
    assert error == pytest.approx(regression.bse[1] * np.sqrt(phi), rel=1e-3)


def test_errors_agree_with_the_clustered_covariance():
    """900 clusters: sandwich of the regression library against phi-scaled errors; its own scatter is about 5 %."""
    exits, risk = world(900, 11)
    phi = measure_dispersion(exits, risk, np.ones(900)).total
    groups = np.repeat(np.arange(900), 10)
    clustered = glm(exits, risk, cov_type="cluster", cov_kwds={"groups": groups})
    plain = glm(exits.sum(axis=0), risk.sum(axis=0))
    assert clustered.params == pytest.approx(plain.params, rel=1e-6)
    assert plain.bse * np.sqrt(phi) == pytest.approx(clustered.bse, rel=0.15)
    assert np.sqrt(phi) > 1.4  # so that errors without phi would be seen


def test_deviance_is_that_of_the_regression():
    exits, risk = world(30, 4)
    target = likelihood(exits, risk, 2.5)
    regression = glm(target.exits, target.risk)
    means = target.risk / regression.fittedvalues
    assert target.deviance(means) == pytest.approx(regression.deviance / 2.5, rel=1e-8)
    assert target.deviance(target.risk / target.exits) == pytest.approx(0.0, abs=1e-9)
    both = target.deviance(np.stack([means, 2 * means]))
    assert both.shape == (2,)
    assert both[1] > both[0]


def test_deviance_without_an_exit():
    """E = 0 contributes 2 S / mu."""
    target = ExitRateLikelihood(np.array([1.0, 2.0]), np.zeros(1), np.array([3.0]), 2.0)
    assert target.deviance(np.array([1.5])) == pytest.approx(2.0 * 2.0 / 2.0, rel=1e-12)


def test_likelihood_by_its_formula():
    """Mean exit times by quadrature of r / (2 K)."""
    exits, risk = world(20, 8)
    target, model = likelihood(exits, risk, 3.1), Model(("exponential", "free", "diffusive"))
    theta = np.array([-11.0, 1.7, np.log(2.3e3), np.log(1.7e4)])
    kernel = model.kernel(theta, SPACE)
    times = []
    for low, high in pairwise(THRESHOLDS):
        inside = [b for b in kernel.breaks if low < b < high]
        times.append(quad(lambda r: r / (2 * kernel(r)), low, high, points=inside or None, epsrel=1e-11)[0])
    wanted = -np.sum(target.exits * np.log(times) + target.risk / np.array(times)) / 3.1
    assert target.batch(model, theta, SPACE)[0] == pytest.approx(wanted, rel=1e-10)


# the pooled dispersion


def by_loops(exits, risk, weight):
    """phi of single thresholds: squared cluster scores with leverage over exits, couples of clusters counted back."""
    n_row, n = exits.shape
    square = alone = total = 0.0
    for k in range(n):
        e = sum(weight[g] * exits[g, k] for g in range(n_row))
        s = sum(weight[g] * risk[g, k] for g in range(n_row))
        total += e
        for g in range(n_row):
            score = (risk[g, k] * e / s - exits[g, k]) / np.sqrt(1.0 - min(risk[g, k] / s, 0.95))
            square += weight[g] * score**2
            alone += score**2 if weight[g] > 0 else 0.0
    return max(square, alone / 2 if min(weight) < 0 else 0.0) / total


def test_dispersion_by_loops():
    exits, risk = world(25, 3)
    weight = np.ones(25)
    found = measure_dispersion(exits, risk, weight)
    assert found.pooled == pytest.approx(by_loops(exits, risk, weight), rel=1e-12)
    share = risk.sum(axis=1)
    assert found.clusters == pytest.approx(share.sum() ** 2 / np.sum(share**2), rel=1e-12)


def with_couples(exits, risk):
    """Rows for pairs that all sit in two clusters: each in both, and once more with weight -1."""
    n = len(exits) // 2
    rows = np.zeros((2 * n, exits.shape[1], 2))
    for k in range(len(exits)):
        for row in (k % n, (k + 1) % n, n + k % n):
            rows[row, :, 0] += exits[k]
            rows[row, :, 1] += risk[k]
    return rows[..., 0], rows[..., 1], np.concatenate([np.ones(n), -np.ones(n)])


def test_dispersion_of_pairs_that_connect_clusters():
    exits, risk = world(24, 6)
    many, long, weight = with_couples(exits, risk)
    assert weight @ many == pytest.approx(exits.sum(axis=0))
    assert measure_dispersion(many, long, weight).pooled == pytest.approx(by_loops(many, long, weight), rel=1e-12)


def test_dispersion_is_the_variance_of_an_exit():
    """Single pairs with gamma times of variance phi mu^2: the score variance is phi, 4 standard errors."""
    rng = np.random.default_rng(2)
    phi, n = 2.9, 4000
    risk = rng.gamma(1 / phi, phi, (n, 5)) * np.arange(1, 6)
    found = measure_dispersion(np.ones((n, 5)), risk, np.ones(n))
    spread = (risk / np.arange(1, 6) - 1.0) ** 2
    assert abs(found.pooled - phi) < 4 * spread.std() / np.sqrt(5 * n)
    assert found.correlation.size == 0
    assert found.total == found.pooled


def test_correlation_between_thresholds_widens_the_errors():
    """Times with common factors of neighbours: correlation one half at one step, none beyond; so total = 2 pooled."""
    rng = np.random.default_rng(12)
    n, k = 30000, 9
    shared = rng.gamma(0.5, 1.0, (n, k + 1))
    risk = shared[:, 1:] + shared[:, :-1]  # mean 1, variance 1, correlation 1/2 of neighbours
    found = measure_dispersion(np.ones((n, k)), risk, np.ones(n))
    assert found.correlation == pytest.approx([0.5], abs=0.02)  # 4 standard errors, heavy tails included
    assert found.pooled == pytest.approx(1.0, abs=0.04)
    assert found.total == pytest.approx(found.pooled * (1 + 2 * found.correlation.sum()), rel=1e-12)
    assert Dispersion(2.0, np.array([0.25, 0.1]), 9.0).total == pytest.approx(3.4, rel=1e-12)


def test_chance_correlation_is_left_out():
    """Independent thresholds, 60 clusters: a correlation above two standard errors shows in one world of twenty."""
    rng = np.random.default_rng(7)
    worlds = [rng.gamma(0.7, 1.0, (60, 8)) for _ in range(150)]
    seen = [measure_dispersion(np.ones((60, 8)), risk, np.ones(60)).correlation.size > 0 for risk in worlds]
    assert np.mean(seen) < 0.05 + 4 * np.sqrt(0.05 * 0.95 / 150)


def test_scores_sum_to_zero_without_leverage():
    """At the saturated fit the scores cancel; the leverage correction only lengthens them (Bell & McCaffrey 2002)."""
    exits, risk = world(40, 5)
    plain = risk * (exits.sum(axis=0) / risk.sum(axis=0)) - exits
    assert plain.sum(axis=0) == pytest.approx(np.zeros(10), abs=1e-9)
    found = scores(exits, risk, np.ones(40))
    assert found == pytest.approx(plain / np.sqrt(1 - risk / risk.sum(axis=0)), rel=1e-12)


def test_dispersion_needs_two_clusters():
    with pytest.raises(DataError, match="got 1 clusters with 10 exits; their spread cannot be measured"):
        measure_dispersion(np.ones((1, 10)), np.ones((1, 10)), np.ones(1))


def test_rate_intervals_are_gamma_quantiles():
    """Rate given E and S: gamma of shape E / phi and rate S / phi, as a likelihood with a flat prior in ln rate."""
    exits, risk, step = np.array([12.0, 3.5]), np.array([4e5, 9e5]), np.log([1.4, 1.4])
    low, high = rate_intervals(exits, risk, step, 2.7, 0.95)
    draws = gamma.rvs(exits / 2.7, scale=2.7 / risk, size=(400000, 2), random_state=1)
    for k in range(2):
        ends = np.quantile(draws[:, k] * step[k], (0.025, 0.975))
        assert (low[k], high[k]) == pytest.approx(ends, rel=0.05 if k else 0.01)
    nothing = rate_intervals(np.zeros(1), np.ones(1), step[:1], 2.7, 0.95)
    assert np.all(np.isnan(nothing))
