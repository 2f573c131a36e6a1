"""Lagged products of velocities and displacements, as sums per independent unit."""

from dataclasses import dataclass

import numpy as np
from scipy.fft import irfft, next_fast_len, rfft

from regimes.particles.velocities import Velocities

# Components are held in the order uu, vv, (uv + vu) / 2.
EE, NN, EN = range(3)


@dataclass(frozen=True, slots=True)
class LaggedSums:
    r"""What every scale and diffusivity is made of; a resample of units is a weighted sum of the rows.

    Parameters
    ----------
    lag : (n_lag,) float array [s]
        From zero, in steps.
    covariance : (n_unit, n_lag, 3) float array [m2/s2]
        Sums of u_i(t) u_j(t - lag), symmetric part: uu, vv, uv.
    count : (n_unit, n_lag) float array
        Products in these sums.
    transport : (n_unit, n_lag, 3) float array [m2/s]
        Sums of u_i(t) [x_j(t) - x_j(t - lag)], symmetric part.
    transport_count : (n_unit, n_lag) float array
        Products in these.
    shortness : (n_unit, n_lag, 2) float array [1/s and 1/s2]
        Sums over tracks of count / L and count / L^2, L being the length of the track that gave the mean.
    transport_shortness : (n_unit, n_lag, 2) float array
        The same for the transport.
    """

    lag: np.ndarray
    covariance: np.ndarray
    count: np.ndarray
    transport: np.ndarray
    transport_count: np.ndarray
    shortness: np.ndarray
    transport_shortness: np.ndarray


def lagged_sums(velocities: Velocities, chosen: np.ndarray, n_lag: int) -> LaggedSums:
    """Sums over the chosen tracks, for lags of 0 to n_lag - 1 steps.

    Parameters
    ----------
    velocities : Velocities
    chosen : (n_chosen,) int array
        Tracks that take part.
    n_lag : int

    Returns
    -------
    LaggedSums
        Rows are the units that the chosen tracks belong to, in their order.
    """
    units, row = np.unique(velocities.unit[chosen], return_inverse=True)
    shape = (units.size, n_lag)
    covariance, transport = np.zeros((*shape, 3)), np.zeros((*shape, 3))
    count, transport_count = np.zeros(shape), np.zeros(shape)
    shortness, transport_shortness = np.zeros((*shape, 2)), np.zeros((*shape, 2))
    for track, r in zip(chosen, row, strict=True):
        span = slice(velocities.offset[track], velocities.offset[track + 1])
        value, path, piece = velocities.value[span], velocities.path[span], velocities.piece[span]
        products, number = _covariances(value, n_lag)
        moved, moved_number = _transports(value, path, piece, n_lag)
        length = max(number[0], 1.0) * velocities.step
        covariance[r] += products
        count[r] += number
        transport[r] += moved
        transport_count[r] += moved_number
        shortness[r] += number[:, None] / length ** np.array([1.0, 2.0])
        transport_shortness[r] += moved_number[:, None] / length ** np.array([1.0, 2.0])
    lag = np.arange(n_lag) * velocities.step
    return LaggedSums(lag, covariance, count, transport, transport_count, shortness, transport_shortness)


def _covariances(value: np.ndarray, n_lag: int) -> tuple[np.ndarray, np.ndarray]:
    """(n_lag, 3) sums of products of a track's velocities and (n_lag,) their numbers."""
    known = np.isfinite(value[:, 0])
    u, v = np.where(known[:, None], value, 0.0).T
    m, fu, fv = (_spectrum(a, n_lag) for a in (known.astype(float), u, v))
    uv = 0.5 * (_lagged(fu, fv, n_lag) + _lagged(fv, fu, n_lag))
    sums = np.stack([_lagged(fu, fu, n_lag), _lagged(fv, fv, n_lag), uv], axis=1)
    number = np.rint(_lagged(m, m, n_lag))
    return np.where(number[:, None] > 0, sums, 0.0), number


def _transports(value, path, piece, n_lag: int) -> tuple[np.ndarray, np.ndarray]:
    """(n_lag, 3) sums of velocity times the displacement that led to it, and (n_lag,) their numbers."""
    total, number = np.zeros((n_lag, 3)), np.zeros(n_lag)
    for one in np.unique(piece[(piece >= 0) & np.isfinite(value[:, 0])]):
        inside = np.flatnonzero(piece == one)
        span = slice(inside[0], inside[-1] + 1)
        here = piece[span] == one
        moving = here & np.isfinite(value[span, 0])
        w = np.where(moving[:, None], value[span], 0.0)
        # A constant in the path cancels; without it, less is lost to rounding.
        x = np.where(here[:, None], path[span] - path[span][here].mean(axis=0), 0.0)
        fw, fx = [_spectrum(c, n_lag) for c in w.T], [_spectrum(c, n_lag) for c in x.T]
        there = _spectrum(here.astype(float), n_lag)

        def part(i, j, w=w, x=x, fw=fw, fx=fx, there=there):
            return _lagged(_spectrum(w[:, i] * x[:, j], n_lag), there, n_lag) - _lagged(fw[i], fx[j], n_lag)

        found = np.rint(_lagged(_spectrum(moving.astype(float), n_lag), there, n_lag))
        sums = np.stack([part(0, 0), part(1, 1), 0.5 * (part(0, 1) + part(1, 0))], axis=1)
        total += np.where(found[:, None] > 0, sums, 0.0)
        number += found
    return total, number


def _spectrum(values: np.ndarray, n_lag: int) -> tuple[np.ndarray, int]:
    """Fourier transform, padded so that lags below n_lag do not wrap round."""
    size = next_fast_len(values.size + n_lag, real=True)
    return rfft(values, size), size


def _lagged(later: tuple[np.ndarray, int], earlier: tuple[np.ndarray, int], n_lag: int) -> np.ndarray:
    """(n_lag,) sums over t of later(t) earlier(t - lag)."""
    return irfft(later[0] * np.conj(earlier[0]), later[1])[:n_lag]
