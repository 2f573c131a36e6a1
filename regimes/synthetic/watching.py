"""How particles are observed: errors of their positions, and which fixes arrive."""

import numpy as np

from regimes.synthetic.recipe import Records
from regimes.units import DAY, HOUR, KM


def position_errors(
    records: Records, shape: tuple[int, ...], rng: np.random.Generator, tails: np.random.Generator
) -> np.ndarray:
    r"""Errors of both coordinates, standard deviation ``position_error_m`` whatever their tail and memory [m].

    .. math:: e_k = \varphi e_{k-1} + \sqrt{1 - \varphi^2}\, z_k \sqrt{(\nu - 2) / \chi^2_\nu}, \quad
              \varphi = e^{-h / \tau}

    Parameters
    ----------
    records : Records
        ``error_tail`` nu, ``error_memory_h`` tau and the fix interval h.
    shape : (n_release, n_member, n_fix, 2)
    rng, tails : Generator
        Of the normal numbers z, and of the chi-squares: one for a fix, which is bad in both coordinates.

    Returns
    -------
    (n_release, n_member, n_fix, 2) float array [m]

    Notes
    -----
    Without memory each coordinate is Student's t of nu degrees of freedom. With memory the tail is that of what is
    new at each fix; the error itself, a weighted sum of these, is nearer to normal.
    """
    error = rng.standard_normal(shape)
    if records.error_tail is not None:
        freedom = records.error_tail
        error *= np.sqrt((freedom - 2.0) / tails.chisquare(freedom, shape[:3]))[..., None]
    if records.error_memory_h > 0:
        memory = np.exp(-records.fix_interval_h / records.error_memory_h)
        for k in range(1, shape[2]):
            error[:, :, k] = memory * error[:, :, k - 1] + np.sqrt(1.0 - memory**2) * error[:, :, k]
    return records.position_error_m * error


def seen_fixes(records: Records, distance: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Which fixes arrive: before the loss of the particle, outside gaps.

    The rate of loss is ``loss_per_d``, and ``loss_per_d_apart`` more after each fix farther than ``apart_km``.

    Parameters
    ----------
    records : Records
    distance : (n_release, n_member, n_fix) float array [m]
        Of the particle from the centroid of its release.
    rng : Generator

    Returns
    -------
    (n_release, n_member, n_fix) bool array
        The first fix always arrives.
    """
    shape = distance.shape
    step = records.fix_interval_h * HOUR
    index = np.arange(shape[2])
    life = rng.standard_exponential(shape[:2])  # drawn in any case, so that gaps do not depend on losses
    hazard = np.broadcast_to(index * step * records.loss_per_d / DAY, shape)
    if records.loss_per_d_apart is not None:
        before = np.zeros(shape)
        before[..., 1:] = np.cumsum(distance[..., :-1] > records.apart_km * KM, axis=-1)
        hazard = hazard + before * step * records.loss_per_d_apart / DAY
    seen = hazard < life[..., None]
    begins = rng.random(shape) < records.gap_probability
    lasts = np.floor(records.gap_h * HOUR / step * rng.standard_exponential(shape)).astype(np.int64)
    end = np.maximum.accumulate(np.where(begins, index + lasts, -1), axis=2)
    seen &= index > end
    seen[..., 0] = True  # a release is always recorded
    return seen
