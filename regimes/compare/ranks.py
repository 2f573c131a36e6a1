"""Where a data set falls among virtual deployments of another, curve by curve and over all curves."""

from dataclasses import dataclass, fields

import numpy as np

from regimes.arrays import frozen_array
from regimes.compare.measured import UNITS, Grid, Measured, in_units
from regimes.compare.runs import run_means, telling_bins
from regimes.inference.predict import QUANTILES

LEVEL = 0.05  # p-value below which two data sets are called different
_SEEN = 0.8  # share of the deployments that must have a value for a bin to be compared
_POWER = 0.8416  # standard deviations beyond the critical value that are seen in 80 % of cases


@dataclass(frozen=True, slots=True)
class CurveRank:
    """One curve of the smaller set among those of the virtual deployments.

    Parameters
    ----------
    curve : str
    axis_name : str
        ``"separation"`` or ``"time"``.
    axis : (n,) float array [m or s]
    value : (n,) float array
        Of the smaller set.
    band : (5, n) float array
        2.5, 16, 50, 84 and 97.5 % points of what is expected of the smaller set.
    rank : (n,) float array
        Share of the deployments that lie below it.
    away : (n,) float array
        Departure from the mean of the deployments in standard deviations of what is expected.
    telling : (n,) bool array
        Where the curve leaves what 95 % of the deployments keep to as a whole, see `telling_bins`.
    critical : float
        Largest departure, over bins and runs of bins, that 95 % of the deployments stay below.
    p_value : float
        Probability of a departure as large somewhere on the curve.
    unit : str
    """

    curve: str
    axis_name: str
    axis: np.ndarray
    value: np.ndarray
    band: np.ndarray
    rank: np.ndarray
    away: np.ndarray
    telling: np.ndarray
    critical: float
    p_value: float
    unit: str

    def __post_init__(self) -> None:
        for field in fields(self):
            if field.name in ("axis", "value", "band", "rank", "away"):
                object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), np.float64))
        object.__setattr__(self, "telling", frozen_array(self.telling, np.bool_))

    @property
    def differs_at(self) -> np.ndarray:
        """Where on the axis [m or s] the curve differs; empty unless its p-value is under `LEVEL`."""
        return self.axis[self.telling & (self.p_value < LEVEL)]


@dataclass(frozen=True, slots=True)
class Ranks:
    """All curves and what they say together.

    Parameters
    ----------
    curves : tuple of CurveRank
    p_value : float
        Over all curves.
    factor : float
        By which exponents must differ at all separations to be told apart in 80 % of cases; NaN without exponents.
    n : int
        Deployments used.
    """

    curves: tuple[CurveRank, ...]
    p_value: float
    factor: float
    n: int


def rank_curves(seen: Measured, drawn: list[Measured], grid: Grid, scale: float) -> Ranks:
    r"""Rank a data set among deployments, with p-values that allow for all bins and all curves.

    .. math:: T_c = \max_b \frac{|\bar v_b - \bar m_b|}{s_b}, \quad G = \max_c \frac{\ln T_c - \overline{\ln T_c}}
              {\mathrm{sd}(\ln T_c)}

    where b stands for single bins and for runs of 2, 4 and 8 neighbours (means of the departures of their bins in
    standard deviations), with mean m and standard deviation s over the deployments; of the data set itself |v - m| is
    divided by `scale` first. p is the share of T (of G, over all curves) among deployments and data set that is as
    large; since each deployment has all curves, G allows for their correlation.

    Parameters
    ----------
    seen : Measured
        The smaller set.
    drawn : list of Measured
        Virtual deployments of the larger one.
    grid : Grid
    scale : float
        See `Plan.scale`.

    Returns
    -------
    Ranks

    Notes
    -----
    G is the smallest p-value over the curves, with p from a log-normal tail: counted p-values would tie at their
    smallest. How G itself is distributed comes from the deployments, so the shape of the tail does not matter for
    the size. Resampling calibration of the smallest p-value: Westfall & Young (1993) Resampling-Based Multiple
    Testing, Wiley (from memory).
    """
    found = [_moments(name, seen, drawn, grid, scale) for name in seen.curves]
    found.append(_distribution(seen, drawn, grid, scale))
    found = [f for f in found if f is not None]
    curves = tuple(f[0] for f in found)
    tests = np.log(np.maximum(np.array([f[1] for f in found]), 1e-12))  # (curve, data set and then deployments)
    middle, spread = tests[:, 1:].mean(axis=1), tests[:, 1:].std(axis=1, ddof=1)
    together = np.max((tests - middle[:, None]) / spread[:, None], axis=0)
    return Ranks(curves, _share(together), _factor(curves[0], drawn, scale), len(drawn))


def _moments(name: str, seen: Measured, drawn: list[Measured], grid: Grid, scale: float):
    """One curve, and T of the data set and of each deployment."""
    rows = np.array([m.curves[name] for m in drawn])
    value = seen.curves[name]
    good = np.isfinite(value) & (np.mean(np.isfinite(rows), axis=0) >= _SEEN)
    if not np.any(good):
        return None
    value, rows = value[good], rows[:, good]
    varies = np.nanstd(rows, axis=0) > 0
    good[good] = varies
    if not np.any(varies):
        return None
    value, rows = value[varies], rows[:, varies]
    middle, spread = np.nanmean(rows, axis=0), np.nanstd(rows, axis=0, ddof=1)
    away = (value - middle) / spread / scale
    run_rows = run_means((rows - middle) / spread)
    width = np.nanstd(run_rows, axis=0, ddof=1)
    run_away = run_means(away[None])[0] / width
    theirs = np.nanmax(np.abs(run_rows) / width, axis=1)
    tests = np.concatenate([[np.max(np.abs(run_away))], theirs])
    critical = float(np.quantile(theirs, 1.0 - LEVEL))
    band = np.nanquantile(middle + scale * (rows - middle), QUANTILES, axis=0)
    rank = np.sum(rows < value, axis=0) / np.sum(np.isfinite(rows), axis=0)
    axis_name, axis = grid.axis(name)
    curve = CurveRank(
        name, axis_name, axis[good], in_units(name, value), in_units(name, band), rank, away,
        telling_bins(away, run_away, critical), critical, _share(tests), UNITS[name],
    )  # fmt: skip
    return curve, tests


def _distribution(seen: Measured, drawn: list[Measured], grid: Grid, scale: float):
    """Kolmogorov-Smirnov distances from all deployments together, at three times."""
    own, rows = [], []
    for k in range(len(seen.samples)):
        pool = np.sort(np.concatenate([m.samples[k] for m in drawn]))
        own.append(distance(seen.samples[k], pool))
        rows.append([distance(m.samples[k], pool) for m in drawn])
    value, rows = np.array(own), np.array(rows).T
    good = np.isfinite(value) & (np.mean(np.isfinite(rows), axis=0) >= _SEEN)
    rows = rows[:, good]
    if not np.any(good) or not np.all(np.any(np.isfinite(rows), axis=1)):
        return None
    value = value[good]
    typical = np.nanmedian(rows, axis=0)
    theirs = np.nanmax(rows / typical, axis=1)
    away = value / typical / scale
    tests = np.concatenate([[np.max(away)], theirs])
    band = np.nanquantile(scale * rows, QUANTILES, axis=0)
    band[0] = 0.0  # no distance is too small
    name = "separation_distribution"
    axis_name, axis = grid.axis(name)
    rank = np.sum(rows < value, axis=0) / np.sum(np.isfinite(rows), axis=0)
    critical = float(np.quantile(theirs, 1.0 - LEVEL))
    curve = CurveRank(
        name, axis_name, axis[good], value, band, rank, away, away > critical, critical, _share(tests), UNITS[name]
    )
    return curve, tests


def distance(sample: np.ndarray, pool: np.ndarray) -> float:
    """Kolmogorov-Smirnov distance of a sorted sample from a large sorted one; NaN for an empty sample."""
    if sample.size == 0 or pool.size == 0:
        return np.nan
    low = np.searchsorted(pool, sample, side="left") / pool.size
    high = np.searchsorted(pool, sample, side="right") / pool.size
    steps = np.arange(sample.size + 1) / sample.size
    return float(max(np.max(steps[1:] - low), np.max(high - steps[:-1])))


def _share(tests: np.ndarray) -> float:
    """p-value of the first among all."""
    return float(np.mean(tests >= tests[0] * (1.0 - 1e-12 * np.sign(tests[0]))))


def _factor(exponent: CurveRank, drawn: list[Measured], scale: float) -> float:
    """Ratio of exponents, the same at all separations, that is seen in 80 % of cases by the run that tells most."""
    if exponent.curve != "exponent":
        return float("nan")
    rows = np.array([m.curves["exponent"] for m in drawn])
    good = np.mean(np.isfinite(rows), axis=0) >= _SEEN
    spread = np.nanstd(run_means(rows[:, good]), axis=0, ddof=1)
    return float(np.exp((exponent.critical + _POWER) * scale * np.min(spread[spread > 0])))
