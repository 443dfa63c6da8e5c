"""Weather read past xarray: the same numbers and counts as the lazy weather, from every way files are written."""

from __future__ import annotations

import pickle
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise

import netCDF4
import numpy as np
import pytest
import xarray as xr

from gridded_samples import (
    LATITUDE,
    LONGITUDE,
    days,
    grid,
    hours,
    north_up,
    positive_longitude,
    single_precision,
    truth,
)
from stillfield.errors import WeatherError
from stillfield.sources.gates import gate
from stillfield.sources.grids import chunk_index, fast_chunks, stored_reading
from stillfield.sources.grids.netcdf import open_netcdf

TRUE = truth()
STATED = {"ghi": {"name": "ghi", "means": "step-mean", "stamp": "start"}}


def hourly() -> xr.Dataset:
    gaps = TRUE.temp_air.copy()
    gaps[5:9, 1, 2] = np.nan
    return grid(hours(), ghi=(TRUE.ghi - 0.5, "W m-2"), t2m=(gaps + 273.15, "K")).astype(np.float32, keep_attrs=True)


def daily() -> xr.Dataset:
    warm = TRUE.temp_air.reshape(4, 24, 3, 4).mean(axis=1)
    sun = TRUE.irradiation.copy()
    sun[1, 0, 0], sun[2, 1, 1], sun[3, 2, 2] = -0.2, np.nan, -999.0
    return grid(days(), rsds=(sun, "MJ m-2"), tas=(warm, "degC"), sfcWind=(warm / 5.0, "m s-1"))


def written(weather: xr.Dataset, folder, *, parts: int = 1, chunk=None, format="NETCDF4", **encoding) -> list[str]:
    """Files of equal length along time."""
    time = str(weather["time"].dims[0])
    names = [name for name in weather.data_vars if weather[name].ndim == 3]
    for i, where in enumerate(np.array_split(np.arange(weather.sizes[time]), parts)):
        piece = weather.isel({time: where})
        own = {name: dict(encoding) for name in names}
        for name in names:
            if chunk is not None:
                sizes = [piece.sizes[dim] for dim in piece[name].dims]
                own[name]["chunksizes"] = tuple(min(one, size) for one, size in zip(chunk, sizes, strict=True))
            if encoding.get("dtype") == "int16":
                low, high = float(piece[name].min()), float(piece[name].max())
                own[name] |= {"scale_factor": (high - low) / 65000.0, "add_offset": (high + low) / 2,
                              "_FillValue": -32768}
        piece.to_netcdf(folder / f"w{i:03}.nc", format=format, encoding=own)
    return [str(folder / "w*.nc")]


def lazily(opened: xr.Dataset, name: str) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """Values and counts by the general way."""
    checked = gate(opened[[name]].assign_attrs(opened.attrs).compute())[0]
    counts = {str(label).split(":")[1]: row.ravel() for label, row in
              zip(checked["count"].values, checked["counts"].values, strict=True)}
    return checked[name].transpose("time", "latitude", "longitude").values, counts


def read(stored, name, records=slice(None), rows=slice(None), columns=slice(None), **options):
    """Values of a part, and what was found."""
    shape = tuple(len(range(*one.indices(size))) for one, size in zip((records, rows, columns), stored.shape,
                                                                      strict=True))
    out = np.full((shape[0], shape[1] * shape[2]), 7.0, np.float32)
    found = stored.read(name, records, rows, columns, out, np.zeros(shape[2], int), **options)
    return out.reshape(shape), found


def agree(opened: xr.Dataset, *, fast: bool = True) -> None:
    """Every quantity, whole and in parts, is what the general way gives."""
    stored = pickle.loads(pickle.dumps(opened.encoding["stored"]))
    np.testing.assert_array_equal(stored.latitude, opened["latitude"].values)
    np.testing.assert_array_equal(stored.longitude, opened["longitude"].values)
    assert stored.time.equals(opened.indexes["time"])
    for name in stored.fields:
        expected, counts = lazily(opened, name)
        values, found = read(stored, name, fast=fast)
        np.testing.assert_allclose(values, expected, rtol=3e-7, atol=2e-5, err_msg=name)
        for kind in ("missing", "clipped", "sentinel"):
            np.testing.assert_array_equal(found.counts.get(kind, np.zeros(12)), counts.get(kind, np.zeros(12)), kind)
        part = (slice(1, 3), slice(1, 3), slice(1, 4))
        np.testing.assert_array_equal(read(stored, name, *part, fast=fast)[0], values[part])
        edges = stored.chunk_edges(name)
        for one, size in zip(edges, stored.shape, strict=True):
            assert one[0] == 0
            assert one[-1] == size
            assert (np.diff(one) > 0).all()
        cut = [read(stored, name, slice(low, high), fast=fast)[0] for low, high in pairwise(edges[0])]
        np.testing.assert_array_equal(np.concatenate(cut), values)


LAYOUTS = {
    "whole": {}, "deflate": {"zlib": True, "chunk": (24, 2, 3)}, "unshuffled": {"zlib": True, "shuffle": False},
    "a map a chunk": {"zlib": True, "chunk": (1, 9, 9)}, "pencils": {"zlib": True, "chunk": (999, 1, 1)},
    "chunked only": {"chunk": (10, 2, 2)}, "zstd": {"compression": "zstd", "chunk": (24, 2, 3)},
    "checksums": {"zlib": True, "fletcher32": True}, "classic": {"format": "NETCDF3_64BIT"},
    "packed": {"dtype": "int16", "zlib": True, "chunk": (24, 2, 3)}, "doubles": {"dtype": "float64", "zlib": True},
    "big-endian": {"dtype": ">f4", "endian": "big", "zlib": True, "chunk": (24, 2, 3)},
}
FAST = {"whole", "deflate", "unshuffled", "a map a chunk", "pencils", "chunked only", "zstd", "packed", "doubles",
        "big-endian"}


@pytest.fixture
def past_library(monkeypatch):
    """Names of the files that the NetCDF library read."""
    through = []
    real = stored_reading._through_library
    monkeypatch.setattr(stored_reading, "_through_library", lambda *given: through.append(given[0]) or real(*given))
    return through


@pytest.mark.parametrize("parts", [1, 5])
@pytest.mark.parametrize("layout", LAYOUTS)
def test_hourly_weather_of_every_layout(tmp_path, layout, parts, past_library):
    opened = open_netcdf(written(hourly(), tmp_path, parts=parts, **LAYOUTS[layout]), variables=STATED)
    agree(opened)
    assert (past_library == []) == (layout in FAST)
    fast = {name: read(opened.encoding["stored"], name)[0] for name in opened.encoding["stored"].fields}
    for name, values in fast.items():
        np.testing.assert_array_equal(read(opened.encoding["stored"], name, fast=False)[0], values)


@pytest.mark.parametrize("change", [north_up, positive_longitude, single_precision])
@pytest.mark.parametrize("layout", ["deflate", "packed", "classic"])
def test_axes_that_run_another_way(tmp_path, change, layout):
    agree(open_netcdf(written(change(hourly()), tmp_path, parts=2, **LAYOUTS[layout]), variables=STATED))


@pytest.mark.parametrize("layout", ["deflate", "classic"])
def test_daily_weather_with_noise_gaps_and_undeclared_numbers(tmp_path, layout):
    agree(open_netcdf(written(daily(), tmp_path, parts=2, **LAYOUTS[layout])))


def test_a_grid_across_the_antimeridian(tmp_path):
    weather = hourly().assign_coords(longitude=("longitude", np.array([179.0, 179.5, 180.0, 180.5]),
                                                {"units": "degrees_east"}))
    opened = open_netcdf(written(weather, tmp_path, **LAYOUTS["deflate"]), variables=STATED)
    assert opened["longitude"].values.tolist() == [179.0, 179.5, 180.0, 180.5]
    agree(opened)


def test_names_and_stamps_of_a_reanalysis(tmp_path):
    energy = np.concatenate([np.zeros((1, 3, 4)), TRUE.ghi[:-1] * 3600.0])
    wind = TRUE.wind_10m
    weather = grid(hours(), ("valid_time", "latitude", "longitude"), ssrd=(energy, "J m**-2"),
                   t2m=(TRUE.temp_air + 273.15, "K"), d2m=(TRUE.temp_air + 263.15, "K"), u10=(wind * 0.6, "m s**-1"),
                   v10=(-wind * 0.8, "m s**-1")).astype(np.float32, keep_attrs=True)
    weather["valid_time"].attrs["standard_name"] = "time"
    weather = weather.rename(valid_time="time")
    said = {"ghi": {"name": "ssrd", "means": "hour-ending accumulation"}}
    opened = open_netcdf(written(weather, tmp_path, parts=3, **LAYOUTS["deflate"]), variables=said)
    assert set(opened.encoding["stored"].fields) == {"ghi", "temp_air", "temp_dew", "wind_speed"}
    agree(opened)
    values, _ = read(opened.encoding["stored"], "wind_speed")
    np.testing.assert_allclose(values[1:], wind[:-1] * 4.87 / np.log(67.8 * 10 - 5.42), rtol=1e-6)  # FAO-56 eq. 47


@pytest.mark.parametrize("parts", [1, 7])
def test_energy_since_midnight(tmp_path, parts):
    grown = (TRUE.ghi.reshape(4, 24, 3, 4) * 3600.0).cumsum(axis=1).reshape(96, 3, 4)
    grown[40, 1, 1] = np.nan
    weather = grid(hours(1.0), ssrd=(grown, "J m-2")).astype(np.float32, keep_attrs=True)
    files = written(weather.isel(time=np.r_[0:30, 33:96]), tmp_path, parts=parts, **LAYOUTS["deflate"])
    opened = open_netcdf(files, variables={"ghi": {"name": "ssrd", "means": "since-00-UTC"}})
    assert opened.encoding["stored"].fields["ghi"].combination == "difference"
    stored = opened.encoding["stored"]
    expected, _ = lazily(opened, "ghi")
    np.testing.assert_allclose(read(stored, "ghi")[0], expected, rtol=1e-6, atol=1e-3)
    np.testing.assert_array_equal(read(stored, "ghi", slice(7, 60))[0], read(stored, "ghi")[0][7:60])


def test_mean_temperature_of_the_extremes(tmp_path):
    weather = daily().rename(tas="tasmin").drop_vars("sfcWind")
    weather["tasmax"] = weather["tasmin"] + 8.0
    weather["tasmax"].attrs = weather["tasmin"].attrs
    opened = open_netcdf(written(weather, tmp_path, **LAYOUTS["deflate"]))
    assert opened.encoding["stored"].fields["temp_air"].combination == "mean"
    agree(opened)


def test_a_stated_range_in_packed_numbers(tmp_path):
    weather = daily()[["rsds", "tas"]]
    names = written(weather, tmp_path, **LAYOUTS["packed"])
    with netCDF4.Dataset(tmp_path / "w000.nc", "a") as file:
        file["tas"].valid_range = np.array([-20000, 20000], np.int16)
    opened = open_netcdf(names)
    assert read(opened.encoding["stored"], "temp_air")[1].counts["sentinel"].sum() > 0
    agree(opened)


def test_each_column_at_its_own_hour_and_cells_left_out(tmp_path):
    opened = open_netcdf(written(hourly(), tmp_path, parts=4, **LAYOUTS["deflate"]), variables=STATED)
    stored, whole = opened.encoding["stored"], lazily(opened, "temp_air")[0]
    kept = np.ones((3, 4), bool)
    kept[1, 2] = False
    at = np.array([-2, -2, 0, 3])
    out = np.full((20, 12), 7.0, np.float32)
    found = stored.read("temp_air", slice(4, 24), slice(None), slice(None), out, at, kept)
    assert "missing" not in found.counts  # they are all in the cell that is left out
    for i, r, c in np.ndindex(20, 3, 4):
        if 0 <= at[c] + i < 20:
            wanted = whole[4 + i, r, c] if kept[r, c] else np.nan
            np.testing.assert_allclose(out[at[c] + i, r * 4 + c], wanted, rtol=1e-6)
    assert (out[:3, 3] == 7.0).all()


def test_the_first_impossible_value_is_reported_not_raised(tmp_path):
    weather = hourly()
    weather["t2m"][30, 2, 1] = 400.0
    stored = open_netcdf(written(weather, tmp_path, **LAYOUTS["deflate"]), variables=STATED).encoding["stored"]
    found = read(stored, "temp_air", slice(10, 50), slice(1, 3))[1]
    assert (found.breach.record, found.breach.cell, found.breach.number) == (20, 4 + 1, 1)
    assert found.breach.value == pytest.approx(126.85, abs=1e-4)


def test_without_numba_or_libdeflate_the_numbers_are_the_same(tmp_path, monkeypatch):
    opened = open_netcdf(written(hourly(), tmp_path, parts=2, **LAYOUTS["packed"]), variables=STATED)
    usual = read(opened.encoding["stored"], "temp_air")[0]
    monkeypatch.setattr("stillfield.sources.settle.is_compiled", lambda *_: False)
    monkeypatch.setattr(fast_chunks, "is_compiled", lambda *_: False)
    monkeypatch.setattr(fast_chunks, "_deflate", lambda: fast_chunks._by_standard_library)
    np.testing.assert_array_equal(read(opened.encoding["stored"], "temp_air")[0], usual)


def test_several_threads_read_at_once(tmp_path):
    files = written(hourly(), tmp_path, parts=3, **LAYOUTS["deflate"])
    stored = open_netcdf(files, variables=STATED).encoding["stored"]
    whole = read(stored, "temp_air")[0]
    with ThreadPoolExecutor(4) as pool:
        parts = list(pool.map(lambda i: read(stored, "temp_air", slice(i, i + 12), fast=i % 24 == 0)[0],
                              range(0, 96, 12)))
    np.testing.assert_array_equal(np.concatenate(parts), whole)


@pytest.mark.parametrize("damage", ["cut", "noise", "short", "long"])
@pytest.mark.parametrize("packed", ["deflate", "zstd"])
@pytest.mark.parametrize("library", ["best", "standard"])
def test_a_damaged_chunk_is_refused(tmp_path, damage, packed, library, monkeypatch):
    import zlib

    from numcodecs.zstd import compress

    if library == "standard":
        monkeypatch.setattr(fast_chunks, "_deflate", lambda: fast_chunks._by_standard_library)
    files = written(hourly(), tmp_path, **LAYOUTS[packed])
    stored = open_netcdf(files, variables=STATED).encoding["stored"]
    index = chunk_index.chunk_index(str(tmp_path / "w000.nc"), "t2m")
    start, size = int(index.starts[1, 0, 0]), int(index.sizes[1, 0, 0])
    pack = zlib.compress if packed == "deflate" else compress
    content = {"cut": b"", "noise": bytes(range(256)) * 9, "short": pack(b"\1" * (index.chunk_bytes - 4)),
               "long": pack(b"\1" * (index.chunk_bytes * 3))}[damage][:size]
    with (tmp_path / "w000.nc").open("r+b") as file:
        file.seek(start)
        file.write(content.ljust(size, b"\0") if damage in {"cut", "noise"} else content)
    with pytest.raises(WeatherError, match="cannot be unpacked"):
        read(stored, "temp_air")


def test_a_file_that_ends_before_its_chunks_is_refused(tmp_path):
    files = written(hourly(), tmp_path, **LAYOUTS["deflate"])
    stored = open_netcdf(files, variables=STATED).encoding["stored"]
    index = chunk_index.chunk_index(str(tmp_path / "w000.nc"), "t2m")
    read(stored, "temp_air")
    with (tmp_path / "w000.nc").open("r+b") as file:
        file.truncate(int(index.starts.max()) + 5)
    with pytest.raises(WeatherError):
        read(stored, "temp_air")


def test_a_chunk_that_was_never_written_is_missing(tmp_path):
    path = tmp_path / "w000.nc"
    with netCDF4.Dataset(path, "w") as file:
        for name, values, unit in (("time", np.arange(4.0), "days since 2010-03-10"),
                                   ("lat", LATITUDE, "degrees_north"), ("lon", LONGITUDE, "degrees_east")):
            file.createDimension(name, values.size)
            file.createVariable(name, "f8", (name,))[:] = values
            file[name].units = unit
        sun = file.createVariable("rsds", "f4", ("time", "lat", "lon"), zlib=True, chunksizes=(2, 3, 4))
        sun.units = "MJ m-2"
        sun[:2] = 20.0
    opened = open_netcdf([str(path)])
    agree(opened)
    assert read(opened.encoding["stored"], "irradiation")[1].counts["missing"].tolist() == [2] * 12


def _repeated(folder):
    weather = daily()
    weather.isel(time=slice(0, 3)).to_netcdf(folder / "a.nc")
    weather.isel(time=slice(2, 4)).to_netcdf(folder / "b.nc")
    return [str(folder / "*.nc")]


def _vapour(folder):
    weather = daily()
    weather["vap"] = ("time", "latitude", "longitude"), np.full((4, 3, 4), 15.0), {"units": "hPa"}
    return written(weather, folder)


def _versions(folder):
    weather = daily()[["rsds"]].expand_dims(expver=[1, 5], axis=1)
    weather.to_netcdf(folder / "a.nc")
    return [str(folder / "a.nc")]


@pytest.mark.parametrize("write", [_repeated, _vapour, _versions])
def test_what_is_not_plain_is_left_to_the_general_way(tmp_path, write):
    opened = open_netcdf(write(tmp_path))
    assert "stored" not in opened.encoding
    assert opened["irradiation"].notnull().any()


@pytest.mark.parametrize("change", [lambda weather: weather, positive_longitude])
def test_columns_in_another_order(tmp_path, change):
    opened = open_netcdf(written(change(hourly()), tmp_path, **LAYOUTS["deflate"]), variables=STATED)
    stored, order = opened.encoding["stored"], np.array([2, 3, 0])
    other = stored.with_columns(order, stored.longitude[order] % 360.0)
    np.testing.assert_array_equal(read(other, "temp_air")[0], read(stored, "temp_air")[0][:, :, order])
    np.testing.assert_array_equal(read(other, "ghi", columns=slice(1, 3))[0],
                                  read(stored, "ghi")[0][:, :, order[1:]])
    assert stored.with_columns(np.array([3, 2, 1]), stored.longitude[1:]) is None


def test_chunk_edges_follow_files_and_turned_axes(tmp_path):
    opened = open_netcdf(written(north_up(hourly()), tmp_path, parts=4, zlib=True, chunk=(10, 2, 3)), variables=STATED)
    records, rows, columns = opened.encoding["stored"].chunk_edges("temp_air")
    assert records.tolist() == [0, 10, 20, 24, 34, 44, 48, 58, 68, 72, 82, 92, 96]
    assert rows.tolist() == [0, 1, 3]
    assert columns.tolist() == [0, 3, 4]


def test_weather_without_chunks_may_be_cut_but_across_its_rows(tmp_path):
    opened = open_netcdf(written(hourly(), tmp_path, format="NETCDF3_64BIT"), variables=STATED)
    assert [one.tolist() for one in opened.encoding["stored"].chunk_edges("ghi")] == [
        list(range(97)), [0, 1, 2, 3], [0, 4]]
