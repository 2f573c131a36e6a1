"""The curves that are predicted: measured in the same way on the data and on every repetition."""

from dataclasses import dataclass

import numpy as np

from regimes.curves import DispersionStatistics, dispersion_statistics
from regimes.curves.diffusivity import relative_diffusivity, residence_statistics
from regimes.curves.distributions import separation_samples
from regimes.curves.passage import from_passage
from regimes.curves.triplets import triplets
from regimes.pairs import Pairs
from regimes.tracks import Tracks

UNITS = {
    "relative_dispersion": "m2",
    "mean_log_separation": "ln m",
    "kurtosis": "1",
    "relative_diffusivity": "m2/s",
    "residence_time": "s",
    "triplet_area": "ln m2",
}
_IN_LOGARITHM = ("relative_dispersion", "kurtosis", "residence_time")


@dataclass(frozen=True, slots=True)
class Grid:
    """Where the curves are taken, the same for the data and all repetitions.

    Parameters
    ----------
    passage : float [m]
        Separation at whose first passage the clock of a pair starts.
    times : (n,) float array [s]
        Since the first passage.
    separations : (m,) float array [m]
        Below which the residence time is taken.
    areas : bool
        Whether there are triplets.
    """

    passage: float
    times: np.ndarray
    separations: np.ndarray
    areas: bool


@dataclass(frozen=True, slots=True)
class Measured:
    """Curves of one data set or repetition.

    Parameters
    ----------
    curves : dict of str to (n,) float array
        Positive skewed ones in their logarithm, see `in_units`.
    samples : tuple of (k,) float array [m]
        Sorted separations at a few of the times.
    """

    curves: dict[str, np.ndarray]
    samples: tuple[np.ndarray, ...]


def measure(tracks: Tracks, pairs: Pairs, grid: Grid) -> Measured:
    """All curves of one set of tracks.

    Raises
    ------
    DataError
        If no pair is seen to pass the first separation.
    """
    moved = from_passage(tracks, pairs, grid.passage)
    since = dispersion_statistics(tracks, moved, grid.times)
    with np.errstate(invalid="ignore", divide="ignore"):
        curves = _moments(since) | {
            "relative_diffusivity": relative_diffusivity(tracks, moved, grid.times).from_growth.value,
            "residence_time": np.log(residence_statistics(tracks, pairs, grid.separations).total.value),
        }
        if grid.areas:
            curves["triplet_area"] = triplets(tracks, grid.times).log_area.value
    chosen = grid.times[sample_places(grid.times.size)]
    samples = separation_samples(tracks, moved, chosen)
    return Measured(curves, tuple(np.sort(s.separation) for s in samples))


def axis_of(curve: str, grid: Grid) -> tuple[str, np.ndarray]:
    """Name of the axis of a curve, and where its bins stand [m or s]."""
    if curve == "residence_time":
        return "separation", grid.separations
    if curve == "relative_diffusivity":
        return "time", 0.5 * (grid.times[1:] + grid.times[:-1])
    return "time", grid.times


def sample_places(n: int) -> np.ndarray:
    """Which of the times are taken for the distribution of separations: three, evenly spread."""
    return np.unique(np.rint(np.array([0.25, 0.6, 0.95]) * (n - 1)).astype(int))


def in_units(curve: str, value: np.ndarray) -> np.ndarray:
    """Values in the unit that is shown."""
    return np.exp(value) if curve in _IN_LOGARITHM else value


def _moments(since: DispersionStatistics) -> dict[str, np.ndarray]:
    return {
        "relative_dispersion": np.log(since.relative_dispersion().value),
        "mean_log_separation": since.mean_log_separation().value,
        "kurtosis": np.log(since.kurtosis().value),
    }
