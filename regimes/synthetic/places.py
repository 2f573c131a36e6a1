"""Where releases are: their moving centres, and positions on the globe."""

import numpy as np
from pyproj import Geod

from regimes.geodesy import wrap_longitude
from regimes.synthetic.particles import Motion, remembering_walks
from regimes.synthetic.recipe import Place, Recipe
from regimes.units import DAY, HOUR, KM

_GLOBE = Geod(ellps="WGS84")


def centres(recipe: Recipe, rng: np.random.Generator, eddies: np.random.Generator) -> np.ndarray:
    r"""Centres (n_release, n_fix, 2) of the releases about the place: start, drift and wandering [m].

    Wandering is a random walk of ``wandering_m2_s`` without memory, plus that of eddies: velocities with
    covariance :math:`u'^2 e^{-t/T}` in each component, u' = ``eddy_speed_m_s`` / sqrt 2 and T = ``eddy_time_d``,
    exact at any fix interval (:math:`2 u'^2 T [t - T (1 - e^{-t/T})]`, Taylor 1922, Proc. Lond. Math. Soc. 20, 196).
    """
    place, step = recipe.place, recipe.records.fix_interval_h * HOUR
    n, n_fix = recipe.releases.number, recipe.records.n_fix
    start = place.spread_km * KM * rng.standard_normal((n, 1, 2))
    walk = np.sqrt(2.0 * place.wandering_m2_s * step) * rng.standard_normal((n, n_fix, 2))
    walk[:, 0] = 0.0
    drift = np.array(place.drift_m_s) * (step * np.arange(n_fix))[:, None]
    centre = start + drift + np.cumsum(walk, axis=1)
    if place.eddy_speed_m_s is None:
        return centre
    z = remembering_walks(Motion(0.5, 1.0 / (place.eddy_time_d * DAY)), (n, 1), step, n_fix, eddies)[:, 0]
    return centre + place.eddy_speed_m_s * np.stack([z.real, z.imag], axis=-1)


def positions(place: Place, centre: np.ndarray, local: np.ndarray, hold: np.ndarray) -> np.ndarray:
    """Displacements about moving centres as longitude and latitude, or x and y on a plane.

    Parameters
    ----------
    place : Place
    centre : (n_release, n_fix, 2) float array [m]
    local : (n_release, n_member, n_fix, 2) float array [m]
    hold : (n_release, n_member, n_fix) int array
        Index of the fix whose centre each displacement is from.

    Returns
    -------
    (n_release, n_member, n_fix, 2) float array [degree or m]
    """
    if not place.planar:
        home = np.full(centre.shape[:2], place.longitude), np.full(centre.shape[:2], place.latitude)
        centre = np.stack(_displaced(*home, centre), axis=-1)
    around = np.take_along_axis(np.broadcast_to(centre[:, None], local.shape), hold[..., None], axis=2)
    return around + local if place.planar else np.stack(_displaced(around[..., 0], around[..., 1], local), axis=-1)


def _displaced(longitude: np.ndarray, latitude: np.ndarray, move: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Ends of geodesics that leave points with the given east and north components [m]."""
    azimuth = np.degrees(np.arctan2(move[..., 0], move[..., 1]))
    length = np.hypot(move[..., 0], move[..., 1])
    ends = _GLOBE.fwd(longitude.ravel(), latitude.ravel(), azimuth.ravel(), length.ravel())
    return wrap_longitude(ends[0]).reshape(length.shape), np.asarray(ends[1]).reshape(length.shape)
