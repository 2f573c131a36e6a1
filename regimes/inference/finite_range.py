"""alpha of a spectrum that ends at an outer scale, from the exit rates inside a range."""

from dataclasses import dataclass

import numpy as np
from scipy.special import logsumexp

from regimes.inference.models import SLOPE_PRIOR
from regimes.inference.slope import TOO_FEW, RangeSlope, inside_range, judged, no_slope
from regimes.likelihood.exit_rate import ExitRateLikelihood, gamma_shape, grid_log_evidence
from regimes.theory.finite_range import NODES, SLOPES, local_exponents

NEAREST, FARTHEST = 0.5, 100.0  # outer scale over the upper end of the range, prior bounds (log-uniform)
_SLOPE_CELLS, _SCALE_CELLS = 90, 36
_HOME = 1000.0  # where the lowest threshold is put on the nodes of the kernel [m]
_RATE_WIDTH = 24.0  # of the uniform prior of ln rate, as for the power law


@dataclass(frozen=True, slots=True)
class FiniteRangeSlope:
    """alpha and outer scale over one range.

    Parameters
    ----------
    slope : RangeSlope
    outer_scale : (n,) float array [m]
        Draws of the longest wavelength.
    log_evidence : float
        ln marginal likelihood, with the priors of rate and alpha that the power law has.
    """

    slope: RangeSlope
    outer_scale: np.ndarray
    log_evidence: float


def finite_range_slope(likelihood: ExitRateLikelihood, low: float, high: float, rng, size: int = 4000):
    """alpha of the finite-range kernel fitted to the exit rates inside a range.

    Parameters
    ----------
    likelihood : ExitRateLikelihood
        All resolved intervals; those inside the range are used.
    low, high : float [m]
    rng : numpy Generator
    size : int
        Number of draws.

    Returns
    -------
    FiniteRangeSlope
        Kind "none" when fewer than three intervals lie inside, or when every slope from 1 to 3 is possible.
    """
    part, low, high = inside_range(likelihood, low, high)
    if part is None:
        return FiniteRangeSlope(no_slope(low, high, TOO_FEW), np.empty(0), -np.inf)
    alpha, scales, evidence = finite_range(part, size, rng)
    return FiniteRangeSlope(judged(low, high, alpha), scales, evidence)


def finite_range(part: ExitRateLikelihood, size: int, rng) -> tuple[np.ndarray, np.ndarray, float]:
    """Posterior of the finite-range kernel from the intervals of a range, by quadrature.

    Parameters
    ----------
    part : ExitRateLikelihood
        Intervals of the range, all used.
    size : int
        Number of draws.
    rng : numpy Generator

    Returns
    -------
    alpha : (size,) float array
        Uniform from 0 to 4 beforehand; 1 stands for 1 or flatter.
    outer_scale : (size,) float array [m]
        Log-uniform beforehand, from half to a hundred times the upper end of the range.
    log_evidence : float

    Notes
    -----
    The bend that the end of a spectrum puts into every exponent is part of the kernel, not of alpha.
    """
    # Only ratios matter; so put, the nodes of the kernel fall alike in all units.
    thresholds = part.thresholds * (_HOME / part.thresholds[0])
    low, high = float(thresholds[0]), float(thresholds[-1])
    width = (SLOPES[1] - SLOPES[0]) / _SLOPE_CELLS
    # One atom for the slopes of the prior that the kernel cannot tell apart, as the power law has it.
    axis = np.concatenate(([SLOPES[0]], SLOPES[0] + width * (np.arange(_SLOPE_CELLS) + 0.5)))
    mass = np.append(SLOPES[0] - SLOPE_PRIOR[0], np.full(_SLOPE_CELLS, width)) / (SLOPE_PRIOR[1] - SLOPE_PRIOR[0])
    step = np.log(FARTHEST / NEAREST) / _SCALE_CELLS
    outer = np.log(high * NEAREST) + step * (np.arange(_SCALE_CELLS) + 0.5)
    alpha, log_scale = (grid.ravel() for grid in np.meshgrid(axis, outer, indexing="ij"))
    breaks = np.tile(np.exp(NODES), (alpha.size, 1))
    exponents = np.ascontiguousarray(local_exponents(alpha, log_scale))
    reference = float(np.sqrt(low * high))
    value, _ = grid_log_evidence(thresholds, part.exits, part.risk, part.dispersion, exponents, breaks, reference)
    joint = value + np.log(np.repeat(mass / _SCALE_CELLS, _SCALE_CELLS))
    total = float(logsumexp(joint))
    chosen = rng.choice(alpha.size, size, p=np.exp(joint - total))
    within = np.where(alpha[chosen] > SLOPES[0], width * rng.uniform(-0.5, 0.5, size), 0.0)
    scales = np.exp(log_scale[chosen] + step * rng.uniform(-0.5, 0.5, size)) * (part.thresholds[0] / _HOME)
    return alpha[chosen] + within, scales, total + gamma_shape(part)[1] - np.log(_RATE_WIDTH)
