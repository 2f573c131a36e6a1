"""Slope of the wavenumber spectrum from structure functions, by forward model."""

from dataclasses import dataclass

import numpy as np
from scipy.special import logsumexp

from regimes.curves.structure import StructureStatistics
from regimes.inference.evidence import bridge
from regimes.inference.health import Health, worst
from regimes.inference.sampler import sample
from regimes.inference.slope import classify, judged
from regimes.inference.spectrum_models import SpectrumModel, SpectrumPosterior, SpectrumSpace, make_space
from regimes.inference.spectrum_range import constrained_wavenumbers, divergent_share
from regimes.likelihood.structure import StructureLikelihood, structure_likelihood, usable_bins

_WALKERS = 40
_KEPT = 4000
_NEAR = 0.1  # the amplitude starts near the data
_LEAST_FACTOR = 2.0  # of wavelengths that a slope must span
_QUANTILES = (0.025, 0.16, 0.5, 0.84, 0.975)


@dataclass(frozen=True, slots=True)
class SpectrumCandidate:
    """One spectrum fitted.

    Parameters
    ----------
    model : SpectrumModel
    log_evidence, log_evidence_error : float
        By bridge sampling, with its Monte Carlo error.
    draws : (n, size) float array
    health : Health
    """

    model: SpectrumModel
    log_evidence: float
    log_evidence_error: float
    draws: np.ndarray
    health: Health


@dataclass(frozen=True, slots=True)
class SpectrumFit:
    """Slope of the spectrum and what it rests on.

    Parameters
    ----------
    kind : str
        "estimate", "lower_bound", "upper_bound" or "none".
    reason : str
        Why it is not an estimate; empty for an estimate.
    alpha : (n,) float array
        Draws of the innermost slope, all spectra together, saturated at 1 and 3; empty for "none".
    wavelengths : (2,) float array [m]
        Range that the data constrain and over which the innermost slope holds; NaN for "none".
    candidates : tuple of SpectrumCandidate
        With one and with two breaks.
    likelihood : StructureLikelihood
    space : SpectrumSpace
    slope_plus_one : float
        Slope of the structure function by least squares plus one, for comparison only: wrong by 0.3 to 1 where
        the spectrum ends or bends within two decades.
    apparent_divergent : (3,) float array
        2.5, 50 and 97.5 % points of the divergent share of the energy that the components imply. Pairs that
        are still separating make it too large (simulated: 0.33 on average in flows without divergence, where
        it should be 0).
    """

    kind: str
    reason: str
    alpha: np.ndarray
    wavelengths: np.ndarray
    candidates: tuple[SpectrumCandidate, ...]
    likelihood: StructureLikelihood
    space: SpectrumSpace
    slope_plus_one: float
    apparent_divergent: np.ndarray

    @property
    def health(self) -> Health:
        """Worst convergence of the two fits."""
        return worst(c.health for c in self.candidates)

    @property
    def probability_two_breaks(self) -> float:
        """Probability of the spectrum with two breaks, one and two being equally probable beforehand."""
        return float(_shares(self.candidates)[1])

    @property
    def quantiles(self) -> np.ndarray:
        """(5,) alpha at 2.5, 16, 50, 84 and 97.5 %; NaN for "none"."""
        return np.quantile(self.alpha, _QUANTILES) if self.alpha.size else np.full(5, np.nan)

    def predicted(self, size: int = 400, seed: int = 0) -> np.ndarray:
        """(size, n_bin) draws of the expected total [m2/s2], noise included, for a picture."""
        rng = np.random.default_rng(seed)
        rows = []
        for candidate, n in zip(self.candidates, rng.multinomial(size, _shares(self.candidates)), strict=True):
            if n:
                posterior = SpectrumPosterior(candidate.model, self.space, self.likelihood)
                rows.append(posterior.mean(candidate.draws[rng.integers(len(candidate.draws), size=n)]))
        return np.concatenate(rows)

    def summary(self) -> str:
        """One line."""
        if self.kind == "none":
            return f"no spectral slope: {self.reason}"
        low, _, middle, _, high = self.quantiles
        short, long = self.wavelengths / 1e3
        between = judged(*self.wavelengths, self.alpha).draws  # of a bound: draws between the saturated ends
        value = {
            "estimate": f"spectral slope {middle:.2f} (95 %: {low:.2f} to {high:.2f})",
            "lower_bound": f"spectral slope at least {np.quantile(between, 0.05):.2f} (95 %)",
            "upper_bound": f"spectral slope at most {np.quantile(between, 0.95):.2f} (95 %)",
        }[self.kind]
        return f"{value} at wavelengths of {short:.3g} to {long:.3g} km"


def fit_spectrum(statistics: StructureStatistics, seed: int, longest: int = 24000) -> SpectrumFit:
    """Fit broken power-law spectra to the total structure function.

    Parameters
    ----------
    statistics : StructureStatistics
        Bins far below and far above the pairs do no harm; `usable_bins` chooses.
    seed : int
    longest : int
        Most steps of each chain.

    Returns
    -------
    SpectrumFit

    Raises
    ------
    DataError
        If too few bins can be used.
    FitError
        If an evidence does not settle.

    Notes
    -----
    The total is fitted, not the longitudinal part: along moving pairs the total keeps its shape where its parts
    do not, and it does not depend on the divergent share.
    """
    likelihood = structure_likelihood(statistics)
    space = make_space(likelihood)
    noisy = likelihood.floor > 0
    candidates = tuple(_fit(SpectrumModel(n, noisy), space, likelihood, seed + n, longest) for n in (1, 2))
    rng = np.random.default_rng(seed)
    draws = [c.draws[rng.integers(len(c.draws), size=_KEPT)] for c in candidates]
    second = rng.random(_KEPT) < _shares(candidates)[1]
    alpha = np.clip(np.where(second, draws[1][:, 0], draws[0][:, 0]), 1.0, 3.0)
    starts = [c.model.inner_start(d) for c, d in zip(candidates, draws, strict=True)]
    low, high = constrained_wavenumbers(candidates[0].model, draws[0], space, likelihood)
    low = max(low, float(np.median(np.where(second, starts[1], starts[0]))))
    kind, reason = classify(alpha)
    if high - low < np.log(_LEAST_FACTOR):
        kind, reason = "none", "the data constrain the slope over less than a factor 2 of wavelength"
    span = 2.0 * np.pi / np.exp(np.array([high, low])) if kind != "none" else np.full(2, np.nan)
    parts = statistics.select(usable_bins(statistics))
    return SpectrumFit(
        kind,
        reason,
        alpha if kind != "none" else np.empty(0),
        span,
        candidates,
        likelihood,
        space,
        1.0 + float(np.polyfit(np.log(likelihood.separation), np.log(likelihood.value), 1)[0]),
        divergent_share(parts, candidates[0].model, draws[0][:400], space, rng),
    )


def _shares(candidates) -> np.ndarray:
    log_z = np.array([c.log_evidence for c in candidates])
    return np.exp(log_z - logsumexp(log_z))


def _fit(model: SpectrumModel, space, likelihood, seed: int, longest: int) -> SpectrumCandidate:
    posterior = SpectrumPosterior(model, space, likelihood)
    chain = sample(posterior, _starts(posterior, seed), seed, min(2400, longest), longest)
    walkers, steps, size = chain.draws.shape
    thin = max(1, walkers * steps // _KEPT)
    scores = chain.draws[:, ::thin].reshape(-1, size)
    log_z, error = bridge(posterior, scores, chain.log_posterior[:, ::thin].reshape(-1), seed)
    return SpectrumCandidate(model, log_z, error, model.parameters(scores, space), chain.health)


def _starts(posterior: SpectrumPosterior, seed: int, tries: int = 6000) -> np.ndarray:
    """Scores of the best of many draws from the prior."""
    drawn = np.random.default_rng(seed).standard_normal((tries, posterior.model.size))
    drawn[:, posterior.model.names.index("ln_amplitude")] *= _NEAR
    return drawn[np.argsort(-posterior(drawn))[:_WALKERS]]
