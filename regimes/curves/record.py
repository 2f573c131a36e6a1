"""A curve is a ratio of two sums over clusters; value, error and merge follow from the sums alone."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.arrays import frozen_array
from regimes.curves.covariance import influence_covariance, small_sample
from regimes.errors import DataError


@dataclass(frozen=True, slots=True)
class Curve:
    r"""A statistic that is, in every bin, a ratio of two sums over clusters.

    .. math:: v_b = \frac{\sum_g w_g N_{gb}}{\sum_g w_g M_{gb}}

    A row with weight +1 holds everything that touches one cluster. A pair whose members belong to two
    clusters stands in both their rows, and once more in a row of weight -1 shared by all pairs of these
    two clusters, so that sums count it once and the sum of squared influences is the dyadic-robust
    variance (Aronow, Samii & Assenova 2015, Political Analysis 23, 564).

    Parameters
    ----------
    name : str
        What the curve shows.
    axis_name : str
        ``"separation"`` or ``"time"``.
    axis : (n_bin,) float array [m or s]
        Where each bin stands.
    numerator, denominator : (n_row, n_bin) float arrays
        The two sums of every row.
    weight : (n_row,) float array
        +1 for a cluster, -1 for the pairs shared by two clusters.
    unit : str
        Unit of the value.

    Raises
    ------
    DataError
        If shapes disagree, a sum is not finite, a denominator is negative or a weight is not +1 or -1.
    """

    name: str
    axis_name: str
    axis: np.ndarray
    numerator: np.ndarray
    denominator: np.ndarray
    weight: np.ndarray
    unit: str

    def __post_init__(self) -> None:
        for field in ("axis", "numerator", "denominator", "weight"):
            object.__setattr__(self, field, frozen_array(getattr(self, field), np.float64))
        _check(self)

    @property
    def value(self) -> np.ndarray:
        """(n_bin,) ratio of the sums; NaN in a bin whose denominator is zero."""
        return _ratio(self.weight @ self.numerator, self.weight @ self.denominator)

    @property
    def influence(self) -> np.ndarray:
        r"""(n_row, n_bin) :math:`U_{gb} = (N_{gb} - v_b M_{gb}) / \sum_g w_g M_{gb}`."""
        return _ratio(self.numerator - self.value * self.denominator, self.weight @ self.denominator)

    @property
    def n_cluster(self) -> np.ndarray:
        """(n_bin,) number of clusters that contribute to each bin."""
        return np.sum(self.denominator[self.weight > 0] > 0, axis=0)

    @property
    def effective_clusters(self) -> np.ndarray:
        r"""(n_bin,) Kish's effective number :math:`(\sum_c M_c)^2 / \sum_c M_c^2`; NaN in an empty bin."""
        share = self.denominator[self.weight > 0]
        return _ratio(share.sum(axis=0) ** 2, np.sum(share**2, axis=0))

    @property
    def covariance(self) -> np.ndarray:
        """(n_bin, n_bin) covariance of the values, see `influence_covariance`."""
        return influence_covariance(self.influence, self.weight, self.n_cluster)

    @property
    def standard_error(self) -> np.ndarray:
        """(n_bin,) root of the diagonal of `covariance`; NaN with fewer than two clusters."""
        return np.sqrt(np.diag(self.covariance))

    def covariance_with(self, other: "Curve") -> np.ndarray:
        """Covariance of this curve's values with those of another curve of the same clusters.

        Returns
        -------
        (n_bin, n_bin of other) float array
            NaN where either bin has fewer than two clusters.

        Raises
        ------
        DataError
            If the two curves do not have the same rows.
        """
        if not np.array_equal(self.weight, other.weight):
            raise DataError(
                f"covariance of {self.name} with {other.name}: got {self.weight.size} and "
                f"{other.weight.size} rows, or rows of other weights; both curves must come from the same "
                "pairs; compute them from the same pairs"
            )
        scale = np.sqrt(np.outer(small_sample(self.n_cluster), small_sample(other.n_cluster)))
        return scale * (self.influence.T @ (self.weight[:, None] * other.influence))

    def leave_one_out(self) -> np.ndarray:
        """(n_cluster, n_bin) values of the curve without each cluster and every pair that touches it."""
        rows = self.weight > 0
        return _ratio(
            self.weight @ self.numerator - self.numerator[rows],
            self.weight @ self.denominator - self.denominator[rows],
        )

    def without(self, cluster: int) -> "Curve":
        """Curve without one cluster.

        Raises
        ------
        DataError
            If there is no such cluster, or pairs connect clusters (then use `leave_one_out`).
        """
        self._refuse_shared_pairs("leaving out a cluster", "use leave_one_out() for its values")
        if not 0 <= cluster < self.weight.size:
            raise DataError(
                f"leaving out a cluster: got {cluster}; clusters are 0 to {self.weight.size - 1}; choose one of them"
            )
        keep = np.arange(self.weight.size) != cluster
        return replace(
            self,
            numerator=self.numerator[keep],
            denominator=self.denominator[keep],
            weight=self.weight[keep],
        )

    def bootstrap(self, n: int, rng: np.random.Generator) -> np.ndarray:
        """Values of the curve for `n` resamples of the clusters with replacement.

        Returns
        -------
        (n, n_bin) float array
            NaN where a resample has nothing in a bin.

        Raises
        ------
        DataError
            If pairs connect clusters: their sums cannot be resampled cluster by cluster.
        """
        self._refuse_shared_pairs("bootstrap over clusters", "use the covariance, which allows for them")
        n_row = self.weight.size
        draws = rng.multinomial(n_row, np.full(n_row, 1.0 / n_row), size=n).astype(float)
        return _ratio(draws @ self.numerator, draws @ self.denominator)

    def merge(self, other: "Curve") -> "Curve":
        """Curve of the clusters of both; the other's clusters must be different ones.

        Raises
        ------
        DataError
            If the two are not the same statistic on the same axis.
        """
        mine, theirs = (self.name, self.axis_name, self.unit), (other.name, other.axis_name, other.unit)
        if mine != theirs or not np.array_equal(self.axis, other.axis):
            raise DataError(
                f"merge of curves: got {self.name} on {self.axis.size} bins and {other.name} on "
                f"{other.axis.size}; name, unit and axis must be the same; compute both with the same bins"
            )
        return replace(
            self,
            numerator=np.concatenate([self.numerator, other.numerator]),
            denominator=np.concatenate([self.denominator, other.denominator]),
            weight=np.concatenate([self.weight, other.weight]),
        )

    def _refuse_shared_pairs(self, action: str, advice: str) -> None:
        shared = int(np.sum(self.weight < 0))
        if shared:
            raise DataError(
                f"{action} of {self.name}: got pairs that connect {shared} couples of clusters; "
                f"only curves whose pairs stay within one cluster allow it; {advice}"
            )

    def _repr_html_(self) -> str:
        titles = (self.axis_name, f"{self.name} [{self.unit}]", "standard error", "clusters")
        head = "<tr>" + "".join(f"<th>{title}</th>" for title in titles) + "</tr>"
        columns = zip(self.axis, self.value, self.standard_error, self.n_cluster, strict=True)
        body = "".join(
            f"<tr><td>{x:.4g}</td><td>{v:.4g}</td><td>{e:.2g}</td><td>{n}</td></tr>" for x, v, e, n in columns
        )
        return f"<table>{head}{body}</table>"


def _ratio(numerator: np.ndarray, denominator: np.ndarray) -> np.ndarray:
    """Quotient, NaN where the denominator is zero."""
    return np.divide(numerator, np.where(denominator > 0, denominator, np.nan))


def _check(curve: Curve) -> None:
    expected = (curve.weight.size, curve.axis.size)
    if curve.numerator.shape != expected or curve.denominator.shape != expected:
        raise DataError(
            f"curve {curve.name}: got numerator {curve.numerator.shape} and denominator "
            f"{curve.denominator.shape}; both must be {expected}, clusters by bins; "
            "give every cluster a row and every bin a column"
        )
    if not (np.all(np.isfinite(curve.numerator)) and np.all(np.isfinite(curve.denominator))):
        raise DataError(
            f"curve {curve.name}: got sums that are not finite; sums must be finite numbers; "
            "leave missing samples out of the sums"
        )
    if np.any(curve.denominator < 0) or not np.all(np.abs(curve.weight) == 1):
        raise DataError(
            f"curve {curve.name}: got smallest denominator {curve.denominator.min():.4g} and weights "
            f"{sorted(set(curve.weight.tolist()))}; denominators must be >= 0 and weights +1 or -1; "
            "correct the sums"
        )
