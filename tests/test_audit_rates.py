"""How often each row of the audit raises its flag: surveys with its contamination, and clean ones."""

from dataclasses import dataclass

import numpy as np
import pytest

from regimes.audit.convergence import convergence
from regimes.audit.independence import independence
from regimes.audit.oscillation import oscillation
from regimes.audit.pairs import pairs
from regimes.audit.position_error import position_error
from regimes.audit.range import range_width
from regimes.audit.record_ends import record_ends
from regimes.audit.sampling_interval import sampling_interval
from regimes.audit.shear import shear
from regimes.audit.subject import verdict_changes
from regimes.errors import DataError
from regimes.units import HOUR
from tests.audit_worlds import audited, recipe
from tests.worlds import in_parallel

SEEDS = range(1000, 1040)
FEW = range(1000, 1008)  # of the short form that runs with every calibration
ROWS = {
    "position_error": position_error,
    "sampling_interval": sampling_interval,
    "oscillation": oscillation,
    "shear": shear,
    "pairs": pairs,
    "convergence": convergence,
    "independence": independence,
    "record_ends": record_ends,
    "range": range_width,
}


def sea(longest_km: float) -> dict:
    """A sea of slope 5/3 up to a wavelength, pairs from 2 km; short waves are as strong whatever that wavelength."""
    return {
        "fourier": {
            "spectral_slopes": [5.0 / 3.0],
            "break_wavelengths_km": [],
            "shortest_km": 1.0,
            "longest_km": longest_km,
            "speed_m_s": 0.5 * (longest_km / 3000.0) ** (1.0 / 3.0),
        },
        "releases": {"start_separation_km": 2.0},
        "records": {"duration_d": 60.0},
    }


# Changes for recipe(), keyword arguments of audited(): the strength at which the verdict flips in most.
RECIPES = {
    "position_error": ({"records": {"position_error_m": 800.0}}, {"stated_error": 10.0}),
    "sampling_interval": ({"records": {"fix_interval_h": 24.0}}, {"step": 24 * HOUR}),
    "oscillation": ({"oscillation": {"speed_m_s": 0.2}}, {}),
    "shear": ({"shear": {"rate_per_d": 0.12}}, {}),
    "pairs": ({"faults": {"grounded": 40}}, {}),  # 40 of 60 aground, and it seldom flips
    "convergence": ({"convergence": {"rate_per_d": 1.0, "lasts_d": 30.0}}, {}),  # half of the verdicts flip
    "independence": ({"releases": {"number": 7, "particles": 9}}, {"launches": 3}),
    "record_ends": ({"records": {"loss_per_d_apart": 0.5, "apart_km": 5.0}}, {}),
    "range": (sea(60.0), {"max_separation": 3000.0}),
}
# The clean survey is the demo's sea but for one: a range can only be narrow beside one that is wide.
TWINS = {"range": (sea(3000.0), {"max_separation": 3000.0})}
pytestmark = pytest.mark.slow


@dataclass(frozen=True, slots=True)
class Trial:
    """Flags of one seed, whether the verdict differs between its two surveys, and what the row itself says of that."""

    contaminated: bool
    clean: bool
    flips: bool
    told: bool


def trial(arguments) -> Trial | None:
    """One seed of one threat; None where the contaminated survey resolves nothing."""
    threat, seed = arguments
    changes, how = RECIPES[threat]
    twin, watched = TWINS.get(threat, ({}, {}))
    before = audited(recipe(seed, **twin), **watched)
    try:
        after = audited(recipe(seed, **changes), **how)
    except DataError:
        return None
    one, two = (ROWS[threat](subject) for subject in (after, before))
    return Trial(one.flag, two.flag, verdict_changes(before.fit, after.fit), one.verdict_changes)


def raised(threat: str, seeds: range) -> tuple[int, dict[str, float], str]:
    """Surveys of each kind, shares of every outcome, and one line that says so."""
    found = [t for t in in_parallel(trial, [(threat, seed) for seed in seeds]) if t is not None]
    n = len(found)
    share = {name: float(np.mean([getattr(t, name) for t in found])) for name in Trial.__slots__}
    text = (
        f"{threat}: flagged {share['contaminated']:.0%} of contaminated ({RECIPES[threat][0]}), {share['clean']:.0%} "
        f"of clean, verdict changed {share['flips']:.0%} (as the row tells it {share['told']:.0%}), {n} surveys of each"
    )
    print(text)
    return n, share, text


@pytest.mark.parametrize("threat", RECIPES)
def test_flags_are_raised_where_they_should_be(threat):
    """Bars: 95 % of contaminated surveys and 5 % of clean ones, within two binomial standard errors. Run by hand."""
    n, share, text = raised(threat, SEEDS)
    margin = 2.0 * np.sqrt(0.95 * 0.05 / n)
    assert n >= 0.9 * len(SEEDS), text
    assert share["contaminated"] >= 0.95 - margin, text
    assert share["clean"] <= 0.05 + margin, text


@pytest.mark.calibration
@pytest.mark.parametrize("threat", RECIPES)
def test_flags_of_a_few_surveys(threat):
    """At the bars, one flag of eight missed and one of eight false would be likely; two of either have 6 %."""
    n, share, text = raised(threat, FEW)
    assert n >= len(FEW) - 1, text
    assert share["contaminated"] * n >= n - 1, text
    assert share["clean"] * n <= 1, text
