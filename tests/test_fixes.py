"""Fixes: every accepted form of file gives the same record; what cannot be used is refused with a reason."""

import gzip
import hashlib
from datetime import UTC, datetime, timedelta

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from regimes.errors import CaseError, DataError
from regimes.fixes import Columns, Fixes, fixes_from_frame, read_fixes, write_fixes
from regimes.fixes.reading import sha256_of

GEO = Columns(particle="id", time="time", longitude="lon", latitude="lat")
GEO_RELEASE = Columns(particle="id", time="time", longitude="lon", latitude="lat", release="release")
PLANE = Columns(particle="id", time="time", x="x_m", y="y_m")
START = datetime(2024, 2, 28, 22, tzinfo=UTC)
FILL = 9.969209968386869e36  # netCDF's default for doubles (its C header; from memory)

COUNTS = {"a7": 5, "b": 3, "c": 4}


def drifts():
    """Twelve invented fixes of three particles, hourly, crossing the date line."""
    rows = []
    for k, (name, count) in enumerate(COUNTS.items()):
        for i in range(count):
            lon = (179.98 + 0.01 * i + 0.002 * k + 180) % 360 - 180
            stamp = START + timedelta(hours=i, minutes=10 * k)
            rows.append((name, stamp, round(lon, 6), round(-10.0 + 0.01 * i - 0.1 * k, 6), f"r{k % 2}"))
    return pd.DataFrame(rows, columns=["id", "time", "lon", "lat", "release"])


def epoch(frame):
    return np.array([stamp.timestamp() for stamp in frame["time"]])


def check(fixes, release=False):
    """Compare with the rows that were invented, through Python's own dates."""
    frame = drifts()
    assert fixes.labels == ("a7", "b", "c")
    np.testing.assert_array_equal(fixes.particle, np.repeat([0, 1, 2], list(COUNTS.values())))
    np.testing.assert_array_equal(fixes.time, epoch(frame))
    np.testing.assert_allclose(fixes.position, frame[["lon", "lat"]], atol=1e-9, rtol=0)
    assert fixes.position_error == 5.0
    assert not fixes.planar
    if release:
        assert fixes.release_labels == ("r0", "r1")
        np.testing.assert_array_equal(fixes.release, [0, 1, 0])
    else:
        assert fixes.release_labels == ()
        np.testing.assert_array_equal(fixes.release, [-1, -1, -1])


def iso(frame):
    return frame.assign(time=[stamp.strftime("%Y-%m-%dT%H:%M:%SZ") for stamp in frame["time"]])


# --- tables ---------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "options"),
    [
        ("f.csv", {}),
        ("f.CSV", {}),
        ("f.csv.gz", {}),
        ("f.csv", {"sep": ";"}),
        ("f.txt", {"sep": "\t"}),
        ("f.tsv", {"sep": "\t"}),
        ("f.txt", {"sep": " "}),
        ("f.csv", {"encoding": "utf-8-sig"}),
        ("f.csv", {"lineterminator": "\r\n"}),
        ("f.csv", {"quoting": 1}),
    ],
)
def test_text_tables(tmp_path, name, options):
    iso(drifts()).to_csv(tmp_path / name, index=False, **options)
    check(read_fixes(tmp_path / name, GEO, 5.0))
    check(read_fixes(str(tmp_path / name), GEO_RELEASE, 5.0), release=True)


def test_text_table_with_comments_blanks_and_other_columns(tmp_path):
    text = iso(drifts()).assign(quality="good, #1").to_csv(index=False)
    padded = text.replace(",", ", ").replace("id, time", "id , time", 1)
    (tmp_path / "f.csv").write_text("# made up\n\n" + padded)
    check(read_fixes(tmp_path / "f.csv", GEO, 5.0))


def test_a_line_of_units_below_the_header_is_one_dropped_row(tmp_path):
    frame = iso(drifts())[["id", "time", "lon", "lat"]]
    for times in (frame["time"], epoch(drifts()).astype(int)):
        lines = frame.assign(time=times).to_csv(index=False).splitlines()
        (tmp_path / "f.csv").write_text("\n".join([lines[0], ",UTC,degrees_east,degrees_north", *lines[1:]]))
        fixes = read_fixes(tmp_path / "f.csv", GEO, 5.0)
        check(fixes)
        assert [(item.reason, item.count) for item in fixes.cleaning] == [("fill-value times", 1)]


def test_names_stay_as_they_are_written(tmp_path):
    frame = iso(drifts()).assign(id=["007"] * 5 + ["NA"] * 3 + ["1e5"] * 4)
    frame.to_csv(tmp_path / "f.csv", index=False)
    assert read_fixes(tmp_path / "f.csv", GEO, 5.0).labels == ("007", "1e5", "NA")
    frame.assign(id=["007"] * 5 + ["08"] * 7, time=epoch(drifts())).to_csv(tmp_path / "f.csv", index=False)
    assert read_fixes(tmp_path / "f.csv", GEO, 5.0, highest_speed=1e4).labels == ("007", "08")


def test_padding_around_names_goes():
    frame = drifts()
    frame["id"] = [name + " " * (k % 3) for k, name in enumerate(frame["id"])]
    check(fixes_from_frame(frame, GEO, 5.0))
    frame["id"] = [name.strip().encode() + b"\0" * (k % 2) for k, name in enumerate(frame["id"])]
    check(fixes_from_frame(frame, GEO, 5.0))


def test_numbered_particles_are_in_numerical_order():
    frame = drifts()
    assert fixes_from_frame(frame.assign(id=[10] * 5 + [9] * 3 + [100] * 4), GEO, 5.0).labels == (
        "9",
        "10",
        "100",
    )
    floats = frame.assign(id=[10.0] * 5 + [9.0] * 3 + [np.nan] * 4)
    assert fixes_from_frame(floats, GEO, 5.0).labels == ("9", "10")


@pytest.mark.parametrize(
    "form",
    [
        lambda t: t.strftime("%Y-%m-%d %H:%M:%S"),
        lambda t: t.strftime("%Y-%m-%dT%H:%M"),
        lambda t: t.strftime("%Y-%m-%d %H:%M:%S UTC"),
        lambda t: t.strftime("%Y/%m/%d %H:%M:%S"),
        lambda t: t.strftime("%Y%m%dT%H%M%SZ"),
        lambda t: (t + timedelta(hours=2)).strftime("%Y-%m-%dT%H:%M:%S+02:00"),
        lambda t: (t - timedelta(hours=3)).strftime("%Y-%m-%d %H:%M:%S -0300"),
        lambda t: t.strftime("%Y-%m-%dT%H:%M:%S.000Z"),
        lambda t: t.timestamp(),
        lambda t: t,
        lambda t: t.replace(tzinfo=None),
        pd.Timestamp,
        lambda t: pd.Timestamp(t).tz_convert("Asia/Tokyo"),
        lambda t: np.datetime64(t.replace(tzinfo=None), "ns"),
    ],
)
def test_forms_of_time(form, tmp_path):
    frame = drifts()
    frame["time"] = [form(stamp) for stamp in frame["time"]]
    check(fixes_from_frame(frame, GEO, 5.0))
    frame.to_csv(tmp_path / "f.csv", index=False)
    check(read_fixes(tmp_path / "f.csv", GEO, 5.0))
    frame.to_parquet(tmp_path / "f.parquet")
    check(read_fixes(tmp_path / "f.parquet", GEO, 5.0))


def test_parquet_with_an_index_and_in_parts(tmp_path):
    frame = iso(drifts())
    frame.set_index(["id", "time"]).to_parquet(tmp_path / "f.parquet")
    check(read_fixes(tmp_path / "f.parquet", GEO_RELEASE, 5.0), release=True)
    (tmp_path / "parts.parquet").mkdir()
    frame[:7].to_parquet(tmp_path / "parts.parquet" / "0.parquet")
    frame[7:].to_parquet(tmp_path / "parts.parquet" / "1.parquet")
    check(read_fixes(tmp_path / "parts.parquet", GEO, 5.0))


def test_plane(tmp_path):
    frame = iso(drifts()).assign(x_m=np.arange(12) * 1000.0, y_m=-5.0)
    frame.to_csv(tmp_path / "f.csv", index=False)
    fixes = read_fixes(tmp_path / "f.csv", PLANE, 5.0)
    assert fixes.planar
    np.testing.assert_array_equal(fixes.position[:, 0], np.arange(12) * 1000.0)


def test_a_pool_in_metres_is_no_pool_of_degrees():
    frame = iso(drifts()).assign(x_m=np.arange(12) * 3.6, y_m=-5.0)  # a millimetre per second
    assert fixes_from_frame(frame, PLANE, 0.01).n_fix == 12


def test_provenance(tmp_path):
    path = tmp_path / "f.csv"
    iso(drifts()).to_csv(path, index=False)
    source = read_fixes(path, GEO, 5.0).source
    assert source.path == str(path)
    assert source.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
    memory = fixes_from_frame(drifts(), GEO, 5.0).source
    assert (memory.path, memory.sha256) == ("memory", None)


# --- NetCDF and Zarr ------------------------------------------------------------------------------------


def since(times, units="seconds since 1970-01-01 00:00:00", dims=("obs",)):
    return xr.Variable(dims, times, {"units": units})


def table():
    """The fixes as a dataset along one dimension."""
    frame = drifts()
    return xr.Dataset(
        {
            "id": ("obs", frame["id"].to_numpy(dtype=str)),
            "time": since(epoch(frame)),
            "lon": ("obs", frame["lon"].to_numpy(), {"units": "degrees_east"}),
            "lat": ("obs", frame["lat"].to_numpy(), {"units": "degrees_north"}),
            "release": ("obs", frame["release"].to_numpy(dtype=str)),
        }
    )


def ragged(**count_attributes):
    """The fixes as a contiguous ragged array of CF."""
    flat = table()
    return flat.drop_vars(["id", "release"]).assign(
        id=("trajectory", np.array(list(COUNTS))),
        release=("trajectory", np.array(["r0", "r1", "r0"])),
        size=("trajectory", np.array(list(COUNTS.values())), count_attributes),
    )


def matrix(fill, width=6):
    """The fixes as particle x time, padded."""
    flat = table()
    out = {}
    for name in ("time", "lon", "lat"):
        values = np.full((3, width), fill)
        for k, name_of_particle in enumerate(COUNTS):
            own = flat[name].values[flat["id"].values == name_of_particle]
            values[k, : len(own)] = own
        out[name] = (("trajectory", "obs"), values, flat[name].attrs)
    return xr.Dataset(out | {"id": ("trajectory", np.array(list(COUNTS)))})


@pytest.mark.parametrize("name", ["f.nc", "f.zarr"])
def test_gridded_forms(tmp_path, name):
    def read(dataset, columns=GEO):
        path = tmp_path / name
        if name.endswith(".nc"):
            dataset.to_netcdf(path, engine="h5netcdf")
        else:
            dataset.to_zarr(path, mode="w", zarr_format=2, consolidated=True)
        return read_fixes(path, columns, 5.0)

    check(read(table(), GEO_RELEASE), release=True)
    check(read(ragged(sample_dimension="obs"), GEO_RELEASE), release=True)
    check(read(ragged(), GEO_RELEASE), release=True)  # counts that lack their attribute
    check(read(matrix(np.nan)))
    check(read(matrix(np.nan).transpose()))
    check(read(matrix(FILL)))
    index = np.repeat([2, 0, 1], [4, 5, 3])
    order = np.argsort(np.argsort(index, kind="stable"), kind="stable")
    flat = table().drop_vars(["id", "release"]).isel(obs=order)
    indexed = flat.assign(
        id=("trajectory", np.array(list(COUNTS))),
        owner=("obs", index, {"instance_dimension": "trajectory"}),
    )
    check(read(indexed))


@pytest.mark.parametrize("zarr_format", [2, 3])
def test_zarr_of_both_formats_without_summary_file(tmp_path, zarr_format):
    flat = table()
    flat["id"] = ("obs", np.repeat([1, 2, 3], list(COUNTS.values())))
    flat.drop_vars("release").to_zarr(tmp_path / "f.zarr", zarr_format=zarr_format, consolidated=False)
    fixes = read_fixes(tmp_path / "f.zarr", GEO, 5.0)
    assert fixes.labels == ("1", "2", "3")
    np.testing.assert_array_equal(fixes.time, epoch(drifts()))


def test_checksum_of_a_folder_sees_names_and_where_files_end(tmp_path):
    sums = set()
    for k, content in enumerate(({"x": "12", "y": ""}, {"x": "1", "y": "2"}, {"x": "1", "z": "2"})):
        (tmp_path / str(k) / "in").mkdir(parents=True)
        for name, text in content.items():
            (tmp_path / str(k) / "in" / name).write_text(text)
        sums.add(sha256_of(tmp_path / str(k)))
    assert len(sums) == 3


def test_checksum_of_a_store_sees_its_content(tmp_path):
    for name, value in (("a", 1.0), ("b", 1.0), ("c", 2.0)):
        data = table().drop_vars(["id", "release"]).assign(id=("obs", np.repeat([1, 2, 3], list(COUNTS.values()))))
        data["lat"] = data["lat"] + value
        data.to_zarr(tmp_path / f"{name}.zarr", zarr_format=2, consolidated=False)
    sums = [read_fixes(tmp_path / f"{name}.zarr", GEO, 5.0).source.sha256 for name in "abc"]
    assert sums[0] == sums[1] != sums[2]


def test_classic_netcdf_with_text_as_characters(tmp_path):
    data = table()
    data["id"] = data["id"].astype("S4")  # padded with zero bytes
    data["release"] = data["release"].astype("S2")
    data.to_netcdf(tmp_path / "f.nc", engine="scipy")
    check(read_fixes(tmp_path / "f.nc", GEO_RELEASE, 5.0), release=True)


def test_particles_without_names_are_numbered(tmp_path):
    matrix(np.nan).drop_vars("id").to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    columns = Columns(particle="trajectory", time="time", longitude="lon", latitude="lat")
    assert read_fixes(tmp_path / "f.nc", columns, 5.0).labels == ("0", "1", "2")


def test_one_time_axis_for_all_particles(tmp_path):
    data = xr.Dataset(
        {
            "time": since(epoch(drifts())[:4], dims=("step",)),
            "lon": (("p", "step"), np.arange(8.0).reshape(2, 4) / 100),
            "lat": (("p", "step"), np.ones((2, 4))),
        }
    ).set_coords(["time", "lon"])
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    fixes = read_fixes(tmp_path / "f.nc", Columns(particle="p", time="time", longitude="lon", latitude="lat"), 5.0)
    np.testing.assert_array_equal(fixes.time, np.tile(epoch(drifts())[:4], 2))
    np.testing.assert_array_equal(fixes.position[:, 0], np.arange(8) / 100)


@pytest.mark.parametrize(
    ("units", "origin", "unit"),
    [
        ("seconds since 1970-01-01 00:00:00 +0000", "1970-01-01", 1),
        ("seconds since 1970-01-01T00:00:00Z", "1970-01-01", 1),
        ("Seconds since 1970-01-01 UTC", "1970-01-01", 1),
        ("minutes since 2000-1-1 00:00:00 GMT", "2000-01-01", 60),
        ("hours since 1950-01-01T00:00:00+00:00", "1950-01-01", 3600),
        ("h since 1950-01-01 12:00:00 +12:00", "1950-01-01", 3600),
        ("day since 2000-01-01 00:00:0.0", "2000-01-01", 86400),
        ("milliseconds since 1970-01-01", "1970-01-01", 0.001),
    ],
)
def test_units_of_time(tmp_path, units, origin, unit):
    data = table()
    shift = datetime.fromisoformat(origin).replace(tzinfo=UTC).timestamp()
    data["time"] = since((epoch(drifts()) - shift) / unit, units)
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    fixes = read_fixes(tmp_path / "f.nc", GEO, 5.0)
    np.testing.assert_allclose(fixes.time, epoch(drifts()), rtol=0, atol=1e-4)  # round-off of days in a double


def test_padding_with_whole_numbers_is_no_time(tmp_path):
    data = matrix(np.nan, width=30)
    times = np.where(np.isnan(data["time"]), -2147483647, data["time"]).astype(np.int32)
    data["time"] = since(times, dims=("trajectory", "obs"))
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    fixes = read_fixes(tmp_path / "f.nc", GEO, 5.0)
    check(fixes)
    assert [(item.reason, item.count) for item in fixes.cleaning] == [("fill-value times", 78)]


def test_more_padding_than_data(tmp_path):
    matrix(FILL, width=30).to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    fixes = read_fixes(tmp_path / "f.nc", GEO, 5.0)
    check(fixes)
    assert [(item.reason, item.count) for item in fixes.cleaning] == [("fill-value times", 78)]


def test_kilometres_become_metres(tmp_path):
    data = table().assign(x_m=("obs", np.arange(12.0), {"units": "km"}), y_m=("obs", np.full(12, -5.0), {"units": "m"}))
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    fixes = read_fixes(tmp_path / "f.nc", PLANE, 5.0)
    np.testing.assert_array_equal(fixes.position[:, 0], np.arange(12) * 1000.0)
    np.testing.assert_array_equal(fixes.position[:, 1], np.full(12, -5.0))


def test_single_precision_is_noted(tmp_path):
    data = table()
    data["lon"] = data["lon"].astype(np.float32)
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    # Spacing of single precision at 180: 2^-16 degrees, 1.7 m at the equator.
    [note] = read_fixes(tmp_path / "f.nc", GEO, 1.0).cleaning
    assert (note.reason, note.count) == ("single precision", 12)
    assert "stored to 1.7 m" in note.note
    assert read_fixes(tmp_path / "f.nc", GEO, 2.0).cleaning == ()


# --- writing --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["f.csv", "f.csv.gz", "f.parquet"])
@pytest.mark.parametrize("release", [True, False])
def test_written_fixes_read_back(tmp_path, name, release):
    fixes = fixes_from_frame(drifts(), GEO_RELEASE if release else GEO, 5.0)
    write_fixes(fixes, tmp_path / name)
    columns = Columns(
        particle="particle",
        time="time",
        longitude="longitude",
        latitude="latitude",
        release="release" if release else None,
    )
    check(read_fixes(tmp_path / name, columns, 5.0), release)
    first = (tmp_path / name).read_bytes()
    write_fixes(fixes, str(tmp_path / name))
    assert (tmp_path / name).read_bytes() == first


def test_bytes_of_a_written_table(tmp_path):
    fixes = Fixes(
        [0, 0, 1, 1],
        ("a", "b"),
        [1e9, 1e9 + 0.5, 1e9, 1e9 + 60],
        [[-0.001, 1.234567], [0.0, 5e5], [1.0, 2.0], [3.0, 4.0]],
        True,
        [0, -1],
        ("r",),
        1.0,
    )
    write_fixes(fixes, tmp_path / "f.csv")
    # 10^9 seconds since 1970 are 2001-09-09T01:46:40Z, the "billennium" (from memory).
    assert (tmp_path / "f.csv").read_text() == (
        "particle,time,x_m,y_m,release\n"
        "a,2001-09-09T01:46:40.000Z,0.00,1.23,r\n"
        "a,2001-09-09T01:46:40.500Z,0.00,500000.00,r\n"
        "b,2001-09-09T01:46:40.000Z,1.00,2.00,\n"
        "b,2001-09-09T01:47:40.000Z,3.00,4.00,\n"
    )
    write_fixes(fixes, tmp_path / "f.csv.gz")
    assert gzip.decompress((tmp_path / "f.csv.gz").read_bytes()) == (tmp_path / "f.csv").read_bytes()
    assert (tmp_path / "f.csv.gz").read_bytes()[4:8] == bytes(4)  # no time in the header (RFC 1952, MTIME)


def test_refuses_to_write_another_ending(tmp_path):
    with pytest.raises(CaseError, match=r"f\.nc: cannot write this ending; known: \.csv, \.csv\.gz, \.parquet"):
        write_fixes(fixes_from_frame(drifts(), GEO, 5.0), tmp_path / "f.nc")


# --- refusals -------------------------------------------------------------------------------------------


def refuse(path, message, columns=GEO):
    with pytest.raises(DataError, match=message) as caught:
        read_fixes(path, columns, 5.0)
    assert str(caught.value).count(str(path)) == 1


def test_no_file_no_known_ending_nothing_inside(tmp_path):
    refuse(tmp_path / "f.csv", "no such file; check observations.path")
    (tmp_path / "f.xlsx").write_text("x")
    refuse(tmp_path / "f.xlsx", r"the ending \.xlsx is not known; known: \.csv, .*\.zarr")
    (tmp_path / "fixes").write_text("x")
    refuse(tmp_path / "fixes", r"the ending \(none\) is not known")
    (tmp_path / "g.csv").mkdir()
    refuse(tmp_path / "g.csv", "is a folder; must be a file")
    (tmp_path / "e.csv").write_text("")
    refuse(tmp_path / "e.csv", "the file is empty")
    (tmp_path / "h.csv").write_text("# only\n\n")
    refuse(tmp_path / "h.csv", "no header line; must be a table with named columns")
    (tmp_path / "i.csv").write_text("id,time,lon,lat\n")
    refuse(tmp_path / "i.csv", "no rows: the table has a header but no fix")


@pytest.mark.parametrize("name", ["f.parquet", "f.csv.gz", "f.csv"])
def test_damaged_files(tmp_path, name):
    (tmp_path / name).write_bytes(b"\x00\xff\xfe broken \x80\n" * 20)
    refuse(tmp_path / name, r"cannot be read as .* \(.*\); is it damaged or another format\?")


@pytest.mark.parametrize("name", ["f.csv.gz", "f.parquet", "f.nc"])
def test_files_cut_short(tmp_path, name):
    frame = iso(drifts())
    if name.endswith("nc"):
        table().to_netcdf(tmp_path / name, engine="h5netcdf")
    else:
        getattr(frame, "to_parquet" if "parquet" in name else "to_csv")(tmp_path / name)
    content = (tmp_path / name).read_bytes()
    (tmp_path / name).write_bytes(content[: len(content) * 2 // 3])
    refuse(tmp_path / name, r"cannot be read as .*is it damaged or another format\?")


def test_netcdf_in_name_only(tmp_path):
    (tmp_path / "f.nc").write_text("id,time,lon,lat\n")
    refuse(tmp_path / "f.nc", r"is no NetCDF file \(it begins with b'id,t'\); check the path or its ending")


def test_zarr_in_name_only(tmp_path):
    (tmp_path / "f.zarr").mkdir()
    refuse(tmp_path / "f.zarr", r"cannot be read as Zarr .*is it damaged or another format\?")


@pytest.mark.parametrize("name", ["f.csv", "f.parquet", "f.nc"])
def test_missing_columns_are_named_with_those_that_exist(tmp_path, name):
    frame = iso(drifts()).rename(columns={"lon": "Longitude", "id": "buoy"})
    if name.endswith("nc"):
        table().rename({"lon": "Longitude", "id": "buoy"}).to_netcdf(tmp_path / name, engine="h5netcdf")
    else:
        getattr(frame, "to_parquet" if "parquet" in name else "to_csv")(tmp_path / name, index=False)
    word = "variable" if name.endswith("nc") else "column"
    columns = Columns(particle="id", time="time", longitude="longitude", latitude="lat")
    refuse(
        tmp_path / name,
        rf"no {word} named id, longitude; there are .*lat.*; did you mean Longitude\?",
        columns,
    )


def frame_of(**changes):
    return iso(drifts()).assign(x_m=np.arange(12) * 1e3, y_m=np.arange(12) * 1e3).assign(**changes)


@pytest.mark.parametrize(
    ("changes", "columns", "message"),
    [
        ({"lon": np.nan}, GEO, "not one of 12 rows has both longitude and latitude; check the columns"),
        ({"x_m": np.nan}, PLANE, "not one of 12 rows has both x and y; check the columns"),
        (
            {"id": [None] * 12},
            GEO,
            "not one of 12 rows has a particle, a time between 1973 and 2100 and a position",
        ),
        (
            {"lat": np.arange(12) * 1e4},
            GEO,
            r"latitude .* 11 of 12 rows \(largest 110000\).*are these metres\?",
        ),
        (
            {"lon": 10.0, "lat": 120.0},
            GEO,
            r"12 of 12 rows while longitude never does; are the two columns swapped\?",
        ),
        (
            {"lon": 5e5},
            GEO,
            r"longitude lies outside -360 to 360 in 12 of 12 rows \(largest 500000\); must be deg",
        ),
        (
            {"x_m": 10 + np.arange(12) / 100, "y_m": 5.0},
            PLANE,
            r"x and y look like degrees: all lie within 360 and move 2\.8e-06 m/s in the median; must be met",
        ),
        ({"lon": 0.0, "lat": 0.0}, GEO, "all 12 fixes of all 3 particles lie at one point"),
        ({"lon": 1.0, "lat": 2.0}, GEO, "all 12 fixes of all 3 particles lie at one point"),
        (
            {"lon": "10,5"},
            GEO,
            r'column lon: 12 of 12 values are no numbers, such as "10,5"; must be decimal',
        ),
        (
            {"time": "28.02.2024 10:00"},
            GEO,
            r'12 of 12 times cannot be read, such as "28\.02\.2024 10:00"; must be',
        ),
        (
            {"time": 20240228},
            GEO,
            "numbers such as 20240228 are no seconds since 1970 between 1973 and 2100; give",
        ),
        ({"time": 1.7e12}, GEO, "between 1973 and 2100; these look like milliseconds; give ISO times"),
        ({"time": "1970-01-01T00:00:00Z"}, GEO, "no seconds since 1970 between 1973 and 2100"),
        ({"id": [f"fix {i}" for i in range(12)]}, GEO, "not one of 12 particles has two usable fixes"),
        (
            {"release": ["r0", "r1"] * 6},
            GEO_RELEASE,
            r"particle a7 has more than one release \(r0, r1\); a particle belongs to one release",
        ),
        (
            {"id": "all", "time": "2024-01-01", "lon": np.arange(12.0)},
            GEO,
            "12 of 12 fixes share particle and time with another at a different place, such as particle all",
        ),
        (
            {"lon": [0.0, 90.0] * 6},
            GEO,
            r"fixes need a speed above .* m/s; check the units of time and position",
        ),
    ],
)
def test_content_that_cannot_be_what_it_claims(changes, columns, message):
    frame = frame_of(**changes)
    limit = 5.0 if "speed" in message else None
    with pytest.raises(DataError, match=message):
        fixes_from_frame(frame, columns, 5.0, limit)


def gridded(tmp_path, data, message, columns=GEO):
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    refuse(tmp_path / "f.nc", message, columns)


def test_gridded_times_that_cannot_be_used(tmp_path):
    for attributes, message in (
        (
            {"units": "months since 2000-01-01"},
            "units 'months since 2000-01-01' cannot be read; must be like",
        ),
        ({}, "units '' cannot be read; must be like"),
        (
            {"units": "days since when"},
            "the date 'when' in its units cannot be read; must be like 1970-01-01",
        ),
        (
            {"units": "days since 2000-01-01", "calendar": "360_day"},
            "calendar '360_day' is not .* must be one of",
        ),
        (
            {"units": "days since 2000-01-01", "calendar": "noleap"},
            "calendar 'noleap' is not .* must be one of",
        ),
        (
            {"units": "days since 0001-01-01"},
            'are ambiguous by days; set the calendar to "proleptic_gregorian"',
        ),
        ({"units": "days since 1970-01-01"}, "no seconds since 1970 between 1973 and 2100"),
    ):
        gridded(tmp_path, table().assign(time=("obs", epoch(drifts()), attributes)), message)
    gridded(tmp_path, table().assign(time=("obs", np.array(["x"] * 12))), "time: holds .*; must hold numbers with")


def test_days_of_an_early_epoch_in_the_proleptic_calendar(tmp_path):
    # Python's date.toordinal counts days of the proleptic Gregorian calendar, 1 on 0001-01-01.
    days = [START.toordinal() - 1 + (START.hour + i) / 24 for i in range(12)]
    attributes = {"units": "days since 0001-01-01", "calendar": "proleptic_gregorian"}
    data = table().assign(time=("obs", np.array(days), attributes))
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    fixes = read_fixes(tmp_path / "f.nc", GEO, 5.0, highest_speed=1e6)
    np.testing.assert_allclose(fixes.time - START.timestamp(), np.arange(12) * 3600.0, atol=1e-3)


def test_gridded_positions_that_cannot_be_used(tmp_path):
    for values, units, message in (
        (np.zeros(12), "m", "variable lon: units 'm'; longitude and latitude must be in degrees"),
        (np.zeros(12), "radian", "variable lon: units 'radian'; longitude and latitude must be in degrees"),
        (np.array(["x"] * 12), "", "variable lon: holds .*; must hold numbers"),
    ):
        gridded(tmp_path, table().assign(lon=("obs", values, {"units": units})), message)
    bad = table().assign(x_m=("obs", np.zeros(12), {"units": "feet"}), y_m=("obs", np.zeros(12)))
    gridded(tmp_path, bad, """variable x_m: units 'feet'; x and y must be in "m" or "km\"""", PLANE)


def test_gridded_layouts_that_cannot_be_used(tmp_path):
    apart = ragged().drop_vars("size")
    gridded(tmp_path, apart, r"id\(trajectory\), time\(obs\), .* do not fit together; must be all along one")
    deep = table().drop_vars("id").expand_dims(id=2, depth=2)
    gridded(tmp_path, deep, "do not fit together; must be all along one dimension")
    short = ragged(sample_dimension="obs").isel(obs=slice(0, 9))
    gridded(tmp_path, short, "variable size: counts 12 fixes but dimension obs has 9; the file is damaged or cut")
    beyond = ragged().assign(owner=("obs", np.arange(12), {"instance_dimension": "trajectory"})).drop_vars("size")
    gridded(tmp_path, beyond, "variable owner: points beyond dimension trajectory; the file is damaged or cut")


def test_rows_of_no_particle_are_left_out_of_ragged_arrays(tmp_path):
    data = ragged(sample_dimension="obs").pad(obs=(0, 3), mode="edge")
    data["time"] = data["time"] + xr.DataArray(np.arange(15) // 12 * 600.0, dims="obs")
    data["time"].attrs = {"units": "seconds since 1970-01-01"}
    data.to_netcdf(tmp_path / "f.nc", engine="h5netcdf")
    check(read_fixes(tmp_path / "f.nc", GEO, 5.0, highest_speed=1e4))


@pytest.mark.parametrize(("error", "speed"), [(-1.0, None), (np.nan, None), (5.0, 0.0), (5.0, -2.0)])
def test_refuses_arguments_out_of_range(error, speed):
    key = "position_error_m" if speed is None else "highest_speed_m_s"
    with pytest.raises(CaseError, match=rf"observations\.{key}: got .*; must be >"):
        fixes_from_frame(drifts(), GEO, error, speed)


# --- the record -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"particle": [], "time": [], "position": np.empty((0, 2))}, "no fix; at least one is needed"),
        ({"time": [1.0]}, r"time of shape \(1,\).*must be \(n,\), \(n,\) and \(n, 2\)"),
        ({"labels": ("a", "a"), "release": [0, 0]}, r"2 labels \(1 different\) and 2 releases"),
        ({"release": [0, 0]}, r"1 labels \(1 different\) and 2 releases"),
        ({"release": [1]}, "release codes must lie in -1 to 0"),
        ({"release": [-2]}, "release codes must lie in -1 to 0"),
        ({"position_error": -1.0}, "position error is -1.0 m; must be a number >= 0"),
        ({"particle": [0, 1]}, "particle codes must rise from 0 to the last label without a step over 1"),
        ({"particle": [1, 0]}, "particle codes must rise from 0 to the last label without a step over 1"),
        ({"time": [1e9, 1e9]}, "time must rise from fix to fix of a particle"),
        ({"time": [1e9, np.nan]}, "times and positions must be finite"),
        ({"position": [[0.0, np.inf], [0.0, 0.0]]}, "times and positions must be finite"),
        ({"position": [[180.0, 0.0], [0.0, 0.0]]}, r"longitude must lie in \[-180, 180\) and latitude in"),
        ({"position": [[0.0, 90.1], [0.0, 0.0]]}, r"longitude must lie in \[-180, 180\) and latitude in"),
    ],
)
def test_the_record_checks_itself(change, message):
    good = {
        "particle": [0, 0],
        "labels": ("a",),
        "time": [1e9, 1e9 + 1],
        "position": [[-180.0, 90.0], [179.9, -90.0]],
        "planar": False,
        "release": [0],
        "release_labels": ("r",),
        "position_error": 1.0,
    }
    assert Fixes(**good).n_fix == 2
    with pytest.raises(DataError, match=message):
        Fixes(**(good | change))
