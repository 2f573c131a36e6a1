"""Models and what all of them say together: hand-made posteriors, counted sequences, slopes over a range."""

from dataclasses import replace
from math import comb

import numpy as np
import pytest

from regimes.cases.record import REGIMES as IN_CASES
from regimes.errors import FitError
from regimes.inference.average import (
    Posterior,
    local_exponents,
    mixed_slopes,
    mixing_weights,
    probabilities,
    range_slopes,
    regime_probability,
    transitions,
)
from regimes.inference.models import Model, Space, free_models, named_models
from regimes.inference.quadrature import _move_nodes
from regimes.theory.regimes import REGIMES

KM = 1e3
SPACE = Space(1 * KM, 64 * KM, 0.5 * np.log(2.0), (-16.0, -8.0))


def at(pieces, slopes=(), breaks=(), n=50, log_evidence=0.0):
    """A posterior whose draws are all the same."""
    theta = np.array([-12.0, *slopes, *np.log(np.multiply(breaks, KM))])
    return Posterior(Model(pieces), log_evidence, np.tile(theta, (n, 1)))


# models


def test_sequences_are_counted():
    """4 + 4 x 3 + 4 x 3 x 3 = 52, neighbours different; by hand."""
    models = named_models(tuple(REGIMES), 2)
    assert len(models) == 52
    assert len({m.pieces for m in models}) == 52
    assert [sum(m.n_transition == k for m in models) for k in range(3)] == [4, 12, 36]
    assert all(a != b for m in models for a, b in zip(m.pieces, m.pieces[1:], strict=False))
    assert len(named_models(("ballistic", "diffusive"), 3)) == 8
    assert len(named_models(tuple(REGIMES), 0)) == 4


def test_free_kernels():
    assert [m.label for m in free_models()] == ["F", "FD", "EF", "FF", "FFD"]
    assert [m.size for m in free_models()] == [2, 3, 3, 4, 5]


def test_the_case_file_knows_the_same_regimes():
    assert set(IN_CASES) == set(REGIMES)


def test_unknown_regime():
    with pytest.raises(
        FitError, match="got regime 'exponentail'; known: ballistic, exponential, richardson, diffusive"
    ):
        named_models(("ballistic", "exponentail"), 1)


def test_parameters_in_order():
    model = Model(("exponential", "free", "free", "diffusive"))
    assert model.parameters == (
        "log_rate",
        "spectral_slope_1",
        "spectral_slope_2",
        "log_transition_1",
        "log_transition_2",
        "log_transition_3",
    )
    theta = np.array([-12.0, 5 / 3, 3.7, *np.log([2e3, 8e3, 3e4])])
    assert model.exponents(theta) == pytest.approx([2.0, 4 / 3, 2.0, 0.0])
    assert model.breaks(theta) == pytest.approx([2e3, 8e3, 3e4])
    kernel = model.kernel(theta, SPACE)
    assert kernel(SPACE.reference) == pytest.approx(np.exp(-12.0) * SPACE.reference**2, rel=1e-12)
    moved = model.log_rate_shift(theta, SPACE, 2e3)
    assert moved == pytest.approx(np.log(kernel(2e3) / 2e3**2) + 12.0, rel=1e-12)


def test_reference_is_the_geometric_middle():
    assert SPACE.reference == pytest.approx(8 * KM, rel=1e-12)


@pytest.mark.parametrize("pieces", [("free",), ("free", "free"), tuple(REGIMES), ("exponential", "free", "diffusive")])
def test_prior_volume_by_monte_carlo(pieces):
    """Share of a box around the prior whose points are inside: 4.5 standard errors."""
    model, rng, n = Model(pieces), np.random.default_rng(1), 200_000
    low, high = np.log(SPACE.lowest), np.log(SPACE.highest)
    bounds = np.array([(-17.0, -7.0), *[(-0.5, 4.5)] * model.n_free, *[(low, high)] * model.n_transition])
    share = np.mean(model.inside(rng.uniform(*bounds.T, (n, model.size)), SPACE))
    wanted = np.exp(model.log_prior_volume(SPACE)) / np.prod(np.diff(bounds, axis=1))
    assert abs(share - wanted) < 4.5 * np.sqrt(wanted * (1 - wanted) / n)
    assert wanted > 0.01


def test_prior_has_edges():
    model = Model(("exponential", "richardson", "diffusive"))
    low, high = SPACE.transition_bounds
    assert low == pytest.approx(np.log(np.sqrt(2) * KM))
    assert high == pytest.approx(np.log(64 / np.sqrt(2) * KM))
    fine = np.array([-12.0, np.log(4 * KM), np.log(16 * KM)])
    assert model.inside(fine, SPACE)
    for column, value in (
        (0, -16.1),
        (0, -7.9),
        (1, low - 0.01),
        (2, high + 0.01),
        (1, np.log(15 * KM)),
        (1, np.log(20 * KM)),
    ):
        wrong = fine.copy()
        wrong[column] = value
        assert not model.inside(wrong, SPACE)
    assert not Model(("free",)).inside(np.array([-12.0, 4.1]), SPACE)


def test_no_room_for_transitions():
    narrow = replace(SPACE, highest=2.1 * KM)
    assert Model(("exponential", "diffusive")).log_prior_volume(narrow) > -np.inf
    assert Model(("exponential", "richardson", "diffusive")).log_prior_volume(narrow) == -np.inf


# averages


def test_probabilities_from_evidence():
    """Bayes factors 1 : 2 : 5."""
    posts = [replace_evidence(at(("ballistic",)), np.log(k) - 700.0) for k in (1, 2, 5)]
    assert probabilities(posts) == pytest.approx([1 / 8, 2 / 8, 5 / 8], rel=1e-12)
    posts[1] = Posterior(posts[1].model, posts[1].log_evidence, np.empty((0, 1)))
    assert mixing_weights(posts) == pytest.approx([1 / 6, 0.0, 5 / 6], rel=1e-12)


def replace_evidence(post, value):
    return replace(post, log_evidence=value)


def test_regime_probability_is_summed_over_sequences():
    posts = [
        at(("exponential", "richardson"), (), (8,), log_evidence=np.log(3.0)),
        at(("exponential", "diffusive"), (), (20,), log_evidence=0.0),
    ]
    found = regime_probability(posts, np.array([2, 7.9, 8.1, 19, 21]) * KM)
    assert found["exponential"] == pytest.approx([1, 1, 0.25, 0.25, 0])
    assert found["richardson"] == pytest.approx([0, 0, 0.75, 0.75, 0.75])
    assert found["diffusive"] == pytest.approx([0, 0, 0, 0, 0.25])
    assert found["ballistic"] == pytest.approx(np.zeros(5))


def test_mixed_slopes_follow_the_weights():
    """Local slopes of two kernels, three to one: 4.5 standard errors; NaN where diffusive, 3 where exponential."""
    posts = [
        at(("free", "diffusive"), (1.7,), (20,), log_evidence=np.log(3.0)),
        at(("exponential", "free"), (3.6,), (5,)),
    ]
    found = mixed_slopes(posts, np.array([2.0, 10.0, 30.0]) * KM, 4000, np.random.default_rng(1))
    first = found[:, 0] == 1.7
    assert abs(first.mean() - 0.75) < 4.5 * np.sqrt(0.75 * 0.25 / 4000)
    assert np.all(np.isnan(found[first, 2]))
    assert np.array_equal(np.unique(found[~first], axis=0), [[3.0, 3.6, 3.6]])
    exponents = local_exponents(found)
    assert np.array_equal(np.unique(exponents[first], axis=0), [[1.35, 1.35, 0.0]])
    assert np.array_equal(np.unique(exponents[~first], axis=0), [[2.0, 2.0, 2.0]])


def test_range_slopes_leave_diffusive_parts_out():
    nan = np.nan
    found = range_slopes(np.array([[1.0, 2.0, nan, 3.0], [nan, nan, nan, 2.0], [2.0, nan, 3.0, nan]]))
    assert found[[0, 2]] == pytest.approx([2.0, 2.5])
    assert np.isnan(found[1])


def test_transitions_weigh_sequences_whatever_the_number_of_their_draws():
    """Weights 3 : 1, ten times more draws of the lighter sequence: 8 km makes three quarters of the draws."""
    posts = [
        at(("exponential", "richardson"), (), (8,), 300, np.log(3.0)),
        at(("exponential", "richardson", "diffusive"), (), (4, 30), 3000, 0.0),
    ]
    first, second = transitions(posts)
    assert (first.lower, first.upper, second.upper) == ("exponential", "richardson", "diffusive")
    assert first.probability == pytest.approx(1.0)
    assert second.probability == pytest.approx(0.25)
    assert np.mean(first.draws > 6 * KM) == pytest.approx(0.75, abs=0.01)
    assert np.unique(second.draws) == pytest.approx([30 * KM])


def test_a_transition_held_twice_counts_once():
    pieces = ("exponential", "diffusive", "exponential", "diffusive")
    found = {(t.lower, t.upper): t for t in transitions([at(pieces, (), (2, 8, 32))])}
    assert found["exponential", "diffusive"].probability == pytest.approx(1.0)
    assert np.unique(found["exponential", "diffusive"].draws) == pytest.approx([2 * KM, 32 * KM])


def test_number_of_nodes_is_that_of_ordered_cells():
    """Cells of an ordered pair, the diagonal included: n (n + 1) / 2 (textbook)."""
    nodes, _ = _move_nodes(Model(("exponential", "richardson", "diffusive")), SPACE)
    assert len(nodes) == comb(41, 2)
