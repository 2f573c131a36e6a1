"""The single-particle side in one call: scales, diffusivity and dispersion of particles taken one by one."""

import numpy as np

from regimes.errors import CaseError, DataError
from regimes.particles.correlation import lag_curves
from regimes.particles.dispersion import absolute_dispersion
from regimes.particles.estimate import Estimate, estimate, resamples
from regimes.particles.mean_flow import MeanFlow
from regimes.particles.record import SingleParticle
from regimes.particles.scales import METHODS, Levelling, Scale, correlation_curves, integral_times, levelling
from regimes.particles.sums import lagged_sums
from regimes.particles.tensor import DiffusivityTensor, diffusivity_tensor
from regimes.particles.velocities import Velocities, eddy_velocities
from regimes.tracks import Tracks
from regimes.units import DAY, HOUR

N_DRAW = 600
# The window reaches four times the lag beyond which the correlation stays within +-0.2, a negative lobe included,
MEMORIES, SMALL = 4.0, 0.2
# and at most a third of the length of the typical track; shorter tracks have no mean of their own.
SHARE = 1.0 / 3.0
FEWEST_LAGS = 5
FEW_UNITS = 6
SMOOTHING = 0.05  # share of the velocity variance that differencing may remove without a word


def single_particle(
    tracks: Tracks,
    mean: str = "record",
    period: float | None = None,
    flow: MeanFlow | None = None,
    window: float | None = None,
    unit: str = "release",
    seed: int = 0,
) -> SingleParticle:
    """Integral scales, diffusivity tensor and absolute dispersion of particles taken one by one.

    Parameters
    ----------
    tracks : Tracks
        One track is enough for the numbers, two independent units for their intervals.
    mean : {"record", "none", "lowpass", "grid"}
        What is removed from the velocities, see `eddy_velocities`.
    period : float [s]
        Cut-off period, for "lowpass" only.
    flow : MeanFlow
        For "grid" only.
    window : float, optional [s]
        Longest lag. Default: four times the lag beyond which the autocorrelation stays within +-0.2, and at most
        a third of the typical track (half of all velocities lie in longer ones).
    unit : {"release", "particle"}
        What is independent and resampled.
    seed : int
        Of the bootstrap.

    Returns
    -------
    SingleParticle

    Raises
    ------
    CaseError
        If a choice is unknown, goes without what it needs, or the window is too short or too long.
    DataError
        If no velocities are left, tracks are too short, or all of the variance is position error.
    """
    velocities = eddy_velocities(tracks, mean, period, flow, unit)
    longest, chosen = _longest_lag(velocities)
    n_lag = _window(velocities, chosen, longest, window) + 1
    sums = lagged_sums(velocities, chosen, n_lag)
    n_unit = len(sums.count)
    curves = lag_curves(sums, resamples(n_unit, N_DRAW, seed), velocities.noise, mean == "record")
    variance = 0.5 * (curves.covariance[:, 0, 0] + curves.covariance[:, 0, 1])
    if not variance[0] > 0.0:
        raise DataError(
            f"single particles: position errors alone give a velocity variance of {velocities.noise:.3g} m2/s2 per "
            "component, more than was found; choose a coarser observations.step_h or correct the position error"
        )
    both = curves.covariance[..., 0] + curves.covariance[..., 1]
    level = levelling(both / both[:, :1], velocities.step, n_unit)
    scales = tuple(_scale(method, curves.covariance, variance, velocities.step, n_unit) for method in METHODS)
    tensor = diffusivity_tensor(curves, n_unit)
    return SingleParticle(
        dispersion=absolute_dispersion(velocities),
        correlation=correlation_curves(curves.lag, curves.covariance),
        velocity=estimate(np.sqrt(np.maximum(variance, 0.0)), n_unit, positive=True),
        scales=scales,
        diffusivity=tensor,
        levelling=level,
        window=float(curves.lag[-1]),
        mean=mean,
        n_particle=len(chosen),
        n_unit=n_unit,
        n_short=tracks.n_track - len(chosen),
        n_lost=velocities.lost,
        cautions=_cautions(velocities, n_unit, level, tensor) + _step_cautions(velocities, scales, variance[0]),
    )


def _longest_lag(velocities: Velocities) -> tuple[int, np.ndarray]:
    """A third of the typical track in steps, and the tracks that are at least as long."""
    size = velocities.n_sample
    order = np.sort(size)
    typical = order[np.searchsorted(np.cumsum(order), 0.5 * order.sum())]
    longest = int(SHARE * typical)
    if longest < FEWEST_LAGS:
        raise DataError(
            f"single particles: typical tracks have {typical} velocities in a row; at least "
            f"{int(np.ceil(FEWEST_LAGS / SHARE))} are needed; choose a finer observations.step_h or longer records"
        )
    return longest, np.flatnonzero(size >= longest)


def _window(velocities: Velocities, chosen: np.ndarray, longest: int, window: float | None) -> int:
    """Longest lag in steps."""
    if window is not None:
        steps = int(np.rint(window / velocities.step)) if np.isfinite(window) else -1
        if not FEWEST_LAGS <= steps <= longest:
            raise CaseError(
                f"window: got {window / DAY:.4g} days; must be {FEWEST_LAGS * velocities.step / DAY:.4g} to "
                f"{longest * velocities.step / DAY:.4g} days, a third of the typical track; choose one within"
            )
        return steps
    sums = lagged_sums(velocities, chosen, longest + 1)
    whole = np.ones((1, len(sums.count)))
    covariance = lag_curves(sums, whole, velocities.noise, velocities.mean == "record").covariance[0]
    both = covariance[:, 0] + covariance[:, 1]
    memory = int(np.flatnonzero(np.abs(both) >= SMALL * both[0])[-1]) + 1
    return int(min(longest, max(np.ceil(MEMORIES * memory), FEWEST_LAGS)))


def _scale(method: str, covariance: np.ndarray, variance: np.ndarray, step: float, n_unit: int) -> Scale:
    parts = (covariance[..., 0] + covariance[..., 1], covariance[..., 0], covariance[..., 1])
    both, east, north = (integral_times(_normalised(part), step, method) for part in parts)
    times: list[Estimate] = [estimate(values, n_unit, positive=True) for values in (both, east, north)]
    return Scale(method, *times, length=estimate(np.sqrt(np.maximum(variance, 0.0)) * both, n_unit, positive=True))


def _normalised(covariance: np.ndarray) -> np.ndarray:
    """Over the value at lag zero; NaN where that is not positive."""
    first = covariance[:, :1]
    return covariance / np.where(first > 0.0, first, np.nan)


def _cautions(velocities: Velocities, n_unit: int, level: Levelling, tensor: DiffusivityTensor) -> tuple[str, ...]:
    found = []
    if not level.converges:
        found.append(f"the integral time does not converge: {level.reason}")
    if velocities.mean == "lowpass":
        found.append("a low-pass mean removes the slow part of the diffusivity too: integral times are too short")
    if n_unit < 2:
        found.append("one independent unit says nothing of the scatter between units: no intervals")
    elif n_unit < FEW_UNITS:
        found.append(f"{n_unit} independent units only: intervals are rough")
    if tensor.minor.value < 0.0:
        found.append("the minor axis of the diffusivity tensor is negative: no diffusivity along it")
    return tuple(found)


def _step_cautions(velocities: Velocities, scales: tuple[Scale, ...], variance: float) -> tuple[str, ...]:
    """What the step does: too long, it averages velocities; too short, position errors drown them."""
    found = []
    if velocities.noise > variance:
        found.append("position errors make more velocity variance than the motion: take a coarser step")
    time, step = scales[METHODS.index("decaying_cosine")].time.value, velocities.step
    removed = 2.0 * step / (3.0 * time) if time > 0.0 else 0.0
    if 0.0 < time < 2.0 * step:
        found.append(
            f"velocities are forgotten within two steps of {step / HOUR:.3g} h: rms velocity, integral time and length "
            "are those of the sampling, only the diffusivity is the particles' own"
        )
    elif removed > SMOOTHING:
        found.append(
            f"velocities are differences over two steps of {step / HOUR:.3g} h: their variance may come out "
            f"{removed:.0%} too low and the integral time as much too long; the diffusivity is not affected"
        )
    return tuple(found)
