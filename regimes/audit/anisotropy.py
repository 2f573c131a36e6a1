"""Do separations of all clusters point the same way? And the linear shear that makes them do so."""

from dataclasses import dataclass

import numpy as np

from regimes.audit.vectors import Vectors, mean_is_zero

_PER_OCTAVE = 2
_ANGLE = 0.1  # degrees between directions that are tried


@dataclass(frozen=True, slots=True)
class Alignment:
    """How separations are aligned, in all and by separation.

    Parameters
    ----------
    share : float
        Length of the mean double-angle vector, 0 for all directions alike and 1 for one axis; NaN without a sample.
    axis_deg : float
        The common axis, counterclockwise from east, 0 to 180.
    p_value : float
        Of no common axis, clusters being independent; NaN with too few.
    edges : (n + 1,) float array [m]
        Of bins of separation.
    bin_p : (n,) float array
        p-value of each bin.
    """

    share: float
    axis_deg: float
    p_value: float
    edges: np.ndarray
    bin_p: np.ndarray


def alignment(vectors: Vectors, low: float, high: float) -> Alignment:
    r"""Mean double-angle vector of separations between two lengths.

    .. math:: R = \left| \frac{1}{C} \sum_c \langle e^{2 i \theta} \rangle_c \right|

    Parameters
    ----------
    vectors : Vectors
    low, high : float [m]

    Returns
    -------
    Alignment
        Means are over time; each cluster counts once, or by its time where pairs connect clusters.

    References
    ----------
    Mardia & Jupp (2000) Directional Statistics, axial data; from memory.
    """
    count = max(1, int(np.ceil(_PER_OCTAVE * np.log2(high / low) - 1e-9)))
    edges = low * 2.0 ** (np.arange(count + 1) / _PER_OCTAVE)
    r = np.hypot(*vectors.place.T)
    inside = (r >= low) & (r < edges[-1])
    (x, y), r, pair = vectors.place[inside].T, r[inside], vectors.pair[inside]
    where = np.minimum((_PER_OCTAVE * np.log2(r / low)).astype(np.int64), count - 1)
    of_pair = np.zeros((vectors.offset.size - 1, count, 3))
    np.add.at(of_pair, (pair, where), np.stack([(x - y) * (x + y) / r**2, 2.0 * x * y / r**2, np.ones(r.size)], axis=1))
    rows = vectors.row_sums(of_pair)
    whole = _by_cluster(rows.sum(axis=1), vectors.weight)
    total = vectors.weight @ whole
    share = float(np.hypot(*total[:2]) / total[2]) if total[2] > 0 else float("nan")
    bins = [_by_cluster(rows[:, b], vectors.weight) for b in range(count)]
    return Alignment(
        share,
        float(np.degrees(0.5 * np.arctan2(total[1], total[0])) % 180.0),
        mean_is_zero(whole[:, :2], vectors.weight),
        edges,
        np.array([mean_is_zero(part[:, :2], vectors.weight) for part in bins]),
    )


def _by_cluster(rows: np.ndarray, weight: np.ndarray) -> np.ndarray:
    """Sums and counts (n_row, 3) turned into means and ones, unless pairs connect clusters."""
    if np.any(weight < 0):
        return rows
    return rows / np.maximum(rows[:, 2:], 1.0)


def fitted_shear(vectors: Vectors, step: float) -> tuple[float, float]:
    r"""The simple shear that explains most of the squared separations.

    .. math:: \hat S(\varphi) = \frac{e^T P e'}{e'^T Q e'}, \quad P = \sum w\, x I^T, \quad Q = \sum w\, I I^T, \quad
              I(t) = \int_0^t x\, dt'

    e points along the shear, e' to its left; the direction is the one for which x - S e (e' I) is shortest.

    Parameters
    ----------
    vectors : Vectors
        x; w is one over their mean square at the same age.
    step : float [s]

    Returns
    -------
    rate : float [1/s]
        S, positive where the flow grows to the left of its direction; NaN where no pair moves apart.
    direction : float [degree]
        0 to 180.

    Notes
    -----
    Right on average where the flow knows of the shear and where the shear is added to paths that do not, for in an
    isotropic flow x along any direction is not correlated with the integral of x across it.
    """
    integral = integrated(vectors.place, vectors, step)
    age = np.arange(len(vectors.place)) - np.repeat(vectors.offset[:-1], np.diff(vectors.offset))
    seen = np.isfinite(vectors.place[:, 0])
    place, integral, age = vectors.place[seen], integral[seen], age[seen]
    square = np.bincount(age, np.sum(place**2, axis=1)) / np.maximum(np.bincount(age), 1)
    weighted = integral / np.where(square > 0, square, np.inf)[age][:, None]
    p, q = place.T @ weighted, integral.T @ weighted
    angle = np.radians(np.arange(0.0, 180.0, _ANGLE))
    along, left = np.stack([np.cos(angle), np.sin(angle)]), np.stack([-np.sin(angle), np.cos(angle)])
    both, alone = np.sum(along * (p @ left), axis=0), np.sum(left * (q @ left), axis=0)
    if not np.all(alone > 0):
        return float("nan"), float("nan")
    best = int(np.argmax(both**2 / alone))
    return float(both[best] / alone[best]), float(np.degrees(angle[best]))


def without_shear(vectors: Vectors, step: float, rate: float, direction: float) -> Vectors:
    """Separations less the integral of a shear [1/s] along a direction [degree]."""
    angle = np.radians(direction)
    along, left = np.array([np.cos(angle), np.sin(angle)]), np.array([-np.sin(angle), np.cos(angle)])
    moved = rate * integrated(vectors.place, vectors, step) @ left
    return Vectors(vectors.place - moved[:, None] * along, vectors.offset, vectors.table, vectors.weight)


def integrated(place: np.ndarray, vectors: Vectors, step: float) -> np.ndarray:
    """Integral over time since the start of each pair (n_sample, 2) [m s], trapezoids; gaps are bridged."""
    index = np.arange(len(place))
    seen = np.isfinite(place[:, 0])
    whole = np.stack([np.interp(index, index[seen], part[seen]) for part in place.T], axis=1)
    sums = np.zeros_like(whole)
    sums[1:] = np.cumsum(0.5 * step * (whole[1:] + whole[:-1]), axis=0)
    return sums - np.repeat(sums[vectors.offset[:-1]], np.diff(vectors.offset), axis=0)
