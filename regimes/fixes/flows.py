"""A mean flow on a grid from a CF NetCDF file."""

from pathlib import Path

import numpy as np
import xarray as xr

from regimes.errors import DataError
from regimes.fixes.gridded import METRES, engine_of

_PER_SECOND = {"": 1.0, "m/s": 1.0, "m s-1": 1.0, "m.s-1": 1.0, "m s^-1": 1.0, "m s**-1": 1.0, "meter second-1": 1.0}
_PER_SECOND |= {"cm/s": 0.01, "cm s-1": 0.01, "cm.s-1": 0.01, "cm s^-1": 0.01, "cm s**-1": 0.01}
_STANDARD = {"longitude": "lon", "latitude": "lat", "projection_x_coordinate": "x", "projection_y_coordinate": "y"}
_NAMES = {"longitude": "lon", "latitude": "lat", "lon": "lon", "lat": "lat", "x": "x", "y": "y"}


def read_flow(path: str | Path) -> xr.Dataset:
    """Velocities `u` and `v` of a NetCDF file, classic or NetCDF-4, over longitude and latitude or x and y.

    Parameters
    ----------
    path : str or Path

    Returns
    -------
    xarray.Dataset
        `u` and `v` [m/s, NaN where unknown] over `lon` and `lat` [degrees], or over `x` and `y` [m]. Coordinates are
        known by their CF standard name, else by the names longitude and latitude, lon and lat, x and y. Dimensions of
        one point (one time, one level) are dropped.

    Raises
    ------
    DataError
        If the file cannot be read, `u` or `v` is missing, or units are not those of a velocity or length.
    """
    path = Path(path)
    try:
        with xr.open_dataset(path, engine=engine_of(path), decode_times=False) as dataset:
            return _prepared(dataset, path)
    except OSError as error:
        raise DataError(f"{path}: cannot be read ({error}); give a NetCDF file of u and v") from error


def _prepared(dataset: xr.Dataset, path: Path) -> xr.Dataset:
    missing = [name for name in ("u", "v") if name not in dataset.data_vars]
    if missing:
        known = ", ".join(sorted(map(str, dataset.variables))) or "nothing"
        raise DataError(
            f"{path}: no variable named {' or '.join(missing)}; the file has {known}; name the eastward and northward "
            "velocity u and v"
        )
    out = dataset[["u", "v"]].squeeze(drop=True)
    for name in ("u", "v"):
        out[name] = _scaled(out[name], _PER_SECOND, path, "m s-1 or cm s-1")
    names = {name: _coordinate(out[name]) for name in out.coords}
    out = out.rename({name: new for name, new in names.items() if new is not None and new != name})
    for name in ("x", "y"):
        if name in out.coords:
            out[name] = _scaled(out[name], METRES, path, "m or km")
    return out.load()


def _coordinate(variable: xr.DataArray) -> str | None:
    """lon, lat, x or y, or None for a coordinate of another kind."""
    return _STANDARD.get(str(variable.attrs.get("standard_name", "")), _NAMES.get(str(variable.name).lower()))


def _scaled(variable: xr.DataArray, factors: dict[str, float], path: Path, allowed: str) -> xr.DataArray:
    """The variable in SI units; without a unit it is taken to be so."""
    unit = " ".join(str(variable.attrs.get("units", "")).lower().split())
    if unit not in factors or not np.issubdtype(variable.dtype, np.number):
        raise DataError(
            f"{path}: variable {variable.name} holds {variable.dtype} in {unit!r}; must hold numbers in {allowed}; "
            "convert it"
        )
    return variable.astype(float) * factors[unit]
