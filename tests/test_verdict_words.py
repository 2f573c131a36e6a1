"""Sentences read word for word, digits, and the numbers of a verdict from posteriors."""

import numpy as np
import pytest

from regimes.inference.slope import RangeSlope
from regimes.verdict.decide import decide
from regimes.verdict.digits import bayes_factor, km, km_interval, listed, p_value, percent, rounded_down, slope_text
from regimes.verdict.numbers import by_separation, interval, sequences, slope_record, transition_scales
from regimes.verdict.record import Interval, Slope, TransitionScale
from regimes.verdict.words import methods_text, slope_words, verdict_sentence
from tests.test_verdict import EDGES, KM, axis, evidence, inference

ESTIMATE = Slope(4 * KM, 16 * KM, "exit_rate", Interval(1.71, 1.6, 1.8, 1.52, 1.93), "estimate", "")
MOVE = TransitionScale("exponential", "richardson", Interval(5 * KM, 4.4 * KM, 6 * KM, 3.8 * KM, 12.3 * KM), 0.8)


def test_supported_sentence():
    assert verdict_sentence(decide(evidence()), [MOVE], [ESTIMATE]) == (
        "Supported: of the four regimes the data are consistent with only exponential from 1.0 to 4.0 km and only "
        "Richardson from 4.0 to 16 km; exponential gives way to Richardson at 5.0 km (3.8 to 12, 95 %); the implied "
        "spectral slope over 4.0 to 16 km is 1.7 (1.5 to 1.9, 95 %)."
    )


def test_a_transition_that_is_not_probable_is_not_named():
    doubtful = TransitionScale("exponential", "richardson", MOVE.scale, 0.4)
    assert "gives way" not in verdict_sentence(decide(evidence()), [doubtful], [])


def test_undecided_sentence():
    found = decide(evidence(leading=axis(p=0.9), within_release=True, clusters=4.0))
    wanted = (
        "Undecided: only 4.0 independent clusters: how much releases differ from one another cannot be estimated "
        "from so few; and the most probable regime anywhere is exponential near 1.2 km (90 %), below the 95 % that "
        "the rule asks for."
    )
    assert verdict_sentence(found, [], []) == wanted


def test_none_fits_sentence():
    found = decide(evidence(fit_p_value=0.002))
    assert verdict_sentence(found, [MOVE], [ESTIMATE]) == (
        "None of the named regimes fits: the exit rates are improbable under the named sequences, weighed by "
        "probability (predictive p = "
        "0.002); the implied spectral slope over 4.0 to 16 km is 1.7 (1.5 to 1.9, 95 %)."
    )


@pytest.mark.parametrize(
    ("value", "kind", "reason", "said"),
    [
        (Interval(np.nan, 2.8, np.nan, 2.64, np.nan), "lower_bound", "", "is at least 2.6 (95 %)"),
        (Interval(np.nan, np.nan, 1.2, np.nan, 1.38), "upper_bound", "", "is at most 1.4 (95 %)"),
    ],
)
def test_bounds_in_words(value, kind, reason, said):
    slope = Slope(1 * KM, 8 * KM, "exit_rate", value, kind, reason)
    assert slope_words(slope) == f"the implied spectral slope over 1.0 to 8.0 km {said}"


def test_no_slope_in_words():
    slope = Slope(1 * KM, 8 * KM, "exit_rate", Interval(*[np.nan] * 5), "none", "the exponent changes inside the range")
    assert slope_words(slope) == (
        "no spectral slope is implied over 1.0 to 8.0 km: the exponent changes inside the range"
    )
    assert verdict_sentence(decide(evidence()), [], [slope]).count("slope") == 0


def test_methods_text():
    facts = {
        "n_pairs": 60,
        "n_particles": 41,
        "n_clusters": 20,
        "clusters": 18.6,
        "kind": "launched",
        "max_separation": 700.0,
        "median_duration": 41 * 86400.0,
        "step": 3600.0,
        "ratio": 2**0.5,
        "within_release": False,
        "version": "0.1.0",
    }
    text = methods_text(facts, inference(), decide(evidence()), "Supported: x.", (1 * KM, 16 * KM))
    assert text == (
        "Separations of 60 launched pairs of 41 particles in 20 clusters (18.6 effective; pairs start within 0.70 km, "
        "median record 41 d, 1 h sampling) were reduced to exit rates between thresholds of ratio 1.41 from 1.0 to 16 "
        "km, counting time at risk and crediting unfinished passages. Sequences of named regimes and kernels with free "
        "exponents were compared by their evidence under a quasi-likelihood whose dispersion (2.7) comes from the "
        "scatter between releases (regimes 0.1.0). The most probable sequence is exponential, Richardson (over 99 %). "
        "Supported: x."
    )
    facts |= {"within_release": True, "kind": "both", "n_clusters": 1}
    text = methods_text(facts, inference(), decide(evidence()), "", (1 * KM, 16 * KM))
    assert "60 launched and chance pairs of 41 particles in 1 cluster (" in text
    assert "scatter between particles" in text


# digits: by hand


@pytest.mark.parametrize(
    ("metres", "said"),
    [
        (1414.2, "1.4"),
        (9960, "10"),
        (9940, "9.9"),
        (12345, "12"),
        (123456, "123"),
        (432, "0.43"),
        (999, "1.0"),
        (99.7, "0.10"),
    ],
)
def test_km(metres, said):
    assert km(metres) == said


def test_digits():
    assert km_interval(8000, 4980, 13200) == "8.0 km (5.0 to 13, 95 %)"
    assert [slope_text(v) for v in (1.649, 2.96, 3.0)] == ["1.6", "3.0", "3.0"]
    assert [percent(p) for p in (1.0, 0.991, 0.5, 0.014, 0.0)] == ["over 99 %", "over 99 %", "50 %", "1 %", "under 1 %"]
    assert [rounded_down(v, d) for v, d in ((5.97, 1), (29.9, 0), (6.0, 1))] == ["5.9", "29", "6.0"]
    assert [bayes_factor(np.log(v)) for v in (3.04, 20.1, 31.9, 999.0, 1001.0)] == [
        "3.0",
        "20.1",
        "31",
        "999",
        "over 1000",
    ]
    assert bayes_factor(1e4) == "over 1000"
    assert [p_value(v) for v in (0.0123, 2e-5, 0.0)] == [f"predictive p {x}" for x in ("= 0.01", "= 2e-05", "< 1e-6")]


def test_lists():
    assert listed([]) == ""
    assert listed(["a"]) == "a"
    assert listed(["a", "b"]) == "a and b"
    assert listed(["a", "b", "c"]) == "a, b and c"
    assert listed(["a, so", "b"]) == "a, so; and b"


# numbers from posteriors


def test_interval():
    found = interval(np.linspace(0, 1, 1001))
    assert (found.median, found.lo68, found.hi68, found.lo95, found.hi95) == pytest.approx(
        (0.5, 0.16, 0.84, 0.025, 0.975)
    )


def test_numbers_along_the_separation_axis():
    """Named: exponential below 5 km, Richardson above. Free: alpha 2.9 with weight e^3 / (1 + e^3)."""
    found = by_separation(inference(), EDGES, 1)
    assert found.separation == pytest.approx(np.sqrt(EDGES[1:] * EDGES[:-1]))
    assert found.probability["exponential"][:4] == pytest.approx(np.ones(4), abs=2e-4)
    assert found.probability["richardson"][5:] == pytest.approx(np.ones(3), abs=2e-4)
    assert found.slope_median == pytest.approx(np.full(8, 2.9), abs=0.01)
    assert found.exponent_lo95[-1] == pytest.approx(1.35, abs=0.01)  # alpha 1.7, probability 0.047
    assert found.slope_lo95 == pytest.approx(2 * found.exponent_lo95 - 1)


def test_sequences_and_transitions():
    (only,) = sequences(inference())
    assert only.regimes == ("exponential", "richardson")
    assert only.probability == pytest.approx(1 / (1 + np.exp(-9)))
    (move,) = transition_scales(inference())
    assert (move.lower, move.upper) == ("exponential", "richardson")
    assert move.scale.median == pytest.approx(5 * KM, rel=1e-3)


def test_slope_record():
    draws = np.linspace(1.0, 3.0, 2001)
    estimate = slope_record(RangeSlope(1.0, 2.0, draws, "estimate", ""), "exit_rate")
    assert estimate.value.median == pytest.approx(2.0)
    low = slope_record(RangeSlope(1.0, 2.0, draws, "lower_bound", "why"), "exit_rate")
    assert (low.value.lo95, low.value.lo68, low.reason) == (pytest.approx(1.1), pytest.approx(1.64), "why")
    assert np.isnan([low.value.median, low.value.hi68, low.value.hi95]).all()
    high = slope_record(RangeSlope(1.0, 2.0, draws, "upper_bound", ""), "exit_rate")
    assert (high.value.hi95, high.value.hi68) == (pytest.approx(2.9), pytest.approx(2.36))
    none = slope_record(RangeSlope(1.0, 2.0, np.empty(0), "none", "why"), "separation")
    assert np.isnan(none.value.median)
    assert none.curve == "separation"
