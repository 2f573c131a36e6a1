"""A mean flow from a file: names, units, coordinates and what cannot be used."""

import numpy as np
import pytest
import xarray as xr

from regimes.errors import DataError
from regimes.fixes.flows import read_flow
from regimes.particles import MeanFlow

LON, LAT = np.array([10.0, 11.0, 12.0]), np.array([50.0, 51.0])
U = np.arange(6.0).reshape(2, 3)


def dataset(x="lon", y="lat", units="m s-1", factor=1.0):
    attributes = {} if units is None else {"units": units}
    return xr.Dataset({"u": ((y, x), factor * U, attributes), "v": ((y, x), -factor * U, attributes)}, {x: LON, y: LAT})


def written(tmp_path, data, engine="h5netcdf"):
    data.to_netcdf(tmp_path / "flow.nc", engine=engine)
    return read_flow(tmp_path / "flow.nc")


@pytest.mark.parametrize("engine", ["h5netcdf", "scipy"])
@pytest.mark.parametrize(("units", "factor"), [("m s-1", 1.0), ("cm/s", 100.0), (None, 1.0)])
def test_velocities_come_out_in_metres_per_second(tmp_path, engine, units, factor):
    flow = MeanFlow.from_dataset(written(tmp_path, dataset(units=units, factor=factor), engine))
    # a node of the grid, exact but for the scaling: round-off
    assert flow.at(np.array([11.0]), np.array([51.0]))[0] == pytest.approx((4.0, -4.0), rel=1e-12)


def test_coordinates_by_standard_name_and_by_name(tmp_path):
    named = dataset("nav_x", "nav_y")
    named["nav_x"].attrs["standard_name"], named["nav_y"].attrs["standard_name"] = "longitude", "latitude"
    for data in (named, dataset("longitude", "latitude"), dataset("LON", "LAT")):
        assert np.array_equal(MeanFlow.from_dataset(written(tmp_path, data)).u, U)


def test_plane_in_km_becomes_metres(tmp_path):
    data = dataset("x", "y")
    data["x"].attrs["units"] = data["y"].attrs["units"] = "km"
    flow = MeanFlow.from_dataset(written(tmp_path, data), planar=True)
    assert np.array_equal(flow.x, 1000.0 * LON)


def test_one_time_is_dropped_and_missing_values_are_unknown(tmp_path):
    data = dataset().expand_dims(time=[0.0])
    data["u"] = data["u"].where(data["lon"] < 12.0)
    data["u"].encoding["_FillValue"] = -999.0
    flow = MeanFlow.from_dataset(written(tmp_path, data))
    assert np.isnan(flow.u[:, 2]).all()
    assert np.array_equal(flow.u[:, :2], U[:, :2])


def test_two_times_are_refused(tmp_path):
    data = xr.concat([dataset(), dataset()], "time")
    with pytest.raises(DataError, match="u has dimensions time, lat, lon; must be lat and lon; choose one time"):
        MeanFlow.from_dataset(written(tmp_path, data))


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (dataset().drop_vars("v"), "no variable named v; the file has lat, lon, u; name the eastward"),
        (dataset(units="knot"), "variable u holds float64 in 'knot'; must hold numbers in m s-1 or cm s-1"),
    ],
)
def test_what_cannot_be_used_is_named(tmp_path, data, words):
    with pytest.raises(DataError, match=words):
        written(tmp_path, data)


def test_no_netcdf_and_no_file(tmp_path):
    (tmp_path / "flow.nc").write_text("lon,lat,u,v")
    with pytest.raises(DataError, match="is no NetCDF file"):
        read_flow(tmp_path / "flow.nc")
    with pytest.raises(DataError, match=r"cannot be read .*; give a NetCDF file of u and v"):
        read_flow(tmp_path / "absent.nc")
