"""Which wavenumbers a structure function constrains, and what its components say about divergence."""

import numpy as np

from regimes.curves.structure import StructureStatistics
from regimes.inference.spectrum_models import SLOPES, SpectrumModel, SpectrumSpace
from regimes.likelihood.structure import StructureLikelihood

_PRIOR_SD = (SLOPES[1] - SLOPES[0]) / np.sqrt(12.0)  # of the uniform prior of alpha
_SMOOTH = np.log(10.0) / 2.0  # distance in ln k over which local slopes stay alike
_GAIN = np.log(2.0)  # least information gain [nat]: posterior half as wide as the prior


def slope_information(model: SpectrumModel, draws, space: SpectrumSpace, likelihood: StructureLikelihood):
    r"""Information that the data hold about the local slope at each wavenumber.

    .. math:: I(k) = \ln \frac{\mathrm{sd\ before}}{\mathrm{sd\ after}}

    Parameters
    ----------
    model : SpectrumModel
    draws : (n, size) float array
        Posterior draws; their mean spectrum is what slopes are perturbed about.
    space : SpectrumSpace
    likelihood : StructureLikelihood

    Returns
    -------
    log_wavenumber : (n_k,) float array
    gain : (n_k,) float array [nat]

    Notes
    -----
    A power law holds to infinity by assumption, so its posterior cannot tell where data speak. Here the slope may
    be another at every wavenumber: a Gaussian process in ln k with the standard deviation of the prior of
    alpha, smooth over half a decade; data enter to first order (Rodgers 2000, Inverse Methods for
    Atmospheric Sounding, ch. 2). The amplitude is unknown.
    """
    grid = space.transform
    k = grid.log_wavenumber
    energy = np.exp(model.log_energy(draws[:: max(1, len(draws) // 200)], k).mean(axis=0))
    kernel = grid.along + grid.across
    share = kernel * energy / (kernel @ energy)[:, None]  # d ln S_b / d ln E_k
    step = k[1] - k[0]
    # A steeper slope in cell j lowers ln E everywhere beyond it.
    jacobian = -step * (np.cumsum(share[:, ::-1], axis=1)[:, ::-1])
    prior = _PRIOR_SD**2 * np.exp(-0.5 * ((k[:, None] - k[None]) / _SMOOTH) ** 2)
    index = np.arange(likelihood.shape.size)
    root = 1.0 / np.sqrt(likelihood.shape)
    noise = likelihood.correlation ** np.abs(index[:, None] - index[None]) * np.outer(root, root)
    noise = noise + 1e4  # unknown amplitude
    cross = prior @ jacobian.T
    after = np.diag(prior) - np.sum(cross * np.linalg.solve(jacobian @ cross + noise, cross.T).T, axis=1)
    return k, 0.5 * np.log(np.diag(prior) / after)


def constrained_wavenumbers(model: SpectrumModel, draws, space: SpectrumSpace, likelihood: StructureLikelihood):
    """Ends in ln k of the range around the best constrained wavenumber in which the slope is twice as sharp as before.

    Returns
    -------
    low, high : float
        Equal where no wavenumber is constrained.
    """
    k, gain = slope_information(model, draws, space, likelihood)
    best = int(np.argmax(gain))
    if gain[best] < _GAIN:
        return float(k[best]), float(k[best])
    below = np.flatnonzero(gain[:best] < _GAIN)
    above = np.flatnonzero(gain[best:] < _GAIN)
    first = int(below[-1]) + 1 if below.size else 0
    last = best + int(above[0]) - 1 if above.size else k.size - 1
    return float(k[first]), float(k[last])


def divergent_share(statistics: StructureStatistics, model: SpectrumModel, draws, space: SpectrumSpace, rng):
    r"""Divergent share of the energy that the longitudinal part of the total implies.

    .. math:: \gamma = \frac{s - s_{rot}}{1 - 2 s_{rot}}, \quad s = S_{LL} / (S_{LL} + S_{TT})

    with s_rot of the fitted spectrum without divergence; bins count by their clusters.

    Parameters
    ----------
    statistics : StructureStatistics
        Usable bins only.
    model : SpectrumModel
    draws : (n, size) float array
    space : SpectrumSpace
    rng : numpy Generator

    Returns
    -------
    (3,) float array
        2.5, 50 and 97.5 % points; beyond 0 and 1 where the components contradict the spectrum.
    """
    grid = space.transform
    energy = np.exp(model.log_energy(draws, grid.log_wavenumber))
    rotational = grid.longitudinal(energy) / grid.total(energy)
    along, total = statistics.longitudinal(), statistics.total()
    noise = statistics.noise_floor()
    ratio = (along.value - 0.5 * noise) / (total.value - noise)
    influence = (along.influence - ratio * total.influence) / (total.value - noise)
    weight = total.effective_clusters * np.abs(1.0 - 2.0 * rotational) ** 2
    weight = weight / weight.sum(axis=1, keepdims=True)
    gamma = np.sum(weight * (ratio - rotational) / (1.0 - 2.0 * rotational), axis=1)
    slope = np.mean(weight / (1.0 - 2.0 * rotational), axis=0)
    clusters = float(np.max(total.n_cluster))
    variance = float(total.weight @ (influence @ slope) ** 2) * clusters / max(clusters - 1.0, 1.0)
    return np.quantile(gamma + np.sqrt(max(variance, 0.0)) * rng.standard_normal(gamma.size), (0.025, 0.5, 0.975))
