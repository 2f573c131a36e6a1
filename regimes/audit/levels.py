"""Exit rates of the same pairs counted in different ways, with the error of their difference."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from regimes.curves import exit_statistics
from regimes.curves.credit import credited_exits, local_growth
from regimes.curves.groups import place_of_rows
from regimes.pairs import Pairs
from regimes.tracks import Tracks

WINDOW = 4.0  # factor of separation that is pooled
LEAST = 20.0  # exits in a window
_UNLIKELY = 0.005  # one-sided probability beyond which two levels differ


@dataclass(frozen=True, slots=True)
class Level:
    r"""ln of the rate at which pairs leave a separation, for a ratio of thresholds that tends to 1.

    .. math:: \ln \Lambda_n, \qquad \Lambda_n = \frac{E'_n}{S_n} \frac{\rho^q - 1}{q} \to \frac{2 K}{r^2}

    with the local growth q of the mean exit times (closed form for a power law, Boffetta & Sokolov 2002).

    Parameters
    ----------
    log_r : (n,) float array
        ln of the thresholds [ln m] that have exits.
    value : (n,) float array
        ln Lambda [ln 1/s].
    exits : (n,) float array
    influence : (n_row, n) float array
        Of the value, by row of the sums.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters.
    """

    log_r: np.ndarray
    value: np.ndarray
    exits: np.ndarray
    influence: np.ndarray
    weight: np.ndarray

    def at(self, log_r: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Value (m,) and influence (n_row, m) between the thresholds."""
        j = np.clip(np.searchsorted(self.log_r, log_r, side="right") - 1, 0, self.log_r.size - 2)
        part = (log_r - self.log_r[j]) / (self.log_r[j + 1] - self.log_r[j])
        return tuple(x[..., j] * (1.0 - part) + x[..., j + 1] * part for x in (self.value, self.influence))


@dataclass(frozen=True, slots=True)
class Shift:
    """How far a level moved within one window of separation.

    Parameters
    ----------
    low, high : float [m]
    change : float
        ln of the ratio of the levels.
    error : float
        Its standard error over clusters.
    beyond : bool
        Whether it is beyond chance.
    """

    low: float
    high: float
    change: float
    error: float
    beyond: bool


def level(tracks: Tracks, pairs: Pairs, every: Pairs, thresholds: np.ndarray) -> Level | None:
    """Level of some `pairs` in the rows of `every` pair; None where fewer than two thresholds have exits."""
    if pairs.n_pair == 0:
        return None
    statistics = exit_statistics(tracks, pairs, thresholds)
    credited = credited_exits(statistics)
    weight, width = statistics.weight, statistics.log_ratio
    exits, risk = weight @ credited, weight @ statistics.time_at_risk
    good = (weight @ statistics.exits >= 1.0) & (exits > 0) & (risk > 0)
    if good.sum() < 2:
        return None
    q = np.maximum(local_growth(statistics, credited), 1e-6)
    value = np.log(exits[good] / risk[good]) + np.log(np.expm1(q * width) / q)[good]
    influence = credited[:, good] / exits[good] - statistics.time_at_risk[:, good] / risk[good]
    place = place_of_rows(pairs, every)
    keys = place_of_rows(every, every)
    rows = np.zeros((keys.size, int(good.sum())))
    rows[place] = influence
    signs = np.where(np.arange(keys.size) < every.n_cluster, 1.0, -1.0)
    return Level(np.log(thresholds[:-1][good]), value, exits[good], rows, signs)


def shifts(before: Level, after: Level, low: float, high: float) -> list[Shift]:
    """What moved from one level to another, in windows of a factor 4 (half of it overlapping) from `low` to `high`."""
    inside = (before.log_r >= np.log(low) - 1e-9) & (before.log_r <= min(np.log(high), after.log_r[-1]) + 1e-9)
    inside &= before.log_r >= after.log_r[0] - 1e-9
    if not inside.any():
        return []
    r = before.log_r[inside]
    other, other_influence = after.at(r)
    change, influence = other - before.value[inside], other_influence - before.influence[:, inside]
    found = []
    width = np.log(WINDOW)
    for start in np.arange(r[0], max(r[-1] - width, r[0]) + 1e-9, 0.5 * width):
        near = (r >= start - 1e-9) & (r < start + width - 1e-9)
        share = before.exits[inside] * near
        if share.sum() < LEAST:
            continue
        share = share / share.sum()
        scores = influence @ share
        clusters = int(np.sum(scores[before.weight > 0] != 0))
        square = before.weight @ scores**2
        if clusters < 3 or not square > 0:
            continue
        error = float(np.sqrt(square * clusters / (clusters - 1)))
        mean = float(change @ share)
        beyond = abs(mean) > float(student.isf(_UNLIKELY, clusters - 1)) * error
        found.append(Shift(float(np.exp(start)), float(np.exp(start + width)), mean, error, bool(beyond)))
    return found
