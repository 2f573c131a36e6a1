"""Mean exit times of pairs that diffuse in a linear shear: the same growth as Richardson's from another cause."""

import numpy as np
from scipy.interpolate import CubicSpline

# ln m at radii evenly spaced in ln R from 0.1 to 60, in units of sqrt(K / S) and 1 / S; by harmonics of the backward
# equation (tests/backward_equation.py), converged to 0.1 % at the upper end and far better elsewhere.
_ENDS = np.log((0.1, 60.0))
_LOG_TIMES = np.array(
    [
        -5.991465,
        -5.517618,
        -5.043772,
        -4.569928,
        -4.096086,
        -3.622251,
        -3.148436,
        -2.674670,
        -2.201032,
        -1.727722,
        -1.255256,
        -0.784939,
        -0.319999,
        0.132095,
        0.556553,
        0.932746,
        1.248119,
        1.510571,
        1.737847,
        1.943478,
        2.135211,
        2.317559,
        2.493364,
        2.664508,
        2.832281,
        2.997587,
        3.161036,
        3.322914,
    ]
)
_LOG_TIME = CubicSpline(np.linspace(*_ENDS, _LOG_TIMES.size), _LOG_TIMES)


def shear_exit_times(thresholds, scale) -> np.ndarray:
    r"""Mean time from each threshold to the next in a linear shear with constant diffusivity, times the shear S.

    .. math:: \mu_n S = m(\delta_{n+1} / L) - m(\delta_n / L), \quad L = \sqrt{K / S}

    Parameters
    ----------
    thresholds : (n + 1,) float array [m]
        Increasing separations delta.
    scale : (m,) float array [m]
        L, from the pair's diffusivity K (twice that of a particle) and the shear S.

    Returns
    -------
    (m, n) float array
        Divide by S for seconds.

    Notes
    -----
    m(x) is the mean time, in units of 1 / S, at which a pair that started from a point leaves a disc of radius x L: T
    at the centre in :math:`\nabla^2 T + y\, \partial_x T = -1`, T = 0 on the rim. First passages follow one another, so
    times between them are differences. m -> x^2 / 4 for x << 1 (diffusive) and m -> c x^(2/3) + d for x >> 1, which is
    Richardson's law: rates alone cannot tell the two apart there. Differences are good to 0.3 %.
    """
    x = np.log(np.asarray(thresholds, float)[None, :] / np.asarray(scale, float)[:, None])
    low, high = _ENDS
    log_m = _LOG_TIME(np.clip(x, low, high)) + 2.0 * np.minimum(x - low, 0.0)
    far = 1.5 * float(_LOG_TIME(high, 1)) * np.expm1(2.0 / 3.0 * np.maximum(x - high, 0.0))
    return np.diff(np.exp(log_m) * (1.0 + far), axis=1)
