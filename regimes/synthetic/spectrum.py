"""Wavenumber spectra, and random modes that have them."""

import math
from dataclasses import dataclass

import numpy as np

from regimes.arrays import frozen_array
from regimes.errors import DataError

# Columns of the table of modes.
KX, KY, FREQUENCY, AX, AY, BX, BY = range(7)


@dataclass(frozen=True, slots=True)
class Spectrum:
    r"""Isotropic wavenumber spectrum, a power law in pieces, with :math:`\int E(k) dk = U^2 / 2`.

    Parameters
    ----------
    slopes : (n_piece,) float array
        alpha in E ~ k^-alpha, from short to long waves.
    breaks : (n_piece - 1,) float array [m]
        Wavelengths at which the slope changes, rising.
    shortest, longest : float [m]
        Wavelengths between which there is energy.
    speed : float [m/s]
        U, root of the mean squared speed (both components together).
    divergent_fraction : float
        Share of the energy in divergent motion, 0 to 1.
    persistence : float
        Frequency of a mode in units of the turnover rate sqrt(k^3 E).
    modes_per_octave : int
        Modes in each doubling of the wavelength.

    Raises
    ------
    DataError
        If shapes disagree, wavelengths are not in order or a value is out of range.
    """

    slopes: np.ndarray
    breaks: np.ndarray
    shortest: float
    longest: float
    speed: float
    divergent_fraction: float = 0.0
    persistence: float = 1.0
    modes_per_octave: int = 6

    def __post_init__(self) -> None:
        for name in ("slopes", "breaks"):
            object.__setattr__(self, name, frozen_array(np.atleast_1d(getattr(self, name)), np.float64))
        edges = self.wavelengths
        ordered = self.shortest > 0 and np.all(np.diff(edges) > 0)
        if self.slopes.size != self.breaks.size + 1 or not ordered or not np.all(np.isfinite(self.slopes)):
            raise DataError(
                f"spectrum: got slopes {self.slopes.tolist()} and wavelengths {edges.tolist()} m; need one slope "
                "for each interval of positive, rising wavelengths; correct shortest, breaks or longest"
            )
        within = 0 <= self.divergent_fraction <= 1 and self.persistence >= 0 and self.modes_per_octave >= 1
        if not (self.speed > 0 and within):
            raise DataError(
                f"spectrum: got speed {self.speed:g} m/s, divergent fraction {self.divergent_fraction:g}, "
                f"persistence {self.persistence:g}, {self.modes_per_octave} modes per octave; need speed > 0, "
                "fraction 0 to 1, persistence >= 0 and at least one mode; correct the numbers"
            )

    @property
    def wavelengths(self) -> np.ndarray:
        """(n_piece + 1,) ends of the pieces, shortest to longest [m]."""
        return np.array([self.shortest, *self.breaks, self.longest])

    def energy(self, wavenumber: np.ndarray) -> np.ndarray:
        """E(k) [m3/s2] at wavenumbers [rad/m]; zero outside the range of wavelengths."""
        k = np.asarray(wavenumber, dtype=float)
        edges, slopes = 2.0 * np.pi / self.wavelengths[::-1], self.slopes[::-1]
        # Value at the start of each piece for E = 1 at the longest wave, and the integral over each piece.
        start = np.concatenate([[1.0], np.cumprod((edges[1:-1] / edges[:-2]) ** -slopes[:-1])])
        total = np.sum(start * _power_integral(edges[:-1], edges[1:], slopes))
        piece = np.clip(np.searchsorted(edges, k, side="right") - 1, 0, slopes.size - 1)
        inside = (k >= edges[0]) & (k <= edges[-1])
        shape = start[piece] * (np.where(inside, k, edges[0]) / edges[piece]) ** -slopes[piece]
        return np.where(inside, 0.5 * self.speed**2 / total * shape, 0.0)

    def turnover_rate(self, wavenumber: np.ndarray) -> np.ndarray:
        """Eddy turnover rate sqrt(k^3 E(k)) [1/s]."""
        return np.sqrt(np.asarray(wavenumber, dtype=float) ** 3 * self.energy(wavenumber))


def _power_integral(low: np.ndarray, high: np.ndarray, slope: np.ndarray) -> np.ndarray:
    """Integral of (k / low)^-slope from low to high."""
    p = 1.0 - slope
    flat = np.abs(p) < 1e-9
    safe = np.where(flat, 1.0, p)
    return low * np.where(flat, np.log(high / low), ((high / low) ** safe - 1.0) / safe)


def fourier_modes(spectrum: Spectrum, rng: np.random.Generator) -> np.ndarray:
    """Draw the modes of one flow.

    Each mode has a wavenumber at random (evenly in its logarithm) within its share of an octave, a random
    direction, and normal amplitudes of cosine and sine, so that flows are Gaussian and have the spectrum on
    average exactly.

    Returns
    -------
    (n_mode, 7) float array
        kx, ky [rad/m], frequency [rad/s], and the (x, y) amplitudes of cosine and sine [m/s].
    """
    octaves = math.log2(spectrum.longest / spectrum.shortest)
    n = max(1, round(octaves * spectrum.modes_per_octave))
    edges = np.linspace(math.log(2 * math.pi / spectrum.longest), math.log(2 * math.pi / spectrum.shortest), n + 1)
    k = np.exp(edges[:-1] + np.diff(edges) * rng.random(n))
    energy = spectrum.energy(k) * k * np.diff(edges)
    direction = 2.0 * np.pi * rng.random(n)
    along = np.stack([np.cos(direction), np.sin(direction)], axis=1)
    across = np.stack([-along[:, 1], along[:, 0]], axis=1)
    share = np.array([1.0 - spectrum.divergent_fraction, spectrum.divergent_fraction])
    size = np.sqrt(2.0 * energy[:, None] * share)
    amplitude = [
        size[:, :1] * rng.standard_normal((n, 1)) * across + size[:, 1:] * rng.standard_normal((n, 1)) * along
        for _ in range(2)
    ]
    frequency = spectrum.persistence * spectrum.turnover_rate(k)
    return np.ascontiguousarray(np.concatenate([k[:, None] * along, frequency[:, None], *amplitude], axis=1))
