"""Synthetic surveys: releases of a known world put on the map and observed with all the usual faults."""

import numpy as np

from regimes.fixes import Fixes
from regimes.synthetic.faults import halted, lashed
from regimes.synthetic.paths import with_contaminations, world_paths
from regimes.synthetic.places import centres, positions
from regimes.synthetic.recipe import Recipe
from regimes.synthetic.releases import about_centroid
from regimes.synthetic.watching import position_errors, seen_fixes
from regimes.units import HOUR

# Each has a stream of random numbers of its own; new ones go to the end, so that old recipes keep their fixes.
_STREAMS = ("flow", "place", "watch", "oscillation", "eddies", "errors", "instruments", "faults")


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
    contaminations the particles still take the same paths, up to what was added. Slip, convergence, shear and
    oscillation are added in this order, each to the paths that the ones before it gave; they are kinematic: the
    flow of the world does not know of them. Faults come last. Displacements from the centroid of a release are laid
    out along geodesics from the centroid (azimuthal equidistant); separations are true to (r / 6371 km)^2 / 6.
    """
    streams = np.random.SeedSequence(recipe.seed).spawn(len(_STREAMS))
    rng = {name: np.random.default_rng(stream) for name, stream in zip(_STREAMS, streams, strict=True)}
    records = recipe.records
    local = with_contaminations(recipe, world_paths(recipe, int(rng["flow"].integers(2**63))), rng)
    if recipe.faults is not None:
        local = lashed(local, recipe.faults.lashed, rng["faults"])
    error = position_errors(records, local.shape, rng["watch"], rng["errors"])
    seen = seen_fixes(records, np.hypot(*np.moveaxis(about_centroid(local), -1, 0)), rng["watch"])
    hold, local = _held(recipe, local, seen, rng["faults"])
    position = positions(recipe.place, centres(recipe, rng["place"], rng["eddies"]), local + error, hold)
    return _as_fixes(recipe, position, seen)


def _held(
    recipe: Recipe, local: np.ndarray, seen: np.ndarray, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Index of the fix at which each particle's centre is to be taken, and the displacements from there [m]."""
    if recipe.faults is None:
        return np.broadcast_to(np.arange(seen.shape[2]), seen.shape), local
    hold, boat = halted(recipe.faults, seen, recipe.records.fix_interval_h, rng)
    return hold, np.take_along_axis(local, hold[..., None], axis=2) + boat


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
