"""What a survey is to show, and whether one fitted campaign shows it."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from regimes.cases import Aim
from regimes.curves.resolution import ERROR_MULTIPLE, MEMORY
from regimes.errors import CaseError
from regimes.fitting.quick import QuickFit
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES
from regimes.units import KM
from regimes.verdict.rule import PROBABLE, SPAN, Stretch

HALF = 0.5  # share of the range, in ln r, over which a regime must be shown
_SAME = 1e-6  # exponents closer than this are one


@dataclass(frozen=True, slots=True)
class Target:
    """The aim as numbers.

    Parameters
    ----------
    regime : str
        To be supported.
    against : str or None
        To be told from; None for all others.
    low, high : float [m]
        Separations over which.
    probability : float
        Wanted of a campaign to succeed.
    """

    regime: str
    against: str | None
    low: float
    high: float
    probability: float


def target_of(aim: Aim, start_separation: float, position_error: float) -> Target:
    """The aim with both ends of its range.

    Below a separation means from where pairs have forgotten their start (twice the start separation) and position
    errors no longer matter (15 of them).

    Parameters
    ----------
    aim : Aim
    start_separation, position_error : float [m]

    Raises
    ------
    CaseError
        If the range is shorter than the factor over which a regime must hold to be supported.
    """
    if aim.range_km is not None:
        (low, high), key = aim.range_km, "range_km"
        low, high = low * KM, high * KM
    else:
        low, high, key = max(MEMORY * start_separation, ERROR_MULTIPLE * position_error), aim.below_km * KM, "below_km"
    if high < SPAN * low:
        how = f"pairs that start {start_separation / KM:.3g} km apart with errors of {position_error:g} m"
        raise CaseError(
            f"plan.aim.{key}: got {low / KM:.3g} to {high / KM:.3g} km for {how}; must span a factor "
            f"{SPAN:g} at least, over which a regime is called supported; widen the range, start closer, or position "
            "better"
        )
    return Target(aim.regime, aim.against, low, high, aim.probability)


def true_pieces(kernel: Kernel, target: Target) -> list[tuple[float, float]]:
    """Parts (low, high) [m] of the target's range where the kernel is of its regime."""
    ends = np.concatenate([[0.0], kernel.breaks, [np.inf]])
    own = REGIMES[target.regime].exponent
    found = []
    for exponent, (low, high) in zip(kernel.exponents, pairwise(ends), strict=True):
        a, b = max(low, target.low), min(high, target.high)
        if abs(exponent - own) < _SAME and b > a:
            found.append((float(a), float(b)))
    return found


def is_true(kernel: Kernel, target: Target) -> bool:
    """Whether the kernel is of the target's regime over half of its range or more, and over a factor 3."""
    covered = sum(np.log(b / a) for a, b in true_pieces(kernel, target))
    return bool(covered >= max(HALF * np.log(target.high / target.low), np.log(SPAN)) - 1e-9)


def right(supported: tuple[Stretch, ...], kernel: Kernel, target: Target) -> bool:
    """Whether the regime is supported over half of where it is true, and nothing wrong is supported."""
    own = [(s.low, s.high) for s in supported if s.regime == target.regime]
    return _covers(own, true_pieces(kernel, target)) and not wrong(supported, kernel)


def wrong(supported: tuple[Stretch, ...], kernel: Kernel) -> bool:
    """Whether a regime is supported where it is not true, more than a factor 2 away from any transition."""
    for stretch in supported:
        r = np.geomspace(stretch.low, stretch.high, 200)[1:-1]
        far = np.all(np.abs(np.log(r[:, None] / kernel.breaks)) > np.log(2.0), axis=1)
        if np.any(far & (np.abs(kernel.exponent(r) - REGIMES[stretch.regime].exponent) > _SAME)):
            return True
    return False


def told(fit: QuickFit, kernel: Kernel, target: Target) -> bool:
    """Whether the regime is told from the one it stands against over half of where it is true.

    At a separation it is where it has 95 % of the probability of the two and lies inside the 95 % interval of the
    free exponent, outside of which the other lies.
    """
    own, other = fit.probability[target.regime], fit.probability[target.against]
    a, b = REGIMES[target.regime].exponent, REGIMES[target.against].exponent
    inside = (fit.exponent_low <= a) & (a <= fit.exponent_high)
    outside = (b < fit.exponent_low) | (fit.exponent_high < b)
    edges = fit.rates.likelihood.thresholds
    here = (own >= PROBABLE * (own + other)) & inside & outside
    return _covers([(edges[i], edges[i + 1]) for i in np.flatnonzero(here)], true_pieces(kernel, target))


def mean_probability(fit: QuickFit, kernel: Kernel, target: Target) -> float:
    """Probability of the regime, averaged in ln r over where it is true; 0 where nothing is resolved."""
    edges, pieces = fit.rates.likelihood.thresholds, true_pieces(kernel, target)
    width = np.array([_overlap([(edges[i], edges[i + 1])], pieces) for i in range(edges.size - 1)])
    return float(width @ fit.probability[target.regime] / sum(np.log(b / a) for a, b in pieces))


def _covers(ranges, pieces) -> bool:
    return bool(_overlap(ranges, pieces) >= HALF * sum(np.log(b / a) for a, b in pieces) - 1e-9)


def _overlap(ranges, pieces) -> float:
    """Length in ln r that disjoint ranges and pieces share."""
    total = 0.0
    for low, high in ranges:
        for a, b in pieces:
            left, right_end = max(low, a), min(high, b)
            total += float(np.log(right_end / left)) if right_end > left else 0.0
    return total
