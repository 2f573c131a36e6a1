"""Exit rates of the pairs, the range they resolve, and their likelihood."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.analysis import RateTable
from regimes.curves import ExitStatistics, default_times, dispersion_statistics, exit_statistics
from regimes.curves.credit import credited_exits, local_growth
from regimes.curves.resolution import ERROR_MULTIPLE, Resolved, ladder, resolved_range
from regimes.errors import DataError
from regimes.fitting.options import Options
from regimes.likelihood.dispersion import Dispersion, exit_rate_likelihood, exit_scatter, rate_intervals
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.verdict.decide import FEW_CLUSTERS


@dataclass(frozen=True, slots=True)
class Rates:
    """Exit statistics and what they give.

    Parameters
    ----------
    everything : ExitStatistics
        All thresholds.
    credited : (n_row, n) float array
        Exits with credit for unfinished passages.
    resolved : Resolved
    likelihood : ExitRateLikelihood
        Of the resolved intervals.
    spread : Dispersion
        Its `clusters` counts the clusters of the pairs as found.
    scatter : (n,) float array
        Relative dispersion of all intervals, from the theory of exit times.
    independent : float
        Dispersion that independent pairs would have.
    pairs : Pairs
        With the clusters that were used as independent.
    within_release : bool
        Whether particles had to take the place of clusters.
    """

    everything: ExitStatistics
    credited: np.ndarray
    resolved: Resolved
    likelihood: ExitRateLikelihood
    spread: Dispersion
    scatter: np.ndarray
    independent: float
    pairs: Pairs
    within_release: bool


def exit_rates(tracks: Tracks, pairs: Pairs, options: Options) -> Rates:
    """Exit rates with clusters as the independent unit, or particles where clusters are too few.

    Raises
    ------
    DataError
        If there is no pair, or too few separations are resolved.
    """
    if pairs.n_pair == 0:
        raise DataError("exit rates: got no pairs; need at least one; widen the rules by which pairs are found")
    starts = pairs.start_separation
    smallest = max(ERROR_MULTIPLE * tracks.position_error, float(np.quantile(starts, 0.05)), 1.0)
    largest = max(largest_separation(tracks, pairs), 4.0 * smallest)
    thresholds = ladder(options.limits, options.ratio, smallest, largest)
    everything = exit_statistics(tracks, pairs, thresholds)
    clusters = _effective(everything)
    within_release = clusters < FEW_CLUSTERS
    if within_release:
        pairs = replace(pairs, cluster=np.arange(pairs.cluster.size), n_cluster=pairs.cluster.size)
        everything = exit_statistics(tracks, pairs, thresholds)
    credited = credited_exits(everything)
    resolved = resolved_range(everything, credited, starts, tracks.position_error)
    cut = resolved.intervals
    scatter = exit_scatter(local_growth(everything, credited), everything.log_ratio)
    independent = float(np.average(scatter[cut], weights=everything.weight @ everything.exits[:, cut]))
    scatter = scatter / independent
    likelihood, spread = exit_rate_likelihood(everything.select(cut), credited[:, cut], scatter[cut])
    spread = replace(spread, clusters=clusters)
    return Rates(everything, credited, resolved, likelihood, spread, scatter, independent, pairs, within_release)


def largest_separation(tracks: Tracks, pairs: Pairs) -> float:
    """Three times the largest root-mean-square separation [m]: few pairs are ever farther apart."""
    found = dispersion_statistics(tracks, pairs, default_times(pairs, tracks.step))
    return 3.0 * float(np.sqrt(np.nanmax(found.relative_dispersion().value)))


def rate_table(rates: Rates) -> RateTable:
    """The exit-rate curve with its intervals, beside the textbook estimate."""
    s = rates.everything
    exits, risk = s.weight @ rates.credited, s.weight @ s.time_at_risk
    usable = np.where((exits > 0) & (risk > 0), exits, np.nan)
    low68, high68 = rate_intervals(usable, risk, s.log_ratio, rates.spread.total * rates.scatter, 0.68)
    low95, high95 = rate_intervals(usable, risk, s.log_ratio, rates.spread.total * rates.scatter, 0.95)
    resolved = np.zeros(exits.size, bool)
    resolved[rates.resolved.intervals] = True
    return RateTable(
        thresholds=s.thresholds,
        rate=s.log_ratio * usable / np.where(risk > 0, risk, np.nan),
        low68=low68,
        high68=high68,
        low95=low95,
        high95=high95,
        textbook=s.textbook_rate,
        exits=s.passages - s.censored,
        passages=s.passages,
        n_pair=s.n_pair,
        n_cluster=s.n_cluster,
        zero_fraction=s.zero_fraction,
        resolved=resolved,
    )


def _effective(statistics: ExitStatistics) -> float:
    """Effective number of clusters (Kish) by their exits."""
    share = statistics.exits[statistics.weight > 0].sum(axis=1)
    square = float(np.sum(share**2))
    return float(share.sum() ** 2 / square) if square > 0 else 0.0
