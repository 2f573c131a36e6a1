"""How much room each regime of a kernel has for its law to show."""

from dataclasses import dataclass

import numpy as np

from regimes.audit.law import Growth, growth, law_holds, longest_factor
from regimes.theory.kernel import Kernel
from regimes.verdict.rule import SPAN


@dataclass(frozen=True, slots=True)
class Room:
    """How much room one regime has.

    Parameters
    ----------
    regime : str
    low, high : float [m]
        Ends of its piece of the kernel, inside the resolved range.
    decades : float
        From the start separation, or from `low` if that is larger, to `high`.
    factor : float
        Over which the root-mean-square separation grows while relative dispersion is within a sixth of the law.
    power : float
        Largest d ln D2 / d ln t inside the piece; NaN where dispersion does not reach it.
    """

    regime: str
    low: float
    high: float
    decades: float
    factor: float
    power: float

    @property
    def shows(self) -> bool:
        """Whether the law holds over a factor 3 of separation, as much as the rule asks of a regime."""
        return self.factor >= SPAN


def rooms_of(kernel: Kernel, names, resolved: tuple[float, float], start: float) -> list[Room]:
    """Room of each regime of a kernel inside the resolved range.

    Parameters
    ----------
    kernel : Kernel
    names : sequence of str
        Regime of each piece.
    resolved : (float, float) [m]
    start : float [m]
        Separation from which dispersion is followed.

    Returns
    -------
    list of Room
    """
    found = growth(kernel, start, resolved[1])
    return [_room(found, kernel, start, *piece) for piece in _pieces(resolved, kernel, names)]


def _pieces(resolved: tuple[float, float], kernel: Kernel, names):
    """Regime and ends [m], inside the resolved range, of each piece of a kernel."""
    low, high = resolved
    ends = np.clip([low, *kernel.breaks, high], low, high)
    return [
        (name, float(ends[i]), float(ends[i + 1]))
        for i, name in enumerate(names)
        if ends[i + 1] > ends[i] * (1.0 + 1e-9)
    ]


def _room(found: Growth, kernel: Kernel, start: float, regime: str, low: float, high: float) -> Room:
    inside = (found.rms >= low) & (found.rms <= high)
    return Room(
        regime,
        low,
        high,
        max(float(np.log10(high / max(low, start))), 0.0),
        longest_factor(found.rms, law_holds(found, kernel, regime, (low, high))),
        float(np.max(found.power[inside])) if np.any(inside) else float("nan"),
    )
