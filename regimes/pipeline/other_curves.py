"""Every curve beside the fitted ones, and whether one kernel and one spectrum answer for them."""

import numpy as np

from regimes.analysis import OtherCurves
from regimes.checks import Check, predictive_checks, structure_check, usual_cause
from regimes.checks.predictive import grid_for
from regimes.checks.structure import RESOLVED, resolves_velocities
from regimes.curves import default_times
from regimes.curves.ballistic import BallisticCheck, ballistic_check
from regimes.curves.diffusivity import RelativeDiffusivity, relative_diffusivity
from regimes.curves.structure import StructureStatistics, separation_bins, structure_statistics
from regimes.curves.triplets import Triplets, triplets
from regimes.errors import DataError, FitError
from regimes.fitting.options import Options
from regimes.fitting.rates import Rates
from regimes.inference.predict import mixed_kernels
from regimes.inference.record import Inference
from regimes.inference.spectrum_fit import SpectrumFit, fit_spectrum
from regimes.likelihood.structure import structure_likelihood
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.units import DAY, KM
from regimes.verdict.record import Caution

_BELOW = 0.5  # of the lowest resolved separation: where the bins of relative velocities begin
_TIMES = 16  # of the relative diffusivity: growth between times that are closer is mostly scatter


def other_curves(tracks: Tracks, pairs: Pairs, rates: Rates, fits, options: Options, progress) -> OtherCurves:
    """Measure and check every other curve; `fits` is (leading fit, pairs from first passage)."""
    leading, moved = fits
    rng = np.random.default_rng([options.seed, 7])
    kernels = drawn_kernels(leading, options.repetitions, rng)
    checks, missing = _checks(tracks, pairs, rates, (kernels, moved), options, progress)
    low, high = _BELOW * rates.resolved.low, float(rates.everything.thresholds[-1])
    structure = structure_statistics(tracks, pairs, separation_bins(low, high))
    ratio = resolves_velocities(structure)
    spectrum, no_spectrum = _spectrum(structure, ratio, options.seed)
    if ratio >= RESOLVED:
        checks += _structure(structure, kernels, options.seed)
    return OtherCurves(
        checks=checks,
        checks_missing=missing,
        structure=structure,
        velocity_ratio=ratio,
        spectrum=spectrum,
        spectrum_missing=no_spectrum,
        diffusivity=_diffusivity(tracks, moved),
        ballistic=_ballistic(tracks, pairs),
        triplets=_triplets(tracks, pairs, options),
    )


def drawn_kernels(leading: Inference, n: int, rng: np.random.Generator) -> list:
    """Kernels of the leading fit: half from the named sequences, half with free exponents."""
    named = mixed_kernels(leading.named_posteriors(), leading.space, n // 2, rng)
    return named + mixed_kernels(leading.free_posteriors(), leading.space, n - n // 2, rng)


def dissents(others: OtherCurves) -> tuple[Caution, ...]:
    """A caution for every curve that the kernel does not answer for."""
    return tuple(_dissent(check) for check in others.checks if not check.agrees)


def _dissent(check: Check) -> Caution:
    name = check.curve.replace("_", " ")
    scale, unit = (KM, "km") if check.axis_name == "separation" else (DAY, "d")
    where = ""
    if check.where.size:
        where = f", at {check.where[0] / scale:.2g} to {check.where[-1] / scale:.2g} {unit}"
        if check.where.size == 1:
            where = f", at {check.where[0] / scale:.2g} {unit}"
    return Caution(
        "curve_dissents",
        f"The {name} leaves what the fitted kernel predicts (p = {check.p_value:.1g}{where}): one kernel without "
        f"memory does not answer for both curves; {usual_cause(check.curve)}.",
    )


def _checks(tracks, pairs, rates: Rates, drawn, options: Options, progress) -> tuple[tuple[Check, ...], str]:
    kernels, moved = drawn
    first = float(rates.likelihood.risk[0] / rates.likelihood.exits[0])
    shared = rates.spread.total / rates.independent
    try:
        grid = grid_for(tracks, moved, rates.resolved.low, first, rates.likelihood.thresholds)
        return predictive_checks(tracks, pairs, kernels, grid, shared, (options.seed, options.jobs, progress)), ""
    except DataError as error:
        return (), str(error)


def _structure(structure: StructureStatistics, kernels, seed: int) -> tuple[Check, ...]:
    try:
        return (structure_check(structure_likelihood(structure), kernels, seed),)
    except DataError:
        return ()  # the same reason stands where the spectrum is missing


def _spectrum(structure: StructureStatistics, ratio: float, seed: int) -> tuple[SpectrumFit | None, str]:
    if not ratio >= RESOLVED:
        return None, (
            "relative velocities are not resolved by the sampling: differences over two steps have "
            f"{ratio:.2f} of the variance of those over one (1 where velocities outlast the interval, 1/2 where they "
            "are forgotten within it)"
        )
    try:
        return fit_spectrum(structure, seed), ""
    except (DataError, FitError) as error:
        return None, str(error)


def _diffusivity(tracks: Tracks, moved: Pairs) -> RelativeDiffusivity | None:
    try:
        return relative_diffusivity(tracks, moved, default_times(moved, tracks.step, _TIMES))
    except DataError:
        return None


def _ballistic(tracks: Tracks, pairs: Pairs) -> BallisticCheck | None:
    try:
        return ballistic_check(tracks, pairs)
    except DataError:
        return None


def _triplets(tracks: Tracks, pairs: Pairs, options: Options) -> Triplets | None:
    if not options.triplets:
        return None
    try:
        return triplets(tracks, default_times(pairs, tracks.step), seed=options.seed)
    except DataError:
        return None
