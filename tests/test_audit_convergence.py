"""Convergence: the law of areas, exact and simulated, and what the finding says."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.audit.areas import early_areas
from regimes.audit.convergence import convergence
from regimes.audit.vectors import Vectors
from regimes.units import DAY
from tests.audit_small import clean, odd, small
from tests.audit_worlds import audited

STEP, GROWTH = 3600.0, 0.5 / DAY
N_STEP = 30


def mapped(matrices, n_direction: int = 48, start: float = 400.0) -> Vectors:
    """Pairs in all directions, one cluster a matrix, each moved by powers of its generator: exp(t A) at every step."""
    angle = np.pi * (np.arange(n_direction) + 0.5) / n_direction
    unit = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    place = []
    for matrix in matrices:
        values, vectors = np.linalg.eig(matrix)
        moves = [(vectors * np.exp(values * STEP * k)) @ np.linalg.inv(vectors) for k in range(N_STEP)]
        place.append(np.einsum("kij,nj->nki", np.real(moves), start * unit))
    n = len(matrices) * n_direction
    table = np.full((n, 3), -1)
    table[:, 0] = np.repeat(np.arange(len(matrices)), n_direction)
    return Vectors(np.concatenate(place).reshape(-1, 2), N_STEP * np.arange(n + 1), table, np.ones(len(matrices)))


def gradients(n: int, divergence: float, seed: int = 1) -> list[np.ndarray]:
    """Random velocity gradients of given divergence."""
    out = []
    for a, b, w in np.random.default_rng(seed).standard_normal((n, 3)) / DAY:
        out.append(np.array([[a + 0.5 * divergence, b - w], [b + w, -a + 0.5 * divergence]]))
    return out


def test_areas_of_an_incompressible_linear_flow_do_not_change():
    found = early_areas(mapped(gradients(8, 0.0)), STEP, GROWTH, 2.0, 0.0)
    assert abs(found.rate) * DAY < 1e-3  # 48 directions instead of all
    assert found.until == 24 * STEP


@pytest.mark.parametrize("divergence", [-0.3, -0.1, 0.1])
def test_the_divergence_of_a_linear_flow_is_found(divergence):
    found = early_areas(mapped(gradients(8, divergence / DAY)), STEP, GROWTH, 2.0, 0.0)
    assert found.rate * DAY == pytest.approx(divergence, rel=0.15)  # first order in the shift of x
    assert (found.p_value < 0.01) == (divergence < 0)


def test_units_directions_and_order_do_not_matter():
    vectors = mapped(gradients(8, -0.2 / DAY))
    one = early_areas(vectors, STEP, GROWTH, 1.8, 10.0)
    turned = replace(vectors, place=7.0 * vectors.place @ np.array([[0.6, 0.8], [-0.8, 0.6]]))
    two = early_areas(turned, STEP, GROWTH, 1.8, 70.0)
    three = early_areas(replace(vectors, place=-vectors.place), 2.0 * STEP, 0.5 * GROWTH, 1.8, 10.0)
    assert (two.rate, two.p_value) == pytest.approx((one.rate, one.p_value), rel=1e-9)
    assert (2.0 * three.rate, three.p_value) == pytest.approx((one.rate, one.p_value), rel=1e-9)


def test_errors_of_position_alone_do_not_shrink_areas():
    rng, n = np.random.default_rng(4), 4000
    vectors = mapped([np.diag([1e-12, -1e-12])] * (n // 48))
    error = 20.0  # of a coordinate of a fix; twice its square for a separation
    noisy = replace(vectors, place=vectors.place + np.sqrt(2.0) * error * rng.standard_normal(vectors.place.shape))
    found = early_areas(noisy, STEP, GROWTH, 2.0, error)
    uncorrected = early_areas(noisy, STEP, GROWTH, 2.0, 0.0)
    assert found.p_value > 0.01
    assert uncorrected.p_value < found.p_value


def test_two_clusters_and_no_time_give_no_p_value():
    assert np.isnan(early_areas(mapped(gradients(2, -1.0 / DAY)), STEP, GROWTH, 2.0, 0.0).p_value)
    short = mapped(gradients(8, 0.0))
    short = Vectors(short.place[::N_STEP], np.arange(len(short.offset)), short.table, short.weight)
    found = early_areas(short, STEP, GROWTH, 2.0, 0.0)
    assert np.isnan(found.rate)
    assert np.isnan(found.p_value)


def test_a_clean_survey_is_not_flagged():
    found = convergence(clean())
    assert not found.flag
    assert not found.verdict_changes
    assert "half of their start separation" in found.text
    assert "The verdict stands" in found.text


def test_convergence_is_flagged_and_told():
    found = convergence(audited(small(5, convergence={"rate_per_d": 1.0, "lasts_d": 10.0})))
    assert found.flag
    assert found.size < -0.2
    assert "shrink by" in found.text
    assert "With every pair begun" in found.text


@pytest.mark.parametrize("kind", ["few pairs", "planar", "gaps", "short"])
def test_odd_surveys_get_a_finding(kind):
    found = convergence(odd()[kind])
    assert found.threat == "convergence"
    assert found.text.endswith(".")
    assert "nan" not in found.text
