"""Evidence by other routes: brute force, nested sampling, targets whose integral is known."""

from functools import cache
from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import dblquad
from scipy.special import logsumexp

from regimes.inference.fit import exit_rate_space, sample_candidates, screen_exit_rates
from regimes.inference.models import Model
from regimes.inference.quadrature import _move_nodes, integrate
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.theory.kernel import Kernel

THRESHOLDS = 1e3 * 2.0 ** (np.arange(13) / 2)
SLOPES = (0.0, 4.0)


@cache
def target(exits=40.0):
    """Exit rates of a kernel exponential to 4 km, then 4/3; counts fall with separation, with some scatter."""
    kernel = Kernel([2.0, 4 / 3], [4e3], 4e-6, 2e3)
    count = exits * np.linspace(1.0, 0.5, THRESHOLDS.size - 1)
    scatter = np.exp(0.1 * np.random.default_rng(4).standard_normal(count.size))
    return ExitRateLikelihood(THRESHOLDS, count, count * kernel.exit_times(THRESHOLDS) * scatter, 2.8)


def posterior(pieces):
    likelihood = target()
    space = exit_rate_space(likelihood)
    return next(iter(screen_exit_rates(likelihood, space, [Model(pieces)], 1))).posterior, space


def box(model, space):
    """Bounds of every parameter, transitions unordered."""
    return [space.log_rate, *[SLOPES] * model.n_free, *[space.transition_bounds] * model.n_transition]


def by_quadrature(pieces):
    """Two parameters by adaptive cubature around the ridge in ln rate, outside which nothing is left."""
    density, space = posterior(pieces)
    bounds = box(density.model, space)
    grid = np.linspace(*bounds[1], 400)
    rate = np.linspace(*space.log_rate, 4000)
    ridge = [rate[np.argmax(density(np.stack([rate, np.full(rate.size, g)], 1)))] for g in grid]
    top = max(density(np.array([[r, g]]))[0] for r, g in zip(ridge, grid, strict=True))
    value = lambda x, y: float(np.exp(density(np.array([[x, y]]))[0] - top))  # noqa: E731
    kinks = [k for k in (1.0, 3.0) if density.model.n_free] or list(np.log(THRESHOLDS[1:-1]))
    ends = sorted({bounds[1][0], *[k for k in kinks if bounds[1][0] < k < bounds[1][1]], bounds[1][1]})
    at = lambda y: np.interp(y, grid, ridge)  # noqa: E731
    parts = [
        dblquad(value, a, b, lambda y: at(y) - 1.5, lambda y: at(y) + 1.5, epsabs=1e-5, epsrel=1e-4)[0]
        for a, b in pairwise(ends)
    ]
    return np.log(sum(parts)) + top


@pytest.mark.parametrize("pieces", [("free",), ("exponential", "richardson"), ("richardson", "diffusive")])
def test_evidence_of_two_parameters_by_cubature(pieces):
    likelihood = target()
    found = integrate(likelihood, Model(pieces), exit_rate_space(likelihood)).log_evidence
    assert found == pytest.approx(by_quadrature(pieces), abs=0.02)


def test_evidence_of_three_parameters_on_a_dense_grid():
    """Midpoints, 160 x 160 for alpha and the transition and 60 for ln rate."""
    density, space = posterior(("exponential", "free"))
    bounds = box(density.model, space)
    axes, log_cell = [], 0.0
    for low, high in bounds[1:]:
        axes.append(low + (high - low) * (np.arange(160) + 0.5) / 160)
        log_cell += np.log((high - low) / 160)
    nodes = np.stack([g.ravel() for g in np.meshgrid(*axes, indexing="ij")], axis=1)
    middle = density.evaluate.likelihood
    centre = np.log(middle.exits.sum() * 0.5 * np.log(2.0) / middle.risk.sum())
    rates = centre + np.linspace(-3.0, 3.0, 60)
    total = [logsumexp(density(np.column_stack([np.full(len(nodes), r), nodes]))) for r in rates]
    wanted = logsumexp(total) + log_cell + np.log(rates[1] - rates[0])
    assert integrate(middle, density.model, space).log_evidence == pytest.approx(wanted, abs=0.02)


MODELS = [
    ("free",),
    ("exponential", "richardson"),
    ("exponential", "richardson", "diffusive"),
    ("exponential", "richardson", "ballistic", "diffusive"),
    ("free", "diffusive"),
    ("exponential", "free"),
    ("free", "free"),
    ("free", "free", "diffusive"),
]


def from_the_prior(model, space, rate, n, rng):
    """Draws of a cube of parameters with ln rate in a window, transitions sorted, and ln of their density."""
    bounds = np.array([rate, *box(model, space)[1:]])
    draws = rng.uniform(*bounds.T, (n, model.size))
    draws[:, 1 + model.n_free :].sort(axis=1)
    volume = np.sum(np.log(np.diff(bounds, axis=1))) - np.sum(np.log(np.arange(1, model.n_transition + 1)))
    return draws, -volume


@pytest.mark.parametrize("pieces", MODELS)
def test_evidence_by_simple_draws_of_the_prior(pieces):
    """Mean likelihood of 400000 draws; ln rate near its middle, where the posterior is: 4.5 s.e. and 0.02."""
    density, space = posterior(pieces)
    middle = np.mean(space.log_rate)
    rng = np.random.default_rng(6)
    draws, log_density = from_the_prior(density.model, space, (middle - 1.5, middle + 1.5), 400_000, rng)
    value = density(draws) - log_density
    top = value.max()
    weight = np.exp(value - top)
    error = weight.std() / weight.mean() / np.sqrt(weight.size)
    wanted = np.log(weight.mean()) + top
    assert error < 0.03
    assert integrate(target(), density.model, space).log_evidence == pytest.approx(wanted, abs=0.02 + 4.5 * error)


@pytest.mark.parametrize(("n", "wanted"), [(1, [1 / 2]), (2, [1 / 3, 2 / 3]), (3, [1 / 4, 1 / 2, 3 / 4])])
def test_nodes_of_transitions_fill_their_simplex(n, wanted):
    """Means of ordered uniform variables (textbook order statistics), after one step at least between neighbours."""
    space = exit_rate_space(target())
    model = Model(("exponential", "richardson", "ballistic", "diffusive")[: n + 1])
    nodes, mass = _move_nodes(model, space)
    low, high = space.transition_bounds
    room = high - low - (n - 1) * space.step
    means = np.exp(mass) @ nodes
    assert np.exp(mass).sum() == pytest.approx(1.0, rel=1e-12)
    assert (means - low - space.step * np.arange(n)) / room == pytest.approx(wanted, rel=1e-12)
    inside = np.column_stack([np.full(len(nodes), np.mean(space.log_rate)), nodes])
    assert np.all(model.inside(inside, space))


@pytest.mark.parametrize("pieces", [m for m in MODELS if len(m) > 1])
def test_quadrature_draws_fill_the_prior_and_no_separation_holds_a_heap(pieces):
    """Inside the prior, and transitions all different: on a grid, round-off would choose the side of a separation."""
    likelihood = target()
    space, model = exit_rate_space(likelihood), Model(pieces)
    draws = integrate(likelihood, model, space).sample(3000, np.random.default_rng(2))
    assert np.all(model.inside(draws, space))
    moves = draws[:, 1 + model.n_free :]
    assert all(np.unique(column).size == 3000 for column in moves.T)


def test_quadrature_draws_have_the_moments_of_the_chain():
    """The grid's draws against the sampler's: means to 4.5 standard errors of the chain, spreads to 10 %."""
    likelihood = target()
    space = exit_rate_space(likelihood)
    found = screen_exit_rates(likelihood, space, [Model(("exponential", "richardson"))], 3)
    (fits,) = sample_candidates("exit_rate", [found], 5)
    chain = fits[0].draws.reshape(-1, 2)
    error = chain.std(axis=0) / np.sqrt(fits[0].health.ess_min)
    grid = found[0].draws
    assert np.all(np.abs(chain.mean(0) - grid.mean(0)) < 4.5 * np.hypot(error, grid.std(0) / np.sqrt(len(grid))))
    assert chain.std(axis=0) == pytest.approx(grid.std(axis=0), rel=0.1)


def test_bridge_of_the_chain_agrees_with_quadrature():
    likelihood = target()
    space = exit_rate_space(likelihood)
    models = [Model(p) for p in (("exponential", "richardson"), ("free", "diffusive"), ("exponential", "free"))]
    found = screen_exit_rates(likelihood, space, models, 2)
    fits, *_ = zip(*[sample_candidates("exit_rate", [[c]], 7)[0] for c in found], strict=True)
    for fit in fits:
        assert fit.health.ok
        assert 0 < fit.log_evidence_error < 0.05
        assert fit.log_evidence == pytest.approx(fit.screened_log_evidence, abs=0.03 + 4 * fit.log_evidence_error)


@pytest.mark.slow
@pytest.mark.calibration
@pytest.mark.filterwarnings("ignore")
@pytest.mark.parametrize("pieces", [("free",), ("exponential", "richardson", "diffusive"), ("free", "free")])
def test_evidence_by_nested_sampling(pieces):
    """dynesty, on the same window: 4 of its own standard errors, each below 0.1."""
    import dynesty

    density, space = posterior(pieces)
    model, middle = density.model, float(np.mean(space.log_rate))
    rate = (middle - 1.5, middle + 1.5)
    bounds = np.array([rate, *box(model, space)[1:]])
    first = 1 + model.n_free

    def place(u):
        theta = bounds[:, 0] + (bounds[:, 1] - bounds[:, 0]) * u
        theta[first:] = np.sort(theta[first:])
        return theta

    sampler = dynesty.NestedSampler(
        lambda theta: float(max(density(theta)[0], -1e10)),
        place,
        model.size,
        nlive=700,
        rstate=np.random.default_rng(1),
    )
    sampler.run_nested(print_progress=False, dlogz=0.01)
    _, log_density = from_the_prior(model, space, rate, 1, np.random.default_rng(1))
    error = float(sampler.results.logzerr[-1])
    assert error < 0.1
    wanted = sampler.results.logz[-1] - log_density
    assert integrate(target(), model, space).log_evidence == pytest.approx(wanted, abs=4 * error)
