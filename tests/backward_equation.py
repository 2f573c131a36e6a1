"""Backward equation of a pair that diffuses in a linear shear, solved by harmonics: the table of `shear_exit`."""

import numpy as np

_HARMONICS = 12.0  # highest one for a layer of unit angle; layers are as narrow as R^(-2/3)


def mean_exit_time(radius: float) -> float:
    r"""Mean time at which a pair that started from a point leaves a disc, K = S = 1.

    .. math:: \nabla^2 T + y\, \partial_x T = -1, \quad T(|r| = R) = 0, \quad m(R) = T(0)

    Parameters
    ----------
    radius : float
        R, in units of sqrt(K / S).

    Returns
    -------
    float
        In units of 1 / S.

    Notes
    -----
    Backward equation of dX = Y dt + sqrt(2) dW, dY = sqrt(2) dW'. Even harmonics of the angle, each an even Chebyshev
    series of the radius; harmonics are coupled to the next ones by the shear, so that the equations are solved
    block by block from the highest to the lowest. Harmonic -k is the conjugate of k.
    """
    n = 40 + int(np.ceil(radius / 2.0))
    s, first, second = _even_chebyshev(n)
    r = radius * s
    first, second = first / radius, second / radius**2
    count = int(np.ceil(_HARMONICS * (1.0 + radius ** (2.0 / 3.0)) / 2.0)) + 4
    eye = np.eye(n)

    def own(k):
        return second + first / r[:, None] - (k * k / r**2 + 0.5j * k)[:, None] * eye

    def other(k):  # what harmonic k gives to k + 2 (sign +1) or k - 2 (sign -1)
        turn = 0.25j * k * eye
        return -0.25j * r[:, None] * first + turn, 0.25j * r[:, None] * first + turn

    ratio = np.zeros((n, n), complex)  # T_(k + 2) = ratio T_k
    for j in range(count, 0, -1):
        k = 2 * j
        block = own(k) + other(k + 2)[1] @ ratio
        block[0], driven = eye[0], -other(k - 2)[0]
        driven[0] = 0.0
        ratio = np.linalg.solve(block, driven)
    upper = other(2)[1] @ ratio
    block = own(0).real + 2.0 * upper.real
    block[0] = eye[0]
    right = -np.ones(n)
    right[0] = 0.0
    return float(_at_centre(n) @ np.linalg.solve(block, right))


def _even_chebyshev(n: int):
    """Points s (n,) from 1 inward, and matrices of the first two derivatives of even functions there."""
    angle = np.pi * np.arange(n) / (2 * n - 1)
    full = np.cos(np.pi * np.arange(2 * n) / (2 * n - 1))
    c = np.concatenate(([2.0], np.ones(2 * n - 2), [2.0])) * (-1.0) ** np.arange(2 * n)
    apart = full[:, None] - full[None, :] + np.eye(2 * n)
    whole = np.outer(c, 1.0 / c) / apart
    whole -= np.diag(whole.sum(axis=1))
    first, second = (d[:n, :n] + d[:n, : n - 1 : -1] for d in (whole, whole @ whole))
    return np.cos(angle), first, second


def _at_centre(n: int) -> np.ndarray:
    """(n,) weights that interpolate an even function to s = 0 from its values at the points."""
    s = np.cos(np.pi * np.arange(n) / (2 * n - 1))
    weight = (-1.0) ** np.arange(n) * np.where(np.arange(n) == 0, 0.5, 1.0)  # barycentric, both signs of s together
    terms = weight / s
    return terms / terms.sum()
