"""Lines in the rotary spectra of relative velocities: inertial motion and the main tides."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from regimes.audit.rotary import Windows, inertial_frequency, windows
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.units import DAY, HOUR
from regimes.verdict.decide import FEW_CLUSTERS

TIDES = {"M2": 12.4206 * HOUR, "S2": 12.0 * HOUR, "K1": 23.9345 * HOUR, "O1": 25.8193 * HOUR}  # periods, astronomy
SHORTEST = 8.0 * DAY  # of a window
PERIODS = 8.0  # inertial ones that a window spans
NEXT = 1.35  # ratio of a frequency to its neighbours, beyond the width of a tapered line
FINEST = 2.0 * NEXT  # steps in the shortest period that can be told with its neighbours
SLOWEST = 30.0 * DAY  # inertial period, near the equator, beyond which it is not looked for
_FACTOR = 4.0  # of separation that is pooled
_UNLIKELY = 0.01  # probability that a survey without lines shows one
_LEAST_EXCESS = np.log(1.5)  # a smaller one may be the curvature of a spectrum without lines


@dataclass(frozen=True, slots=True)
class Line:
    """A line at one range of separation.

    Parameters
    ----------
    name : str
        inertial, M2, S2, K1 or O1.
    period : float [s]
    low, high : float [m]
    excess : float
        Mean ln of the power over the background.
    error : float
        Its standard error over clusters.
    clear : bool
        Whether it is beyond chance, all ranges and lines considered, and more than a factor 1.5.
    """

    name: str
    period: float
    low: float
    high: float
    excess: float
    error: float
    clear: bool


def lines(tracks: Tracks, pairs: Pairs) -> tuple[Line, ...]:
    r"""Excess power at every line and range of separation that the data can show.

    .. math:: x_{inertial} = \ln\frac{P(f_-)}{P(-f_-)}, \qquad
              x_{tide} = \ln P(\omega) - \tfrac12 [\ln P(\omega / 1.35) + \ln P(1.35\, \omega)]

    P is the power of a window of 8 days, or 8 inertial periods, of the relative velocity of a pair; f_- turns
    anticyclonically at the latitude of the window. Tides are sought in both senses of rotation together, and in the
    cyclonic one alone where inertial motion is clear or near. x is averaged over the windows of each cluster,
    and over clusters in proportion to their windows, for every factor 4 of separation.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs

    Returns
    -------
    tuple of Line
        Empty where records are too short; without the inertial line on a plane and near the equator.

    Notes
    -----
    A line is clear if its excess is above ln 1.5 and its t statistic beyond a one-sided 1 % divided by the number of
    lines and ranges, with as many degrees of freedom as there are effective clusters (Kish, by windows) less one;
    ranges with fewer than six of them are left out. Turbulence turns both ways alike, so that inertial motion shows
    even where the motion of particles through the waves spreads its frequency. A power-law spectrum gives tides no
    excess.

    References
    ----------
    Rotary spectra: Gonella (1972) Deep-Sea Res. 19, 833, from memory.
    """
    turning = _inertial(tracks, pairs)
    found = windows(tracks, pairs, max(SHORTEST, PERIODS * turning if np.isfinite(turning) else 0.0))
    if found is None:
        return ()
    tested: dict[str, tuple[float, np.ndarray]] = {}
    bins = np.floor(np.log(found.separation) / np.log(_FACTOR)).astype(int)
    tides = {name: period for name, period in TIDES.items() if period >= FINEST * tracks.step}
    if np.isfinite(turning) and turning >= FINEST * tracks.step:
        tested["inertial"] = turning, _log(found.power(found.inertial)) - _log(found.power(-found.inertial))
    count = len(np.unique(bins)) * (len(tested) + len(tides))
    out = [
        line for name, (period, x) in tested.items() for line in _by_separation((name, period), x, bins, found, count)
    ]
    inertial = any(line.clear for line in out)
    for name, period in tides.items():
        near = inertial or (np.isfinite(turning) and abs(np.log(period / turning)) < np.log(NEXT))
        x = _over_neighbours(found, 2.0 * np.pi / period, near)
        out += _by_separation((name, period), x, bins, found, count)
    return tuple(out)


def _inertial(tracks: Tracks, pairs: Pairs) -> float:
    """Median inertial period of the tracks in pairs [s]; NaN on a plane and near the equator."""
    used = np.repeat(pairs.cluster >= 0, tracks.n_step) & np.isfinite(tracks.position[:, 0])
    if tracks.planar or not used.any():
        return float("nan")
    frequency = float(np.median(np.abs(inertial_frequency(tracks)[used])))
    return 2.0 * np.pi / frequency if frequency > 2.0 * np.pi / SLOWEST else float("nan")


def _over_neighbours(found: Windows, frequency: float, cyclonic: bool) -> np.ndarray:
    """ln power of every window at a frequency over that at its neighbours."""

    def log_power(w: float) -> np.ndarray:
        against = -np.sign(found.inertial)
        return _log(found.power(against * w) if cyclonic else found.power(w) + found.power(-w))

    return log_power(frequency) - 0.5 * (log_power(frequency / NEXT) + log_power(frequency * NEXT))


def _log(power: np.ndarray) -> np.ndarray:
    """ln, NaN where two particles do not move against each other at all."""
    return np.log(np.where(power > 0, power, np.nan))


def _by_separation(line: tuple[str, float], x: np.ndarray, bins: np.ndarray, found: Windows, count: int) -> list[Line]:
    out = []
    for b in np.unique(bins):
        here = (bins == b) & np.isfinite(x)
        number, cluster = np.unique(found.cluster[here], return_inverse=True)
        size = np.bincount(cluster)
        effective = float(size.sum() ** 2 / np.sum(size**2)) if size.size else 0.0
        if effective < FEW_CLUSTERS:
            continue
        mean = float(x[here].mean())
        scores = np.bincount(cluster, x[here] - mean) / size.sum()
        error = float(np.sqrt(np.sum(scores**2) * number.size / (number.size - 1)))
        clear = mean > max(_LEAST_EXCESS, float(student.isf(_UNLIKELY / count, effective - 1.0)) * error)
        out.append(Line(*line, float(_FACTOR**b), float(_FACTOR ** (b + 1)), mean, error, bool(clear)))
    return out
