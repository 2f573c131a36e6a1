"""The competitor that no kernel holds: constant diffusivity in a linear shear."""

from dataclasses import dataclass

import numpy as np
from scipy.special import logsumexp

from regimes.inference.models import Space
from regimes.likelihood.exit_rate import ExitRateLikelihood, gamma_shape
from regimes.theory.shear_exit import shear_exit_times

BELOW = 30.0  # lowest scale under the lowest resolved separation: what is smaller looks like Richardson's law all over
_CELLS = 200


@dataclass(frozen=True, slots=True)
class ShearEvidence:
    """How well shear and diffusion explain the exit rates.

    Parameters
    ----------
    log_evidence : float
        ln of the marginal likelihood, to be held against those of the kernels.
    scale : float [m]
        Posterior median of sqrt(K / S), below which diffusion rules and above which shear does.
    rate : float [1/s]
        Posterior mean of the shear S.
    """

    log_evidence: float
    scale: float
    rate: float


def shear_evidence(likelihood: ExitRateLikelihood, space: Space) -> ShearEvidence:
    r"""Evidence of diffusion in a linear shear.

    .. math:: Z = \int\!\!\int L(K, S) \, \frac{d\ln S}{w} \frac{d\ln L}{v}, \quad L = \sqrt{K / S}

    Parameters
    ----------
    likelihood : ExitRateLikelihood
    space : Space
        Of the kernels: w is the width of their ln rate; ln L is uniform from 1/30 of the lowest resolved separation to
        the highest, as transitions of kernels are inside the range.

    Returns
    -------
    ShearEvidence

    Notes
    -----
    ln S is integrated exactly (a gamma function), ln L by midpoints.
    """
    low, high = np.log(space.lowest / BELOW), np.log(space.highest)
    nodes = np.exp(low + (high - low) * (np.arange(_CELLS) + 0.5) / _CELLS)
    times = shear_exit_times(likelihood.thresholds, nodes)
    shape, log_gamma = gamma_shape(likelihood)
    gamma_rate = np.sum(likelihood.risk / times, axis=1) / likelihood.dispersion
    value = -np.log(times) @ likelihood.exits / likelihood.dispersion - shape * np.log(gamma_rate)
    total = float(logsumexp(value))
    mass = np.exp(value - total)
    width = np.log(space.log_rate[1] - space.log_rate[0])
    scale = nodes[min(int(np.searchsorted(np.cumsum(mass), 0.5)), _CELLS - 1)]
    return ShearEvidence(total - np.log(_CELLS) + log_gamma - width, float(scale), float(mass @ (shape / gamma_rate)))
