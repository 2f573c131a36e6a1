"""Tracks: every particle on one regular time axis, never bridged across a long gap."""

from dataclasses import dataclass

import numpy as np

from regimes.arrays import frozen_array
from regimes.errors import CaseError, DataError
from regimes.fixes.record import Fixes
from regimes.geodesy import to_cartesian
from regimes.units import DAY, HOUR

GAP_STEPS = 3.0
FINEST_STEP = 0.25  # of the median fix interval
ROUND_INTERVALS = 60.0 * np.array([1, 2, 5, 10, 15, 20, 30, 60, 120, 180, 240, 360, 720, 1440])  # s
ROUNDING = 0.02  # largest relative change that turns a median interval into a round one


@dataclass(frozen=True, slots=True)
class Tracks:
    """Regularly sampled particle positions, ragged, in Cartesian coordinates.

    Parameters
    ----------
    position : (n_sample, 3) float array [m]
        Earth-centred Cartesian coordinates on the WGS84 ellipsoid, or (x, y, 0) when `planar`.
        NaN rows mark steps inside a gap that was too long to bridge.
    offset : (n_track + 1,) int array
        Track i owns rows ``offset[i]:offset[i + 1]``.
    start_step : (n_track,) int array
        Step of each track's first row on the common time axis.
    step : float [s]
        Interval of the common time axis.
    first_time : float [s]
        Time of step 0, seconds since 1970-01-01 UTC.
    planar : bool
        True when positions are x and y on a plane.
    labels : (n_track,) tuple of str
        Particle names.
    release : (n_track,) int array
        Release group of each track, -1 where unknown.
    position_error : float [m]
        Standard error of one coordinate of one fix.
    """

    position: np.ndarray
    offset: np.ndarray
    start_step: np.ndarray
    step: float
    first_time: float
    planar: bool
    labels: tuple[str, ...]
    release: np.ndarray
    position_error: float

    def __post_init__(self):
        object.__setattr__(self, "position", frozen_array(self.position, np.float64))
        for name in ("offset", "start_step", "release"):
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.int64))
        n = len(self.start_step)
        if self.position.ndim != 2 or self.position.shape[1] != 3:
            raise DataError(f"tracks: position has shape {self.position.shape}; must be (n_sample, 3)")
        if not len(self.offset) == n + 1 == len(self.release) + 1 == len(self.labels) + 1:
            raise DataError(
                f"tracks: {n} start steps, {len(self.offset)} offsets, {len(self.release)} releases and "
                f"{len(self.labels)} labels; must be n, n + 1, n and n"
            )
        if self.offset[0] != 0 or self.offset[-1] != len(self.position) or np.any(np.diff(self.offset) < 1):
            raise DataError("tracks: offset must rise from 0 to the number of samples")
        if not self.step > 0:
            raise DataError(f"tracks: step is {self.step} s; must be > 0")

    @property
    def n_track(self) -> int:
        """Number of tracks."""
        return len(self.start_step)

    @property
    def n_step(self) -> np.ndarray:
        """(n_track,) int array: steps of each track, gaps included."""
        return np.diff(self.offset)

    def missing_from(self, fixes: Fixes) -> tuple[str, ...]:
        """Labels of the particles in `fixes` that gave no track (fewer than two valid steps)."""
        kept = set(self.labels)
        return tuple(label for label in fixes.labels if label not in kept)

    def summary(self) -> str:
        """One line: how many tracks, on which axis, how long, how much of it in gaps."""
        gap = float(np.mean(np.isnan(self.position[:, 0])))
        days = (self.n_step - 1) * self.step / DAY
        tracks = "1 track" if self.n_track == 1 else f"{self.n_track} tracks"
        long = f"{days.min():.3g} to {days.max():.3g} days long (median {np.median(days):.3g})"
        if days.min() == days.max():
            long = f"{days.min():.3g} days long"
        return f"{tracks} every {self.step / HOUR:.4g} h, {long}, {gap:.1%} of the steps in gaps"


def make_tracks(fixes: Fixes, step: float | None = None, longest_gap: float | None = None) -> Tracks:
    """Put every particle on one regular time axis by linear interpolation between its fixes.

    Parameters
    ----------
    fixes : Fixes
    step : float, optional [s]
        Interval of the common axis; its steps fall on whole multiples of `step` since 1970-01-01 UTC.
        Default: the median fix interval, as a round number of minutes or hours where one is within 2 %,
        else to the second.
    longest_gap : float, optional [s]
        Two fixes further apart in time are never bridged. Default: three steps, or three median fix
        intervals if that is longer.

    Returns
    -------
    Tracks
        A particle with fewer than two valid steps gives no track, see `Tracks.missing_from`.

    Raises
    ------
    CaseError
        If `step` or `longest_gap` is not positive.
    DataError
        If the step is below a quarter of the median fix interval, so that most positions would be invented
        by interpolation; if no particle has two valid steps; or if gaps would fill the memory.

    Notes
    -----
    Geographic positions are interpolated along the chord between two fixes. It runs below the surface by
    d^2 / 8 R, two metres for fixes d = 10 km apart, which shrinks a distance by 3e-7: nothing.
    """
    interval = _median_interval(fixes)
    step = _round_interval(interval) if step is None else _positive("step", step)
    if step < FINEST_STEP * interval:
        raise DataError(
            f"step is {step:g} s but the median fix interval is {interval:g} s: three of four positions "
            f"would be invented by interpolation; choose a step of at least {FINEST_STEP * interval:g} s "
            f"(observations.step_h = {FINEST_STEP * interval / HOUR:.4g})"
        )
    longest_gap = default_gap(fixes, step) if longest_gap is None else _positive("longest_gap", longest_gap)
    axis_start = float(np.floor(fixes.time.min() / step))
    clock = _Clock(step, axis_start, longest_gap)
    return _assemble(fixes, clock, *_sample(fixes, clock))


@dataclass(frozen=True, slots=True)
class _Clock:
    """The common axis: step [s], its first step counted from 1970, and the longest gap to bridge [s]."""

    step: float
    axis_start: float
    longest_gap: float

    @property
    def slack(self) -> float:
        """Round-off of a time, in steps: a microsecond, and never less than 1e-9 steps."""
        return max(1e-9, 1e-6 / self.step)


def _sample(fixes: Fixes, clock: _Clock) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Interpolated positions of every particle at every step it spans, with particle code and step."""
    u = fixes.time / clock.step - clock.axis_start
    ceiling = np.ceil(u - clock.slack).astype(np.int64)
    last = np.append(fixes.particle[1:] != fixes.particle[:-1], True)
    count = np.append(ceiling[1:], 0) - ceiling
    # A particle's last fix has no interval after it and gives a sample only where it falls on a step.
    count[last] = np.abs(u[last] - ceiling[last]) <= clock.slack
    _check_size(fixes, count, last)
    owner = np.repeat(np.arange(len(u)), count)
    into = np.arange(len(owner)) - np.repeat(np.cumsum(count) - count, count)
    step_index = ceiling[owner] + into
    after = np.where(last, np.arange(len(u)), np.arange(len(u)) + 1)
    span = np.where(last, 1.0, u[after] - u)
    weight = np.clip((step_index - u[owner]) / span[owner], 0.0, 1.0)
    weight[np.abs(step_index - u[owner]) <= clock.slack] = 0.0
    place = _cartesian(fixes)
    position = place[owner] * (1.0 - weight)[:, None] + place[after[owner]] * weight[:, None]
    too_long = (span * clock.step > clock.longest_gap * (1.0 + 1e-9)) & ~last
    position[too_long[owner] & (weight > 0.0)] = np.nan
    return position, fixes.particle[owner], step_index


def _assemble(fixes: Fixes, clock: _Clock, position, code, step_index) -> Tracks:
    """Trim gaps off both ends, drop particles with fewer than two valid steps, lay out the record."""
    n = len(fixes.labels)
    valid = ~np.isnan(position[:, 0])
    lowest, highest = np.full(n, np.iinfo(np.int64).max), np.full(n, -1)
    np.minimum.at(lowest, code[valid], step_index[valid])
    np.maximum.at(highest, code[valid], step_index[valid])
    usable = np.bincount(code[valid], minlength=n) >= 2
    if not usable.any():
        raise DataError(
            f"no particle has two positions on an axis of {clock.step:g} s without a gap over "
            f"{clock.longest_gap:g} s; choose a shorter observations.step_h or a longer "
            "observations.longest_gap_h"
        )
    keep = usable[code] & (step_index >= lowest[code]) & (step_index <= highest[code])
    position, code = position[keep], code[keep]
    position.flags.writeable = False
    first = int(lowest[usable].min())
    return Tracks(
        position=position,
        offset=np.append(0, np.cumsum(np.bincount(code, minlength=n)[usable])),
        start_step=lowest[usable] - first,
        step=clock.step,
        first_time=(clock.axis_start + first) * clock.step,
        planar=fixes.planar,
        labels=tuple(label for label, use in zip(fixes.labels, usable, strict=True) if use),
        release=fixes.release[usable],
        position_error=fixes.position_error,
    )


def _cartesian(fixes: Fixes) -> np.ndarray:
    if fixes.planar:
        return np.column_stack([fixes.position, np.zeros(len(fixes.position))])
    return to_cartesian(fixes.position[:, 0], fixes.position[:, 1])


def default_gap(fixes: Fixes, step: float) -> float:
    """Longest gap that is bridged unless another is asked for: three steps or three median fix intervals [s]."""
    return GAP_STEPS * max(step, _median_interval(fixes))


def _median_interval(fixes: Fixes) -> float:
    interval = np.diff(fixes.time)[fixes.particle[1:] == fixes.particle[:-1]]
    if interval.size == 0:
        raise DataError("no particle has two fixes; a track needs at least two")
    return float(np.median(interval))


def _round_interval(interval: float) -> float:
    nearest = float(ROUND_INTERVALS[np.argmin(np.abs(ROUND_INTERVALS / interval - 1.0))])
    if abs(nearest / interval - 1.0) <= ROUNDING:
        return nearest
    return float(round(interval)) if interval >= 1.0 else interval


def _positive(name: str, value: float) -> float:
    if not (np.isfinite(value) and value > 0):
        raise CaseError(f"{name}: got {value!r} s; must be a number > 0")
    return float(value)


def _check_size(fixes: Fixes, count: np.ndarray, last: np.ndarray) -> None:
    """Stop before one wrong date turns into billions of empty steps."""
    if count.sum() <= 100 * len(count) + 1_000_000:
        return
    at = int(np.argmax(np.where(last, 0, count)))
    days = (fixes.time[at + 1] - fixes.time[at]) / DAY
    raise DataError(
        f"the common axis would need {count.sum()} steps for {len(count)} fixes; the longest gap is "
        f"{days:.0f} days, in particle {fixes.labels[fixes.particle[at]]}: look for a wrong date, or choose "
        "a longer observations.step_h"
    )
