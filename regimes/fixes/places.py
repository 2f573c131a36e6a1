"""Are these positions what their columns say? Smell tests, and longitudes in one winding."""

from dataclasses import replace

import numpy as np

from regimes.errors import DataError
from regimes.fixes.record import Cleaning
from regimes.fixes.rows import Rows

_SLOWEST = 1e-4  # m/s; a median speed below it means that x and y are degrees


def checked_places(rows: Rows) -> tuple[Rows, list[Cleaning]]:
    """Rows with impossible positions set to NaN, longitudes in [-180, 180).

    Raises
    ------
    DataError
        If most positions are missing or impossible, or look like another kind of coordinate.
    """
    known = np.isfinite(rows.position).all(axis=1)
    if not known.any():
        words = "x and y" if rows.planar else "longitude and latitude"
        raise DataError(f"not one of {len(known)} rows has both {words}; check the columns and their fill values")
    if rows.planar:
        _refuse_degrees(rows, known)
        return rows, []
    longitude, latitude = rows.position[:, 0].copy(), rows.position[:, 1].copy()
    with np.errstate(invalid="ignore"):
        high = known & (np.abs(latitude) > 90)
        impossible = known & ((np.abs(latitude) > 90) | (np.abs(longitude) > 360))
        null = known & (longitude == 0) & (latitude == 0)
    if high.sum() > known.sum() / 2:
        _explain_latitudes(longitude[known], latitude[known])
    if impossible.sum() > known.sum() / 2:
        raise DataError(
            f"longitude lies outside -360 to 360 in {impossible.sum()} of {known.sum()} rows (largest "
            f"{np.abs(longitude[known]).max():g}); must be degrees; give positions in metres as x and y"
        )
    null = null if null.sum() < known.sum() / 2 else np.zeros_like(null)
    longitude[impossible | null] = latitude[impossible | null] = np.nan
    longitude = _wound(longitude)
    found = [
        Cleaning(
            "impossible positions",
            int(impossible.sum()),
            "latitude beyond 90 or longitude beyond 360; dropped",
        ),
        Cleaning("null positions", int(null.sum()), "exactly 0 N 0 E: no position was received; dropped"),
    ]
    return replace(rows, position=np.column_stack([longitude, latitude])), found


def _wound(longitude: np.ndarray) -> np.ndarray:
    """Longitudes in [-180, 180), bit for bit where they are already."""
    outside = (longitude < -180) | (longitude >= 180)
    turned = np.mod(longitude[outside] + 180.0, 360.0) - 180.0
    longitude[outside] = np.where(turned >= 180.0, -180.0, turned)
    return longitude


def _explain_latitudes(longitude: np.ndarray, latitude: np.ndarray) -> None:
    count = f"latitude lies outside -90 to 90 in {np.sum(np.abs(latitude) > 90)} of {len(latitude)} rows"
    if np.abs(latitude).max() <= 360 and np.abs(longitude).max() <= 90:
        raise DataError(f"{count} while longitude never does; are the two columns swapped?")
    raise DataError(
        f"{count} (largest {np.abs(latitude).max():g}); must be degrees; are these metres? Then name the "
        "columns as x and y"
    )


def _refuse_degrees(rows: Rows, known: np.ndarray) -> None:
    """Positions within +-360 that hardly move are degrees: as metres they would creep below 0.1 mm/s."""
    if np.abs(rows.position[known]).max() > 360:
        return
    used = known & np.isfinite(rows.time) & (rows.particle >= 0)
    order = np.lexsort((rows.time[used], rows.particle[used]))
    particle, time, place = (column[used][order] for column in (rows.particle, rows.time, rows.position))
    same = (particle[1:] == particle[:-1]) & (np.diff(time) > 0)
    if not same.any():
        return
    speed = np.hypot(*np.diff(place, axis=0)[same].T) / np.diff(time)[same]
    if np.median(speed) < _SLOWEST:
        raise DataError(
            f"x and y look like degrees: all lie within 360 and move {np.median(speed):.2g} m/s in the "
            "median; must be metres; name the columns as longitude and latitude if they are degrees"
        )
