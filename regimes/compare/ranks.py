"""Where a data set falls among virtual deployments of another, curve by curve and over all curves."""

from dataclasses import dataclass, fields

import numpy as np

from regimes.arrays import frozen_array
from regimes.compare.departure import Departure, departure, distances, spreads
from regimes.compare.drawing import Pools
from regimes.compare.grid import UNITS, in_units
from regimes.compare.runs import run_means, telling_bins
from regimes.compare.sums import Table
from regimes.inference.predict import QUANTILES

LEVEL = 0.05  # p-value below which two data sets are called different
AGAINST = 150  # deployments that each one is held against
_SEEN = 0.8  # share of the deployments that must have a value for a bin to be compared
_POWER = 0.8416  # standard deviations beyond the critical value that are seen in 80 % of cases
_KS = "separation_distribution"


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
        Share of what is expected that lies below it.
    away : (n,) float array
        Departure from the mean of the deployments in their standard deviations.
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
        Deployments ranked.
    """

    curves: tuple[CurveRank, ...]
    p_value: float
    factor: float
    n: int


def rank_curves(table: Table, pools: Pools, own: np.ndarray, n: int, seed: int, tell=None) -> Ranks:
    r"""Rank a data set among deployments, with p-values that allow for all bins and all curves.

    .. math:: T_c = \max_b \frac{|\bar v_b - \bar m_b|}{s_b}, \quad G = \max_c \frac{\ln T_c - \overline{\ln T_c}}
              {\mathrm{sd}(\ln T_c)}

    where b stands for single bins and for runs of 2, 4 and 8 neighbours, and m and s are mean and standard deviation
    of `AGAINST` deployments. Each of n further deployments is held in the same way against others that share no
    launch with it, as the data set shares none with any. p is the share of T (of G, over all curves) among these
    and the data set that is as large.

    Parameters
    ----------
    table : Table
        Sums of the launches of both sets.
    pools : Pools
    own : (n_small,) int array
        Rows of the smaller set.
    n : int
        Deployments to rank it among.
    seed : int
    tell : callable, optional
        Called with (stage, done, total).

    Returns
    -------
    Ranks

    Notes
    -----
    That a deployment and those it is held against have nothing in common makes room for all that the larger set does
    not hold: the error of its mean, and rare launches that move a kurtosis (with a factor for the finite size of the
    larger set in its place, 29 of 200 data sets of one flow were called different at 5 %). G is the smallest p-value
    over the curves, with p from a log-normal tail: counted p-values would tie at their smallest. Since G is ranked
    itself, the shape of that tail does not matter for the size. Resampling calibration of the smallest p-value:
    Westfall & Young (1993) Resampling-Based Multiple Testing, Wiley (from memory).
    """
    rng = np.random.default_rng(seed)
    seen = table.curves(own[None])
    rows = table.curves(pools.draw(AGAINST, rng)[0])
    bins = {name: _bins(name, seen[name][0], rows[name]) for name in seen}
    bins = {name: kept for name, kept in bins.items() if np.any(kept)}
    first = {name: _hold(name, seen[name][0], rows[name], kept) for name, kept in bins.items()}
    others: dict[str, list[Departure]] = {name: [] for name in bins}
    for k in range(n):
        row, launch = pools.draw(1, rng)
        one, rest = table.curves(row), table.curves(pools.draw(AGAINST, rng, launch[0])[0])
        for name, kept in bins.items():
            others[name].append(_hold(name, one[name][0], rest[name], kept))
        if tell is not None:
            tell("virtual deployments", k + 1, n)
    curves = tuple(_ranked(name, table, first[name], others[name], bins[name]) for name in bins)
    tests = np.array([[d.test for d in (first[name], *others[name])] for name in bins])
    logs = np.log(np.maximum(tests, 1e-9))
    middle, spread = logs[:, 1:].mean(axis=1, keepdims=True), logs[:, 1:].std(axis=1, ddof=1, keepdims=True)
    together = np.max((logs - middle) / spread, axis=0)
    factor = float("nan")
    if curves[0].curve == "exponent":
        kept = bins["exponent"]
        factor = _factor(curves[0].critical, rows["exponent"][:, kept], others["exponent"])
    return Ranks(curves, _share(together), factor, n)


def _hold(name: str, value: np.ndarray, rows: np.ndarray, kept: np.ndarray) -> Departure:
    if name == _KS:
        return distances(value[kept], rows[:, kept])
    return departure(value[kept], rows[:, kept])


def _bins(name: str, value: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Which bins the data set and most deployments have, and vary in."""
    if name == _KS:
        return (value.sum(axis=1) > 0) & (np.mean(rows.sum(axis=2) > 0, axis=0) >= _SEEN)
    return np.isfinite(value) & (np.mean(np.isfinite(rows), axis=0) >= _SEEN) & (spreads(rows) > 0)


def _ranked(name: str, table: Table, own: Departure, others: list[Departure], kept: np.ndarray) -> CurveRank:
    tests = np.array([d.test for d in (own, *others)])
    critical = float(np.quantile(tests[1:], 1.0 - LEVEL))
    apart = np.array([d.apart for d in others])
    band = own.middle + np.nanquantile(apart, QUANTILES, axis=0)
    if name == _KS:
        band[0] = 0.0  # no distance is too small
        telling = own.away > critical
    else:
        telling = telling_bins(own.away, own.run_away, critical)
    axis_name, axis = table.grid.axis(name)
    return CurveRank(
        curve=name,
        axis_name=axis_name,
        axis=axis[kept],
        value=in_units(name, own.middle + own.apart),
        band=in_units(name, band),
        rank=np.sum(apart < own.apart, axis=0) / np.maximum(np.sum(np.isfinite(apart), axis=0), 1),
        away=own.away,
        telling=telling,
        critical=critical,
        p_value=_share(tests),
        unit=UNITS[name],
    )


def _share(tests: np.ndarray) -> float:
    """p-value of the first among all."""
    return float(np.mean(tests >= tests[0] * (1.0 - 1e-12 * np.sign(tests[0]))))


def _factor(critical: float, rows: np.ndarray, others: list[Departure]) -> float:
    """Ratio of exponents, the same at all separations, that is seen in 80 % of cases by the run that tells most."""
    from_runs = spreads(run_means(rows))
    noise = spreads(run_means(np.array([d.apart for d in others])))
    return float(np.exp(np.min(critical * from_runs + _POWER * noise)))
