"""Exits counted exactly: credit for passages cut short, and for samples that overshoot their threshold."""

import numpy as np

from regimes.curves.exit_rates import ExitStatistics

_ROUNDS = 500
_SETTLED = 1e-5  # relative change of the exits of every interval
_STEP, _STEADY = 0.7, 40  # share of the change taken in each of so many rounds, less and less in later ones
_LEAST = 0.25  # smallest number of exits, credit included, that a mean exit time is formed from


def credited_exits(statistics: ExitStatistics) -> np.ndarray:
    r"""Exits per row in exact measure: what each passage has gained, in units of the mean exit time.

    .. math:: E'_n = \sum_{passages} \frac{T(r_{end}) - T(r_{start})}{\mu_n}, \quad
              \mu_n = S_n / E'_n, \quad T(\delta_n) = \sum_{m<n} \mu_m

    Parameters
    ----------
    statistics : ExitStatistics

    Returns
    -------
    (n_row, n) float array
        E'. A finished passage gains about one; one that the record cuts short gains what it had reached, less
        than nothing if it had drifted back.

    Notes
    -----
    T(r) is the mean time to get from the lowest threshold to r. Along a record T(r(t)) - t is a
    martingale, so that gains minus time at risk is zero on average wherever samples fall and
    whenever records end. Counting exits over time at risk alone is not: an exit grows likelier while a passage
    lasts (exponents 10 to 40 % too high at separations that a third of the pairs reached), and the first sample
    beyond a threshold lies further beyond, in time, at the next one (5 % too low where a tenth of the exits fall
    inside one sampling interval). T comes from the mean exit times themselves, hence the iteration;
    between thresholds it follows the local power law. Sparse outer thresholds can make full steps cycle, so later
    steps shrink.

    References
    ----------
    Optional stopping of Dynkin's martingale, e.g. Karatzas & Shreve (1991) Brownian Motion and
    Stochastic Calculus, section 5.4; self-consistency in the sense of Efron (1967) Proc. 5th Berkeley
    Symp. 4, 831.
    """
    weight = statistics.weight
    whole, risk = weight @ (statistics.exits - statistics.at_once), weight @ statistics.time_at_risk
    start = np.log(statistics.thresholds)
    scale = np.maximum(weight @ statistics.exits, 1.0)
    gained = weight @ statistics.exits
    with np.errstate(divide="ignore", invalid="ignore"):
        for done in range(_ROUNDS):
            clock = _Clock(start, risk / np.maximum(gained, _LEAST), gained)
            credit, over = clock.credit(statistics), clock.overshoot(statistics)
            level, where = statistics.loose_interval, statistics.loose_row
            new = whole + weight @ over + np.bincount(level, weight[where] * credit, whole.size)
            moved = np.max(np.abs(new - gained) / scale)
            gained += _STEP * min(1.0, _STEADY / max(done, 1)) * (new - gained)
            if moved < _SETTLED:
                break
    table = statistics.exits - statistics.at_once + over
    np.add.at(table, (where, level), credit)
    return table


def local_growth(statistics: ExitStatistics, credited) -> np.ndarray:
    """Local d ln mu / d ln r of the mean exit times, 0 to 2, from credited exits (n_row, n); (n,)."""
    exits, risk = statistics.weight @ credited, statistics.weight @ statistics.time_at_risk
    mu = np.where((exits > 0) & (risk > 0), risk / np.where(exits > 0, exits, 1.0), 0.0)
    return _local_power_law(np.log(statistics.thresholds[:-1]), mu, np.maximum(exits, 0.0))[0]


class _Clock:
    """The mean time T from the lowest threshold to any separation, by local power laws."""

    def __init__(self, start: np.ndarray, mu: np.ndarray, exits: np.ndarray):
        self.start, self.mu = start, np.where(np.isfinite(mu), mu, 0.0)
        self.width = np.diff(start)
        self.growth, smooth = _local_power_law(start[:-1], self.mu, exits)
        self.total = np.concatenate(([0.0], np.cumsum(self.mu)))
        flat = np.abs(self.growth * self.width) < 1e-6
        safe = np.where(flat, 1.0, self.growth)
        slope = np.where(flat, 1.0 / self.width, safe / np.expm1(safe * self.width))
        self.speed = smooth * slope  # dT / d ln r at each threshold but the highest

    def at(self, x: np.ndarray) -> np.ndarray:
        """T at ln r; below the lowest threshold its power law goes on, unless it falls outwards."""
        i = np.clip(np.searchsorted(self.start, x, side="right") - 1, -1, self.mu.size - 1)
        j = np.maximum(i, 0)
        q = np.where(i < 0, max(float(self.growth[0]), 0.0), self.growth[j])
        u, h = x - self.start[j], self.width[j]
        flat = np.abs(q * h) < 1e-6
        safe = np.where(flat, 1.0, q)
        return self.total[j] + self.mu[j] * np.where(flat, u / h, np.expm1(safe * u) / np.expm1(safe * h))

    def credit(self, statistics: ExitStatistics) -> np.ndarray:
        """Gain of every unfinished passage beyond its threshold, in mean exit times."""
        level = statistics.loose_interval
        mu = self.mu[level]
        gain = (self.at(statistics.loose_log) - self.at(self.start[level])) / np.where(mu > 0, mu, np.nan)
        return np.where(mu > 0, gain, 0.0)

    def overshoot(self, statistics: ExitStatistics) -> np.ndarray:
        """Gain beyond the thresholds at exits less that at starts, per row, in mean exit times."""
        last = self.speed[-1] * np.exp(self.growth[-1] * self.width[-1])
        next_speed, next_growth = np.append(self.speed[1:], last), np.append(self.growth[1:], self.growth[-1])
        s = statistics
        exits = next_speed * (s.exit_over + 0.5 * next_growth * s.exit_over_square)
        starts = self.speed * (s.start_over + 0.5 * self.growth * s.start_over_square)
        return np.where(self.mu > 0, (exits - starts) / np.where(self.mu > 0, self.mu, 1.0), 0.0)


def _local_power_law(x: np.ndarray, mu: np.ndarray, exits: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Local d ln mu / d ln r, limited to 0 .. 2, and smoothed mu, over five intervals weighted by exits.

    The smoothing keeps the overshoot of one threshold from driving its neighbours up and down in turn.
    """
    growth, smooth = np.zeros(mu.size), mu.copy()
    good = (mu > 0) & (exits > 0)
    for i in range(mu.size):
        near = np.flatnonzero(good & (np.abs(np.arange(mu.size) - i) <= 2))
        if near.size >= 2:
            w, dx, y = exits[near], x[near], np.log(mu[near])
            mean = np.average(dx, weights=w)
            fitted = np.sum(w * (dx - mean) * y) / np.sum(w * (dx - mean) ** 2)
            growth[i] = min(max(fitted, 0.0), 2.0)
            smooth[i] = np.exp(np.average(y, weights=w) + growth[i] * (x[i] - mean))
    return growth, smooth
