"""The second opinion: the distribution of separations since the first passage of the lowest one."""

import numpy as np

from regimes.curves import separation_counts
from regimes.curves.passage import from_passage
from regimes.errors import DataError, FitError
from regimes.fitting.rates import Rates, largest_separation
from regimes.inference.fit import infer, screen_costly
from regimes.likelihood.separation import SeparationLikelihood, grid_edges, output_times
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_START_BINS = np.array([1.0, 1.15, 1.4, 1.8, 3.0, 1e9])  # in units of the separation at which the clock starts


def second_opinion(tracks: Tracks, rates: Rates, candidates, how):
    """The separation-distribution fit, or why there is none, its likelihood, and the pairs from their first passage."""
    moved = from_passage(tracks, rates.pairs, rates.resolved.low)
    try:
        likelihood = separation_likelihood(tracks, rates, moved)
        named, free = candidates
        screened, tempered = screen_costly("separation", likelihood, [*named, *free], how["seed"], how["progress"])
        found = infer("separation", screened[: len(named)], screened[len(named) :], 1.0 / tempered.tempering, **how)
    except (DataError, FitError) as error:
        return None, str(error), None, moved
    return found, "", tempered, moved


def separation_likelihood(tracks: Tracks, rates: Rates, moved: Pairs) -> SeparationLikelihood:
    """Likelihood of the separations of pairs since their first passage, not tempered.

    Raises
    ------
    DataError
        If records are too short.
    """
    low = rates.resolved.low
    lasting = np.sort(moved.length)[::-1]
    end = float(lasting[min(max(9, lasting.size // 4), lasting.size - 1)] - 1) * tracks.step
    begin = float(rates.likelihood.risk[0] / rates.likelihood.exits[0])
    times = output_times(begin, end, tracks.step)
    starts = low * _START_BINS
    starts[0] *= 1.0 - 1e-9
    edges = grid_edges(low, largest_separation(tracks, moved))
    edges[0], edges[-1] = 0.0, np.inf  # no separation is lost
    counts = separation_counts(tracks, moved, times, starts, edges)
    return SeparationLikelihood(counts)
