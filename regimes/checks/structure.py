"""The structure function held against the separation kernel: one flow must answer for both."""

import numpy as np

from regimes.checks.record import Check
from regimes.curves.structure import StructureStatistics
from regimes.inference.predict import QUANTILES
from regimes.likelihood.structure import StructureLikelihood
from regimes.theory.kernel import Kernel

LEVEL, LEVEL_SPREAD = 2.45, 0.35  # ln G: mean and standard deviation over simulated flows, see `structure_check`
TILT_SPREAD = 0.1  # of its change per unit of ln r
RESOLVED = 0.7  # least ratio of `resolves_velocities` at which velocities mean something
_REPLICATES = 1999


def resolves_velocities(statistics: StructureStatistics) -> float:
    """Variance of relative velocities by differences over two steps over that by one, position errors removed.

    Near 1 where velocities outlast the sampling interval, 1/2 where motion is forgotten from one fix to the next;
    NaN where position errors exceed it.
    """
    floor = (statistics.noise_floor("long"), statistics.noise_floor("short"))
    count = statistics.n_sample
    long, short = (
        float(np.sum((np.nan_to_num(curve.value) - noise) * count))
        for curve, noise in zip((statistics.two_steps(), statistics.one_step()), floor, strict=True)
    )
    return long / short if short > 0 and long > 0 else float("nan")


def structure_check(likelihood: StructureLikelihood, kernels: list[Kernel], seed: int) -> Check:
    r"""Hold the total structure function against what the kernel says of relative velocities.

    .. math:: S(r) = G\, [\lambda(r)\, r]^2, \quad \lambda = 2 K / r^2, \qquad
              T = \max_b |\ln V_b - m_b| / s_b

    with mean m and standard deviation s of replicates ln V_j, each of a kernel, a level G and sampling errors of its
    own; p is the share of replicates with a T as large.

    Parameters
    ----------
    likelihood : StructureLikelihood
        Of the usable bins.
    kernels : list of Kernel
        Drawn from the posterior of the fit.
    seed : int

    Returns
    -------
    Check

    Notes
    -----
    Pairs separate at a rate of the order of the velocity difference over the separation (theory of local and nonlocal
    stirring alike: Bennett 1984, J. Atmos. Sci. 41, 1881). How long they keep that velocity sets G. In random-Fourier
    flows of slopes 5/3, 2, 5/2, a broken and a steep spectrum, whose waves live half, once or twice their turnover
    time, ln G was 2.0 to 3.3 and changed by 0.1 per unit of ln r or less, but for the extremes; it is drawn from a
    normal distribution about 2.45 with standard deviation 0.35, its tilt with 0.1. Where the kernel makes [lambda r]^2
    fall (diffusive ranges) S stays as it is: velocities no longer differ more.
    """
    rng = np.random.default_rng(seed)
    r = likelihood.separation
    chosen = [kernels[i] for i in rng.integers(len(kernels), size=_REPLICATES)]
    speed = np.maximum.accumulate(np.array([2.0 * k(r) / r for k in chosen]), axis=1)
    weight = likelihood.shape / likelihood.shape.sum()
    from_middle = np.log(r) - np.log(r) @ weight
    level, tilt = rng.standard_normal((2, _REPLICATES, 1))
    gain = LEVEL + LEVEL_SPREAD * level + TILT_SPREAD * tilt * from_middle
    drawn = np.log(speed**2 * np.exp(gain) + likelihood.floor) + _scatter(likelihood, rng)
    middle, spread = drawn.mean(axis=0), drawn.std(axis=0)
    away = np.max(np.abs(drawn - middle) / spread, axis=1)
    own = np.max(np.abs(np.log(likelihood.value) - middle) / spread)
    p = float((1 + np.sum(away >= own)) / (1 + _REPLICATES))
    band = np.exp(np.quantile(drawn, QUANTILES, axis=0))
    return Check("structure_function", "separation", r, likelihood.value, band, p, "m2/s2")


def _scatter(likelihood: StructureLikelihood, rng: np.random.Generator) -> np.ndarray:
    """Sampling errors of ln V (n, n_bin): spread and correlation as estimated between clusters, t-shaped."""
    z = rng.standard_normal((_REPLICATES, likelihood.shape.size))
    rho = likelihood.correlation
    for i in range(1, z.shape[1]):
        z[:, i] = rho * z[:, i - 1] + np.sqrt(1.0 - rho**2) * z[:, i]
    freedom = max(likelihood.clusters - 1.0, 2.0)
    return z / np.sqrt(likelihood.shape) / np.sqrt(rng.chisquare(freedom, (_REPLICATES, 1)) / freedom)
