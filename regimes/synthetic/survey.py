"""Synthetic surveys: releases of a known world put on the map and observed with all the usual faults."""

import numpy as np
from pyproj import Geod

from regimes.fixes import Fixes
from regimes.geodesy import wrap_longitude
from regimes.synthetic.fourier_flow import fourier_tracks
from regimes.synthetic.kernel_groups import release_tracks
from regimes.synthetic.linear_flow import convergence_displacement, shear_displacement
from regimes.synthetic.oscillation import oscillation
from regimes.synthetic.recipe import Place, Recipe
from regimes.synthetic.worlds import FourierWorld
from regimes.units import DAY, HOUR, KM

# Each has a stream of random numbers of its own; new ones go to the end, so that old recipes keep their fixes.
_STREAMS = ("flow", "place", "watch", "oscillation")
_GLOBE = Geod(ellps="WGS84")


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
    place, watch = rng["place"], rng["watch"]
    local = _with_contaminations(recipe, _paths(recipe, int(rng["flow"].integers(2**63))), rng)
    centre = _centres(recipe, place, local.shape[2])
    error = recipe.records.position_error_m
    local = local + error * watch.standard_normal(local.shape)
    position = centre[:, None] + local if recipe.place.planar else _on_globe(recipe.place, centre, local)
    seen = _seen(recipe, watch, local.shape[:3])
    return _as_fixes(recipe, position, seen)


def _paths(recipe: Recipe, seed: int) -> np.ndarray:
    """Positions (n_release, n_member, n_fix, 2) about the moving centre of each release [m]."""
    size = (recipe.releases.number, recipe.releases.particles)
    options = (
        size,
        recipe.releases.start_separation_km * KM,
        recipe.records.fix_interval_h * HOUR,
        recipe.records.n_fix,
        seed,
    )
    if isinstance(recipe.world, FourierWorld):
        tracks, _ = fourier_tracks(recipe.world.spectrum, *options)
    else:
        tracks, _ = release_tracks(recipe.world.kernel, *options)
    return tracks.position.reshape(*size, -1, 3)[..., :2]


def _with_contaminations(recipe: Recipe, local: np.ndarray, rng: dict[str, np.random.Generator]) -> np.ndarray:
    """Paths of the world and what the recipe adds to them, start positions unchanged."""
    step = recipe.records.fix_interval_h * HOUR
    if recipe.convergence is not None:
        made = recipe.convergence
        flow = (made.rate_per_d / DAY, made.direction_deg, made.lasts_d * DAY)
        local = local + convergence_displacement(local, step, *flow)
    if recipe.shear is not None:
        local = local + shear_displacement(local, step, recipe.shear.rate_per_d / DAY, recipe.shear.direction_deg)
    if recipe.oscillation is not None:
        made, times = recipe.oscillation, step * np.arange(local.shape[2])
        wavelength = None if made.wavelength_km is None else made.wavelength_km * KM
        turn = made.angular_velocity(recipe.place.latitude)
        local = local + oscillation(local, times, made.speed_m_s, turn, wavelength, rng["oscillation"])
    return local


def _centres(recipe: Recipe, rng: np.random.Generator, n_fix: int) -> np.ndarray:
    """Centres (n_release, n_fix, 2) of the releases about the place: start, drift and wandering [m]."""
    place, step = recipe.place, recipe.records.fix_interval_h * HOUR
    n = recipe.releases.number
    start = place.spread_km * KM * rng.standard_normal((n, 1, 2))
    walk = np.sqrt(2.0 * place.wandering_m2_s * step) * rng.standard_normal((n, n_fix, 2))
    walk[:, 0] = 0.0
    drift = np.array(place.drift_m_s) * (step * np.arange(n_fix))[:, None]
    return start + drift + np.cumsum(walk, axis=1)


def _on_globe(place: Place, centre: np.ndarray, local: np.ndarray) -> np.ndarray:
    """Longitude and latitude (n_release, n_member, n_fix, 2) of planar displacements about moving centres."""
    shape = centre.shape[:2]
    home = np.full(shape, place.longitude), np.full(shape, place.latitude)
    middle = _displaced(*home, centre)
    around = (np.broadcast_to(x[:, None], local.shape[:3]) for x in middle)
    return np.stack(_displaced(*around, local), axis=-1)


def _displaced(longitude: np.ndarray, latitude: np.ndarray, move: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Ends of geodesics that leave points with the given east and north components [m]."""
    azimuth = np.degrees(np.arctan2(move[..., 0], move[..., 1]))
    length = np.hypot(move[..., 0], move[..., 1])
    ends = _GLOBE.fwd(longitude.ravel(), latitude.ravel(), azimuth.ravel(), length.ravel())
    return wrap_longitude(ends[0]).reshape(length.shape), np.asarray(ends[1]).reshape(length.shape)


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
