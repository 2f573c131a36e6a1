"""The single-particle side of a run: what particles say one by one, or why they say nothing."""

from dataclasses import replace

import numpy as np

from regimes.analysis import SinglesOnly
from regimes.curves.plateau import late_plateau
from regimes.errors import DataError
from regimes.fitting.options import Options, SingleOptions
from regimes.fixes.flows import read_flow
from regimes.pairs import Pairs
from regimes.particles import (
    MeanFlow,
    Ratio,
    SingleParticle,
    length_ratio,
    plateau_ratio,
    single_particle,
    standard_error,
)
from regimes.pipeline.origin import provenance
from regimes.tracks import Tracks
from regimes.verdict.record import TransitionScale

LIKELY = 0.5  # transitions at least as probable are held against the deformation radius
_NORMAL_95 = 1.959963984540054


def single_side(tracks: Tracks, chosen: SingleOptions, seed: int) -> tuple[SingleParticle | None, str]:
    """What particles say one by one, or nothing and the reason."""
    try:
        flow = _mean_flow(chosen.flow, tracks.planar)
        return single_particle(tracks, chosen.mean, chosen.period, flow, seed=seed), ""
    except DataError as error:
        return None, str(error).removeprefix("single particles: ")


def with_releases(tracks: Tracks, pairs: Pairs) -> Tracks:
    """Tracks whose releases, where none is named, are the clusters that the pairs make."""
    return tracks if np.any(tracks.release >= 0) else replace(tracks, release=pairs.cluster)


def cross_checks(
    single: SingleParticle | None,
    tracks: Tracks,
    pairs: Pairs | None,
    transitions: tuple[TransitionScale, ...],
    radius: float | None,
) -> tuple[Ratio, ...]:
    """The single-particle side against the pairs and against a deformation radius, where both are known.

    Parameters
    ----------
    single : SingleParticle or None
    tracks : Tracks
    pairs : Pairs or None
        None where there is none.
    transitions : tuple of TransitionScale
    radius : float or None [m]
        Deformation radius.
    """
    found = []
    if single is not None and pairs is not None:
        found += _plateau(single, tracks, pairs)
    if radius is not None:
        length = None if single is None else single.scale().length
        if length is not None and length.low > 0.0:
            found.append(length_ratio("Lagrangian length", length.value, standard_error(length), radius))
        found += [_transition(t, radius) for t in transitions if t.probability >= LIKELY]
    return tuple(found)


def analyse_singles(
    tracks: Tracks, options: Options | None = None, no_pair: str = "pairs were not asked for"
) -> SinglesOnly:
    """Analyse particles one by one where there is no pair to compare.

    Parameters
    ----------
    tracks : Tracks
    options : Options, optional
        Only those for single particles and the seed are used.
    no_pair : str
        Why there is no pair, as it shall stand in the report.

    Returns
    -------
    SinglesOnly
        Also where not even the single-particle side can be told; then it says why.
    """
    options = options or Options()
    single, missing = single_side(tracks, options.single, options.seed)
    reasons = (no_pair,) if single is not None else (no_pair, missing)
    why = no_pair[:1].upper() + no_pair[1:]
    rest = "" if single is not None else f" Nor do particles say anything one by one: {missing}."
    return SinglesOnly(
        provenance=provenance(tracks, None, options.seed),
        single=single,
        single_missing=missing,
        ratios=cross_checks(single, tracks, None, (), options.single.deformation_radius),
        sentence=f"Undecided: no pair statistics exist, for want of a pair to compare. {why}.{rest}",
        reasons=reasons,
    )


def _mean_flow(flow: MeanFlow | str | None, planar: bool) -> MeanFlow | None:
    return MeanFlow.from_dataset(read_flow(flow), planar) if isinstance(flow, str) else flow


def _plateau(single: SingleParticle, tracks: Tracks, pairs: Pairs) -> list[Ratio]:
    level, mean = late_plateau(tracks, pairs), single.diffusivity.mean
    if level.reason or not mean.low > 0.0:
        return []
    return [plateau_ratio(level.value, level.error, mean.value, standard_error(mean))]


def _transition(transition: TransitionScale, radius: float) -> Ratio:
    scale = transition.scale
    error = scale.median * float(np.log(scale.hi95 / scale.lo95)) / (2.0 * _NORMAL_95)
    name = f"transition from {transition.lower} to {transition.upper}"
    return length_ratio(name, scale.median, error, radius)
