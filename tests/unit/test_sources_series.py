"""Files of one build opened as one: the same weather and the same messages as file by file."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from gridded_samples import DAYS, days, grid, hours, north_up, packed, positive_longitude, single_precision, truth
from stillfield.errors import WeatherError
from stillfield.sources.grids import netcdf_series
from stillfield.sources.grids.netcdf import open_netcdf

TRUE = truth()


def daily():
    wind = TRUE.wind_10m.reshape(DAYS, 24, *TRUE.wind_10m.shape[1:]).mean(axis=1)
    air = TRUE.temp_air.reshape(DAYS, 24, *TRUE.temp_air.shape[1:]).mean(axis=1)
    return grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), tas=(air, "degC"), sfcWind=(wind, "m s-1"))


def a_file_a_day(weather, folder, **options):
    for day in range(weather.sizes["time"]):
        weather.isel(time=slice(day, day + 1)).to_netcdf(folder / f"d{day}.nc", **options)
    return [str(folder / "d*.nc")]


def units_of_its_own(weather, folder):
    """Every file counts its time from its own first day, in its own unit."""
    for day in range(weather.sizes["time"]):
        unit = ("hours", "days", "minutes", "seconds")[day % 4]
        piece = weather.isel(time=slice(day, day + 1))
        piece.to_netcdf(folder / f"d{day}.nc", encoding={"time": {"units": f"{unit} since 2010-03-{10 + day}"}})
    return [str(folder / "d*.nc")]


def with_bounds(weather, folder):
    bounds = np.stack([weather.time.values, weather.time.values + np.timedelta64(1, "D")], axis=1)
    weather = weather.assign(time_bnds=(("time", "nv"), bounds))
    weather["time"].attrs["bounds"] = "time_bnds"
    weather["time"].encoding["units"] = "hours since 2010-01-01"
    return a_file_a_day(weather, folder)


def record_last(weather, folder):
    return a_file_a_day(weather.transpose("longitude", "latitude", "time"), folder)


def classic(weather, folder):
    return a_file_a_day(weather, folder, format="NETCDF3_64BIT")


def with_a_cftime_calendar(weather, folder):
    return a_file_a_day(weather.convert_calendar("noleap", use_cftime=True), folder)


def opened_alone(monkeypatch, files, **options):
    """Every file by itself, as the truth."""
    with monkeypatch.context() as patch:
        patch.setattr(netcdf_series, "_header", lambda path: None)
        return open_netcdf(files, **options).load()


WRITERS = [a_file_a_day, units_of_its_own, with_bounds, record_last, classic, with_a_cftime_calendar, packed]


@pytest.mark.parametrize("write", WRITERS)
@pytest.mark.parametrize("change", [lambda weather: weather, north_up, positive_longitude, single_precision])
def test_the_weather_is_that_of_the_files_one_by_one(tmp_path, monkeypatch, write, change):
    files = write(change(daily()), tmp_path)
    as_one = open_netcdf(files)
    alone = opened_alone(monkeypatch, files)
    assert as_one.sizes["time"] == DAYS
    xr.testing.assert_identical(as_one.load(), alone)


def test_only_the_first_file_goes_through_the_full_opening(tmp_path, monkeypatch):
    files = a_file_a_day(daily(), tmp_path)
    full = []
    real = netcdf_series.open_one
    monkeypatch.setattr(netcdf_series, "open_one", lambda path: full.append(path.name) or real(path))
    monkeypatch.setattr(netcdf_series, "read_pieces", lambda path, choices: pytest.fail(f"{path.name} opened alone"))
    open_netcdf(files)
    assert full == ["d0.nc"]


def test_nothing_is_read_of_daily_weather_before_it_is_computed(tmp_path, monkeypatch):
    files = a_file_a_day(daily(), tmp_path)
    read = []
    real = netcdf_series._read_values
    monkeypatch.setattr(netcdf_series, "_read_values", lambda *given: read.append(given[:2]) or real(*given))
    weather = open_netcdf(files)
    assert read == []
    weather["temp_air"].load()
    assert sorted(read) == [(str(tmp_path / f"d{day}.nc"), "tas") for day in range(DAYS)]


def test_each_file_is_unpacked_by_its_own_scale(tmp_path):
    names = packed(daily(), tmp_path)
    scales = set()
    for name in names:
        with xr.open_dataset(name, mask_and_scale=False) as raw:
            scales.add(float(raw["rsds"].attrs["scale_factor"]))
    assert len(scales) == len(names)
    # The packing steps of the sample are below a thousandth of the values.
    sun = open_netcdf(names)["irradiation"].values
    np.testing.assert_allclose(sun, TRUE.irradiation, rtol=2e-4)


def test_short_files_share_a_block_and_long_ones_are_cut(tmp_path, monkeypatch):
    files = a_file_a_day(daily(), tmp_path)
    assert open_netcdf(files)["irradiation"].chunks[0] == (DAYS,)
    weather = grid(hours(), ghi=(TRUE.ghi, "W m-2"), tas=(TRUE.temp_air, "degC"))
    for half in (0, 1):
        weather.isel(time=slice(48 * half, 48 * half + 48)).to_netcdf(tmp_path / f"h{half}.nc")
    # Room for 30 hours of the 12 cells in double precision.
    monkeypatch.setattr("stillfield.sources.grids.netcdf_pieces._BLOCK_BYTES", 30 * 12 * 8)
    said = {"ghi": {"name": "ghi", "means": "step-mean", "stamp": "start"}}
    cut = open_netcdf([str(tmp_path / "h*.nc")], variables=said)
    assert cut["temp_air"].chunks[0] == (30, 18, 30, 18)
    np.testing.assert_allclose(cut["temp_air"].values, TRUE.temp_air)


def test_a_file_that_is_built_differently_is_still_read_or_refused(tmp_path, monkeypatch):
    files = a_file_a_day(daily(), tmp_path)
    other = daily().isel(time=slice(1, 2)).drop_vars("tas")
    other.to_netcdf(tmp_path / "d1.nc")
    xr.testing.assert_identical(open_netcdf(files).load(), opened_alone(monkeypatch, files))
    daily().isel(time=slice(2, 3), latitude=slice(0, 2)).to_netcdf(tmp_path / "d2.nc")
    with pytest.raises(WeatherError, match="files lie on different cells"):
        open_netcdf(files)


@pytest.mark.parametrize("format", ["NETCDF3_64BIT", "NETCDF4"])
def test_the_one_file_that_is_cut_off_is_named(tmp_path, format):
    files = a_file_a_day(daily(), tmp_path, format=format)
    whole = (tmp_path / "d2.nc").read_bytes()
    (tmp_path / "d2.nc").write_bytes(whole[: len(whole) * 2 // 3])
    with pytest.raises(WeatherError, match=r"d2\.nc"):
        open_netcdf(files)


def test_a_file_without_records_is_named(tmp_path):
    files = a_file_a_day(daily(), tmp_path)
    daily().isel(time=slice(0, 0)).to_netcdf(tmp_path / "d3.nc")
    with pytest.raises(WeatherError, match=r"d3\.nc: the file holds no times"):
        open_netcdf(files)


def test_overlapping_files_give_what_they_give_alone(tmp_path, monkeypatch):
    files = a_file_a_day(daily(), tmp_path)
    daily().isel(time=slice(1, 3)).to_netcdf(tmp_path / "d2.nc")
    xr.testing.assert_identical(open_netcdf(files).load(), opened_alone(monkeypatch, files))
