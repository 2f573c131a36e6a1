"""The record of position fixes, as read and cleaned."""

from dataclasses import dataclass

import numpy as np

from regimes.arrays import frozen_array
from regimes.errors import DataError
from regimes.units import DAY


@dataclass(frozen=True, slots=True)
class Cleaning:
    """One thing that was found in the rows: why, how many, and what was done about it."""

    reason: str
    count: int
    note: str


@dataclass(frozen=True, slots=True)
class Source:
    """Where fixes came from: path, and SHA-256 of the bytes (None for data handed over in memory)."""

    path: str = "memory"
    sha256: str | None = None


@dataclass(frozen=True, slots=True)
class Fixes:
    """Position fixes of particles, sorted by particle, then time.

    Parameters
    ----------
    particle : (n,) int array
        Code of each fix's particle, 0 to n_particle - 1, never falling; each occurs.
    labels : (n_particle,) tuple of str
        Particle names, all different.
    time : (n,) float array [s]
        Seconds since 1970-01-01 UTC, rising within a particle.
    position : (n, 2) float array
        Longitude in [-180, 180) and latitude in degrees; x and y in metres when `planar`.
    planar : bool
        True when positions are x and y on a plane.
    release : (n_particle,) int array
        Code of each particle's release, -1 where unknown.
    release_labels : (n_release,) tuple of str
        Release names.
    position_error : float [m]
        Standard error of one coordinate of one fix, >= 0.
    cleaning : tuple of Cleaning
        What was found and done before, in order.
    source : Source
        Path and checksum.
    """

    particle: np.ndarray
    labels: tuple[str, ...]
    time: np.ndarray
    position: np.ndarray
    planar: bool
    release: np.ndarray
    release_labels: tuple[str, ...]
    position_error: float
    cleaning: tuple[Cleaning, ...] = ()
    source: Source = Source()

    def __post_init__(self):
        for name, dtype in (
            ("particle", np.int64),
            ("time", np.float64),
            ("position", np.float64),
            ("release", np.int64),
        ):
            object.__setattr__(self, name, frozen_array(getattr(self, name), dtype))
        self._check_shapes()
        self._check_order()
        self._check_places()

    def _check_shapes(self) -> None:
        n, m = len(self.particle), len(self.labels)
        if n == 0:
            raise DataError("fixes: no fix; at least one is needed")
        if self.time.shape != (n,) or self.position.shape != (n, 2):
            raise DataError(
                f"fixes: {n} particle codes, time of shape {self.time.shape}, position of shape "
                f"{self.position.shape}; must be (n,), (n,) and (n, 2)"
            )
        if self.release.shape != (m,) or len(set(self.labels)) != m:
            raise DataError(
                f"fixes: {m} labels ({len(set(self.labels))} different) and {len(self.release)} releases; "
                "each particle needs a label of its own and one release code"
            )
        if np.any(self.release < -1) or np.any(self.release >= len(self.release_labels)):
            raise DataError(f"fixes: release codes must lie in -1 to {len(self.release_labels) - 1}")
        if not (np.isfinite(self.position_error) and self.position_error >= 0):
            raise DataError(f"fixes: position error is {self.position_error} m; must be a number >= 0")

    def _check_order(self) -> None:
        change = np.diff(self.particle)
        ends = self.particle[0] == 0 and self.particle[-1] == len(self.labels) - 1
        if not ends or np.any((change != 0) & (change != 1)):
            raise DataError("fixes: particle codes must rise from 0 to the last label without a step over 1")
        if np.any((np.diff(self.time) <= 0) & (change == 0)):
            raise DataError("fixes: time must rise from fix to fix of a particle")

    def _check_places(self) -> None:
        if not (np.isfinite(self.time).all() and np.isfinite(self.position).all()):
            raise DataError("fixes: times and positions must be finite")
        if self.planar:
            return
        longitude, latitude = self.position.T
        if np.any((longitude < -180) | (longitude >= 180) | (np.abs(latitude) > 90)):
            raise DataError("fixes: longitude must lie in [-180, 180) and latitude in [-90, 90] degrees")

    @property
    def n_fix(self) -> int:
        """Number of fixes."""
        return len(self.particle)

    @property
    def n_particle(self) -> int:
        """Number of particles."""
        return len(self.labels)

    def summary(self) -> str:
        """A few lines: how many fixes, from when to when, and what cleaning found."""
        first, last = (np.datetime64(int(t), "s") for t in (self.time.min(), self.time.max()))
        days = (self.time.max() - self.time.min()) / DAY
        releases = f", {len(self.release_labels)} releases" if self.release_labels else ""
        head = f"{self.n_fix} fixes of {self.n_particle} particles{releases}"
        lines = [f"{head}, {first}Z to {last}Z ({days:.3g} days)"]
        lines += [f"  {item.reason}: {item.count} ({item.note})" for item in self.cleaning]
        return "\n".join(lines)
