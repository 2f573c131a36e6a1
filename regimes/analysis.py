"""Everything one run has found: the record that the report is made from."""

from dataclasses import dataclass
from html import escape

import numpy as np

from regimes.checks import Check
from regimes.curves import Curve, DispersionStatistics
from regimes.curves.ballistic import BallisticCheck
from regimes.curves.diffusivity import RelativeDiffusivity
from regimes.curves.structure import StructureStatistics
from regimes.curves.triplets import Triplets
from regimes.inference.record import Inference
from regimes.inference.spectrum_fit import SpectrumFit
from regimes.particles import Ratio, SingleParticle
from regimes.verdict.finding import Finding
from regimes.verdict.record import Verdict


@dataclass(frozen=True, slots=True)
class Provenance:
    """Where the numbers come from.

    Parameters
    ----------
    case : str
        Name of the case.
    seed : int
    versions : dict of str to str
        Of this package, Python and the libraries that the numbers depend on.
    source : str
        File name of the fixes (no folders), or "memory".
    sha256 : str
        Of the input.
    n_fixes, n_particles, n_pairs, n_clusters : int
    kind : str
        "launched", "chance" or "both".
    step : float [s]
        Common time axis.
    longest_gap : float [s]
        Longest gap bridged.
    position_error : float [m]
    max_separation : float [m]
        Of pairs at their start.
    median_start, start_p90 : float [m]
        Start separations of the pairs, median and 90th percentile.
    median_duration : float [s]
        Of the pairs.
    cleaning : tuple of (str, int, str)
        What was dropped or changed: reason, count, note.
    case_sha256 : str
        Of the choices of the case; empty for data from memory.
    """

    case: str
    seed: int
    versions: dict[str, str]
    source: str
    sha256: str
    n_fixes: int
    n_particles: int
    n_pairs: int
    n_clusters: int
    kind: str
    step: float
    longest_gap: float
    position_error: float
    max_separation: float
    median_start: float
    start_p90: float
    median_duration: float
    cleaning: tuple[tuple[str, int, str], ...]
    case_sha256: str = ""


@dataclass(frozen=True, slots=True)
class RateTable:
    """The exit-rate curve as it entered the fit, and beyond.

    Parameters
    ----------
    thresholds : (n + 1,) float array [m]
    rate : (n,) float array [1/s]
        Finite-scale Lyapunov exponent, with time at risk and the credit for unfinished passages; NaN where
        nothing was seen.
    low68, high68, low95, high95 : (n,) float arrays [1/s]
        Intervals from the pooled dispersion (gamma-shaped).
    textbook : (n,) float array [1/s]
        ln(rho) over the mean time of completed exits only, the usual estimate, biased where records end.
    exits, passages, n_pair, n_cluster : (n,) int arrays
    zero_fraction : (n,) float array
        Share of exits within one sample.
    resolved : (n,) bool array
        Whether the interval entered the fit.
    """

    thresholds: np.ndarray
    rate: np.ndarray
    low68: np.ndarray
    high68: np.ndarray
    low95: np.ndarray
    high95: np.ndarray
    textbook: np.ndarray
    exits: np.ndarray
    passages: np.ndarray
    n_pair: np.ndarray
    n_cluster: np.ndarray
    zero_fraction: np.ndarray
    resolved: np.ndarray


@dataclass(frozen=True, slots=True)
class Bands:
    """What the fitted kernels predict; rows are the 2.5, 16, 50, 84 and 97.5 % quantiles.

    Parameters
    ----------
    separation : (m,) float array [m]
        Lower thresholds, finely spaced over the resolved range.
    rate_named, rate_free : (5, m) float arrays [1/s]
        Exponent of the named sequences and of the free-exponent kernels.
    """

    separation: np.ndarray
    rate_named: np.ndarray
    rate_free: np.ndarray


@dataclass(frozen=True, slots=True)
class OtherCurves:
    """Curves beside those that were fitted, and whether the fitted kernel answers for them.

    Parameters
    ----------
    checks : tuple of Check
        Every curve held against its posterior predictive distribution.
    checks_missing : str
        Why curves are not checked; empty where they are.
    structure : StructureStatistics
        Relative velocities by separation.
    velocity_ratio : float
        Variance of relative velocities by differences over two steps over that by one; 1/2 where motion is forgotten
        from fix to fix, see `resolves_velocities`.
    spectrum : SpectrumFit or None
        Slope of the wavenumber spectrum from the structure function, by forward model.
    spectrum_missing : str
        Why there is no spectrum; empty where there is.
    diffusivity : RelativeDiffusivity or None
        Since the first passage of `Analysis.passage_separation`; None where too few steps follow it.
    ballistic : BallisticCheck or None
        Short-time law of the relative dispersion; None where too few steps follow the start.
    triplets : Triplets or None
        None where releases hold no triplets or the case does not want them.
    """

    checks: tuple[Check, ...]
    checks_missing: str
    structure: StructureStatistics
    velocity_ratio: float
    spectrum: SpectrumFit | None
    spectrum_missing: str
    diffusivity: RelativeDiffusivity | None
    ballistic: BallisticCheck | None
    triplets: Triplets | None


@dataclass(frozen=True, slots=True)
class Analysis:
    """One run.

    Parameters
    ----------
    provenance : Provenance
    rates : RateTable
    exponent : Curve
        Finite-scale Lyapunov exponent as sums per cluster [1/s].
    dispersion : DispersionStatistics
        Since the start of the pairs.
    passage_dispersion : DispersionStatistics
        Since the first passage of `passage_separation`.
    passage_separation : float [m]
        Lowest resolved separation.
    fits : dict of str to Inference
        "exit_rate", "separation" and "joint" (the last two absent where the data do not allow them).
    bands : Bands
    verdict : Verdict
    single : SingleParticle or None
        What particles say one by one.
    single_missing : str
        Why there is no `single`; empty where there is.
    ratios : tuple of Ratio
        `single` held against the pairs and against a deformation radius, as far as that can be done.
    others : OtherCurves
        Every other curve, and whether the kernel answers for it.
    audit : tuple of Finding
        What could fake the result, one for each threat.
    """

    provenance: Provenance
    rates: RateTable
    exponent: Curve
    dispersion: DispersionStatistics
    passage_dispersion: DispersionStatistics
    passage_separation: float
    fits: dict[str, Inference]
    bands: Bands
    verdict: Verdict
    single: SingleParticle | None
    single_missing: str
    ratios: tuple[Ratio, ...]
    others: OtherCurves
    audit: tuple[Finding, ...]

    @property
    def sentence(self) -> str:
        """The verdict in a few sentences."""
        return self.verdict.sentence

    @property
    def healthy(self) -> bool:
        """Whether the sampling converged."""
        return self.verdict.healthy

    def summary(self) -> str:
        """What was analysed and what came out, as a few lines of text."""
        origin = self.provenance
        head = (
            f"{origin.case}: {origin.n_pairs} pairs of {origin.n_particles} particles in {origin.n_clusters} clusters"
        )
        return f"{head}\n{self.verdict.summary()}"

    def _repr_html_(self) -> str:
        head = escape(self.summary().splitlines()[0])
        return f"<p>{head}</p>{self.verdict._repr_html_()}"


@dataclass(frozen=True, slots=True)
class SinglesOnly:
    """One run on data without a pair: what particles say one by one, and why there is no more.

    Parameters
    ----------
    provenance : Provenance
        Numbers of pairs are zero, separations and durations of pairs NaN.
    single : SingleParticle or None
    single_missing : str
        Why there is no `single`; empty where there is.
    ratios : tuple of Ratio
        `single` held against a deformation radius where one was given.
    sentence : str
        That nothing is decided, and why.
    reasons : tuple of str
        Why there is no pair, and why no `single`.
    """

    provenance: Provenance
    single: SingleParticle | None
    single_missing: str
    ratios: tuple[Ratio, ...]
    sentence: str
    reasons: tuple[str, ...]

    @property
    def healthy(self) -> bool:
        """True: nothing was sampled."""
        return True

    def summary(self) -> str:
        """What was analysed and what came out, as a few lines of text."""
        lines = [f"{self.provenance.case}: {self.provenance.n_particles} particles, no pair", self.sentence]
        return "\n".join(lines if self.single is None else [*lines, self.single.summary()])

    def _repr_html_(self) -> str:
        table = "" if self.single is None else self.single._repr_html_()
        return f"<p>{escape(self.sentence)}</p>{table}"
