"""What is audited, and how a verdict after a change of the data compares with the one before."""

from dataclasses import dataclass

import numpy as np

from regimes.curves.structure import StructureStatistics, separation_bins, structure_statistics
from regimes.errors import DataError
from regimes.fitting.options import Options
from regimes.fitting.quick import QuickFit, quick_fit
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.verdict.rule import SPAN, Stretch

_KEPT = 0.5  # share of a supported stretch that must stay supported for the verdict to be the same


@dataclass(frozen=True, slots=True)
class Subject:
    """The data of a run and their fit by quadrature.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    options : Options
    fit : QuickFit
    structure : StructureStatistics
        Relative velocities by separation, from half the lowest resolved separation on.
    """

    tracks: Tracks
    pairs: Pairs
    options: Options
    fit: QuickFit
    structure: StructureStatistics

    @property
    def resolved(self) -> tuple[float, float]:
        """Lowest and highest resolved separation [m]."""
        return self.fit.rates.resolved.low, self.fit.rates.resolved.high

    def refit(
        self, tracks: Tracks | None = None, pairs: Pairs | None = None, options: Options | None = None
    ) -> QuickFit | None:
        """The fit of changed data; None where too few separations are then resolved."""
        try:
            return quick_fit(tracks or self.tracks, pairs or self.pairs, options or self.options)
        except DataError:
            return None


def subject_of(tracks: Tracks, pairs: Pairs, options: Options) -> Subject:
    """The subject of an audit.

    Raises
    ------
    DataError
        If too few separations are resolved.
    """
    fit = quick_fit(tracks, pairs, options)
    edges = separation_bins(0.5 * fit.rates.resolved.low, float(fit.rates.everything.thresholds[-1]))
    return Subject(tracks, pairs, options, fit, structure_statistics(tracks, pairs, edges))


def supported(fit: QuickFit) -> tuple[Stretch, ...]:
    """Stretches of separation over which the rule is met, wide enough to be called supported."""
    return tuple(s for s in fit.stretches() if s.span >= SPAN * (1.0 - 1e-9))


def verdict_changes(before: QuickFit, after: QuickFit | None) -> bool:
    """Whether another regime is supported, or one no longer is, where both fits have resolved separations.

    Parameters
    ----------
    before, after : QuickFit
        `after` None (nothing can be fitted any more) changes every verdict that supported something.

    Returns
    -------
    bool
        True if less than half (in ln r) of a supported stretch is still supported by the same regime, or if a regime is
        newly supported over more than a factor 3 where another one was or nothing was.
    """
    old = supported(before)
    if after is None:
        return bool(old)
    new = supported(after)
    lost = any(_share(stretch, new) < _KEPT for stretch in old)
    gained = any(_share(stretch, old) < _KEPT for stretch in new)
    return lost or gained


def _share(stretch: Stretch, others: tuple[Stretch, ...]) -> float:
    """Share of a stretch, in ln r, that stretches of the same regime cover."""
    covered = 0.0
    for other in others:
        if other.regime == stretch.regime:
            low, high = max(stretch.low, other.low), min(stretch.high, other.high)
            covered += max(np.log(high / low), 0.0) if high > low else 0.0
    return float(covered / np.log(stretch.high / stretch.low))
