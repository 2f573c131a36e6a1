"""Rows from NetCDF and Zarr: ragged arrays, particle x time, and plain tables along one dimension."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

from regimes.cases import Columns
from regimes.errors import DataError
from regimes.fixes.rows import Rows, rows_from
from regimes.fixes.tables import check_names, wanted
from regimes.fixes.times import seconds_since

METRES = {"": 1.0, "m": 1.0, "metre": 1.0, "metres": 1.0, "meter": 1.0, "meters": 1.0}
METRES |= {"km": 1e3, "kilometre": 1e3, "kilometres": 1e3, "kilometer": 1e3, "kilometers": 1e3}
_SIGNATURES = {b"CDF": "scipy", b"\x89HDF": "h5netcdf"}
_LARGEST_COORDINATE = 1e12  # beyond it stands an undeclared fill value


def read_netcdf(path: Path, columns: Columns) -> Rows:
    """Rows of a NetCDF file, classic or NetCDF-4."""
    with xr.open_dataset(path, engine=engine_of(path), decode_times=False) as dataset:
        return _rows(dataset, columns)


def engine_of(path: Path) -> str:
    """Name of the reader for a NetCDF file, by its first bytes.

    Raises
    ------
    DataError
        If it is no NetCDF file.
    """
    with path.open("rb") as file:
        start = file.read(4)
    engine = next((name for key, name in _SIGNATURES.items() if start.startswith(key)), None)
    if engine is None:
        raise DataError(f"{path}: is no NetCDF file (it begins with {start!r}); check the path or its ending")
    return engine


def read_zarr(path: Path, columns: Columns) -> Rows:
    """Rows of a Zarr store in a folder."""
    consolidated = (path / ".zmetadata").exists()
    with xr.open_dataset(path, engine="zarr", decode_times=False, consolidated=consolidated, chunks=None) as dataset:
        return _rows(dataset, columns)


def _rows(dataset: xr.Dataset, columns: Columns) -> Rows:
    check_names(columns, [*dataset.variables, *dataset.sizes], "variable")
    names = wanted(columns)
    parts = {name: dataset[name].variable for name in names}
    parts[columns.time] = _seconds(dataset[columns.time], columns.time)
    for name in columns.position:
        parts[name] = _coordinate(dataset[name], name, columns.planar)
    flat = _flatten(dataset, parts, columns)
    return rows_from(
        particle=_names(flat[columns.particle]),
        time=flat[columns.time],
        position=[flat[name] for name in columns.position],
        release=None if columns.release is None else _names(flat[columns.release]),
        planar=columns.planar,
    )


def _names(values: np.ndarray) -> pd.Series:
    """Names as text without padding, or as numbers."""
    if values.dtype.kind == "S":
        values = np.char.decode(values, "utf-8", "replace")
    return pd.Series(values.astype(object) if values.dtype.kind == "U" else values)


def _seconds(variable: xr.DataArray, name: str) -> xr.Variable:
    units, calendar = (str(variable.attrs.get(key, "")) for key in ("units", "calendar"))
    if not np.issubdtype(variable.dtype, np.number):
        raise DataError(f"variable {name}: holds {variable.dtype}; must hold numbers with units of time")
    return xr.Variable(variable.dims, seconds_since(variable.values, units, calendar, name))


def _coordinate(variable: xr.DataArray, name: str, planar: bool) -> xr.Variable:
    if not np.issubdtype(variable.dtype, np.number):
        raise DataError(f"variable {name}: holds {variable.dtype}; must hold numbers")
    units = str(variable.attrs.get("units", "")).strip()
    values = variable.values
    if values.dtype.kind != "f":
        values = values.astype(float)
    values = np.where(np.abs(values) < _LARGEST_COORDINATE, values, values.dtype.type(np.nan))
    if planar:
        if units.lower() not in METRES:
            raise DataError(f'variable {name}: units {units!r}; x and y must be in "m" or "km"')
        factor = METRES[units.lower()]
        return xr.Variable(variable.dims, values if factor == 1.0 else values * factor)
    if units.lower() and not units.lower().startswith("degree"):
        raise DataError(
            f"variable {name}: units {units!r}; longitude and latitude must be in degrees (use x and y for "
            "positions on a plane)"
        )
    return xr.Variable(variable.dims, values)


def _flatten(dataset: xr.Dataset, parts: dict[str, xr.Variable], columns: Columns) -> dict[str, np.ndarray]:
    """All variables along one axis of fixes, whatever the layout."""
    place = parts[columns.position[0]]
    if place.ndim == 1:
        ragged = _ragged(dataset, place.dims[0], parts[columns.particle].dims)
        if ragged is not None:
            parts = {name: ragged.spread(part) for name, part in parts.items()}
    shapes = ", ".join(f"{name}({', '.join(map(str, part.dims))})" for name, part in parts.items())
    spanned = {dim for part in parts.values() for dim in part.dims}
    if spanned - set(place.dims) or not 1 <= place.ndim <= 2:
        raise DataError(
            f"{shapes} do not fit together; must be all along one dimension, particle x time, or a ragged "
            "array whose count variable has the attribute sample_dimension, or index variable "
            "instance_dimension"
        )
    sizes = parts[columns.position[0]].sizes
    return {name: part.set_dims(sizes).values.ravel() for name, part in parts.items()}


@dataclass(frozen=True, slots=True)
class _Ragged:
    """A ragged array: its dimensions, and the particle number of each fix (-1 for rows of none)."""

    instance: str
    sample: str
    index: np.ndarray

    def spread(self, part: xr.Variable) -> xr.Variable:
        """A variable along the fixes; those given per particle repeated, rows of no particle left out."""
        used = self.index >= 0
        if part.dims == (self.instance,):
            return xr.Variable((self.sample,), part.values[self.index[used]])
        return xr.Variable(part.dims, part.values[used]) if part.dims == (self.sample,) else part


def _ragged(dataset: xr.Dataset, sample: str, particle_dims: tuple) -> _Ragged | None:
    """The ragged layout of the fixes along a dimension, contiguous or indexed; None if there is none.

    A variable of counts that lacks the attribute of the CF conventions is accepted if it is the only one of
    whole numbers along the particles that adds up to the number of fixes.
    """
    unmarked = []
    for name, variable in dataset.variables.items():
        if variable.attrs.get("sample_dimension") == sample and variable.ndim == 1:
            return _contiguous(dataset, sample, str(name))
        if "instance_dimension" in variable.attrs and variable.dims == (sample,):
            return _indexed(dataset, sample, str(name))
        whole = variable.dtype.kind in "iu" and variable.dims == particle_dims != (sample,)
        if whole and variable.ndim == 1 and variable.values.sum() == dataset.sizes[sample]:
            unmarked.append(str(name))
    return _contiguous(dataset, sample, unmarked[0]) if len(unmarked) == 1 else None


def _contiguous(dataset: xr.Dataset, sample: str, name: str) -> _Ragged:
    count = np.nan_to_num(dataset[name].values).astype(np.int64)
    size = dataset.sizes[sample]
    if count.min(initial=0) < 0 or count.sum() > size:
        raise DataError(
            f"variable {name}: counts {count.sum()} fixes but dimension {sample} has {size}; the file is "
            "damaged or cut short"
        )
    index = np.repeat(np.arange(len(count)), count)
    return _Ragged(str(dataset[name].dims[0]), sample, np.append(index, np.full(size - len(index), -1)))


def _indexed(dataset: xr.Dataset, sample: str, name: str) -> _Ragged:
    instance = str(dataset[name].attrs["instance_dimension"])
    index = np.nan_to_num(dataset[name].values, nan=-1).astype(np.int64)
    if instance not in dataset.sizes or index.max(initial=-1) >= dataset.sizes[instance]:
        raise DataError(f"variable {name}: points beyond dimension {instance}; the file is damaged or cut short")
    return _Ragged(instance, sample, index)
