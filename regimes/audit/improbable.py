"""Pairs whose separations are improbable under the fitted kernel."""

from dataclasses import dataclass

import numpy as np

from regimes.audit.subject import Subject
from regimes.curves.passage import from_passage
from regimes.curves.passes import separation_pass, spans_and_rows
from regimes.errors import DataError
from regimes.inference.average import probabilities
from regimes.likelihood.separation import grid_edges, log_probability
from regimes.pairs import Pairs
from regimes.synthetic.likeness import design_of, likeness
from regimes.theory.kernel import Kernel
from regimes.tracks import Tracks

REPETITIONS = 24
LEVEL = 0.05  # probability that any pair of a data set that follows the kernel is named
_TIMES = 8
_MOST_PAIRS = 150


@dataclass(frozen=True, slots=True)
class Improbable:
    """Pairs that hardly ever come about under the fitted kernel.

    Parameters
    ----------
    pairs : tuple of (str, str)
        Labels of their members, the least probable first.
    compared : int
        Pairs that were looked at.
    """

    pairs: tuple[tuple[str, str], ...]
    compared: int


def best_kernel(subject: Subject) -> Kernel:
    """Kernel of the most probable named sequence at the median of its draws."""
    named = [p for p in subject.fit.named if len(p.draws)]
    best = named[int(np.argmax(probabilities(named)))]
    low, high = subject.resolved
    reference = float(np.sqrt(low * high))
    theta = np.median(best.draws, axis=0)
    return Kernel(best.model.exponents(theta), best.model.breaks(theta), float(np.exp(theta[0])), reference)


def improbable_pairs(subject: Subject) -> Improbable:
    r"""Rank of every pair's likelihood among those of pairs simulated under the fitted kernel.

    .. math:: \ell_i = \frac{1}{n_i} \sum_t \ln p(r_i(t) \mid t, r_0; K), \quad
              p_i = \frac{1 + \#\{\ell \le \ell_i\}}{1 + N}

    t counts from the first passage of the lowest resolved separation; the simulated pairs repeat the design of the
    data, see `likeness`. Compared are pairs seen at about as many times. Named are those with p below 5 % over the
    number of pairs.

    Parameters
    ----------
    subject : Subject
        Of more than 150 pairs, every so many-th is taken.

    Returns
    -------
    Improbable
        Empty where no pair passes the lowest resolved separation.
    """
    pairs = subject.pairs.select(slice(None, None, -(-subject.pairs.n_pair // _MOST_PAIRS)))
    low, _ = subject.resolved
    kernel = best_kernel(subject)
    try:
        moved = from_passage(subject.tracks, pairs, low)
    except DataError:
        return Improbable((), 0)
    longest = int(np.quantile(moved.length, 0.9))
    lags = np.unique(np.rint(np.geomspace(1, max(longest - 1, 1), _TIMES))).astype(np.int64)
    table = _table(kernel, low, lags * subject.tracks.step)
    own, seen = _likelihoods(subject.tracks, moved, lags, table)
    design = design_of(subject.tracks, pairs)
    rng = np.random.default_rng(subject.options.seed)
    drawn = [_again(design, kernel, rng, low, lags, table) for _ in range(REPETITIONS)]
    values, counts = (np.concatenate([d[k] for d in drawn]) for k in (0, 1))
    p = np.ones(own.size)
    for i in np.flatnonzero(seen > 0):
        like = np.abs(counts - seen[i]) <= 1
        p[i] = (1.0 + np.sum(values[like] <= own[i])) / (1.0 + np.sum(like))
    order = [i for i in np.argsort(p, kind="stable") if p[i] < LEVEL / max(int(np.sum(seen > 0)), 1)]
    label = subject.tracks.labels
    return Improbable(tuple((label[moved.first[i]], label[moved.second[i]]) for i in order), int(np.sum(seen > 0)))


def _table(kernel: Kernel, low: float, times: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Cell edges [ln m] and ln probability (n_time, n_cell) of pairs that start at `low`."""
    edges = np.log(grid_edges(low, 1e3 * low))
    grid = (edges, np.array([np.log(low)]), times.astype(float))
    found = log_probability(grid, kernel.exponents, kernel.breaks, kernel.reference, float(np.log(kernel.rate)))
    return edges, np.maximum(found[:, :, 0], np.log(1e-12))


def _again(design, kernel: Kernel, rng, low: float, lags: np.ndarray, table) -> tuple[np.ndarray, np.ndarray]:
    tracks, pairs = likeness(design, kernel, rng)
    try:
        return _likelihoods(tracks, from_passage(tracks, pairs, low), lags, table)
    except DataError:
        return np.empty(0), np.empty(0, int)


def _likelihoods(tracks: Tracks, pairs: Pairs, lags: np.ndarray, table) -> tuple[np.ndarray, np.ndarray]:
    """Mean ln probability of each pair over the times at which it is seen, and how many these are."""
    edges, log_p = table
    spans, _, _ = spans_and_rows(tracks, pairs)
    r = np.empty((pairs.n_pair, lags.size))
    separation_pass(np.ascontiguousarray(tracks.position, float), bool(tracks.planar), spans, lags, r)
    found = np.isfinite(r) & (r > 0)
    cell = np.clip(np.searchsorted(edges, np.log(np.where(found, r, 1.0)), side="right") - 1, 0, edges.size - 2)
    value = np.where(found, log_p[np.arange(lags.size)[None, :], cell], 0.0)
    count = found.sum(axis=1)
    return value.sum(axis=1) / np.maximum(count, 1), count
