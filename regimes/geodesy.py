"""Distances on the WGS84 ellipsoid from Cartesian coordinates, without trigonometry per sample.

A position is kept as an earth-centred Cartesian point, so that neither the date line nor a pole is special.
The distance of two points follows from their chord and from the curvature of the ellipsoid between them.
"""

import math

import numpy as np
from numba import njit
from pyproj import Transformer

EQUATORIAL_RADIUS = 6378137.0  # m, defining constant of WGS84
FLATTENING = 1.0 / 298.257223563  # defining constant of WGS84
POLAR_RADIUS = EQUATORIAL_RADIUS * (1.0 - FLATTENING)  # m
ECCENTRICITY_SQUARED = FLATTENING * (2.0 - FLATTENING)
EARTH_RADIUS = 6371008.8  # m, mean radius (2 a + b) / 3

_PER_A2 = 1.0 / EQUATORIAL_RADIUS**2
_PER_B2 = 1.0 / POLAR_RADIUS**2
_PER_SQUASH = EQUATORIAL_RADIUS**2 / POLAR_RADIUS**2  # 1 / (1 - e^2)
_GEOCENTRIC = "+proj=cart +ellps=WGS84"


def to_cartesian(longitude, latitude) -> np.ndarray:
    """Earth-centred Cartesian coordinates of points on the surface of the WGS84 ellipsoid.

    Parameters
    ----------
    longitude, latitude : (n,) array-like [degrees]
        Geodetic coordinates; any winding of longitude is accepted.

    Returns
    -------
    (n, 3) float array [m]
        x towards (0 E, 0 N), y towards (90 E, 0 N), z towards the north pole. NaN in gives NaN out.
    """
    longitude = np.atleast_1d(np.asarray(longitude, dtype=float))
    latitude = np.atleast_1d(np.asarray(latitude, dtype=float))
    known = np.isfinite(longitude) & np.isfinite(latitude)
    position = np.full((longitude.size, 3), np.nan)
    forward = Transformer.from_pipeline(_GEOCENTRIC)
    x, y, z = forward.transform(longitude[known], latitude[known], np.zeros(int(known.sum())))
    position[known, 0], position[known, 1], position[known, 2] = x, y, z
    return position


def to_geographic(position) -> tuple[np.ndarray, np.ndarray]:
    """Geodetic longitude and latitude of Cartesian points on or near the WGS84 surface.

    Parameters
    ----------
    position : (n, 3) array-like [m]
        Earth-centred Cartesian coordinates.

    Returns
    -------
    longitude, latitude : (n,) float arrays [degrees]
        Longitude in [-180, 180). NaN in gives NaN out.
    """
    position = np.atleast_2d(np.asarray(position, dtype=float))
    known = np.isfinite(position).all(axis=1)
    longitude = np.full(len(position), np.nan)
    latitude = np.full(len(position), np.nan)
    inverse = Transformer.from_pipeline(f"+proj=pipeline +step +inv {_GEOCENTRIC}")
    lon, lat, _ = inverse.transform(*np.ascontiguousarray(position[known].T))
    longitude[known], latitude[known] = wrap_longitude(lon), lat
    return longitude, latitude


def wrap_longitude(longitude) -> np.ndarray:
    """The same meridians in [-180, 180), bit for bit where they already lie there [degrees]."""
    longitude = np.asarray(longitude, dtype=float)
    inside = (longitude >= -180.0) & (longitude < 180.0)
    wrapped = np.mod(longitude + 180.0, 360.0) - 180.0
    # The remainder of a tiny negative number rounds to 360, which must not become +180.
    wrapped = np.where(wrapped >= 180.0, -180.0, wrapped)
    return np.where(inside, longitude, wrapped)


@njit(cache=True, error_model="numpy")
def separation_components(ax, ay, az, bx, by, bz, planar):
    r"""Distance from a to b and its east and north parts.

    On the ellipsoid, with the chord c and the Euler radius of curvature R in the direction of the chord,

    .. math:: s = 2 R \arcsin\frac{c}{2R}, \qquad
              \frac{1}{R} = \frac{\cos^2 A}{M} + \frac{\sin^2 A}{N}

    where A is the azimuth of the chord, and M and N are the meridional and transverse radii of curvature,
    all at the midpoint. On a plane, plain differences (z is ignored).

    Parameters
    ----------
    ax, ay, az, bx, by, bz : float [m]
        Cartesian coordinates of the two points, as of `to_cartesian`, or x, y and 0 when `planar`.
    planar : bool

    Returns
    -------
    r, east, north : float [m]
        Distance, and components of the vector from a to b at the midpoint, ``east**2 + north**2 == r**2``.
        With the midpoint on the earth's axis, where there is no east, 90 E serves as east.

    Notes
    -----
    Relative error of r below 1e-7 up to 1000 km and 2e-5 up to 5000 km, of its azimuth below 0.001 and
    0.01 degrees, checked against geodesics (Karney 2013, doi:10.1007/s00190-012-0578-z); beyond that the
    error grows, to several per cent near the antipode. NaN in gives NaN out.
    """
    dx, dy, dz = bx - ax, by - ay, bz - az
    if planar:
        return math.sqrt(dx * dx + dy * dy), dx, dy
    mx, my, mz = ax + bx, ay + by, az + bz  # twice the midpoint; few divisions, since this is called for every sample
    nx, ny, nz = mx * _PER_A2, my * _PER_A2, mz * _PER_B2
    axial2 = mx * mx + my * my
    size2 = nx * nx + ny * ny + nz * nz
    per_size = 1.0 / math.sqrt(size2) if size2 > 0.0 else 0.0
    per_axial = 1.0 / math.sqrt(axial2) if axial2 > 0.0 else 0.0
    ex, ey = (-my * per_axial, mx * per_axial) if axial2 > 0.0 else (0.0, 1.0)
    sine, cosine = nz * per_size, axial2 * per_axial * _PER_A2 * per_size  # of the latitude
    east = dx * ex + dy * ey
    north = sine * (dy * ex - dx * ey) + cosine * dz
    level2 = east * east + north * north
    chord2 = dx * dx + dy * dy + dz * dz
    if level2 == 0.0:  # one and the same point, or the two ends of a diameter
        arc = math.sqrt(chord2) * _stretch(chord2 / (4.0 * EARTH_RADIUS**2))
        return arc, arc, 0.0
    per_level2 = 1.0 / level2
    w2 = 1.0 - ECCENTRICITY_SQUARED * sine * sine
    bent = (north * north * w2 * _PER_SQUASH + east * east) * per_level2
    curvature2 = w2 * bent * bent * _PER_A2
    stretch = _stretch(0.25 * chord2 * curvature2)
    scale = math.sqrt(chord2 * per_level2) * stretch
    return math.sqrt(chord2) * stretch, east * scale, north * scale


@njit(cache=True, error_model="numpy")
def _stretch(u2):
    """Arc over chord for u = chord / (2 R): series below u = 0.3 (error 2e-7), arcsine beyond."""
    if u2 < 0.09:
        return 1.0 + u2 * (1.0 / 6.0 + u2 * (3.0 / 40.0 + u2 * (5.0 / 112.0 + u2 * 35.0 / 1152.0)))
    u = math.sqrt(min(u2, 1.0))
    return math.asin(u) / math.sqrt(u2)


@njit(cache=True, error_model="numpy")
def _separations(a, b, planar):
    out = np.empty((a.shape[0], 3))
    for i in range(a.shape[0]):
        out[i, 0], out[i, 1], out[i, 2] = separation_components(
            a[i, 0], a[i, 1], a[i, 2], b[i, 0], b[i, 1], b[i, 2], planar
        )
    return out


def separation(a, b, planar: bool) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Distances from points a to points b with their east and north parts, row by row.

    Parameters
    ----------
    a, b : (n, 3) array-like [m]
        Cartesian coordinates.
    planar : bool

    Returns
    -------
    r, east, north : (n,) float arrays [m]
        See `separation_components`.
    """
    a = np.ascontiguousarray(np.atleast_2d(np.asarray(a, dtype=float)))
    b = np.ascontiguousarray(np.atleast_2d(np.asarray(b, dtype=float)))
    out = _separations(a, b, bool(planar))
    return out[:, 0], out[:, 1], out[:, 2]
