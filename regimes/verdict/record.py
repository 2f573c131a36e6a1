"""The verdict: what may be said, with every number behind it."""

from dataclasses import dataclass
from html import escape

import numpy as np

from regimes.verdict.digits import km, km_interval


@dataclass(frozen=True, slots=True)
class Interval:
    """Median and central 68 % and 95 % intervals of a posterior."""

    median: float
    lo68: float
    hi68: float
    lo95: float
    hi95: float


@dataclass(frozen=True, slots=True)
class Sequence:
    """A sequence of named regimes and its probability."""

    regimes: tuple[str, ...]
    probability: float


@dataclass(frozen=True, slots=True)
class BySeparation:
    """Regimes and local slope along the separation axis.

    Parameters
    ----------
    edges : (n + 1,) float array [m]
        Ends of the separation bins.
    separation : (n,) float array [m]
        Their middles.
    probability : dict of str to (n,) float array
        Probability of each named regime.
    slope_median, slope_lo95, slope_hi95 : (n,) float arrays
        Spectral slope alpha of the free-exponent kernels; 3 stands for "3 or steeper", 1 for "1 or flatter",
        -1 for a diffusive kernel, which implies no spectrum.
    exponent_median, exponent_lo95, exponent_hi95 : (n,) float arrays
        Kernel exponent a.
    """

    edges: np.ndarray
    separation: np.ndarray
    probability: dict[str, np.ndarray]
    slope_median: np.ndarray
    slope_lo95: np.ndarray
    slope_hi95: np.ndarray
    exponent_median: np.ndarray
    exponent_lo95: np.ndarray
    exponent_hi95: np.ndarray


@dataclass(frozen=True, slots=True)
class TransitionScale:
    """Separation [m] at which one regime gives way to another.

    `probability` is summed over all sequences with this transition.
    """

    lower: str
    upper: str
    scale: Interval
    probability: float


@dataclass(frozen=True, slots=True)
class OuterScale:
    """Longest wavelength [m] of a spectrum that ends: median and 95 % interval.

    NaN where undetermined; with one end NaN the other is a one-sided 95 % bound, and there is no median.
    """

    median: float
    lo95: float
    hi95: float


UNDETERMINED = OuterScale(float("nan"), float("nan"), float("nan"))


@dataclass(frozen=True, slots=True)
class Slope:
    """Spectral slope implied over a range of separations.

    Parameters
    ----------
    low, high : float [m]
        The range.
    curve : str
        "exit_rate", "separation" or "joint".
    value : Interval
        alpha. NaN when `kind` is "none".
    kind : str
        "estimate", "lower_bound" (alpha at least lo95), "upper_bound" (at most hi95) or "none".
    reason : str
        Why it is a bound or nothing; empty for an estimate.
    outer_scale : OuterScale
        Where the spectrum ends, given that it does.
    log_bayes_factor_end : float
        ln Bayes factor of a spectrum that ends over one that does not; NaN where not compared.
    """

    low: float
    high: float
    curve: str
    value: Interval
    kind: str
    reason: str
    outer_scale: OuterScale = UNDETERMINED
    log_bayes_factor_end: float = float("nan")


@dataclass(frozen=True, slots=True)
class Caution:
    """Something the reader must know: a short code and a sentence."""

    code: str
    text: str


@dataclass(frozen=True, slots=True)
class Supported:
    """A regime supported from one separation [m] to another."""

    regime: str
    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Verdict:
    """Decision, words and numbers of one analysis.

    Parameters
    ----------
    decision : str
        "supported", "undecided" or "none_fits".
    reasons : tuple of str
        Why, one sentence each; never empty for "undecided" and "none_fits".
    sentence : str
        The verdict in one or two sentences.
    methods : str
        Methods-and-result text ready to quote in a paper.
    supported : tuple of Supported
        The stretches that meet the rule, whatever the decision.
    sequences : tuple of Sequence
        Most probable first.
    by_separation : BySeparation
    log_bayes_factor : float
        ln, best free-exponent kernel over best named sequence.
    challenger_preferred : bool
    transitions : tuple of TransitionScale
    slopes : tuple of Slope
    resolved : tuple of float [m]
        Lowest and highest resolved separation.
    limited_by : tuple of str
        What limits each end.
    fit_p_value : float
        Posterior predictive p-value of the leading curve.
    healthy : bool
    health_reason : str
    rhat_max, ess_min : float
    cautions : tuple of Caution
    """

    decision: str
    reasons: tuple[str, ...]
    sentence: str
    methods: str
    supported: tuple[Supported, ...]
    sequences: tuple[Sequence, ...]
    by_separation: BySeparation
    log_bayes_factor: float
    challenger_preferred: bool
    transitions: tuple[TransitionScale, ...]
    slopes: tuple[Slope, ...]
    resolved: tuple[float, float]
    limited_by: tuple[str, str]
    fit_p_value: float
    healthy: bool
    health_reason: str
    rhat_max: float
    ess_min: float
    cautions: tuple[Caution, ...]

    def summary(self) -> str:
        """The verdict as a few lines of text: sentence, reasons, transitions, cautions."""
        lines = [self.sentence]
        lines += [f"  because {reason}" for reason in self.reasons if reason not in self.sentence]
        lines += [
            f"  {t.lower} to {t.upper} at {km_interval(t.scale.median, t.scale.lo95, t.scale.hi95)}, "
            f"probability {t.probability:.2f}"
            for t in self.transitions
        ]
        lines.append(f"  resolved: {km(self.resolved[0])} to {km(self.resolved[1])} km")
        lines += [f"  caution: {caution.text}" for caution in self.cautions]
        if not self.healthy:
            lines.append(f"  not converged: {self.health_reason}")
        return "\n".join(lines)

    def _repr_html_(self) -> str:
        first, *rest = (escape(line.strip()) for line in self.summary().splitlines())
        items = "".join(f"<li>{line}</li>" for line in rest)
        return f"<p><strong>{first}</strong></p><ul>{items}</ul>"
