"""A campaign of known kernel: releases with random losses, as tracks and pairs at once."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.errors import DataError
from regimes.pairs import LAUNCHED, Pairs
from regimes.synthetic.likeness import Design, likeness
from regimes.synthetic.releases import polygon
from regimes.theory.kernel import Kernel
from regimes.tracks import Tracks

MOST_MEMBERS = 4  # of a release: where exponents change, larger groups have no flow with the kernel


@dataclass(frozen=True, slots=True)
class Layout:
    """How a campaign is made.

    Parameters
    ----------
    releases, particles : int
        Number of releases, and of particles in each, 2 to 4.
    start_separation : float [m]
        Side of the regular polygon on which the particles of a release start.
    step : float [s]
        Fix interval.
    n_step : int
        Fixes of a complete record, 2 or more.
    position_error : float [m]
        Standard deviation of the error of each coordinate.
    loss : float [1/s]
        Rate at which particles are lost for good.

    Raises
    ------
    DataError
        If a number is out of range.
    """

    releases: int
    particles: int
    start_separation: float
    step: float
    n_step: int
    position_error: float = 0.0
    loss: float = 0.0

    def __post_init__(self) -> None:
        sizes = self.releases >= 1 and 2 <= self.particles <= MOST_MEMBERS and self.n_step >= 2
        if not (sizes and self.start_separation > 0 and self.step > 0 and self.position_error >= 0 and self.loss >= 0):
            raise DataError(
                f"campaign: got {self}; need 1 release or more of 2 to {MOST_MEMBERS} particles, 2 fixes, positive "
                "separation and interval, error and loss of 0 or more; correct the numbers"
            )


def campaign(kernel: Kernel, layout: Layout, seed: int | np.random.SeedSequence) -> tuple[Tracks, Pairs]:
    """Releases whose pairs separate by a kernel, in a flow without memory, as they would be observed.

    Parameters
    ----------
    kernel : Kernel
    layout : Layout
    seed : int or SeedSequence
        Same seed, same bytes.

    Returns
    -------
    tracks : Tracks
        On a plane, each release about its own centroid, each track up to the last fix before its loss.
    pairs : Pairs
        All pairs within each release that have two common fixes, one cluster per release.
    """
    rng = np.random.default_rng(seed)
    n_track = layout.releases * layout.particles
    life = rng.standard_exponential(n_track)
    length = np.full(n_track, layout.n_step)
    if layout.loss > 0:
        length = np.minimum(length, np.ceil(life / (layout.loss * layout.step)).astype(np.int64))
    design = _design(layout, np.maximum(length, 1))
    tracks, pairs = likeness(design, kernel, rng)
    apart = np.diff(tracks.position[tracks.offset[np.stack([pairs.first, pairs.second])]], axis=0)[0]
    return tracks, replace(pairs, start_separation=np.hypot(apart[:, 0], apart[:, 1]))


def _design(layout: Layout, length: np.ndarray) -> Design:
    """What `likeness` needs: tracks of these lengths, their starts and pairs."""
    n, groups = layout.particles, np.arange(length.size).reshape(layout.releases, layout.particles)
    release = np.repeat(np.arange(layout.releases), n)
    tracks = Tracks(
        position=np.zeros((int(length.sum()), 3)),
        offset=np.concatenate([[0], np.cumsum(length)]),
        start_step=np.zeros(length.size, dtype=np.int64),
        step=layout.step,
        first_time=0.0,
        planar=True,
        labels=tuple(str(i) for i in range(length.size)),
        release=release,
        position_error=layout.position_error,
    )
    one, two = np.triu_indices(n, 1)
    first, second = groups[:, one].ravel(), groups[:, two].ravel()
    both = np.minimum(length[first], length[second])
    pairs = Pairs(
        first=first,
        second=second,
        begin=np.zeros(first.size, dtype=np.int64),
        length=both,
        kind=np.full(first.size, LAUNCHED),
        start_separation=np.full(first.size, layout.start_separation),
        cluster=release,
        n_cluster=layout.releases,
    ).select(both >= 2)
    start = np.tile(polygon(n, layout.start_separation), (layout.releases, 1))
    return Design(tracks, pairs, start, tuple(groups), whole=True)
