"""Sums of single launches, from which the curves of any deployment follow by adding rows."""

from dataclasses import dataclass

import numpy as np

from regimes.compare.grid import Grid
from regimes.curves import dispersion_statistics
from regimes.curves.credit import credited_exits
from regimes.curves.distributions import separation_samples
from regimes.curves.exit_rates import ExitStatistics, exit_statistics
from regimes.curves.passage import from_passage
from regimes.curves.structure import structure_statistics
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_LEAST_EXITS = 0.25
_PER_OCTAVE = 4
_OCTAVES = 25  # from 1 m on
N_BIN = _PER_OCTAVE * _OCTAVES  # of separation, for its distribution


@dataclass(frozen=True, slots=True)
class Raw:
    """Sums of some launches before unfinished passages are credited.

    Parameters
    ----------
    exit : ExitStatistics
        A row for each launch.
    others : (n_row, n_column) float array
        All other sums, see `Columns`.
    """

    exit: ExitStatistics
    others: np.ndarray


@dataclass(frozen=True, slots=True)
class Table:
    """Sums of launches, a row each: exits, time at risk [s], and all others.

    Parameters
    ----------
    values : (n_row, n_column) float array
    grid : Grid
    """

    values: np.ndarray
    grid: Grid

    def curves(self, chosen: np.ndarray) -> dict[str, np.ndarray]:
        """Curves of deployments, positive ones in their logarithm.

        Parameters
        ----------
        chosen : (m, u) int array
            Rows of each deployment.

        Returns
        -------
        dict of str to (m, n) float array
            NaN where there is nothing to tell; "separation_distribution" is (m, 3, `N_BIN`): counts.
        """
        total = self.values[chosen].sum(axis=1)
        part = dict(zip(_names(), np.split(total, np.cumsum(_widths(self.grid))[:-1], axis=1), strict=True))
        with np.errstate(invalid="ignore", divide="ignore"):
            rate = np.where(part["exits"] > _LEAST_EXITS, part["exits"], np.nan) / part["risk"]
            second, fourth = part["square"] / part["count"], part["fourth"] / part["count"]
            growth = part["log"] / part["log_count"] - part["start_log"] / part["pairs"]
            curves = {
                "exponent": np.log(np.diff(np.log(self.grid.thresholds)) * rate),
                "relative_dispersion": np.log(second),
                "mean_log_growth": growth,
                "kurtosis": np.log(fourth / second**2),
            }
            if self.grid.edges.size:
                curves["structure_function"] = np.log(part["velocity_square"] / part["velocities"])
        curves = {name: np.where(np.isfinite(v), v, np.nan) for name, v in curves.items()}
        counts = part["histogram"].reshape(len(total), self.grid.sample_times.size, N_BIN)
        return curves | {"separation_distribution": counts}


def table_of(parts: list[Raw], grid: Grid) -> Table:
    """One table of the rows of all parts, in order; passages are credited by the rates of all together."""
    found = parts[0].exit
    for part in parts[1:]:
        found = found.merge(part.exit)
    others = np.concatenate([part.others for part in parts])
    return Table(np.concatenate([credited_exits(found), found.time_at_risk, others], axis=1), grid)


def raw_sums(tracks: Tracks, pairs: Pairs, grid: Grid) -> Raw:
    """Sums of every cluster of a set of tracks; pairs lie within clusters."""
    moved = _moved(tracks, pairs, float(grid.thresholds[0]))
    since = dispersion_statistics(tracks, moved, grid.times)
    start = dispersion_statistics(tracks, pairs, grid.start_times)
    own = pairs.cluster[pairs.first]
    logs = np.bincount(own, np.log(np.maximum(pairs.start_separation, 1.0)), pairs.n_cluster)
    number = np.bincount(own, minlength=pairs.n_cluster).astype(float)
    columns = [since.count, since.square, since.fourth, start.log, start.log_count, logs[:, None], number[:, None]]
    if grid.edges.size:
        s = structure_statistics(tracks, pairs, grid.edges)
        columns += [s.total().numerator, s.count]
    columns.append(_histograms(tracks, moved, grid))
    return Raw(exit_statistics(tracks, pairs, grid.thresholds), np.concatenate(columns, axis=1))


def _moved(tracks: Tracks, pairs: Pairs, passage: float) -> Pairs:
    """Pairs from their first passage; none where none was seen to pass."""
    try:
        return from_passage(tracks, pairs, passage)
    except DataError:
        return pairs.select(np.zeros(pairs.n_pair, bool))


def _histograms(tracks: Tracks, moved: Pairs, grid: Grid) -> np.ndarray:
    """(n_cluster, 3 n_bin): separations at three times since the first passage, by cluster and bin."""
    out = np.zeros((moved.n_cluster, grid.sample_times.size, N_BIN))
    if moved.n_pair:
        for k, sample in enumerate(separation_samples(tracks, moved, grid.sample_times)):
            octave = np.log2(np.maximum(sample.separation, 1.0))
            place = np.clip((_PER_OCTAVE * octave).astype(int), 0, N_BIN - 1)
            np.add.at(out, (sample.cluster, k, place), 1.0)
    return out.reshape(moved.n_cluster, -1)


def _names() -> tuple[str, ...]:
    return (
        "exits", "risk", "count", "square", "fourth", "log", "log_count", "start_log", "pairs", "velocity_square",
        "velocities", "histogram",
    )  # fmt: skip


def _widths(grid: Grid) -> list[int]:
    n, t, s, v = grid.thresholds.size - 1, grid.times.size, grid.start_times.size, max(grid.edges.size - 1, 0)
    return [n, n, t, t, t, s, s, 1, 1, v, v, grid.sample_times.size * N_BIN]
