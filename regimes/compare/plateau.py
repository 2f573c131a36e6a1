"""Where a model stops resolving: its exponent is constant below, while the observed one still changes."""

import numpy as np

from regimes.fitting import QuickFit
from regimes.inference.average import local_exponents, mixed_slopes

CONSTANT = 1.9  # kernel exponent from which on the exponent counts as constant: 2 is exactly so
NO_PLATEAU = (
    "the exponent of the model is not constant below a separation at which the observed one changes, or the data do "
    "not tell"
)
_CERTAIN = 0.95
_DRAWS = 4000


def plateau_end(observed: QuickFit, model: QuickFit, thresholds: np.ndarray, rng) -> tuple[np.ndarray, bool]:
    """Median and 95 % ends (3,) of the separation [m] where the constant exponent of the model ends.

    Parameters
    ----------
    observed, model : QuickFit
    thresholds : (n + 1,) float array [m]
        Resolved by both.
    rng : numpy Generator

    Returns
    -------
    (3,) float array, bool
        NaN and True where there is no such plateau: with probability 0.95 that of the model reaches a threshold
        further than that of the observed case.

    Notes
    -----
    From draws of all kernels with free exponents, weighed by evidence: the first threshold above which the kernel
    exponent is below `CONSTANT`, counted from the lowest that both resolve.
    """
    mine, theirs = (_ends(fit, thresholds, rng) for fit in (observed, model))
    if np.mean(theirs > mine * (1.0 + 1e-9)) < _CERTAIN:
        return np.full(3, np.nan), True
    return np.quantile(theirs, (0.5, 0.025, 0.975)), False


def _ends(fit: QuickFit, thresholds: np.ndarray, rng) -> np.ndarray:
    """Draws (n,) of the threshold at which the constant exponent ends [m]; the lowest where there is none."""
    middle = np.sqrt(thresholds[1:] * thresholds[:-1])
    exponent = local_exponents(mixed_slopes(fit.free, middle, _DRAWS, rng))
    constant = np.cumprod(exponent >= CONSTANT, axis=1).sum(axis=1)
    return rng.permutation(thresholds[constant])
