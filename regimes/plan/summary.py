"""What the campaigns of one design show together, with the error of having simulated only so many."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import beta

from regimes.plan.design import Point
from regimes.plan.judge import Judged


@dataclass(frozen=True, slots=True)
class Share:
    """A share of campaigns with its 95 % interval (Jeffreys).

    Parameters
    ----------
    value, low, high : float
    """

    value: float
    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Mean:
    """A mean over campaigns; NaN where there is none, `error` NaN with fewer than two.

    Parameters
    ----------
    value : float
    error : float
        Standard error; of the logarithm where the mean is geometric.
    """

    value: float
    error: float


@dataclass(frozen=True, slots=True)
class Summary:
    """One design.

    Parameters
    ----------
    point : Point
    campaigns : int
    fitted, right, told, wrong : Share
        As in `Judged`.
    probability : Mean
        Of the true regime over its range.
    alpha_width : Mean
    found : Share
        Campaigns in which the transition at the end of the range was found.
    transition_factor, low, high : Mean
        Geometric, of those campaigns that have one; `low` and `high` [m] are the ends of the resolved range.
    """

    point: Point
    campaigns: int
    fitted: Share
    right: Share
    told: Share
    wrong: Share
    probability: Mean
    alpha_width: Mean
    found: Share
    transition_factor: Mean
    low: Mean
    high: Mean


def summary_of(point: Point, campaigns: Sequence[Judged]) -> Summary:
    """Shares and means over campaigns of one design, one at least."""
    column = {name: np.array([getattr(c, name) for c in campaigns], float) for name in Judged.__slots__}
    found = np.isfinite(column["transition_factor"])
    return Summary(
        point=point,
        campaigns=len(campaigns),
        **{name: share(column[name] > 0) for name in ("fitted", "right", "told", "wrong")},
        probability=mean(column["probability"]),
        alpha_width=mean(column["alpha_width"]),
        found=share(found),
        **{name: geometric(column[name]) for name in ("transition_factor", "low", "high")},
    )


def share(happened) -> Share:
    r"""Share of campaigns in which something happened, with its Jeffreys interval.

    .. math:: p \sim \mathrm{Beta}(k + 1/2,\ n - k + 1/2)

    with the lower end 0 for k = 0 and the upper end 1 for k = n.

    References
    ----------
    Brown, Cai & DasGupta (2001) Statistical Science 16, 101.
    """
    happened = np.asarray(happened, bool)
    k, n = int(happened.sum()), happened.size
    low, high = beta.ppf((0.025, 0.975), k + 0.5, n - k + 0.5)
    return Share(k / n, 0.0 if k == 0 else float(low), 1.0 if k == n else float(high))


def mean(values) -> Mean:
    """Mean of the finite values and its standard error."""
    values = np.asarray(values, float)
    values = values[np.isfinite(values)]
    if values.size == 0:
        return Mean(float("nan"), float("nan"))
    error = float(np.std(values, ddof=1) / np.sqrt(values.size)) if values.size > 1 else float("nan")
    return Mean(float(np.mean(values)), error)


def geometric(values) -> Mean:
    """Geometric mean of the finite values, and the standard error of its logarithm."""
    logs = mean(np.log(values))
    return Mean(float(np.exp(logs.value)), logs.error)
