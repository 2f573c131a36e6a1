"""Short-time check: pairs that keep their first relative velocity."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from regimes.curves.dispersion import default_times, nearest_lags
from regimes.curves.passes import spans_and_rows
from regimes.curves.record import Curve
from regimes.errors import DataError
from regimes.geodesy import separation
from regimes.pairs import Pairs
from regimes.tracks import Tracks

# Share of D2 that differences of squares of positions may differ by without meaning.
_ROUNDING = 1e-9


@dataclass(frozen=True, slots=True)
class BallisticCheck:
    r"""Mean square separation beside the ballistic law of the same pairs.

    .. math:: D^2(t) = \overline{r_0^2} + 2 \overline{r_0 \delta u_L}\, t + S_2(r_0)\, t^2

    Parameters
    ----------
    dispersion : Curve [m2]
        Mean square separation, each row a cluster.
    prediction : Curve [m2]
        The law, for the pairs present at each time.
    departure : Curve [m2]
        Dispersion minus prediction, pair by pair: its error holds what the two have in common only once.
    start_square : Curve [m2]
        Mean square initial separation; one bin, at zero.
    longitudinal : Curve [m/s]
        Initial longitudinal velocity difference, weighted by the initial separation (sum of r0 du_L over sum of r0).
    structure : Curve [m2/s2]
        S_2, mean square initial velocity difference, both components together.
    noise : float [m2/s2]
        What the position error added to S_2 and was taken away, 8 s^2 / dt^2.
    """

    dispersion: Curve
    prediction: Curve
    departure: Curve
    start_square: Curve
    longitudinal: Curve
    structure: Curve
    noise: float

    @property
    def holds_until(self) -> float:
        """Last time before the 95 % band of the dispersion first leaves the law [s].

        The last time of all where it never does, zero where it has at the first; NaN where there is no band at the
        first time (one cluster).
        """
        return self._last_inside(self.dispersion)

    @property
    def departs_after(self) -> float:
        """Last time before the 95 % band of the pair-by-pair departure first excludes zero [s].

        Sharper than `holds_until`: what both sides share, as the spread of initial separations, does not blur it.
        """
        return self._last_inside(self.departure)

    def _last_inside(self, banded: Curve) -> float:
        """Last time before the departure first exceeds the half width of a curve's 95 % band."""
        some = banded.n_cluster > 1
        if not some[0]:
            return float("nan")
        half = np.zeros(some.size)
        half[some] = student.ppf(0.975, banded.n_cluster[some] - 1) * banded.standard_error[some]
        half += _ROUNDING * self.dispersion.value
        outside = np.flatnonzero(some & (np.abs(self.departure.value) > half))
        end = outside[0] if outside.size else np.flatnonzero(some)[-1] + 1
        return float(banded.axis[end - 1]) if end > 0 else 0.0

    def summary(self) -> str:
        """One line: initial velocity difference, how long the law holds, and within what."""
        end = self.dispersion.axis[-1]
        text = (
            f"initial velocity difference {np.sqrt(max(self.structure.value[0], 0.0)):.3g} m/s (root mean square) at "
            f"{np.sqrt(self.start_square.value[0]):.3g} m"
        )
        if not np.isfinite(self.holds_until):
            return f"{text}; one cluster says nothing of how long the ballistic law holds"
        if self.holds_until == end:
            return f"{text}; the ballistic law holds to the last time, {end:.3g} s"
        return f"{text}; the ballistic law holds until {self.holds_until:.3g} s"


def ballistic_check(tracks: Tracks, pairs: Pairs, times: np.ndarray | None = None) -> BallisticCheck:
    r"""Compare D2 with the law of pairs that keep their initial relative velocity.

    The initial velocity difference is the first forward difference, :math:`(r_1 - r_0) / \Delta t`. Position errors
    s of one coordinate of one fix add :math:`8 s^2 / \Delta t^2` to its mean square and
    :math:`-4 s^2 / \Delta t` to its product with r_0; both are taken out. At the first step law and data agree
    by construction.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
        Pairs without a position at their first two steps are left out.
    times : (n_time,) float array, optional [s]
        Since the start of the pair, rising, two steps or more. Default: about 40, evenly spaced in logarithm.

    Returns
    -------
    BallisticCheck

    Raises
    ------
    DataError
        If no pair has its first two positions, or a time is below two steps.
    """
    lags = _lags(tracks, pairs, times)
    spans, rows, weight = spans_and_rows(tracks, pairs)
    noise = 8.0 * (tracks.position_error / tracks.step) ** 2
    begin, product, square = initial = _initial(tracks, spans, noise)
    chosen = np.flatnonzero(np.isfinite(square))
    if chosen.size == 0:
        raise DataError(
            f"ballistic check: got {pairs.n_pair} pairs, none with positions at its first two steps; needed is one; "
            "choose a coarser observations.step_h"
        )
    axis = lags * tracks.step
    sums = np.zeros((3, lags.size, chosen.size))
    for k, t in enumerate(axis):
        found = _square_separation(tracks, spans[chosen], int(lags[k]))
        law = (begin + 2.0 * product * t + square * t * t)[chosen]
        there = np.isfinite(found)
        sums[:, k] = np.where(there, [found, law, there], 0.0)
    pooled = _pool(sums.reshape(-1, chosen.size), rows[chosen], weight.size).reshape(3, lags.size, weight.size)
    both, law, count = np.swapaxes(pooled, 1, 2)
    named = (("dispersion", both), ("ballistic law", law), ("departure from the ballistic law", both - law))
    curves = [Curve(name, "time", axis, values, count, weight, "m2") for name, values in named]
    return BallisticCheck(*curves, *_initial_curves(initial, chosen, rows, weight), noise)


def _lags(tracks: Tracks, pairs: Pairs, times: np.ndarray | None) -> np.ndarray:
    """Times in steps, the first two or more."""
    if pairs.n_pair == 0:
        raise DataError("ballistic check: got no pairs; at least one is needed; allow a larger start separation")
    if times is None:
        times = default_times(pairs, tracks.step)
        times = times[times >= 1.5 * tracks.step]
        if times.size == 0:
            raise DataError("ballistic check: got pairs of two steps; needed are three; use longer records")
    lags = nearest_lags(times, tracks.step)
    if lags[0] < 2:
        raise DataError(
            f"ballistic check: got a first time of {lags[0]} steps; must be 2 or more, as at the first step law and "
            f"data agree by construction; begin at {2 * tracks.step:g} s"
        )
    return lags


def _initial(tracks: Tracks, spans: np.ndarray, noise: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """r0^2, r0 times du_L and du^2 of each pair, freed of the position error; NaN without the first two positions."""
    places = [tracks.position[spans[:, :2] + k] for k in (0, 1)]
    first, second = (np.stack(separation(p[:, 0], p[:, 1], tracks.planar)[1:], axis=1) for p in places)
    change = (second - first) / tracks.step
    product = np.sum(first * change, axis=1) + 0.5 * noise * tracks.step
    return np.sum(first**2, axis=1), product, np.sum(change**2, axis=1) - noise


def _square_separation(tracks: Tracks, spans: np.ndarray, lag: int) -> np.ndarray:
    """(n_pair,) squared separation at a lag, NaN beyond the end of a pair or in a gap."""
    found = np.full(len(spans), np.nan)
    on = spans[:, 2] > lag
    rows = spans[on, :2] + lag
    found[on] = separation(tracks.position[rows[:, 0]], tracks.position[rows[:, 1]], tracks.planar)[0] ** 2
    return found


def _pool(values: np.ndarray, rows: np.ndarray, n_row: int) -> np.ndarray:
    """(n, n_row) sums of (n, n_pair) values over the rows of each pair."""
    out = np.zeros((len(values), n_row))
    for column in rows.T:
        used = column >= 0
        for i, value in enumerate(values):
            out[i] += np.bincount(column[used], value[used], n_row)
    return out


def _initial_curves(initial, chosen: np.ndarray, rows: np.ndarray, weight: np.ndarray) -> list[Curve]:
    begin, product, square = (v[chosen] for v in initial)
    values = np.stack([begin, product, square, np.sqrt(begin), np.ones(chosen.size)])
    begin, product, square, distance, count = _pool(values, rows[chosen], weight.size)[..., None]
    parts = (
        ("initial square separation", begin, count, "m2"),
        ("initial longitudinal velocity difference", product, distance, "m/s"),
        ("initial square velocity difference", square, count, "m2/s2"),
    )
    return [Curve(name, "time", np.zeros(1), above, below, weight, unit) for name, above, below, unit in parts]
