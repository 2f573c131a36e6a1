"""Every other curve of the invented analysis: measured on its pairs, held against predictions made by hand."""

import numpy as np

from regimes.analysis import OtherCurves
from regimes.checks import Check
from regimes.curves import dispersion_statistics
from regimes.curves.ballistic import ballistic_check
from regimes.curves.diffusivity import relative_diffusivity
from regimes.curves.structure import separation_bins, structure_statistics
from regimes.curves.triplets import triplets
from regimes.inference.health import Health
from regimes.inference.spectrum_fit import SpectrumCandidate, SpectrumFit
from regimes.inference.spectrum_models import SpectrumModel, make_space
from regimes.likelihood.structure import structure_likelihood
from regimes.synthetic.particles import Motion, drifting_particles

KM, DAY = 1e3, 86400.0
FACTORS = np.exp([-0.6, -0.3, 0.0, 0.3, 0.6])[:, None]  # of the predicted bands


def demo_others(tracks, pairs, passed) -> OtherCurves:
    """What belongs to `demo_analysis`: one of eight curves dissents, slopes of the spectrum scatter about 2.2."""
    structure = structure_statistics(tracks, pairs, separation_bins(0.6 * KM, 300 * KM))
    return OtherCurves(
        checks=_checks(tracks, passed, structure),
        checks_missing="",
        structure=structure,
        velocity_ratio=0.97,
        spectrum=demo_spectrum(structure),
        spectrum_missing="",
        diffusivity=relative_diffusivity(tracks, passed, np.geomspace(2, 60, 8) * DAY),
        ballistic=ballistic_check(tracks, pairs),
        triplets=_triplets(),
    )


def demo_spectrum(structure) -> SpectrumFit:
    """Draws about a slope of 2.2 in place of those that a sampler would find."""
    rng = np.random.default_rng(5)
    likelihood = structure_likelihood(structure)
    space = make_space(likelihood)
    model = SpectrumModel(1, likelihood.floor > 0)
    middle = np.zeros(model.size)
    middle[:4] = 2.2, np.log(2 * np.pi / (200 * KM)), 0.5, np.log(2 * np.pi / (0.5 * KM))
    draws = middle + 0.2 * rng.standard_normal((400, model.size))
    candidates = tuple(SpectrumCandidate(m, -5.0, 0.02, draws, Health(1.003, 900.0, 70.0)) for m in (model,) * 2)
    alpha = np.clip(2.2 + 0.2 * rng.standard_normal(4000), 1.0, 3.0)
    span = np.array([8.0, 120.0]) * KM
    shares = np.array([0.1, 0.3, 0.5])
    return SpectrumFit("estimate", "", alpha, span, candidates, likelihood, space, 2.6, shares)


def _checks(tracks, passed, structure) -> tuple[Check, ...]:
    times = np.unique(np.rint(np.geomspace(12, 600, 8))) * tracks.step
    since = dispersion_statistics(tracks, passed, times)
    middle = 0.5 * (times[1:] + times[:-1])
    growth = relative_diffusivity(tracks, passed, times).from_growth.value
    square = since.relative_dispersion().value
    distance = np.geomspace(2, 100, 6) * KM
    velocity = structure_likelihood(structure)
    made = (
        ("relative_dispersion", "time", times, square, 0.41, "m2"),
        ("mean_log_separation", "time", times, since.mean_log_separation().value, 0.62, "ln m"),
        ("kurtosis", "time", times, since.kurtosis().value, 0.004, "1"),
        ("relative_diffusivity", "time", middle, growth, 0.3, "m2/s"),
        ("residence_time", "separation", distance, 3.0 * DAY * (distance / KM) ** 0.5, 0.75, "s"),
        ("triplet_area", "time", times, np.log(0.4 * square), 0.2, "ln m2"),
        ("separation_distribution", "time", times[[1, 4, 7]], np.array([0.08, 0.07, 0.1]), 0.09, "1"),
        ("structure_function", "separation", velocity.separation, velocity.value, 0.55, "m2/s2"),
    )
    return tuple(_check(*row) for row in made)


def _check(curve, axis_name, axis, value, p_value, unit) -> Check:
    """A curve in the middle of its band, or above it in its second half where it dissents."""
    centre = value / np.where(np.arange(value.size) < value.size // 2, 1.0, 2.0 if p_value < 0.01 else 1.0)
    band = centre + np.log(FACTORS) if unit.startswith("ln") else centre * FACTORS
    if curve == "separation_distribution":
        band[0] = 0.0
    return Check(curve, axis_name, axis, value, band, p_value, unit)


def _triplets():
    """Of particles that forget in two days, in releases of three."""
    tracks, _ = drifting_particles(Motion(0.04, 1.0 / (2.0 * DAY), shared=0.5), (12, 3), 21600.0, 241, 4)
    return triplets(tracks, np.geomspace(0.5, 50, 9) * DAY)
