"""Least-squares decaying cosine of many correlation functions at once."""

import numpy as np

_ROUNDS = 40
_TOLERANCE = 1e-8  # relative gain of a round below which a fit is finished
_STIFF = 1e6  # damping beyond which no step helps


def decaying_cosine(correlation: np.ndarray, step: float) -> tuple[np.ndarray, np.ndarray]:
    r"""Least-squares gamma and omega of :math:`e^{-\gamma s} \cos \omega s`, by damped Gauss-Newton steps.

    The square of omega is the parameter, and the cosine goes over into the hyperbolic cosine where it is
    negative, so that no fit stalls at zero; a fit that ends there is repeated with omega = 0.

    Returns
    -------
    gamma, omega : (n,) float arrays [1/s, rad/s]
    """
    n_lag = correlation.shape[1]
    span = (n_lag - 1) * step
    s = np.arange(n_lag) / (n_lag - 1.0)  # window as unit of time
    start = _coarse(np.mean(correlation, axis=0), s)
    gamma, square = _descend(correlation, s, np.tile(start, (len(correlation), 1)), free=True).T
    plain = square <= 0.0
    if plain.any():
        begin = np.stack([gamma[plain], np.zeros(plain.sum())], axis=1)
        gamma[plain] = _descend(correlation[plain], s, begin, free=False)[:, 0]
    return gamma / span, np.sqrt(np.maximum(square, 0.0)) / span


def _model(theta: np.ndarray, s: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Decaying cosine and its slopes in gamma and in omega squared, (n, n_lag) each."""
    gamma, square = theta[:, :1], theta[:, 1]
    root = np.sqrt(np.abs(square))[:, None]
    phase = np.minimum(root * s, 700.0)  # the fall is as fast as the growth
    wave, turn = np.empty_like(phase), np.empty_like(phase)
    real = square >= 0.0
    wave[real], turn[real] = np.cos(phase[real]), np.sin(phase[real])
    wave[~real], turn[~real] = np.cosh(phase[~real]), np.sinh(phase[~real])
    fall = np.exp(-gamma * s)
    value = fall * wave
    slope = np.where(root > 1e-6, turn / np.maximum(root, 1e-6), s)
    return value, -s * value, -0.5 * s * fall * slope


def _coarse(target: np.ndarray, s: np.ndarray) -> np.ndarray:
    """Best gamma and omega squared of a coarse table, to start from."""
    gamma, omega = np.meshgrid(np.geomspace(0.5, 100.0, 24), np.append(0.0, np.geomspace(0.5, 0.5 * np.pi / s[1], 80)))
    table = np.stack([gamma.ravel(), omega.ravel() ** 2], axis=1)
    misfit = np.sum((_model(table, s)[0] - target) ** 2, axis=1)
    return table[np.argmin(misfit)]


def _descend(target: np.ndarray, s: np.ndarray, theta: np.ndarray, free: bool) -> np.ndarray:
    """Damped Gauss-Newton of all rows together; a step that does not help is not taken, a finished row rests."""
    theta, damping = theta.copy(), np.full(len(theta), 1e-3)
    misfit = np.sum((target - _model(theta, s)[0]) ** 2, axis=1)
    active = np.arange(len(theta))
    for _ in range(_ROUNDS):
        here = theta[active]
        value, *slopes = _model(here, s)
        move = _step(target[active] - value, slopes, damping[active], free)
        gamma = np.maximum(here[:, 0] + move[:, 0], 0.1 * here[:, 0])
        trial = np.stack([gamma, np.maximum(here[:, 1] + move[:, 1], -0.8 * gamma**2)], axis=1)
        found = np.sum((target[active] - _model(trial, s)[0]) ** 2, axis=1)
        better = found <= misfit[active]
        finished = better & (misfit[active] - found <= _TOLERANCE * misfit[active])
        theta[active[better]] = trial[better]
        misfit[active[better]] = found[better]
        damping[active] *= np.where(better, 0.3, 5.0)
        active = active[~finished & (damping[active] < _STIFF)]
        if active.size == 0:
            break
    return theta


def _step(rest: np.ndarray, slopes: list[np.ndarray], damping: np.ndarray, free: bool) -> np.ndarray:
    """Levenberg-Marquardt steps of all rows; without `free` only gamma moves."""
    g, q = slopes
    push_g, push_q = np.sum(g * rest, axis=1), np.sum(q * rest, axis=1)
    gg, qq = np.sum(g * g, axis=1) * (1.0 + damping), np.sum(q * q, axis=1) * (1.0 + damping)
    if not free:
        return np.stack([push_g / gg, np.zeros_like(gg)], axis=1)
    gq = np.sum(g * q, axis=1)
    size = gg * qq - gq * gq
    return np.stack([(qq * push_g - gq * push_q) / size, (gg * push_q - gq * push_g) / size], axis=1)
