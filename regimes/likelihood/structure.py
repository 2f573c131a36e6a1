"""How probable a total structure function is under a spectrum, clusters being the independent sample."""

from dataclasses import dataclass

import numpy as np

from regimes.curves.structure import StructureStatistics
from regimes.errors import DataError

FIRST_BIN = 1.4  # multiples of the start separation at which the first bin in use may begin
REACHED = 0.85  # least share of the clusters that must have been in a bin
LEAST_BINS = 4
_SMALLEST_CLUSTERS = 6


@dataclass(frozen=True, slots=True)
class StructureLikelihood:
    r"""Quasi-likelihood of the total structure function.

    .. math:: \log L = -\tfrac{1}{2} d^T R^{-1} d, \quad
              d_b = \mathrm{sign}(V_b - \mu_b) \sqrt{2 n_b [V_b / \mu_b - 1 - \ln (V_b / \mu_b)]}

    Parameters
    ----------
    separation : (n_bin,) float array [m]
    value : (n_bin,) float array [m2/s2]
        V, noise included.
    shape : (n_bin,) float array
        n, inverse of the relative variance of V.
    correlation : float
        Correlation of neighbouring bins; R_bc = correlation^|b - c|.
    floor : float [m2/s2]
        What the stated position error adds to V.
    clusters : float
        Effective number of clusters.

    Notes
    -----
    Without correlation this is the gamma likelihood of shape n_b and mean mu_b. One pooled dispersion and one
    pooled correlation, since estimates bin by bin go up and down with the values.
    """

    separation: np.ndarray
    value: np.ndarray
    shape: np.ndarray
    correlation: float
    floor: float
    clusters: float

    def __call__(self, mean: np.ndarray) -> np.ndarray:
        """log L (...) of mean values mu (..., n_bin) [m2/s2], noise included."""
        ratio = self.value / mean
        d = np.sign(ratio - 1.0) * np.sqrt(2.0 * self.shape * np.maximum(ratio - 1.0 - np.log(ratio), 0.0))
        rho = self.correlation
        change = d[..., 1:] - rho * d[..., :-1]
        return -0.5 * (d[..., 0] ** 2 + np.sum(change**2, axis=-1) / (1.0 - rho**2))


def usable_bins(statistics: StructureStatistics) -> slice:
    r"""Bins whose sampling is even enough for a spectrum.

    Returns
    -------
    slice
        From 1.4 start separations on, as long as 85 % of the clusters have been in the bin, and where the
        signal exceeds the noise floor.

    Notes
    -----
    Pairs that were just released or just met have not forgotten how they were chosen, and the slow ones have
    not reached large separations when the record ends. Between the two, moving pairs lower the total by a
    factor that hardly depends on separation (simulated in random-Fourier flows: 0.87, 0.84 and 0.78 for slopes
    5/3, 2 and 5/2, within 3 % over more than a decade), while the two components change by factors that do: at
    slope 5/2 the longitudinal part by 1.0 to 1.5, the transverse by 0.7 to 0.5.

    Raises
    ------
    DataError
        If fewer than four bins are left.
    """
    curve = statistics.total()
    seen = curve.n_cluster
    value = np.where(statistics.n_sample > 0, curve.value, 0.0)
    good = (statistics.edges[:-1] >= FIRST_BIN * statistics.start) & (seen >= REACHED * seen.max())
    good &= (value > 2.0 * statistics.noise_floor()) & (seen >= _SMALLEST_CLUSTERS)
    runs = np.flatnonzero(np.diff(np.concatenate([[0], good.astype(int), [0]])))
    if runs.size:
        lengths = runs[1::2] - runs[::2]
        best = int(np.argmax(lengths))
        if lengths[best] >= LEAST_BINS:
            return slice(int(runs[2 * best]), int(runs[2 * best + 1]))
    raise DataError(
        f"spectrum from structure functions: got {int(good.sum())} of {good.size} bins of separation that are beyond "
        f"{FIRST_BIN} start separations, above the noise and seen by {REACHED:.0%} of at least {_SMALLEST_CLUSTERS} "
        f"clusters; {LEAST_BINS} in a row are needed; use longer records or more releases"
    )


def structure_likelihood(statistics: StructureStatistics) -> StructureLikelihood:
    r"""Likelihood of the usable bins, see `usable_bins`.

    .. math:: u_{cb} = \frac{N_{cb} / V_b - M_{cb}}{M_b \sqrt{1 - M_{cb} / M_b}}, \quad
              \frac{1}{n_b} = \frac{\phi}{C_b}, \quad \phi = \frac{\sum_b C_b \sum_c u_{cb}^2}{n_{bin}}

    where C_b is the effective number of clusters of a bin (Kish). The correlation is that of the scores u of
    neighbouring bins, all bins together.

    Raises
    ------
    DataError
        If too few bins can be used.

    References
    ----------
    Bell & McCaffrey (2002) Survey Methodology 28, 169 (the leverage correction).
    """
    part = statistics.select(usable_bins(statistics))
    curve = part.total()
    effective = curve.effective_clusters
    leverage = np.clip(curve.denominator / (curve.weight @ curve.denominator), 0.0, 0.95)
    scores = curve.influence / curve.value / np.sqrt(1.0 - leverage) * np.sqrt(effective)
    main = curve.weight > 0
    square = np.maximum(curve.weight @ scores**2, 0.5 * np.sum(scores[main] ** 2, axis=0) * np.any(~main))
    dispersion = float(square.mean())
    if not dispersion > 1e-12:  # of squared relative scores: round-off
        raise DataError(
            "spectrum from structure functions: got clusters that are all alike; their spread must be > 0; "
            "give releases that are independent"
        )
    products = curve.weight @ (scores[:, 1:] * scores[:, :-1])
    rho = float(np.clip(products.mean() / dispersion, 0.0, 0.9))
    return StructureLikelihood(
        part.separation, curve.value, effective / dispersion, rho, part.noise_floor(), float(effective.mean())
    )
