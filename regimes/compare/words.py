"""The decision of a comparison, and its sentence."""

import numpy as np

from regimes.compare.fitted import Fitted
from regimes.compare.ranks import LEVEL, CurveRank, Ranks
from regimes.report.digits import significant
from regimes.report.words import p_text
from regimes.units import DAY
from regimes.verdict.digits import km

TELLS = 2.0  # factor in the exponent that must be seen in 80 % of cases before two cases are called consistent
WORDS = {"consistent": "Consistent", "different": "Different", "undecided": "Undecided"}
_AT_A_TIME = 3  # curves named in the sentence


def decide(ranks: Ranks) -> str:
    """ "different" below `LEVEL`; else "consistent", or "undecided" where only more than a factor `TELLS` is seen."""
    if ranks.p_value < LEVEL:
        return "different"
    return "consistent" if ranks.factor <= TELLS else "undecided"


def sentence(ranks: Ranks, fitted: Fitted, unmatched_p: float) -> str:
    """What was found, in one or two sentences."""
    decision, p = decide(ranks), p_text(ranks.p_value)
    if decision == "different":
        return f"Different: sampled alike, the two cases disagree (p = {p} over all curves)" + _where(ranks, fitted)
    seen = f"a factor of {significant(ranks.factor)} in all exponents"
    if decision == "undecided" and not np.isfinite(ranks.factor):
        return (
            f"Undecided: sampled alike, no curve tells the two cases apart (p = {p} over all curves), but data of this "
            "size are not sure to show a difference of any size." + _explained(unmatched_p)
        )
    if decision == "undecided":
        return (
            f"Undecided: sampled alike, no curve tells the two cases apart (p = {p} over all curves), but it takes "
            f"{seen} to be seen in four of five cases." + _explained(unmatched_p)
        )
    return (
        f"Consistent: sampled alike, no curve tells the two cases apart (p = {p} over all curves); {seen} would have "
        "been seen in four of five cases." + _explained(unmatched_p)
    )


def place(curve: CurveRank) -> str:
    """Where a curve differs, in words; empty where no single place does."""
    at = curve.differs_at
    if at.size == 0:
        return ""
    low, high = float(at[0]), float(at[-1])
    if curve.axis_name == "separation":
        return f"{km(low)} km" if at.size == 1 else f"{km(low)} to {km(high)} km"
    days = [significant(t / DAY) for t in (low, high)]
    return f"{days[0]} days" if at.size == 1 else f"{days[0]} to {days[1]} days"


def name_of(curve: str) -> str:
    """A curve's name as a reader meets it."""
    return curve.replace("_", " ")


def _where(ranks: Ranks, fitted: Fitted) -> str:
    telling = sorted((c for c in ranks.curves if c.p_value < LEVEL), key=lambda c: c.p_value)
    named = [name_of(c.curve) + (f" at {place(c)}" if place(c) else "") for c in telling[:_AT_A_TIME]]
    more = len(telling) - len(named)
    listed = ", ".join(named) + (f" and {more} more" if more else "")
    exponent = next((c for c in telling if c.curve == "exponent" and c.differs_at.size), None)
    tail = f": {listed}" if named else ""
    if exponent is None:
        return tail + "."
    chosen = np.any(np.abs(np.log(fitted.thresholds[:-1, None] / exponent.differs_at[None])) < 1e-6, axis=1)
    if not np.any(chosen):
        return tail + "."
    median, low, high = (significant(q) for q in fitted.ratio_over(chosen))
    times = f"{median} ({low} to {high}) times that of the model"
    return f"{tail}; at {place(exponent)} the observed exponent is {times}."


def _explained(unmatched: float) -> str:
    if not unmatched < LEVEL:
        return ""
    return f" Compared as they are they would differ (p = {p_text(unmatched)}): sampling alone explains it."


def plateau_text(fitted: Fitted) -> str:
    """Where the model stops resolving, or that it does not."""
    if not np.all(np.isfinite(fitted.plateau)):
        return f"None: {fitted.plateau_reason}."
    median, low, high = (km(r) for r in fitted.plateau)
    return f"Below {median} km ({low} to {high} km) the exponent of the model no longer changes, the observed one does."
