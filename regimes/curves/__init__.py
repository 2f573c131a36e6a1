"""Pairs reduced to sums per cluster, from which every value, error and merge follows."""

from regimes.curves.counts import SeparationCounts, separation_counts
from regimes.curves.dispersion import DispersionStatistics, Kurtosis, default_times, dispersion_statistics
from regimes.curves.exit_rates import ExitStatistics, exit_statistics
from regimes.curves.groups import Groups, make_groups
from regimes.curves.record import Curve

__all__ = [
    "Curve",
    "DispersionStatistics",
    "ExitStatistics",
    "Groups",
    "Kurtosis",
    "SeparationCounts",
    "default_times",
    "dispersion_statistics",
    "exit_statistics",
    "make_groups",
    "separation_counts",
]
