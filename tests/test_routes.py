"""The same number by two routes: closed forms, quadrature, general-purpose solvers."""

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp
from scipy.stats import lognorm

from regimes.errors import FitError
from regimes.theory.exit_times import mean_exit_times
from regimes.theory.fokker_planck import kernel_at, log_grid, moments, separation_masses
from regimes.theory.kernel import Kernel
from regimes.theory.self_similar import cumulative, density, exponential_moment, moment

TWO_PIECES = Kernel([2.0, 4 / 3], [3.0], 0.8, 1.0)


def random_kernel(seed, low=1.0, high=100.0):
    """Up to four pieces, exponents 0 to 2 with the ends frequent, transitions anywhere in and around the range."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(1, 5))
    exponents = np.where(rng.random(n) < 0.4, rng.choice([0.0, 1.0, 4 / 3, 2.0], n), rng.uniform(0.0, 2.0, n))
    breaks = np.sort(np.exp(rng.uniform(np.log(low / 3), np.log(3 * high), n - 1)))
    return Kernel(exponents, breaks, float(np.exp(rng.normal())), float(np.exp(rng.uniform(np.log(low), np.log(high)))))


def by_hand(kernel, r):
    """K at one separation: piece by piece from the reference, as its definition says."""
    value, at = kernel.rate * kernel.reference**2, kernel.reference
    edges = [0.0, *kernel.breaks, np.inf]
    piece = next(i for i in range(len(kernel.exponents)) if edges[i] <= at < edges[i + 1])
    while not edges[piece] <= r < edges[piece + 1]:
        nearer = edges[piece + 1] if r >= edges[piece + 1] else edges[piece]
        value *= (nearer / at) ** kernel.exponents[piece]
        at, piece = nearer, piece + (1 if r >= edges[piece + 1] else -1)
    return value * (r / at) ** kernel.exponents[piece]


def by_quadrature(kernel, low, high):
    """Integral of r / (2 K), split at the transitions."""
    ends = [low, *(b for b in kernel.breaks if low < b < high), high]
    parts = [
        quad(lambda r: r / (2.0 * by_hand(kernel, r)), a, b, epsrel=1e-12, epsabs=0.0)[0] for a, b in pairwise(ends)
    ]
    return sum(parts)


@pytest.mark.parametrize("seed", range(25))
def test_kernel_of_many_pieces(seed):
    kernel = random_kernel(seed)
    r = np.exp(np.random.default_rng(seed + 100).uniform(np.log(0.1), np.log(1e3), 20))
    wanted = [by_hand(kernel, x) for x in r]
    assert kernel(r) == pytest.approx(wanted, rel=1e-11)
    log_r = np.sort(np.log(r))
    on_grid = kernel_at(log_r, kernel.exponents, kernel.breaks, kernel.reference, kernel.rate)
    assert np.exp(on_grid) == pytest.approx(kernel(np.exp(log_r)), rel=1e-11)


@pytest.mark.parametrize("seed", range(40))
def test_exit_times_by_quadrature(seed):
    """Steps of a factor 1.2 to 3, so that up to three transitions fall inside one step."""
    kernel = random_kernel(seed)
    ratio = np.random.default_rng(seed).uniform(1.2, 3.0)
    thresholds = ratio ** np.arange(int(np.log(100.0) / np.log(ratio)) + 1)
    wanted = [by_quadrature(kernel, a, b) for a, b in pairwise(thresholds)]
    assert kernel.exit_times(thresholds) == pytest.approx(wanted, rel=1e-10)


def test_random_kernels_have_transitions_inside_steps():
    """The test above is not empty: most kernels bend inside the range, some twice between two thresholds."""
    kernels = [random_kernel(seed) for seed in range(40)]
    inside = [np.sum((k.breaks > 1.0) & (k.breaks < 100.0)) for k in kernels]
    close = [np.any(np.diff(np.log(k.breaks)) < np.log(1.2)) for k in kernels]
    assert np.mean(np.array(inside) > 0) > 0.5
    assert sum(close) >= 1


@pytest.mark.parametrize("gap", [1e-3, 1e-6, 1e-10, 0.0])
def test_exit_times_are_smooth_towards_the_exponential_regime(gap):
    """q = 2 - a towards zero, where x^q / q loses its digits: integral by quadrature."""
    kernel = Kernel([2.0 - gap], [], 0.7, 5.0)
    assert kernel.exit_times([1.0, 1.4])[0] == pytest.approx(by_quadrature(kernel, 1.0, 1.4), rel=1e-11)


@pytest.mark.parametrize("inner", [0.5, 1.0, 4.0, 90.0, 200.0])
def test_transition_at_a_threshold_or_outside(inner):
    """Thresholds are powers of two: a transition on one of them, below and above all."""
    kernel = Kernel([2.0, 0.0], [inner], 0.3, 10.0)
    thresholds = 2.0 ** np.arange(7)
    wanted = [by_quadrature(kernel, a, b) for a, b in pairwise(thresholds)]
    assert kernel.exit_times(thresholds) == pytest.approx(wanted, rel=1e-11)


@pytest.mark.parametrize("move", [-1e-9, 1e-9])
def test_branches_agree_at_a_transition(move):
    """A transition just below, at or just above the reference and a threshold gives the same kernel and times."""
    at, beside = Kernel([2.0, 1.0], [4.0], 0.3, 4.0), Kernel([2.0, 1.0], [4.0 * (1 + move)], 0.3, 4.0)
    r = np.array([1.0, 2.0, 4.0, 4.0 * (1 + 1e-8), 8.0])
    assert beside(r) == pytest.approx(at(r), rel=1e-7)
    assert beside.exit_times(r[[0, 1, 2, 4]]) == pytest.approx(at.exit_times(r[[0, 1, 2, 4]]), rel=1e-7)


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (([2.0], [1.0], 1.0, 1.0), "got 1 exponents"),
        (([2.0, 1.0, 0.0], [3.0, 2.0], 1.0, 1.0), "breaks increasing"),
        (([2.0, 1.0], [-3.0], 1.0, 1.0), "but exponents positive"),
        (([2.0], [], 0.0, 1.0), "rate 0"),
        (([2.0], [], 1.0, -1.0), "reference -1"),
        (([np.nan], [], 1.0, 1.0), "finite"),
        (([2.0], [], np.inf, 1.0), "finite"),
    ],
)
def test_kernel_that_is_none(arguments, said):
    with pytest.raises(FitError, match=said):
        Kernel(*arguments)


# the distribution of separations


def masses(kernel, starts, times, cells, steps, ends=(1e-4, 1e5)):
    edges = log_grid(*ends, cells)
    value = kernel_at(edges, kernel.exponents, kernel.breaks, kernel.reference, kernel.rate)
    found = separation_masses(edges, value, np.log(np.array(starts, float)), np.array(times, float), steps)
    return edges, found


# Largest error of the distribution function and relative errors of D2 and <r4>: about twice what was measured.
@pytest.mark.parametrize(("cells", "steps", "errors"), [(400, 20, (5e-4, 8e-3, 5e-2)), (1600, 80, (5e-5, 6e-4, 3e-3))])
@pytest.mark.parametrize("a", [0.0, 1.0, 4 / 3, 1.5])
def test_distribution_of_one_power_law(a, cells, steps, errors):
    """Against the Bessel density, integrated, and its exact moments; the finer grid is closer."""
    kernel, times = Kernel([a], [], 0.7, 1.0), (0.3, 1.0, 3.0)
    edges, found = masses(kernel, [1.3], times, cells, steps)
    _, second, fourth = moments(edges, found)
    for j, t in enumerate(times):
        r = np.exp(edges[:: max(1, cells // 50)])
        exact = np.array([distribution(x, t, 1.3, 0.7, a) for x in r])
        mine = np.concatenate(([0.0], np.cumsum(found[j, :, 0])))[:: max(1, cells // 50)]
        assert np.max(np.abs(mine - exact)) < errors[0]
        assert second[j, 0] == pytest.approx(moment(2, t, 0.7, a, 1.3), rel=errors[1])
        assert fourth[j, 0] == pytest.approx(moment(4, t, 0.7, a, 1.3), rel=errors[2])


def test_moments_of_a_coarse_cell():
    """One cell from 1 to 2 m, uniform per area: <r2> = 5/2 and <r4> = 7 by integration."""
    mean_log, second, fourth = moments(np.log([1.0, 2.0]), np.ones((1, 1, 1)))
    assert mean_log[0, 0] == pytest.approx(0.5 * np.log(2.0), rel=1e-12)  # middle of the cell, as documented
    assert (second[0, 0], fourth[0, 0]) == (pytest.approx(2.5, rel=1e-12), pytest.approx(7.0, rel=1e-12))


def distribution(r, t, start, coefficient, a):
    """Share of pairs closer than r: the density summed over a fine grid in ln r."""
    x = np.linspace(np.log(1e-4), np.log(r), 20001) if r > 1e-4 else np.zeros(2)
    return np.trapezoid(density(np.exp(x), t, start, coefficient, a) * np.exp(x), x)


def test_distribution_of_the_exponential_regime():
    """ln r is normal with drift 2 t/T and variance 2 t/T (Lundgren 1981)."""
    edges, found = masses(Kernel([2.0], [], 0.5, 1.0), [1.0], (0.5, 2.0, 4.0), 1600, 60, (1e-5, 1e8))
    mean_log, second, _ = moments(edges, found)
    for j, t in enumerate((0.5, 2.0, 4.0)):
        mine = np.cumsum(found[j, :, 0])
        exact = lognorm.cdf(np.exp(edges[1:]), np.sqrt(2 * 0.5 * t), scale=np.exp(2 * 0.5 * t))
        assert np.max(np.abs(mine - exact)) < 5e-5
        assert mean_log[j, 0] == pytest.approx(2 * 0.5 * t, rel=1e-9)
        assert second[j, 0] == pytest.approx(
            exponential_moment(2, t, 0.5, 1.0), rel=2.5e-2
        )  # twice as measured; all in the far tail


def by_general_solver(kernel, start, times, cells):
    """The same finite volumes as one matrix, handed to an implicit Runge-Kutta solver of order five."""
    edges = log_grid(0.01, 1e3, cells)
    r, h = np.exp(edges), edges[1] - edges[0]
    area = np.diff(r**2) / 2.0
    flow = np.array([by_hand(kernel, x) for x in r[1:-1]]) / h
    matrix = np.zeros((cells, cells))
    for i, f in enumerate(flow):  # flux through an inner edge, proportional to the difference of densities per area
        matrix[i, i] -= f / area[i]
        matrix[i + 1, i] += f / area[i]
        matrix[i, i + 1] += f / area[i + 1]
        matrix[i + 1, i + 1] -= f / area[i + 1]
    first = np.zeros(cells)
    place = (np.log(start) - edges[0]) / h - 0.5
    first[int(place)], first[int(place) + 1] = 1 - place % 1, place % 1
    options = {"method": "Radau", "rtol": 1e-9, "atol": 1e-12, "jac": matrix, "t_eval": times}
    return solve_ivp(lambda _, y: matrix @ y, (0.0, times[-1]), first, **options).y.T


def test_distribution_of_two_pieces_by_a_general_solver():
    times = [0.4, 1.0, 2.5]
    exact = by_general_solver(TWO_PIECES, 1.1, times, 60)
    error = []
    for steps in (20, 40, 80):
        _, found = masses(TWO_PIECES, [1.1], times, 60, steps, (0.01, 1e3))
        error.append(np.max(np.abs(found[:, :, 0] - exact)))
    assert error[0] < 2.5e-4  # twice as measured
    assert error[1] / error[2] == pytest.approx(4.0, rel=0.3)  # second order in the time step


def test_distribution_is_conserved_positive_and_ends_uniform_per_area():
    edges, found = masses(TWO_PIECES, [0.5, 2.0], (1.0, 5.0, 1e4), 80, 20, (0.1, 50.0))
    assert found.sum(axis=1) == pytest.approx(np.ones((3, 2)), abs=1e-12)
    assert np.all(found > -1e-15)
    area = np.diff(np.exp(2.0 * edges))
    assert found[2, :, 0] == pytest.approx(area / area.sum(), rel=1e-6)


@pytest.mark.parametrize("a", [0.0, 1.0, 4 / 3, 1.5])
def test_distribution_from_a_point_is_the_limit_of_the_density(a):
    """Gamma distribution of r^q against the Bessel density from a start of 1e-9."""
    for r in (0.3, 1.0, 4.0):
        x = np.concatenate(([0.0], np.geomspace(1e-12, r, 40001)))
        near = np.trapezoid(density(x[1:], 0.8, 1e-9, 0.7, a), x[1:])
        assert near == pytest.approx(cumulative(r, 0.8, 0.7, a), rel=1e-4)


@pytest.mark.parametrize(("order", "a"), [(1, 4 / 3), (2, 1.5), (4, 1.0), (0.5, 0.0)])
def test_moments_by_quadrature_of_the_density(order, a):
    x = np.linspace(np.log(1e-8), np.log(3e3), 400001)
    f = density(np.exp(x), 0.9, 1.3, 0.7, a) * np.exp((1 + order) * x)
    assert np.trapezoid(f, x) == pytest.approx(moment(order, 0.9, 0.7, a, 1.3), rel=1e-8)


def test_exit_times_take_the_mean_of_first_passages():
    """A passage simulated by another scheme (reflection-free Euler in ln r) takes the predicted time, 4.5 s.e."""
    rng = np.random.default_rng(3)
    n, dt, q = 6000, 2e-4, 2.0 - 4 / 3
    x, time, alive = np.zeros(n), np.zeros(n), np.ones(n, bool)
    barrier = np.log(2.0) - 0.5826 * np.sqrt(2 * dt) * 2.0 ** (-q / 2)  # Siegmund (1979): discrete monitoring
    while np.any(alive):
        y = x[alive]
        rate = np.exp(-q * y) * dt
        small = np.minimum(rate, 20 * dt)  # close to the origin steps are kept small, in time of their own
        spent = dt * small / rate
        x[alive] = y + 4 / 3 * small + np.sqrt(2 * small) * rng.standard_normal(y.size)
        time[alive] += spent
        alive[alive] = x[alive] < barrier
    wanted = mean_exit_times(np.array([1.0, 2.0]), np.array([4 / 3]), np.empty(0), 1.0)[0]
    assert abs(time.mean() - wanted) < 4.5 * time.std() / np.sqrt(n) + 0.005 * wanted
