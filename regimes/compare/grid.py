"""Where the compared curves are taken, the same for both data sets."""

from dataclasses import dataclass

import numpy as np

from regimes.checks.structure import RESOLVED, resolves_velocities
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
_LEAST_TIMES = 3
_LEAST_PAIRS = 10
_LEAST_SHARE = 0.25  # of the pairs must still be there at the last time


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
        return "time", self.sample_times if curve == "separation_distribution" else self.times

    @property
    def sample_times(self) -> np.ndarray:
        """Times at which the distribution of separations is taken: three, evenly spread [s]."""
        n = self.times.size
        return self.times[np.unique(np.rint(np.array([0.25, 0.6, 0.95]) * (n - 1)).astype(int))]


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


def in_units(curve: str, value: np.ndarray) -> np.ndarray:
    """Values in the unit that is shown."""
    return np.exp(value) if curve in IN_LOGARITHM else value
