"""The curves that are compared, measured in one way on every deployment."""

from dataclasses import dataclass

import numpy as np

from regimes.checks.structure import RESOLVED, resolves_velocities
from regimes.curves import dispersion_statistics, exit_statistics
from regimes.curves.credit import credited_exits
from regimes.curves.distributions import separation_samples
from regimes.curves.passage import from_passage
from regimes.curves.structure import separation_bins, structure_statistics
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks

UNITS = {
    "exponent": "1/s",
    "relative_dispersion": "m2",
    "mean_log_growth": "1",
    "kurtosis": "1",
    "structure_function": "m2/s2",
    "separation_distribution": "1",
}
IN_LOGARITHM = ("exponent", "relative_dispersion", "kurtosis", "structure_function")
_TIMES = 10
_LEAST_PAIRS = 10
_LEAST_TIMES = 3
_LEAST_SHARE = 0.25  # of the pairs must still be there at the last time
_LEAST_EXITS = 0.25


@dataclass(frozen=True, slots=True)
class Grid:
    """Where the curves are taken.

    Parameters
    ----------
    thresholds : (n + 1,) float array [m]
        Resolved by both data sets.
    times : (m,) float array [s]
        Since the first passage of the lowest threshold.
    start_times : (l,) float array [s]
        Since the start of the pairs.
    edges : (k + 1,) float array [m]
        Bins of the structure function; empty where velocities are not resolved.
    """

    thresholds: np.ndarray
    times: np.ndarray
    start_times: np.ndarray
    edges: np.ndarray

    def axis(self, curve: str) -> tuple[str, np.ndarray]:
        """Name of the axis of a curve, and where its bins stand [m or s]."""
        if curve == "exponent":
            return "separation", self.thresholds[:-1]
        if curve == "structure_function":
            return "separation", np.sqrt(self.edges[1:] * self.edges[:-1])
        if curve == "mean_log_growth":
            return "time", self.start_times
        return "time", self.times[sample_places(self.times.size)] if curve == "separation_distribution" else self.times


@dataclass(frozen=True, slots=True)
class Measured:
    """Curves of one deployment, positive ones in their logarithm; sorted separations [m] at three times."""

    curves: dict[str, np.ndarray]
    samples: tuple[np.ndarray, ...]


def grid_of(tracks: Tracks, pairs: Pairs, thresholds: np.ndarray) -> Grid:
    """Where curves of the smaller set are taken: times until a quarter of its pairs is left.

    Raises
    ------
    DataError
        If records end at once.
    """
    moved = from_passage(tracks, pairs, float(thresholds[0]))
    steps, start_steps = (_steps(some.length) for some in (moved, pairs))
    if steps.size < _LEAST_TIMES:
        raise DataError(
            f"compare: got {moved.n_pair} pairs, a quarter of which last {steps[-1]} steps beyond the passage of the "
            f"lowest separation that both cases resolve; must be {_LEAST_TIMES} steps at least; use longer records"
        )
    edges = separation_bins(float(thresholds[0]), float(thresholds[-1]))
    share = resolves_velocities(structure_statistics(tracks, pairs, edges))
    kept = edges if share >= RESOLVED else np.empty(0)
    return Grid(thresholds, steps * tracks.step, start_steps * tracks.step, kept)


def _steps(length: np.ndarray) -> np.ndarray:
    """Steps evenly spread in their logarithm, from one to where a quarter of the pairs is left."""
    lasting = np.sort(length)[::-1]
    at = min(max(_LEAST_PAIRS - 1, int(_LEAST_SHARE * lasting.size)), lasting.size - 1)
    return np.unique(np.rint(np.geomspace(1, max(int(lasting[at]) - 2, 1), _TIMES)).astype(int))


def measure(tracks: Tracks, pairs: Pairs, grid: Grid) -> Measured:
    """All curves of one deployment.

    Raises
    ------
    DataError
        If no pair is seen to pass the lowest threshold.
    """
    moved = from_passage(tracks, pairs, float(grid.thresholds[0]))
    since = dispersion_statistics(tracks, moved, grid.times)
    with np.errstate(invalid="ignore", divide="ignore"):
        curves = {
            "exponent": log_exponent(tracks, pairs, grid.thresholds),
            "relative_dispersion": np.log(since.relative_dispersion().value),
            "mean_log_growth": log_growth(tracks, pairs, grid.start_times),
            "kurtosis": np.log(since.kurtosis().value),
        }
        if grid.edges.size:
            total = structure_statistics(tracks, pairs, grid.edges).total().value
            curves["structure_function"] = np.log(np.where(total > 0, total, np.nan))
    chosen = grid.times[sample_places(grid.times.size)]
    return Measured(curves, tuple(np.sort(s.separation) for s in separation_samples(tracks, moved, chosen)))


def log_exponent(tracks: Tracks, pairs: Pairs, thresholds: np.ndarray) -> np.ndarray:
    """ln of the exit rate [1/s] between thresholds, unfinished passages credited; NaN where next to nothing exits."""
    found = exit_statistics(tracks, pairs, thresholds)
    exits, risk = found.weight @ credited_exits(found), found.weight @ found.time_at_risk
    seen = (exits > _LEAST_EXITS) & (risk > 0)
    return np.where(seen, np.log(found.log_ratio * np.where(seen, exits, 1.0) / np.where(seen, risk, 1.0)), np.nan)


def log_growth(tracks: Tracks, pairs: Pairs, times: np.ndarray) -> np.ndarray:
    """Mean of ln r at times since the start [s] less that of ln r at the start.

    Growth rather than separation, since starts are matched within a factor only.
    """
    later = dispersion_statistics(tracks, pairs, times).mean_log_separation().value
    return later - float(np.mean(np.log(np.maximum(pairs.start_separation, 1.0))))


def sample_places(n: int) -> np.ndarray:
    """Which of the times are taken for the distribution of separations: three, evenly spread."""
    return np.unique(np.rint(np.array([0.25, 0.6, 0.95]) * (n - 1)).astype(int))


def in_units(curve: str, value: np.ndarray) -> np.ndarray:
    """Values in the unit that is shown."""
    return np.exp(value) if curve in IN_LOGARITHM else value
