"""Mean exit times of a piecewise power-law kernel, in closed form."""

import numpy as np
from numba import njit


@njit(cache=True)
def mean_exit_times(thresholds, exponents, breaks, reference):
    r"""Mean time from each threshold to the next, for K(r0) / r0^2 = 1 at the reference separation.

    .. math:: \mu_n = \int_{\delta_n}^{\delta_{n+1}} \frac{r}{2 K(r)} dr

    Parameters
    ----------
    thresholds : (n + 1,) float array [m]
        Increasing separations delta.
    exponents : (n_piece,) float array
        Kernel exponents.
    breaks : (n_piece - 1,) float array [m]
        Transition separations, increasing.
    reference : float [m]
        Where K / r^2 is one.

    Returns
    -------
    (n,) float array
        Mean exit times in units of r0^2 / K(r0); divide by the rate for seconds.

    Notes
    -----
    Two dimensions, no flux at the origin, exact for any K (backward equation; Boffetta & Sokolov 2002
    Phys. Rev. Lett. 88, 094501, for the power law). In x = r / reference a piece K = c x^a gives
    [x^(2 - a) / (2 (2 - a) c)] between its ends, or ln x / (2 c) for a = 2.
    """
    n_piece = exponents.size
    log_c = np.zeros(n_piece)
    home = 0
    for i in range(n_piece - 1):
        log_b = np.log(breaks[i] / reference)
        log_c[i + 1] = log_c[i] + (exponents[i] - exponents[i + 1]) * log_b
        if breaks[i] <= reference:
            home = i + 1
    shift = log_c[home]
    n = thresholds.size - 1
    out = np.zeros(n)
    piece = 0
    for j in range(n):
        low = np.log(thresholds[j] / reference)
        top = np.log(thresholds[j + 1] / reference)
        while low < top:
            while piece < n_piece - 1 and np.log(breaks[piece] / reference) <= low:
                piece += 1
            high = top
            if piece < n_piece - 1:
                high = min(top, np.log(breaks[piece] / reference))
            q = 2.0 - exponents[piece]
            width = high - low
            grown = width if abs(q * width) < 1e-14 else np.expm1(q * width) / q
            out[j] += 0.5 * np.exp(q * low - (log_c[piece] - shift)) * grown
            low = high
    return out
