"""Bridge and importance sampling on targets whose integral is known; convergence against another library."""

import numpy as np
import pytest
from scipy.stats import norm

from regimes.errors import FitError
from regimes.inference.evidence import Mixture, bridge
from regimes.inference.health import judge, rhat_of_chains, worst
from regimes.inference.importance import approximate, climbed
from regimes.inference.sampler import sample

# targets whose integral is known


def gaussian(x):
    return np.sum(norm.logpdf(x, [1.0, -2.0, 0.5], [0.3, 2.0, 1.0]), axis=1) + 3.7


def truncated(x):
    """A Gaussian cut by a box at its middle in one direction, flat across the box in the other."""
    inside = (x[:, 0] > 0.0) & (x[:, 0] < 5.0) & (np.abs(x[:, 1]) < 1.5)
    return np.where(inside, norm.logpdf(x[:, 0]), -np.inf) - 8.0


def bimodal(x):
    one = np.log(0.3) + np.sum(norm.logpdf(x, [-2.5, 0.0], 0.4), axis=1)
    two = np.log(0.7) + np.sum(norm.logpdf(x, [2.5, 1.0], [0.6, 0.3]), axis=1)
    return np.logaddexp(one, two)


def draw(name, n, rng):
    if name == "gaussian":
        return rng.normal([1.0, -2.0, 0.5], [0.3, 2.0, 1.0], (n, 3))
    if name == "truncated":
        return np.column_stack([np.abs(rng.standard_normal(n)), rng.uniform(-1.5, 1.5, n)])
    left = rng.random(n) < 0.3
    return np.where(left[:, None], rng.normal([-2.5, 0.0], 0.4, (n, 2)), rng.normal([2.5, 1.0], [0.6, 0.3], (n, 2)))


# ln of the integral: by hand.
KNOWN = {
    "gaussian": (gaussian, 3.7),
    "truncated": (truncated, np.log(3.0 * (norm.cdf(5.0) - 0.5)) - 8.0),
    "bimodal": (bimodal, 0.0),
}


@pytest.mark.parametrize("name", KNOWN)
def test_bridge_on_known_integrals(name):
    """Within 4 of its own errors, which are right: the scatter of 40 repeats agrees with them to a factor 1.5."""
    log_target, wanted = KNOWN[name]
    found, errors = [], []
    for seed in range(40):
        draws = draw(name, 300, np.random.default_rng(seed))
        value, error = bridge(log_target, draws, log_target(draws), seed, 1500)
        found.append(value)
        errors.append(error)
    assert np.max(np.abs(np.array(found) - wanted) / errors) < 4.5
    assert abs(np.mean(found) - wanted) < 4 * np.std(found) / np.sqrt(40)
    assert 1 / 1.5 < np.std(found) / np.mean(errors) < 1.5


def test_bridge_says_when_it_does_not_settle():
    """Draws of another target, far wider than the one whose integral is asked for, or outside it."""
    draws = np.random.default_rng(1).standard_normal((400, 1))
    narrow = lambda x: norm.logpdf(1e4 * x[:, 0])  # noqa: E731
    with pytest.raises(FitError, match=r"bridge sampling: got a last change of .* not cover the posterior"):
        bridge(narrow, draws, narrow(draws), 1)
    with pytest.raises(FitError, match=r"bridge sampling: got a first ln Z of -inf .* sample longer"):
        bridge(lambda x: np.full(len(x), -np.inf), draws, np.zeros(400), 1)


@pytest.mark.parametrize("name", KNOWN)
def test_importance_sampling_on_known_integrals(name):
    """From draws of a target that is shifted and half as wide; the worst of ten seeds is within 0.25."""
    log_target, wanted = KNOWN[name]
    for seed in range(10):
        rng = np.random.default_rng(seed)
        guesses = draw(name, 400, rng)
        guesses = guesses[np.isfinite(log_target(guesses))][:60]
        found = approximate(log_target, guesses, climbed(log_target, guesses), seed)
        assert found.log_evidence == pytest.approx(wanted, abs=0.25)
        assert found.effective > 100
        assert found.best_value == pytest.approx(log_target(found.best[None])[0])
        assert np.all(np.isfinite(log_target(found.draws)))


def test_climb_finds_the_maximum():
    best, value = climbed(gaussian, draw("gaussian", 30, np.random.default_rng(3)) + 0.5)
    assert best == pytest.approx([1.0, -2.0, 0.5], abs=0.3)
    assert value == pytest.approx(gaussian(np.array([[1.0, -2.0, 0.5]]))[0], abs=0.05)


def test_mixture_density_integrates_to_one():
    rng = np.random.default_rng(1)
    mixture = Mixture(draw("bimodal", 300, rng), rng)
    axis = np.linspace(-13, 13, 201)
    x, y = np.meshgrid(axis, axis, indexing="ij")
    total = np.exp(mixture.log_density(np.column_stack([x.ravel(), y.ravel()]))).sum() * (axis[1] - axis[0]) ** 2
    assert total == pytest.approx(1.0, abs=1e-3)


# convergence


@pytest.mark.filterwarnings("ignore")
def test_split_rhat_is_that_of_another_library():
    import arviz

    rng = np.random.default_rng(9)
    for shift in (0.0, 0.3):
        chains = rng.standard_normal((4, 500)) + shift * np.arange(4)[:, None]
        halves = np.concatenate([chains[:, :250], chains[:, 250:]])
        assert rhat_of_chains(halves) == pytest.approx(float(arviz.rhat(chains, method="split")), rel=1e-10)


def test_rhat_of_chains_that_stand_still():
    assert rhat_of_chains(np.ones((4, 10))) == 1.0
    assert rhat_of_chains(np.ones((4, 10)) * np.arange(4)[:, None]) == np.inf


def test_health_of_an_ensemble():
    rng = np.random.default_rng(2)
    good = judge(rng.standard_normal((32, 600, 2)), np.array([1.0, 2.0]))
    assert good.ok
    assert good.reason == ""
    assert (good.ess_min, good.lengths_min) == (32 * 600 / 2.0, 300.0)
    drifting = rng.standard_normal((32, 600, 2)) + np.linspace(0, 1, 600)[:, None]
    assert judge(drifting, np.array([1.0, 2.0])).rhat_max > 1.01
    apart = rng.standard_normal((32, 600, 1)) + (np.arange(32) >= 24)[:, None, None]
    assert not judge(apart, np.array([2.0])).ok
    lost = judge(rng.standard_normal((32, 600, 1)), np.array([np.nan]))
    assert not lost.ok
    bad = worst([good, lost])
    assert bad.reason == (
        "split R-hat inf is not below 1.01; effective sample size 0 is not above 400; "
        "the chain is 0 autocorrelation times long, not 50"
    )


def test_sampler_finds_a_bimodal_target_and_says_so_when_it_is_cut_short():
    start = draw("bimodal", 32, np.random.default_rng(1))
    chain = sample(bimodal, start, 4)
    assert chain.health.ok
    left = np.mean(chain.draws[..., 0] < 0)
    assert left == pytest.approx(0.3, abs=4.5 * np.sqrt(0.21 / (chain.health.ess_min / 4)))  # modes mix slower
    assert chain.log_posterior[3, 7] == pytest.approx(bimodal(chain.draws[3, 7][None])[0])
    again = sample(bimodal, start, 4)
    assert np.array_equal(again.draws, chain.draws)
    short = sample(bimodal, start, 4, block=60, longest=60)
    assert short.draws.shape[1] == 60
    assert "autocorrelation times long" in short.health.reason
