"""The rule that turns probabilities and exponents into "supported"."""

from dataclasses import dataclass

import numpy as np

from regimes.theory.regimes import REGIMES

PROBABLE = 0.95  # probability a regime needs at a separation
SPAN = 3.0  # factor of separation over which it must hold
CHALLENGE = np.log(20.0)  # ln Bayes factor at which a free exponent beats every named sequence


@dataclass(frozen=True, slots=True)
class Stretch:
    """A run of separations over which one regime holds.

    Parameters
    ----------
    regime : str
    low, high : float [m]
    """

    regime: str
    low: float
    high: float

    @property
    def span(self) -> float:
        """Ratio of the ends."""
        return self.high / self.low


def called(probability, low, high) -> dict[str, np.ndarray]:
    """Where each regime is called: probable among the named, and alone inside the free interval.

    Parameters
    ----------
    probability : dict of str to (n,) float array
        Probability of each named regime at each separation.
    low, high : (n,) float arrays
        95 % interval of the kernel exponent from the free-exponent kernels.

    Returns
    -------
    dict of str to (n,) bool array
    """
    out = {}
    for name, p in probability.items():
        own = REGIMES[name].exponent
        alone = (low <= own) & (own <= high)
        for other in REGIMES.values():
            if other.name != name:
                alone &= ~((low <= other.exponent) & (other.exponent <= high))
        out[name] = (p >= PROBABLE) & alone
    return out


def stretches(mask: dict[str, np.ndarray], edges) -> tuple[Stretch, ...]:
    """Unbroken runs of called separations, from small to large.

    Parameters
    ----------
    mask : dict of str to (n,) bool array
        From `called`, at the middles of `edges`.
    edges : (n + 1,) float array [m]
    """
    found = []
    for name, flag in mask.items():
        padded = np.concatenate(([False], flag, [False])).astype(int)
        starts, ends = np.flatnonzero(np.diff(padded) == 1), np.flatnonzero(np.diff(padded) == -1)
        found += [Stretch(name, float(edges[a]), float(edges[b])) for a, b in zip(starts, ends, strict=True)]
    return tuple(sorted(found, key=lambda s: s.low))
