"""The rule, the decision with each of its branches, and the words, from hand-made numbers."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.inference.health import Health
from regimes.inference.models import Model, Space
from regimes.inference.record import Fit, Inference
from regimes.verdict.decide import Evidence, contradictions, decide
from regimes.verdict.record import BySeparation, Interval, Slope
from regimes.verdict.rule import Stretch, called, stretches

KM = 1e3
EDGES = KM * 2.0 ** (np.arange(9) / 2)  # 1 to 16 km
MIDDLE = np.sqrt(EDGES[1:] * EDGES[:-1])
SPACE = Space(EDGES[0], EDGES[-1], 0.5 * np.log(2.0), (-16.0, -8.0))
GOOD, BAD = Health(1.002, 2000.0, 90.0), Health(1.2, 150.0, 90.0)


def fit(pieces, log_evidence, health=GOOD, slopes=(), breaks=()):
    model = Model(pieces)
    theta = np.array([-12.0, *slopes, *np.log(np.multiply(breaks, KM))])
    draws = theta + 1e-3 * np.random.default_rng(1).standard_normal((8, 50, model.size))
    return Fit(model, log_evidence, 0.02, log_evidence, draws, np.zeros((8, 50)), health)


def inference(curve="exit_rate", challenge=-2.0, health=GOOD):
    named = (fit(("exponential", "richardson"), 0.0, health, (), (5,)), fit(("ballistic",), -9.0))
    free = (fit(("free",), challenge, GOOD, (2.9,)), fit(("free", "free"), challenge - 3.0, GOOD, (2.9, 1.7), (5,)))
    return Inference(curve, SPACE, named, free, 2.7)


def axis(first=4, p=0.97, low=(1.8, 1.2), high=(2.0, 1.5)):
    """Exponential on the first bins, Richardson on the others, with probability p and free intervals as given."""
    here = np.arange(8) < first
    names = ("ballistic", "exponential", "richardson", "diffusive")
    probability = {n: np.full(8, (1 - p) / 3) for n in names}
    probability["exponential"] = np.where(here, p, (1 - p) / 3)
    probability["richardson"] = np.where(here, (1 - p) / 3, p)
    lo, hi = np.where(here, low[0], low[1]), np.where(here, high[0], high[1])
    mid = (lo + hi) / 2
    return BySeparation(EDGES, MIDDLE, probability, 2 * mid - 1, 2 * lo - 1, 2 * hi - 1, mid, lo, hi)


def evidence(**changes):
    given = {
        "exit_rate": inference(),
        "separation": inference("separation"),
        "leading": axis(),
        "second": axis(),
        "fit_p_value": 0.4,
        "free_p_value": 0.5,
        "clusters": 42.0,
        "within_release": False,
        "slopes": (),
        "position_error": 5.0,
        "zero_fraction": 0.01,
        "second_missing": "",
    }
    return Evidence(**(given | changes))


# the rule


@pytest.mark.parametrize(
    ("p", "low", "high", "richardson"),
    [
        (0.96, 1.2, 1.5, True),
        (0.95, 1.2, 1.5, True),
        (0.949, 1.2, 1.5, False),  # not probable enough
        (0.99, 1.36, 1.5, False),  # its own exponent outside
        (0.99, 0.9, 1.5, False),  # ballistic inside too
        (0.99, 1.2, 2.0, False),  # exponential inside too
        (0.99, 4 / 3, 4 / 3, True),
    ],
)
def test_called(p, low, high, richardson):
    rest = {name: np.array([(1 - p) / 3]) for name in ("ballistic", "exponential", "diffusive")}
    found = called({"richardson": np.array([p])} | rest, np.array([low]), np.array([high]))
    assert found["richardson"][0] == richardson
    assert not any(found[name][0] for name in rest)


def test_stretches():
    mask = {
        "richardson": np.array([0, 1, 1, 0, 1, 0, 0, 1], bool),
        "exponential": np.array([1, 0, 0, 0, 0, 0, 0, 0], bool),
    }
    found = stretches(mask, EDGES / KM)
    assert [s.regime for s in found] == ["exponential", "richardson", "richardson", "richardson"]
    assert [s.low for s in found] == pytest.approx([1, 2**0.5, 4, 2**3.5])
    assert [s.high for s in found] == pytest.approx([2**0.5, 2**1.5, 2**2.5, 16])
    assert found[1].span == pytest.approx(2.0)


# the decision


def test_supported():
    found = decide(evidence())
    assert found.decision == "supported"
    assert found.reasons == ()
    assert [(s.regime, s.low, s.high) for s in found.supported] == [
        ("exponential", pytest.approx(KM), pytest.approx(4 * KM)),
        ("richardson", pytest.approx(4 * KM), pytest.approx(16 * KM)),
    ]
    assert found.cautions == ()


SMALL = axis(first=2, p=0.97, low=(1.8, 0.9), high=(2.0, 1.5))
BRANCHES = [
    ({"leading": SMALL}, "undecided", "exponential meets the rule only from 1.0 to 2.0 km, less than a factor 3"),
    (
        {"leading": axis(p=0.9)},
        "undecided",
        r"is exponential near 1.2 km \(90 %\), below the 95 % that the rule",
    ),
    ({"leading": axis(p=0.949)}, "undecided", r"near 1.2 km \(just under 95 %\), below the 95 %"),
    (
        {"leading": axis(low=(1.2, 0.9), high=(2.0, 1.5))},
        "undecided",
        r"but the free kernel exponent there, 1.2 to 2.0 \(95 %\), is consistent with exponential and Richardson$",
    ),
    (
        {"leading": axis(low=(0.0, 0.0), high=(2.0, 2.0))},
        "undecided",
        "is consistent with ballistic, exponential, Richardson and diffusive$",
    ),
    ({"leading": axis(low=(1.6, 1.6), high=(1.8, 1.8))}, "undecided", "is consistent with none of the named regimes$"),
    (
        {"second": axis(p=0.04, low=(1.1, 0.5), high=(1.3, 1.2))},
        "undecided",
        "support exponential from 1.0 to 4.0 km and the distribution of separations contradicts it there",
    ),
    (
        {"within_release": True, "clusters": 5.97},
        "undecided",
        "only 5.9 independent clusters: how much releases differ from one another cannot be estimated",
    ),
    ({"exit_rate": inference(health=BAD)}, "undecided", "the exit-rate fit has not converged: split R-hat 1.200"),
    (
        {"separation": inference("separation", health=BAD)},
        "undecided",
        "the separation-distribution fit has not converged: .*; effective sample size 150 is not above 400",
    ),
    (
        {"exit_rate": inference(challenge=np.log(31.0))},
        "none_fits",
        r"a free exponent is preferred to every named sequence by a Bayes factor of 31 \(20 is enough\)",
    ),
    ({"exit_rate": inference(challenge=60.0)}, "none_fits", "by a Bayes factor of over 1000 "),
    (
        {"fit_p_value": 0.002},
        "none_fits",
        r"improbable under the named sequences, weighed by probability \(predictive p = 0.002\)$",
    ),
    ({"fit_p_value": 0.0}, "none_fits", r"\(predictive p < 1e-6\)$"),
    (
        {"fit_p_value": 0.002, "free_p_value": 0.004},
        "none_fits",
        r"\), and under the kernels with free exponents too: the curve is not a power law in two or three pieces$",
    ),
]


@pytest.mark.parametrize(("changes", "decision", "said"), BRANCHES)
def test_every_branch(changes, decision, said):
    found = decide(evidence(**changes))
    assert found.decision == decision
    assert found.reasons
    with pytest.raises(LookupError, match=said):  # `match` as everywhere: a regular expression that must be found
        raise LookupError(found.reasons[0])


def test_nothing_is_supported_by_a_fit_that_did_not_converge():
    assert decide(evidence(exit_rate=inference(health=BAD))).supported == ()


def test_want_of_convergence_comes_before_everything_else():
    found = decide(evidence(exit_rate=inference(health=BAD, challenge=10.0), fit_p_value=0.0))
    assert found.decision == "undecided"


def test_below_the_limits_nothing_stops_it():
    kept = evidence(exit_rate=inference(challenge=np.log(19.9)), fit_p_value=0.0101, second=None, separation=None)
    assert decide(kept).decision == "supported"


def test_contradiction_needs_both_halves_over_half_the_range():
    held = (Stretch("exponential", EDGES[0], EDGES[4]),)
    assert contradictions(held, axis(p=0.04, low=(1.8, 1.2), high=(2.0, 1.5))) == []  # improbable, not excluded
    assert contradictions(held, axis(p=0.2, low=(1.1, 1.1), high=(1.3, 1.3))) == []  # excluded, not improbable
    half = axis(first=2, p=0.97, low=(1.8, 1.1), high=(2.0, 1.5))
    assert len(contradictions(held, half)) == 1
    assert contradictions(held, axis(first=3, low=(1.8, 1.1), high=(2.0, 1.5))) == []
    assert contradictions(held, None) == []


CAUTIONS = [
    ({"within_release": True, "clusters": 5.97}, "within_release", "5.9 effective clusters are too few (under 6)"),
    ({"clusters": 29.8}, "few_clusters", "Intervals rest on 29 effective clusters"),
    ({"position_error": 40.0}, "position_error", "The lowest separations, 1 km and up, are within 30 position errors"),
    ({"zero_fraction": 0.12}, "sampling_interval", "12 % of the exits at the lowest separation fall inside one"),
    (
        {"second": None, "second_missing": "records are few"},
        "no_second_opinion",
        "No second opinion: records are",
    ),
    ({"second": axis(p=0.04, low=(1.1, 0.5), high=(1.3, 1.2))}, "second_opinion_differs", "The exit rates support"),
    (
        {"exit_rate": inference(challenge=np.log(7.0))},
        "free_exponent",
        "(Bayes factor 7.0; more than 20 overrules",
    ),
]


@pytest.mark.parametrize(("changes", "code", "said"), CAUTIONS)
def test_cautions(changes, code, said):
    found = [c for c in decide(evidence(**changes)).cautions if c.code == code]
    assert found
    assert said in found[0].text
    assert found[0].text[0].isupper() or found[0].text[0].isdigit()
    assert found[0].text.endswith(".")


def test_a_slope_over_less_than_a_decade_has_its_caution():
    joint = Slope(2 * KM, 9 * KM, "joint", Interval(1.7, 1.6, 1.8, 1.5, 1.9), "estimate", "")
    assert decide(evidence(slopes=(joint,))).cautions == ()  # that of the separations, over the same range, is enough
    slope = Slope(2 * KM, 9 * KM, "exit_rate", Interval(1.7, 1.6, 1.8, 1.5, 1.9), "estimate", "")
    (caution,) = decide(evidence(slopes=(slope,))).cautions
    assert caution.text.startswith("The slope over 2.0 to 9.0 km rests on less than one decade;")
    assert decide(evidence(slopes=(replace(slope, high=20 * KM),))).cautions == ()
    assert decide(evidence(slopes=(replace(slope, kind="lower_bound"),))).cautions == ()
