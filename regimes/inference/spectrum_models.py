"""Broken power-law spectra as models of a total structure function: parameters, prior, posterior."""

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from regimes.likelihood.structure import StructureLikelihood
from regimes.theory.structure_functions import Transform, log_broken_power_law, make_transform

SLOPES = (0.5, 4.5)  # prior of alpha, uniform, beyond both ends of what can be told
ROLL_OFF = (0.0, 4.0)  # prior of the exponent of E ~ k^p below the lowest break
_LARGEST_ROLL = 0.03  # k0 times the largest separation, from here
_SMALLEST_ROLL = 0.5  # to here times k at the smallest
_CUT = (2.0 * np.pi, 100.0 * np.pi)  # k_c times the smallest separation
_PER_DECADE = 40  # nodes of the grid; error below 4e-4, far below that of any data
APART = np.log(2.0)  # least distance of breaks in ln k
_AMPLITUDE_SD = 1.0  # of ln of the total at the middle bin over its value
_NOISE_SD = 0.35  # of ln(floor / stated floor): a factor 2 at two standard deviations


@dataclass(frozen=True, slots=True)
class SpectrumSpace:
    """Grid and prior bounds, common to all spectra of one data set.

    Parameters
    ----------
    transform : Transform
        At the separations of the bins.
    low, high : float [m]
        Smallest and largest separation in use.
    """

    transform: Transform
    low: float
    high: float

    @property
    def roll(self) -> tuple[float, float]:
        """Bounds of ln k0."""
        return float(np.log(_LARGEST_ROLL / self.high)), float(np.log(_SMALLEST_ROLL / self.low))

    @property
    def cut(self) -> tuple[float, float]:
        """Bounds of ln k_c, where the spectrum ends."""
        return float(np.log(_CUT[0] / self.low)), float(np.log(_CUT[1] / self.low))

    @property
    def innermost(self) -> float:
        """Largest ln k1, the second break."""
        return float(-np.log(self.low))


def make_space(likelihood: StructureLikelihood) -> SpectrumSpace:
    """Grid and bounds for the separations of a likelihood."""
    r = likelihood.separation
    low, high = float(r[0]), float(r[-1])
    return SpectrumSpace(make_transform(r, 0.3 * _LARGEST_ROLL / high, 2.0 * _CUT[1] / low, _PER_DECADE), low, high)


@dataclass(frozen=True, slots=True)
class SpectrumModel:
    r"""Spectrum with one or two breaks.

    .. math:: E(k) \propto k^{p} \;(k < k_0), \quad k^{-\alpha_{out}} \;(k_0 < k < k_1), \quad
              k^{-\alpha} \;(k > k_1), \quad \text{times } e^{-(k / k_c)^2}

    Parameters
    ----------
    breaks : int
        1 (no k_1 and alpha_out) or 2.
    noisy : bool
        Whether a noise floor is a parameter.

    Notes
    -----
    Parameters in order: alpha, ln k_0, p, ln k_c, with two breaks alpha_out and ln k_1, then ln of the total at
    the middle bin over its value, and ln(floor / stated) if noisy. Priors are uniform, those of the last two
    normal. E rises or is flat below k_0; k_c lies beyond 2 pi over the smallest separation, so that
    it only trims what the smallest separations see. Sampling takes place in standard normal scores z of the
    priors, where what the data leave open has no corners.
    """

    breaks: int
    noisy: bool

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the parameters."""
        inner = ("alpha_out", "ln_k1") if self.breaks == 2 else ()
        return ("alpha", "ln_k0", "p", "ln_kc", *inner, "ln_amplitude", *(("ln_floor",) if self.noisy else ()))

    @property
    def size(self) -> int:
        """Number of parameters."""
        return len(self.names)

    def parameters(self, score, space: SpectrumSpace) -> np.ndarray:
        """Parameters (m, size) of standard normal scores (m, size)."""
        z = np.atleast_2d(np.asarray(score, float))
        share = ndtr(z)
        theta = np.empty_like(z)
        for i, (low, high) in enumerate((SLOPES, space.roll, ROLL_OFF, space.cut)):
            theta[:, i] = low + (high - low) * share[:, i]
        at = 4
        if self.breaks == 2:
            theta[:, 4] = SLOPES[0] + (SLOPES[1] - SLOPES[0]) * share[:, 4]
            low = theta[:, 1] + APART
            theta[:, 5] = low + (space.innermost - low) * share[:, 5]
            at = 6
        theta[:, at] = _AMPLITUDE_SD * z[:, at]
        if self.noisy:
            theta[:, at + 1] = _NOISE_SD * z[:, at + 1]
        return theta

    def log_energy(self, theta, log_wavenumber) -> np.ndarray:
        """ln E (m, n_k), up to a constant, of parameters (m, size)."""
        k = np.asarray(log_wavenumber, float)
        if self.breaks == 1:
            breaks, slopes = theta[:, 1:2], np.stack([-theta[:, 2], theta[:, 0]], axis=1)
        else:
            breaks = theta[:, (1, 5)]
            slopes = np.stack([-theta[:, 2], theta[:, 4], theta[:, 0]], axis=1)
        end = np.exp(np.minimum(2.0 * (k[None] - theta[:, 3:4]), 6.0))
        return log_broken_power_law(k, breaks, slopes) - end

    def inner_start(self, theta) -> np.ndarray:
        """ln k (m,) at which the innermost power law begins."""
        return theta[:, 5 if self.breaks == 2 else 1]


@dataclass(frozen=True, slots=True)
class SpectrumPosterior:
    """ln posterior of the scores of a spectrum's parameters: normalised prior times likelihood.

    Parameters
    ----------
    model : SpectrumModel
    space : SpectrumSpace
    likelihood : StructureLikelihood
    """

    model: SpectrumModel
    space: SpectrumSpace
    likelihood: StructureLikelihood

    def __call__(self, score) -> np.ndarray:
        z = np.atleast_2d(np.asarray(score, float))
        prior = -0.5 * np.sum(z**2, axis=1) - 0.5 * z.shape[1] * np.log(2.0 * np.pi)
        return prior + self.likelihood(self.mean(self.model.parameters(z, self.space)))

    def mean(self, theta) -> np.ndarray:
        """Expected total (m, n_bin) [m2/s2], noise included, of parameters (m, size)."""
        grid = self.space.transform
        shape = grid.total(np.exp(self.model.log_energy(theta, grid.log_wavenumber)))
        middle = shape.shape[1] // 2
        amplitude = theta[:, self.model.names.index("ln_amplitude")]
        floor = self.likelihood.floor * np.exp(theta[:, -1]) if self.model.noisy else np.zeros(len(theta))
        level = (self.likelihood.value[middle] - self.likelihood.floor) * np.exp(amplitude) / shape[:, middle]
        return shape * level[:, None] + floor[:, None]
