"""Velocities of single particles, and their eddy part after a mean flow is taken away."""

from dataclasses import dataclass

import numpy as np

from regimes.arrays import frozen_array
from regimes.errors import CaseError, DataError
from regimes.geodesy import separation, to_geographic
from regimes.particles.mean_flow import MeanFlow, low_pass
from regimes.tracks import Tracks

MEANS = ("none", "record", "lowpass", "grid")
UNITS = ("release", "particle")


@dataclass(frozen=True, slots=True)
class Velocities:
    """Eddy velocities and displacements of every track, sample by sample.

    Parameters
    ----------
    value : (n_sample, 2) float array [m/s]
        East and north (x and y) eddy velocity; NaN at both ends of a track or gap and where the mean is unknown.
    path : (n_sample, 2) float array [m]
        Eddy displacement since the first sample of the piece; NaN where there is none.
    piece : (n_sample,) int array
        Samples of one piece have a known displacement between them; -1 for none.
    offset : (n_track + 1,) int array
        Track i owns rows ``offset[i]:offset[i + 1]``.
    unit : (n_track,) int array
        Independent unit of each track: its release where known, else itself; 0 to n_unit - 1.
    step : float [s]
        Interval between samples.
    mean : str
        What was removed: none, record, lowpass or grid.
    noise : float [m2/s2]
        Variance of one component that the position error makes.
    lost : int
        Samples whose velocity is known but whose mean is not.
    """

    value: np.ndarray
    path: np.ndarray
    piece: np.ndarray
    offset: np.ndarray
    unit: np.ndarray
    step: float
    mean: str
    noise: float
    lost: int

    def __post_init__(self) -> None:
        for name in ("value", "path"):
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.float64))
        for name in ("piece", "offset", "unit"):
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.int64))

    @property
    def n_unit(self) -> int:
        """Number of independent units."""
        return int(self.unit.max()) + 1

    @property
    def n_sample(self) -> np.ndarray:
        """(n_track,) int array: velocities of each track."""
        known = np.concatenate([[0], np.cumsum(np.isfinite(self.value[:, 0]))])
        return known[self.offset[1:]] - known[self.offset[:-1]]


def eddy_velocities(
    tracks: Tracks,
    mean: str = "record",
    period: float | None = None,
    flow: MeanFlow | None = None,
    unit: str = "release",
) -> Velocities:
    r"""Velocities by centred differences, less a mean.

    .. math:: u_i = \frac{x_{i+1} - x_{i-1}}{2 \Delta t}

    On the ellipsoid, displacements are summed step by step in the local east and north directions.

    Parameters
    ----------
    tracks : Tracks
    mean : {"record", "none", "lowpass", "grid"}
        Mean over each track, nothing, the slow part of each track, or a mean flow on a grid.
    period : float [s]
        Cut-off of the slow part, for "lowpass" only.
    flow : MeanFlow
        For "grid" only.
    unit : {"release", "particle"}
        What is independent: whole releases (a track of unknown release stands for itself), or every particle.

    Returns
    -------
    Velocities

    Raises
    ------
    CaseError
        If a choice is unknown or goes without what it needs.
    DataError
        If no velocity is left.

    Notes
    -----
    A centred difference averages the velocity over two steps, which lowers its variance by about
    2 step / (3 T_L) and raises T_L as much; their product, the diffusivity, stays.
    """
    _check_choices(mean, period, flow, unit)
    owner = np.repeat(np.arange(tracks.n_track), tracks.n_step)
    path = _local_path(tracks, owner)
    raw = np.full_like(path, np.nan)
    inside = (owner[2:] == owner[:-2]) & np.isfinite(path[1:-1, 0])
    raw[1:-1][inside] = (path[2:] - path[:-2])[inside] / (2.0 * tracks.step)
    slow = _slow_part(tracks, raw, mean, period, flow)
    value = raw - slow
    if not np.isfinite(value).any():
        raise DataError(
            f"velocities: got none after removing the mean ({mean}) from {tracks.n_track} tracks; each needs three "
            "positions in a row, inside the mean flow; choose another mean, a longer gap or a finer step"
        )
    # Across a gap only a mean that is constant can be followed.
    piece = owner if mean in ("none", "record") else _runs(owner, np.isfinite(path[:, 0]) & np.isfinite(slow[:, 0]))
    eddy_path = _eddy_path(path, slow, piece, tracks.step)
    return Velocities(
        value=value,
        path=eddy_path,
        piece=np.where(np.isfinite(eddy_path[:, 0]), piece, -1),
        offset=tracks.offset,
        unit=_units(tracks, unit),
        step=tracks.step,
        mean=mean,
        noise=0.5 * (tracks.position_error / tracks.step) ** 2,
        lost=int(np.sum(np.isfinite(raw[:, 0]) & ~np.isfinite(value[:, 0]))),
    )


def _check_choices(mean: str, period: float | None, flow: MeanFlow | None, unit: str) -> None:
    if mean not in MEANS:
        raise CaseError(f"mean: got {mean!r}; known: {', '.join(MEANS)}; choose one of them")
    if unit not in UNITS:
        raise CaseError(f"unit: got {unit!r}; known: {', '.join(UNITS)}; choose one of them")
    if (mean == "lowpass") != (period is not None):
        raise CaseError(f"mean {mean!r}: got period {period!r}; lowpass needs a period and no other mean takes one")
    if period is not None and not (np.isfinite(period) and period > 0):
        raise CaseError(f"period: got {period!r} s; must be a number > 0; give the cut-off period of the slow part")
    if (mean == "grid") != (flow is not None):
        raise CaseError(f"mean {mean!r}: got flow {flow!r}; grid needs a mean flow and no other mean takes one")


def _local_path(tracks: Tracks, owner: np.ndarray) -> np.ndarray:
    """(n_sample, 2) displacement since the start of each track, summed in local east and north parts."""
    known = np.flatnonzero(np.isfinite(tracks.position[:, 0]))
    a, b = known[:-1], known[1:]
    _, east, north = separation(tracks.position[a], tracks.position[b], tracks.planar)
    moves = np.stack([east, north], axis=1)
    moves[owner[a] != owner[b]] = 0.0
    path = np.full((len(owner), 2), np.nan)
    path[known] = np.concatenate([np.zeros((1, 2)), np.cumsum(moves, axis=0)])
    first = path[known[np.searchsorted(known, tracks.offset[:-1])]]
    return path - first[owner]


def _slow_part(tracks: Tracks, raw: np.ndarray, mean: str, period, flow: MeanFlow | None) -> np.ndarray:
    if mean == "none":
        return np.zeros_like(raw)
    if flow is not None:
        if flow.planar != tracks.planar:
            raise CaseError(
                f"mean flow: got planar = {flow.planar} for tracks with planar = {tracks.planar}; both must be on "
                "the same kind of coordinates; give the mean flow on those of the fixes"
            )
        x, y = tracks.position[:, :2].T if tracks.planar else to_geographic(tracks.position)
        return flow.at(x, y)
    slow = np.full_like(raw, np.nan)
    for start, end in zip(tracks.offset[:-1], tracks.offset[1:], strict=True):
        part = raw[start:end]
        known = np.isfinite(part[:, 0])
        if known.any():
            slow[start:end] = part[known].mean(axis=0) if period is None else low_pass(part, tracks.step, period)
    return slow


def _runs(owner: np.ndarray, known: np.ndarray) -> np.ndarray:
    """Number of the unbroken run of each sample."""
    new = np.append(True, (owner[1:] != owner[:-1]) | (known[1:] != known[:-1]))
    return np.cumsum(new) - 1


def _eddy_path(path: np.ndarray, slow: np.ndarray, piece: np.ndarray, step: float) -> np.ndarray:
    """Displacement less that of the slow part, which is integrated by trapezia within each piece."""
    drift = np.zeros_like(path)
    drift[1:] = 0.5 * step * (slow[1:] + slow[:-1])
    drift[1:][piece[1:] != piece[:-1]] = 0.0
    drift = np.cumsum(np.nan_to_num(drift), axis=0)
    eddy = np.where(np.isfinite(slow), path - drift, np.nan)
    new = np.append(True, piece[1:] != piece[:-1])
    return eddy - eddy[np.flatnonzero(new)][np.cumsum(new) - 1]


def _units(tracks: Tracks, unit: str) -> np.ndarray:
    own = np.arange(tracks.n_track) + int(tracks.release.max(initial=0)) + 1
    label = own if unit == "particle" else np.where(tracks.release >= 0, tracks.release, own)
    return np.unique(label, return_inverse=True)[1]
