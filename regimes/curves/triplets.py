"""Triangles of particles launched together: their area and shape in time."""

from dataclasses import dataclass
from itertools import combinations

import numpy as np

from regimes.arrays import frozen_array
from regimes.curves.dispersion import nearest_lags
from regimes.curves.record import Curve
from regimes.errors import DataError
from regimes.tracks import Tracks

MOST_PER_RELEASE = 1000
_EQUILATERAL = np.sqrt(3.0) / 4.0  # area over squared side
_BLOCK = 20_000


@dataclass(frozen=True, slots=True)
class Growth:
    """Rate of growth of the logarithm of a curve between successive times.

    Parameters
    ----------
    axis : (n_time - 1,) float array [s]
        Middles of the times.
    value, standard_error : (n_time - 1,) float arrays [1/s]
        NaN where a time has no data; the error also with fewer than two releases.
    """

    axis: np.ndarray
    value: np.ndarray
    standard_error: np.ndarray

    def __post_init__(self) -> None:
        for name in self.__slots__:
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.float64))


@dataclass(frozen=True, slots=True)
class Triplets:
    r"""Area and shape of triangles of particles released together; every row is a release.

    Parameters
    ----------
    area : Curve [m2]
        Mean area.
    log_area : Curve [ln m2]
        Mean logarithm of the areas above zero.
    aspect : Curve
        Mean of :math:`4\sqrt{3} A / (a^2 + b^2 + c^2)`: 1 for an equilateral triangle, 0 for three points in line;
        1/2 for particles that wander independently.
    side_square : Curve [m2]
        Mean square side: what pairs say of the same triangles.
    filling : Curve
        Mean area over that of an equilateral triangle of the same mean square side: as `aspect`, but led by the
        largest triangles.
    n_triplet : int
        Triangles followed.
    n_left_out : int
        Triangles of large releases that were not followed.
    """

    area: Curve
    log_area: Curve
    aspect: Curve
    side_square: Curve
    filling: Curve
    n_triplet: int
    n_left_out: int

    def area_growth(self) -> Growth:
        """Growth rate of the mean area; zero where the flow stretches triangles without diffusing across."""
        return log_growth(self.area)

    def side_growth(self) -> Growth:
        """Growth rate of the mean square side; equal to that of the area where shapes are in equilibrium."""
        return log_growth(self.side_square)

    def summary(self) -> str:
        """One line: how many triangles, and how area, sides and shape change from first to last."""
        area, side, shape = (c.value[[0, -1]] for c in (self.area, self.side_square, self.aspect))
        left = f" ({self.n_left_out} more left out)" if self.n_left_out else ""
        return (
            f"{self.n_triplet} triplets{left} in {self.area.weight.size} releases: mean area times "
            f"{area[1] / area[0]:.3g}, mean square side times {side[1] / side[0]:.3g}, aspect {shape[0]:.2f} to "
            f"{shape[1]:.2f} from {self.area.axis[0]:.3g} to {self.area.axis[-1]:.3g} s"
        )


def triplets(tracks: Tracks, times: np.ndarray, largest_side: float | None = None, seed: int = 0) -> Triplets:
    """Follow every triangle within every release of three or more particles.

    Parameters
    ----------
    tracks : Tracks
        With known releases.
    times : (n_time,) float array [s]
        Since the last of the three started, rising; each is moved to the nearest step.
    largest_side : float, optional [m]
        Triangles with a longer side at the start are left out. Default: only those with a corner missing there are.
    seed : int
        Chooses among the triangles of releases that hold more than a thousand.

    Returns
    -------
    Triplets

    Raises
    ------
    DataError
        If no release holds a triangle, or times are not as required.

    Notes
    -----
    The area is that between the chords through the earth, 2e-6 too small for sides of 20 km and 0.6 % for 1100 km
    (against geodesic polygons). Position errors s make triangles of a line: areas below about s times the longest
    side are noise.

    References
    ----------
    Pumir, Shraiman & Chertkov 2000, Phys. Rev. Lett. 85, 5324, for the shapes of particle clusters (from memory).
    """
    lags = nearest_lags(times, tracks.step)
    members, release, left_out = _members(tracks, seed)
    begin = np.max(tracks.start_step[members], axis=1)
    longest = np.sqrt(np.max(_shape(tracks, members, begin, 0)[2], axis=0))
    fit = longest <= (np.inf if largest_side is None else largest_side)  # False where a corner is missing
    members, release, begin = members[fit], release[fit], begin[fit]
    if len(members) == 0:
        raise DataError(
            f"triplets: got none among {tracks.n_track} tracks, largest side {largest_side} m; needed are three "
            "particles of one release present together; give a release column, or allow a larger side"
        )
    codes, row = np.unique(release, return_inverse=True)
    sums = np.zeros((6, codes.size, lags.size))
    for k, lag in enumerate(lags):
        for part in np.array_split(np.arange(len(members)), -(-len(members) // _BLOCK)):
            area, total, _ = _shape(tracks, members[part], begin[part], int(lag))
            there = np.isfinite(area) & (total > 0)
            area, total = np.where(there, area, 0.0), np.where(there, total, 1.0)
            positive = area > 0
            logs = np.log(np.where(positive, area, 1.0))
            aspect = 12.0 / np.sqrt(3.0) * area / total
            values = (there, area, np.where(there, total / 3.0, 0.0), aspect, logs, positive)
            for i, value in enumerate(values):
                sums[i, :, k] += np.bincount(row[part], value, codes.size)
    return _record(lags * tracks.step, sums, len(members), left_out)


def log_growth(curve: Curve) -> Growth:
    r"""Rate :math:`\ln(v_{k+1} / v_k) / (t_{k+1} - t_k)` of a curve in time, its error by the delta method."""
    gap = np.diff(curve.axis)
    value = np.where(curve.value > 0, curve.value, np.nan)
    spread = curve.covariance
    relative = spread / np.outer(value, value)
    variance = np.diag(relative)
    rate_variance = variance[1:] + variance[:-1] - 2.0 * np.diag(relative, 1)
    middle = 0.5 * (curve.axis[1:] + curve.axis[:-1])
    return Growth(middle, np.diff(np.log(value)) / gap, np.sqrt(np.maximum(rate_variance, 0.0)) / gap)


def _members(tracks: Tracks, seed: int) -> tuple[np.ndarray, np.ndarray, int]:
    """(n, 3) tracks of each triangle, (n,) its release, and how many were left out of large releases."""
    rng = np.random.default_rng(seed)
    found, owner, left_out = [np.zeros((0, 3), dtype=np.int64)], [np.zeros(0, dtype=np.int64)], 0
    for code in np.unique(tracks.release[tracks.release >= 0]):
        group = np.flatnonzero(tracks.release == code)
        number = group.size * (group.size - 1) * (group.size - 2) // 6
        if number > MOST_PER_RELEASE:
            left_out += number - MOST_PER_RELEASE
            trios = _some(group.size, rng)
        else:
            trios = np.array(list(combinations(range(group.size), 3)), dtype=np.int64).reshape(-1, 3)
        found.append(group[trios])
        owner.append(np.full(len(trios), code))
    return np.concatenate(found), np.concatenate(owner), left_out


def _some(n: int, rng: np.random.Generator) -> np.ndarray:
    """A thousand different trios of n members."""
    chosen: set[tuple[int, ...]] = set()
    while len(chosen) < MOST_PER_RELEASE:
        chosen.add(tuple(sorted(rng.choice(n, 3, replace=False).tolist())))
    return np.array(sorted(chosen), dtype=np.int64)


def _shape(
    tracks: Tracks, members: np.ndarray, begin: np.ndarray, lag: int
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Areas (n,), sums of squared sides (n,) and squared sides (3, n); NaN where a corner is missing."""
    into = begin[:, None] + lag - tracks.start_step[members]
    there = np.all(into < tracks.n_step[members], axis=1)
    corner = np.full((len(members), 3, 3), np.nan)
    corner[there] = tracks.position[(tracks.offset[members] + into)[there]]
    a, b = corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]
    sides = np.stack([np.sum(v * v, axis=1) for v in (a, b, b - a)])
    return 0.5 * np.linalg.norm(np.cross(a, b), axis=1), sides.sum(axis=0), sides


def _record(axis: np.ndarray, sums: np.ndarray, n_triplet: int, left_out: int) -> Triplets:
    count, area, square, aspect, logs, positive = sums
    weight = np.ones(len(count))

    def curve(name: str, above: np.ndarray, below: np.ndarray, unit: str) -> Curve:
        return Curve(name, "time", axis, above, below, weight, unit)

    return Triplets(
        area=curve("triplet area", area, count, "m2"),
        log_area=curve("mean log triplet area", logs, positive, "ln m2"),
        aspect=curve("triplet aspect ratio", aspect, count, "1"),
        side_square=curve("triplet mean square side", square, count, "m2"),
        filling=curve("triplet area over equilateral", area, _EQUILATERAL * square, "1"),
        n_triplet=n_triplet,
        n_left_out=left_out,
    )
