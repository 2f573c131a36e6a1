"""Synthetic surveys: releases of a known world put on the map and observed with all the usual faults."""

import numpy as np

from regimes.fixes import Fixes
from regimes.synthetic.paths import with_contaminations, world_paths
from regimes.synthetic.places import centres, on_globe
from regimes.synthetic.recipe import Recipe
from regimes.units import DAY, HOUR

# Each has a stream of random numbers of its own; new ones go to the end, so that old recipes keep their fixes.
_STREAMS = ("flow", "place", "watch", "oscillation", "eddies")


def simulate(recipe: Recipe) -> Fixes:
    """Fixes of a survey in the world of a recipe.

    Parameters
    ----------
    recipe : Recipe

    Returns
    -------
    Fixes
        Geographic where the recipe names a place, else on a plane; each release with its own label. Particles
        that were lost before their first fix after the start have a single fix.

    Raises
    ------
    DataError
        If the world cannot have such releases.

    Notes
    -----
    Flow, place, observation and each contamination draw from streams of their own: with other gaps, losses or
    contaminations the particles still take the same paths, up to what was added. Convergence, shear and
    oscillation are added in this order, each to the paths that the ones before it gave; they are kinematic: the
    flow of the world does not know of them. Displacements from the centroid of a release are laid out along
    geodesics from the centroid (azimuthal equidistant); separations are true to (r / 6371 km)^2 / 6.
    """
    streams = np.random.SeedSequence(recipe.seed).spawn(len(_STREAMS))
    rng = {name: np.random.default_rng(stream) for name, stream in zip(_STREAMS, streams, strict=True)}
    watch = rng["watch"]
    local = with_contaminations(recipe, world_paths(recipe, int(rng["flow"].integers(2**63))), rng)
    centre = centres(recipe, rng["place"], rng["eddies"])
    error = recipe.records.position_error_m
    local = local + error * watch.standard_normal(local.shape)
    position = centre[:, None] + local if recipe.place.planar else on_globe(recipe.place, centre, local)
    seen = _seen(recipe, watch, local.shape[:3])
    return _as_fixes(recipe, position, seen)


def _seen(recipe: Recipe, rng: np.random.Generator, shape: tuple[int, ...]) -> np.ndarray:
    """Which fixes (n_release, n_member, n_fix) arrive: before the loss of the particle, outside gaps."""
    records = recipe.records
    step = records.fix_interval_h * HOUR
    index = np.arange(shape[2])
    life = rng.standard_exponential(shape[:2])  # drawn in any case, so that gaps do not depend on losses
    seen = index * step * records.loss_per_d / DAY < life[..., None]
    begins = rng.random(shape) < records.gap_probability
    lasts = np.floor(records.gap_h * HOUR / step * rng.standard_exponential(shape)).astype(np.int64)
    end = np.maximum.accumulate(np.where(begins, index + lasts, -1), axis=2)
    seen &= index > end
    seen[..., 0] = True  # a release is always recorded
    return seen


def _as_fixes(recipe: Recipe, position: np.ndarray, seen: np.ndarray) -> Fixes:
    n_release, n_member, n_fix = seen.shape
    step = recipe.records.fix_interval_h * HOUR
    start = recipe.releases.first_time + recipe.releases.interval_h * HOUR * np.arange(n_release)
    time = start[:, None, None] + step * np.arange(n_fix)
    particle = np.arange(n_release * n_member).reshape(n_release, n_member, 1)
    digits = len(str(n_release))
    releases = [f"L{i + 1:0{digits}d}" for i in range(n_release)]
    return Fixes(
        particle=np.broadcast_to(particle, seen.shape)[seen],
        labels=tuple(f"{name}-{k + 1}" for name in releases for k in range(n_member)),
        time=np.broadcast_to(time, seen.shape)[seen],
        position=position[seen],
        planar=recipe.place.planar,
        release=np.repeat(np.arange(n_release), n_member),
        release_labels=tuple(releases),
        position_error=recipe.records.position_error_m,
    )
