"""Second-order structure functions of the velocities of pairs, binned by their separation."""

from dataclasses import dataclass, fields, replace

import numpy as np

from regimes.arrays import frozen_array
from regimes.curves.passes import spans_and_rows
from regimes.curves.record import Curve
from regimes.curves.structure_passes import SUMS, structure_pass
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_NAMES = ("count", "log_r", "lean", "along_short", "along_long", "across_short", "across_long", "change")
# Relative errors of position s of one coordinate raise the total by so many s^2 / dt^2.
_FLOOR = {"short": 8.0, "long": 2.0, "extrapolated": 10.0}
_BINS_PER_OCTAVE = 2


@dataclass(frozen=True, slots=True)
class StructureStatistics:
    r"""Sums of relative velocities per row and bin of separation.

    Parameters
    ----------
    edges : (n_bin + 1,) float array [m]
        Evenly spaced in ln r.
    count : (n_row, n_bin) float array
        Samples of pairs.
    log_r : (n_row, n_bin) float array
        Sum of ln(r / 1 m).
    lean : (n_row, n_bin) float array [m/s]
        Sum of the component along the separation, differences over two steps.
    along_short, along_long : (n_row, n_bin) float arrays [m2/s2]
        Sum of the squared component along the separation; differences over one and over two steps.
    across_short, across_long : (n_row, n_bin) float arrays [m2/s2]
        The same across the separation.
    change : (n_row, n_bin) float array [m2/s2]
        Sum of the squared change of the relative velocity from the step before a sample to the step after.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters; see `Curve`.
    step : float [s]
        Interval between samples.
    position_error : float [m]
        Standard error of one coordinate of one fix.
    start : float [m]
        Separation below which nine of ten pairs start.

    Notes
    -----
    A difference over a time T averages the velocity over it, which lowers a squared difference by about
    :math:`T^2 \langle \dot u^2 \rangle / 12`. Both differences are centred on the same sample, so that

    .. math:: \frac{4}{3} \frac{u_-^2 + u_+^2}{2} - \frac{1}{3} \left(\frac{u_- + u_+}{2}\right)^2

    is free of this term; that is what the curves show. Position errors s raise the total by
    :math:`10 s^2 / \Delta t^2` (8 for one-step and 2 for two-step differences).
    """

    edges: np.ndarray
    count: np.ndarray
    log_r: np.ndarray
    lean: np.ndarray
    along_short: np.ndarray
    along_long: np.ndarray
    across_short: np.ndarray
    across_long: np.ndarray
    change: np.ndarray
    weight: np.ndarray
    step: float
    position_error: float
    start: float

    def __post_init__(self) -> None:
        for field in fields(self):
            if field.name not in ("step", "position_error", "start"):
                object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), np.float64))

    @property
    def separation(self) -> np.ndarray:
        """(n_bin,) geometric mean separation of the samples of each bin; its middle where there are none [m]."""
        middle = 0.5 * np.log(self.edges[1:] * self.edges[:-1])
        total = self.weight @ self.count
        return np.exp(np.where(total > 0, (self.weight @ self.log_r) / np.where(total > 0, total, 1.0), middle))

    def longitudinal(self) -> Curve:
        """Mean squared velocity difference along the separation [m2/s2]."""
        return self._mean("longitudinal structure function", _extrapolate(self.along_short, self.along_long))

    def transverse(self) -> Curve:
        """Mean squared velocity difference across the separation [m2/s2]."""
        return self._mean("transverse structure function", _extrapolate(self.across_short, self.across_long))

    def total(self) -> Curve:
        """Mean squared velocity difference, both components together [m2/s2]."""
        short, long = self.along_short + self.across_short, self.along_long + self.across_long
        return self._mean("total structure function", _extrapolate(short, long))

    def one_step(self) -> Curve:
        """Total with velocities from differences over one step, not corrected for their averaging [m2/s2]."""
        return self._mean("total structure function, one step", self.along_short + self.across_short)

    def two_steps(self) -> Curve:
        """Total with velocities from differences over two steps, not corrected for their averaging [m2/s2]."""
        return self._mean("total structure function, two steps", self.along_long + self.across_long)

    def mean_longitudinal(self) -> Curve:
        """Mean velocity along the separation, positive where pairs move apart [m/s]."""
        return self._mean("mean longitudinal velocity difference", self.lean, "m/s")

    def noise_floor(self, differences: str = "extrapolated") -> float:
        """What position errors add to the total [m2/s2]; half of it to each component.

        Parameters
        ----------
        differences : str
            ``"extrapolated"`` (`total`), ``"short"`` (`one_step`) or ``"long"`` (`two_steps`).
        """
        if differences not in _FLOOR:
            raise DataError(f"noise floor: got {differences!r}; known: {', '.join(_FLOOR)}; choose one of them")
        return _FLOOR[differences] * (self.position_error / self.step) ** 2

    @property
    def n_sample(self) -> np.ndarray:
        """(n_bin,) samples of pairs."""
        return self.weight @ self.count

    def select(self, bins: slice) -> "StructureStatistics":
        """A contiguous range of the bins."""
        first, last, _ = bins.indices(self.count.shape[1])
        chosen = {name: getattr(self, name)[:, first:last] for name in _NAMES}
        return replace(self, edges=self.edges[first : last + 1], **chosen)

    def merge(self, other: "StructureStatistics") -> "StructureStatistics":
        """Statistics of the clusters of both; the other's clusters must be different ones.

        Raises
        ------
        DataError
            If bins, step or position error differ.
        """
        mine, theirs = (self.step, self.position_error), (other.step, other.position_error)
        if not np.array_equal(self.edges, other.edges) or mine != theirs:
            raise DataError(
                f"merge of structure functions: got {self.edges.size - 1} and {other.edges.size - 1} bins, steps "
                f"{self.step:g} and {other.step:g} s, position errors {self.position_error:g} and "
                f"{other.position_error:g} m; all must be the same; compute both in the same way"
            )
        joined = {n: np.concatenate([getattr(self, n), getattr(other, n)]) for n in (*_NAMES, "weight")}
        return replace(self, **joined, start=max(self.start, other.start))

    def _mean(self, name: str, total: np.ndarray, unit: str = "m2/s2") -> Curve:
        return Curve(name, "separation", self.separation, total, self.count, self.weight, unit)


def _extrapolate(short: np.ndarray, long: np.ndarray) -> np.ndarray:
    return (4.0 * short - long) / 3.0


def separation_bins(low: float, high: float, per_octave: int = _BINS_PER_OCTAVE) -> np.ndarray:
    """Edges of bins evenly spaced in ln r, from `low` to at least `high` [m].

    Raises
    ------
    DataError
        If the range is empty.
    """
    if not 0 < low < high < np.inf or per_octave < 1:
        raise DataError(
            f"bins of separation: got {low:g} to {high:g} m, {per_octave} per octave; need 0 < low < high and at "
            "least one; correct the range"
        )
    n = max(1, int(np.ceil(per_octave * np.log2(high / low) - 1e-9)))
    return low * 2.0 ** (np.arange(n + 1) / per_octave)


def structure_statistics(tracks: Tracks, pairs: Pairs, edges: np.ndarray) -> StructureStatistics:
    """Relative velocities of every pair, by separation.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    edges : (n_bin + 1,) float array [m]
        Rising, evenly spaced in their logarithm; see `separation_bins`.

    Returns
    -------
    StructureStatistics
        From samples with a fix on both sides.

    Raises
    ------
    DataError
        If there are no pairs, or edges are not positive, rising and evenly spaced in their logarithm.
    """
    edges = np.asarray(edges, float)
    good = edges.ndim == 1 and edges.size > 1 and np.all(np.isfinite(edges)) and np.all(edges > 0)
    widths = np.diff(np.log(edges)) if good else np.zeros(1)
    if not good or np.any(widths <= 0) or np.ptp(widths) > 1e-6 * widths.mean():
        raise DataError(
            f"bins of separation: got edges {np.array2string(edges, threshold=6)} m; must be positive, rising and "
            "evenly spaced in their logarithm; use separation_bins"
        )
    if pairs.n_pair == 0:
        raise DataError("structure functions: got no pairs; at least one is needed; allow larger separations")
    spans, rows, weight = spans_and_rows(tracks, pairs)
    sums = np.zeros((weight.size, edges.size - 1, SUMS))
    position = np.ascontiguousarray(tracks.position, dtype=float)
    structure_pass(position, bool(tracks.planar), spans, rows, np.log(edges), float(tracks.step), sums)
    return StructureStatistics(
        edges,
        *np.moveaxis(sums, -1, 0),
        weight=weight,
        step=float(tracks.step),
        position_error=float(tracks.position_error),
        start=float(np.quantile(pairs.start_separation, 0.9)),
    )
