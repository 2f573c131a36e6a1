"""What all worlds share: how a release is laid out, and the records it becomes."""

import numpy as np

from regimes.errors import DataError
from regimes.pairs import LAUNCHED, Pairs
from regimes.tracks import Tracks


def polygon(n: int, side: float) -> np.ndarray:
    """Corners (n, 2) of a regular polygon with the given side [m]; for n = 2 its two ends."""
    angle = 2.0 * np.pi * np.arange(n) / n
    radius = side / (2.0 * np.sin(np.pi / n))
    return radius * np.stack([np.cos(angle), np.sin(angle)], axis=1)


def about_centroid(local: np.ndarray) -> np.ndarray:
    """Positions (n_release, n_member, n_fix, 2) less the moving centroid of each release."""
    return local - local.mean(axis=1, keepdims=True)


def check_sizes(n_group: int, start_separation: float, step: float, n_step: int) -> None:
    if n_group < 1 or n_step < 2 or not (start_separation > 0 and step > 0):
        raise DataError(
            f"kernel flow: got {n_group} groups, start separation {start_separation:g} m, step {step:g} s, "
            f"{n_step} steps; need at least 1 group, 2 steps and positive lengths and times; "
            "correct the numbers"
        )


def as_tracks_and_pairs(
    position: np.ndarray, step: float, rng: np.random.Generator, position_error: float
) -> tuple[Tracks, Pairs]:
    """Records for (n_group, n_member, n_time, 3) positions: all pairs within a group, each a cluster."""
    n_group, n_member, n_time, _ = position.shape
    if position_error > 0:
        position[..., :2] += position_error * rng.standard_normal((n_group, n_member, n_time, 2))
    n_track = n_group * n_member
    tracks = Tracks(
        position=position.reshape(-1, 3),
        offset=np.arange(n_track + 1, dtype=np.int64) * n_time,
        start_step=np.zeros(n_track, dtype=np.int64),
        step=float(step),
        first_time=0.0,
        planar=True,
        labels=tuple(str(i) for i in range(n_track)),
        release=np.repeat(np.arange(n_group, dtype=np.int64), n_member),
        position_error=float(position_error),
    )
    one, two = np.triu_indices(n_member, 1)
    base = np.arange(n_group, dtype=np.int64)[:, None] * n_member
    start = position[:, two, 0] - position[:, one, 0]
    n_pair = n_group * one.size
    return tracks, Pairs(
        first=(base + one).ravel(),
        second=(base + two).ravel(),
        begin=np.zeros(n_pair, dtype=np.int64),
        length=np.full(n_pair, n_time, dtype=np.int64),
        kind=np.full(n_pair, LAUNCHED, dtype=np.int8),
        start_separation=np.hypot(start[..., 0], start[..., 1]).ravel(),
        cluster=tracks.release.copy(),
        n_cluster=n_group,
    )
