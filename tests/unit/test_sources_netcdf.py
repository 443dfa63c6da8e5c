"""The same weather in many conventions gives the same canonical data; what is ambiguous is refused."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridded_samples import (
    DAYS,
    LATITUDE,
    LONGITUDE,
    classic,
    days,
    grid,
    hours,
    north_up,
    packed,
    positive_longitude,
    single_precision,
    split_by_variable,
    split_in_time,
    truth,
    whole,
)
from stillfield.errors import UnitsError, WeatherError
from stillfield.sources import guess_kind, open_source
from stillfield.sources.gates import gate
from stillfield.sources.grids import netcdf
from stillfield.sources.tally import totals
from typical_year_samples import clear_sky

TRUE = truth()
WIND_FACTOR = 4.87 / np.log(67.8 * 10 - 5.42)  # FAO-56 equation 47


def open_netcdf(*files, **options) -> xr.Dataset:
    """Weather held against the gates when it is computed, as a notebook gets it."""
    weather = netcdf.open_netcdf(*files, **options)
    return gate(weather, where=weather.attrs["files"])[0]



def _since_midnight(ghi: np.ndarray) -> np.ndarray:
    """Energy since 00 UTC [J m-2] at the end of each hour."""
    by_day = ghi.reshape(DAYS, 24, *ghi.shape[1:]) * 3600.0
    return by_day.cumsum(axis=1).reshape(ghi.shape)


#: Way of writing hourly sunshine -> (dataset of sunshine, what the run file has to say).
HOURLY = {
    "mean, stamp at start": lambda: (grid(hours(), rsds=(TRUE.ghi, "W m-2")), {"stamp": "start"}),
    "mean, stamp in the middle": lambda: (grid(hours(0.5), SWGDN=(TRUE.ghi, "W m-2")), {}),
    "mean, stamp at end": lambda: (grid(hours(1.0), rsds=(TRUE.ghi, "W/m2")), {"stamp": "end"}),
    "mean rate of ECMWF": lambda: (grid(hours(1.0), avg_sdswrf=(TRUE.ghi, "W m**-2")), {}),
    "energy of the hour before": lambda: (grid(hours(1.0), ssrd=(TRUE.ghi * 3600, "J m**-2")),
                                          {"means": "hour-ending accumulation"}),
    "energy of the hour after": lambda: (grid(hours(), ssrd=(TRUE.ghi * 3600, "J m-2")),
                                         {"means": "hour-starting accumulation"}),
    "Wh of the hour": lambda: (grid(hours(), ghi=(TRUE.ghi, "Wh m-2")), {"means": "hour-starting accumulation"}),
    "energy of the hour around": lambda: (grid(hours(0.5), ssrd=(TRUE.ghi * 3600, "J m-2")), {}),
    "since 00 UTC, stated": lambda: (grid(hours(1.0), ssrd=(_since_midnight(TRUE.ghi), "J m**-2")),
                                     {"means": "since-00-UTC"}),
    "since 00 UTC, seen": lambda: (grid(hours(1.0), ssrd=(_since_midnight(TRUE.ghi), "J m**-2")), {}),
    "energy with bounds": lambda: (_with_bounds(grid(hours(1.0), ssrd=(TRUE.ghi * 3600, "J m-2")), 1.0, end=True), {}),
    "energy with bounds, stated": lambda: (_with_bounds(grid(hours(1.0), ssrd=(TRUE.ghi * 3600, "J m-2")), 1.0,
                                                        end=True), {"means": "hour-ending accumulation"}),
    "mean with bounds": lambda: (_with_bounds(grid(hours(0.5), rsds=(TRUE.ghi, "W m-2")), 1.0, end=False), {}),
}

#: Way of writing daily sunshine.
DAILY = {
    "MJ m-2": lambda: (grid(days(), irradiation=(TRUE.irradiation, "MJ m-2")), {}),
    "J m-2": lambda: (grid(days(), rsds=(TRUE.irradiation * 1e6, "J m-2")), {"means": "daily-total"}),
    "kWh m-2 day-1": lambda: (grid(days(), ALLSKY_SFC_SW_DWN=(TRUE.irradiation / 3.6, "kW-hr/m^2/day")), {}),
    "mean, stated": lambda: (grid(days(12), qq=(TRUE.irradiation / 0.0864, "W/m2")), {"means": "daily-mean"}),
    "mean, cell_methods": lambda: (grid(days(12), rsds=(TRUE.irradiation / 0.0864, {
        "units": "W m-2", "cell_methods": "area: time: mean"})), {}),
    "at the next 00 UTC": lambda: (grid(days(24), ssrd=(TRUE.irradiation * 1e6, "J m**-2")),
                                   {"means": "since-00-UTC"}),
    "stamp at the end of the day": lambda: (grid(days(24), rsds=(TRUE.irradiation, "MJ m-2")), {"stamp": "end"}),
    "daily mean rate of ECMWF": lambda: (grid(days(), avg_sdswrf=(TRUE.irradiation / 0.0864, "W m**-2")),
                                         {"means": "daily-mean"}),
    "with bounds": lambda: (_with_bounds(grid(days(24), rsds=(TRUE.irradiation, "MJ m-2")), 24.0, end=True), {}),
}


def _with_bounds(weather: xr.Dataset, step: float, *, end: bool) -> xr.Dataset:
    stamps = weather.time.values
    span = np.timedelta64(round(step * 3600), "s")
    lower = stamps - span if end else stamps - span // 2
    weather.time.attrs["bounds"] = "time_bnds"
    weather.time.encoding["units"] = "minutes since 2010-01-01"
    return weather.assign(time_bnds=(("time", "bnds"), np.stack([lower, lower + span], axis=1)))


def _check(found: xr.Dataset, name: str, expected: np.ndarray, stamps: np.ndarray, *, rel: float = 2e-4) -> None:
    np.testing.assert_array_equal(found.latitude.values, LATITUDE)
    np.testing.assert_array_equal(found.longitude.values, LONGITUDE)
    np.testing.assert_array_equal(found.time.values.astype("datetime64[ns]"), stamps)
    assert found[name].dims == ("time", "latitude", "longitude")
    np.testing.assert_allclose(found[name].values, expected, rtol=rel, atol=rel * np.nanmax(expected))


def _open(weather: xr.Dataset, said: dict, write, tmp_path) -> xr.Dataset:
    name = next(str(name) for name in weather.data_vars if name != "time_bnds")
    return open_netcdf(write(weather, tmp_path), variables={"irradiation": {"name": name, **said}} if said else None)


@pytest.mark.parametrize("write", [whole, split_in_time, packed, classic])
@pytest.mark.parametrize("way", HOURLY)
def test_hourly_sunshine_in_any_way_is_one_irradiance(tmp_path, way, write):
    weather, said = HOURLY[way]()
    found = _open(weather, said, write, tmp_path)
    assert (found.attrs["step_hours"], found.attrs["clock"], found.attrs["record"]) == (1.0, "UTC", "series")
    assert found.ghi.chunks is not None, "not lazy"
    _check(found, "ghi", TRUE.ghi, hours())


@pytest.mark.parametrize("write", [whole, split_in_time, packed, classic])
@pytest.mark.parametrize("way", DAILY)
def test_daily_sunshine_in_any_way_is_one_irradiation(tmp_path, way, write):
    weather, said = DAILY[way]()
    found = _open(weather, said, write, tmp_path)
    assert (found.attrs["step_hours"], found.attrs["clock"]) == (24.0, "own-days")
    _check(found, "irradiation", TRUE.irradiation, days())
    gate(found.compute())


@pytest.mark.parametrize("lay", [north_up, positive_longitude, single_precision])
@pytest.mark.parametrize("names", [("time", "latitude", "longitude"), ("valid_time", "lat", "lon")])
@pytest.mark.parametrize("write", [whole, split_in_time, packed])
def test_any_orientation_is_one_grid(tmp_path, lay, names, write):
    weather = lay(grid(days(), names, rsds=(TRUE.irradiation, "MJ m-2")))
    _check(open_netcdf(write(weather, tmp_path)), "irradiation", TRUE.irradiation, days())


@pytest.mark.parametrize("write", [whole, split_by_variable, packed])
def test_only_accumulated_fields_move(tmp_path, write):
    """Sunshine stamped at the end of its hour moves to its start; instants of temperature and wind stay."""
    weather = grid(hours(1.0), ssrd=(TRUE.ghi * 3600, "J m**-2"), t2m=(TRUE.temp_air + 273.15, "K"),
                   u10=(0.6 * TRUE.wind_10m, "m s**-1"), v10=(-0.8 * TRUE.wind_10m, "m s**-1"))
    found = open_netcdf(write(weather, tmp_path),
                        variables={"irradiation": {"name": "ssrd", "means": "hour-ending accumulation"}})
    _check(found, "ghi", TRUE.ghi, hours())
    # The value stamped 01:00 is the first one of temperature, so 00:00 has none.
    assert bool(found.temp_air.isel(time=0).isnull().all())
    np.testing.assert_allclose(found.temp_air.values[1:], TRUE.temp_air[:-1], atol=0.01)
    np.testing.assert_allclose(found.wind_speed.values[1:], WIND_FACTOR * TRUE.wind_10m[:-1], rtol=1e-3)
    assert any("temp_air is missing at 1 of 96 times" in line for line in found.attrs["conventions"])


def test_single_and_double_precision_coordinates_are_the_same_cells(tmp_path):
    """A tenth of a degree has no exact binary form, so 32 and 64 bits differ."""
    tenths = np.round(25.0 + 0.1 * np.arange(3), 1)
    thirds = 30.0 + np.arange(4) / 3
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    for name, kind in (("a", np.float32), ("b", np.float64)):
        part = weather if name == "a" else weather.rename(rsds="tas")
        part = part.assign_coords(latitude=tenths.astype(kind), longitude=thirds.astype(kind))
        part[next(iter(part.data_vars))].attrs["units"] = "MJ m-2" if name == "a" else "degC"
        part.to_netcdf(tmp_path / f"{name}.nc")
    found = open_netcdf([str(tmp_path / "*.nc")])
    assert found.latitude.values.tolist() == tenths.tolist()
    assert dict(found.sizes) == {"time": DAYS, "latitude": 3, "longitude": 4}
    assert int(found.temp_air.isnull().sum()) == 0


def test_packed_files_are_decoded_each_by_its_own_scale(tmp_path):
    warm = TRUE.temp_air + np.linspace(0, 20, TRUE.temp_air.shape[0])[:, None, None]
    weather = grid(hours(), rsds=(TRUE.ghi, "W m-2"), tas=(warm + 273.15, "K"))
    found = open_netcdf(packed(weather, tmp_path))
    np.testing.assert_allclose(found.temp_air.values, warm, atol=0.002)


def test_a_repeated_meridian_is_dropped(tmp_path):
    columns = np.arange(0.0, 361.0, 90.0)
    values = np.arange(DAYS * 3 * 5, dtype=float).reshape(DAYS, 3, 5) % 30
    values[:, :, -1] = values[:, :, 0]
    weather = xr.Dataset({"rsds": (("time", "lat", "lon"), values, {"units": "MJ m-2"})},
                         coords={"time": days(), "lat": LATITUDE, "lon": columns})
    found = open_netcdf(whole(weather, tmp_path))
    assert found.longitude.values.tolist() == [-180.0, -90.0, 0.0, 90.0]
    np.testing.assert_allclose(found.irradiation.sel(longitude=0.0), values[:, :, 0])
    assert "1 repeated meridian was dropped." in found.attrs["conventions"]


def test_columns_from_20_to_380_are_brought_to_plus_minus_180(tmp_path):
    values = np.ones((DAYS, 3, 18)) * np.arange(18)
    weather = xr.Dataset({"rsds": (("time", "lat", "lon"), values, {"units": "MJ m-2"})},
                         coords={"time": days(), "lat": LATITUDE, "lon": np.arange(30.0, 390.0, 20.0)})
    found = open_netcdf(whole(weather, tmp_path))
    assert found.longitude.values.tolist() == np.arange(-170.0, 180.0, 20.0).tolist()
    assert float(found.irradiation.sel(longitude=10.0).isel(time=0, latitude=0)) == 17.0


def test_the_columns_of_a_box_across_the_antimeridian_stand_side_by_side(tmp_path):
    weather = xr.Dataset({"rsds": (("time", "lat", "lon"), np.ones((DAYS, 3, 4)) * np.arange(4), {"units": "MJ m-2"})},
                         coords={"time": days(), "lat": LATITUDE, "lon": [178.0, 179.0, 180.0, 181.0]})
    found = open_netcdf(whole(weather, tmp_path))
    assert found.longitude.values.tolist() == [178.0, 179.0, 180.0, 181.0]
    assert found.irradiation.isel(time=0, latitude=0).values.tolist() == [0.0, 1.0, 2.0, 3.0]
    assert "The grid lies across the antimeridian; its longitudes run on beyond 180." in found.attrs["conventions"]


@pytest.mark.parametrize("cells", [{"latitude": [1], "longitude": [2]}, {"latitude": [1]}, {"longitude": [0]}])
def test_one_cell_one_row_and_one_column(tmp_path, cells):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2")).isel(cells)
    found = open_netcdf(whole(weather, tmp_path))
    np.testing.assert_allclose(found.irradiation, weather.rsds)


def test_a_point_with_scalar_coordinates_is_a_grid_of_one_cell(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2")).isel(latitude=1, longitude=2)
    found = open_netcdf(whole(weather, tmp_path))
    assert dict(found.sizes) == {"time": DAYS, "latitude": 1, "longitude": 1}
    np.testing.assert_allclose(found.irradiation.values.ravel(), TRUE.irradiation[:, 1, 2])


def test_single_images_make_a_series(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    for i in range(DAYS):
        weather.isel(time=i).to_netcdf(tmp_path / f"{i}.nc")
    _check(open_netcdf([str(tmp_path / "*.nc")]), "irradiation", TRUE.irradiation, days())


def test_size_one_dimensions_are_squeezed_and_ensembles_refused(tmp_path):
    weather = grid(days(), qq=(TRUE.irradiation, "MJ m-2")).expand_dims(ensemble=[0])
    _check(open_netcdf(whole(weather, tmp_path)), "irradiation", TRUE.irradiation, days())
    both = xr.concat([weather, weather.assign_coords(ensemble=[1])], dim="ensemble")
    with pytest.raises(WeatherError, match=r"variable 'qq' does not lie on time, latitude and longitude only \(got "
                                           r"ensemble \(2\), time \(4\)"):
        open_netcdf(whole(both, tmp_path), variables={"irradiation": "qq"})


def test_final_and_preliminary_versions_are_joined(tmp_path):
    weather = grid(days(), ssrd=(TRUE.irradiation, "MJ m-2"))
    first = weather.where(weather.time < days()[2])
    last = weather.where(weather.time >= days()[2])
    both = xr.concat([first, last], dim="expver").assign_coords(expver=[1, 5]).transpose("time", ...)
    both.ssrd.attrs = weather.ssrd.attrs
    _check(open_netcdf(whole(both, tmp_path)), "irradiation", TRUE.irradiation, days())


def test_valid_time_wins_over_the_start_of_the_forecast(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    weather = weather.assign_coords(time=weather.time.values - np.timedelta64(1, "D"), valid_time=("time", days()))
    weather.time.attrs["standard_name"] = "forecast_reference_time"
    _check(open_netcdf(whole(weather, tmp_path)), "irradiation", TRUE.irradiation, days())


def test_stations_stay_stations(tmp_path):
    weather = xr.Dataset(
        {"rsds": (("station", "time"), TRUE.irradiation[:, 0, :2].T, {"units": "MJ m-2"})},
        coords={"time": days(), "lat": ("station", [8.0, 8.5], {"units": "degrees_north"}),
                "lon": ("station", [359.0, 0.5], {"units": "degrees_east"}),
                "station_name": ("station", ["north", "south"], {"cf_role": "timeseries_id"})},
    )
    found = open_netcdf(whole(weather, tmp_path))
    assert found.irradiation.dims == ("time", "site")
    assert found.site.values.tolist() == ["north", "south"]
    assert found.longitude.values.tolist() == [-1.0, 0.5]
    np.testing.assert_allclose(found.irradiation, TRUE.irradiation[:, 0, :2])


@pytest.mark.parametrize("calendar", ["noleap", "360_day"])
def test_other_calendars_keep_their_days(tmp_path, calendar):
    time = xr.date_range("2010-02-27", periods=DAYS, freq="D", calendar=calendar, use_cftime=True)
    weather = grid(np.arange(DAYS), rsds=(TRUE.irradiation, "MJ m-2")).assign_coords(time=time)
    found = open_netcdf(split_in_time(weather, tmp_path))
    assert found.time.dt.calendar == calendar
    assert [str(stamp)[:10] for stamp in found.time.values] == [str(stamp)[:10] for stamp in time]


def test_extremes_give_the_mean_temperature_with_a_word(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), tasmin=(TRUE.irradiation * 0 + 20, "C"),
                   tasmax=(TRUE.irradiation * 0 + 303.15, "K"))
    found = open_netcdf(whole(weather, tmp_path))
    np.testing.assert_allclose(found.temp_air, 25.0)
    np.testing.assert_allclose(found.temp_air_max, 30.0)
    assert any("middle of minimum and maximum" in line for line in found.attrs["conventions"])


def test_extremes_are_known_by_their_cell_methods(tmp_path):
    about = {"units": "K", "standard_name": "air_temperature"}
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"),
                   low=(TRUE.irradiation * 0 + 290, {**about, "cell_methods": "time: minimum"}),
                   high=(TRUE.irradiation * 0 + 300, {**about, "cell_methods": "time: maximum"}),
                   mean=(TRUE.irradiation * 0 + 294, {**about, "cell_methods": "time: mean"}))
    found = open_netcdf(whole(weather, tmp_path))
    for name, value in (("temp_air_min", 16.85), ("temp_air_max", 26.85), ("temp_air", 20.85)):
        np.testing.assert_allclose(found[name], value, err_msg=name)


@pytest.mark.parametrize("sentinel", [-999.0, -9999.0, 1e15, 1e20, 9.96921e36, -1e34])
def test_undeclared_numbers_for_missing_are_masked(tmp_path, sentinel):
    values = TRUE.irradiation.astype(np.float32) * 1e6
    values[1, 1, 1] = sentinel
    weather = grid(days(), rsds=(values, "J m-2"))
    weather.rsds.encoding["_FillValue"] = None
    found, counts = gate(netcdf.open_netcdf(whole(weather, tmp_path)).compute())
    assert bool(found.irradiation[1, 1, 1].isnull())
    assert counts.missing == {"irradiation": 1}


def test_gaps_are_counted(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2")).isel(time=[0, 1, 3])
    found = open_netcdf(whole(weather, tmp_path))
    assert found.sizes["time"] == 3
    assert any("1 steps between the first and the last are absent" in line for line in found.attrs["conventions"])


def test_a_gap_in_an_accumulation_is_missing_not_double(tmp_path):
    weather = grid(hours(1.0), ssrd=(_since_midnight(TRUE.ghi), "J m**-2"))
    weather = weather.isel(time=[i for i in range(96) if i not in {34, 35}])
    found = open_netcdf(whole(weather, tmp_path)).ghi.reindex(time=hours()).values
    expected = TRUE.ghi.copy()
    expected[34:37] = np.nan
    np.testing.assert_allclose(found, expected, atol=0.1)


def test_a_window_of_the_grid_is_cut_to(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    wind = grid(days(), fg=(TRUE.irradiation * 0 + 3, "m/s")).isel(latitude=slice(1, 3), longitude=slice(0, 3))
    weather.to_netcdf(tmp_path / "a.nc")
    wind.to_netcdf(tmp_path / "b.nc")
    found = open_netcdf([str(tmp_path / "*.nc")])
    assert dict(found.sizes) == {"time": DAYS, "latitude": 2, "longitude": 3}
    assert any("irradiation was cut from 3 to the 2 shared values of latitude" in c for c in found.attrs["conventions"])


def test_what_was_recognised_is_told(tmp_path):
    weather = grid(days(), dswrf=(TRUE.irradiation, {
        "units": "MJ m-2", "standard_name": "surface_downwelling_shortwave_flux_in_air"}))
    found = open_netcdf(whole(weather, tmp_path))
    assert found.attrs["conventions"][0] == "dswrf is read as sunshine by its standard_name (units 'MJ m-2')."
    assert found.attrs["origin"] == "Daily weather read from w.nc."
    assert found.irradiation.attrs["units"] == "MJ m-2"
    assert guess_kind([str(tmp_path / "w.nc")]) == "netcdf"
    assert open_source("netcdf", [tmp_path / "w.nc"]).open().sizes["time"] == DAYS


def test_opening_reads_no_weather(tmp_path, monkeypatch):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), tas=(TRUE.irradiation + 280, "K"))
    path = whole(weather, tmp_path)
    read: list[tuple[int, ...]] = []
    from xarray.backends.netCDF4_ import NetCDF4ArrayWrapper

    original = NetCDF4ArrayWrapper._getitem
    monkeypatch.setattr(NetCDF4ArrayWrapper, "_getitem",
                        lambda self, key: read.append(self.shape) or original(self, key))
    found = open_netcdf(path)
    assert (DAYS, 3, 4) not in read
    found.compute()
    assert read.count((DAYS, 3, 4)) == 2


def test_impossible_weather_is_refused_when_it_is_computed(tmp_path):
    values = TRUE.irradiation.copy()
    values[3, 2, 1] = 45.0
    weather = grid(days(), rsds=(values, "MJ m-2"), tas=(TRUE.irradiation * 0 + 20, "degC"))
    found = open_netcdf(whole(weather, tmp_path))
    assert float(found.temp_air.mean()) == pytest.approx(20.0)
    with pytest.raises(WeatherError, match=r"w\.nc, time 2010-03-13T00:00, latitude 9, longitude -0\.5: more sunshine "
                                           r"than reaches the top of the atmosphere \(got 45\.00 MJ m-2 in the day"):
        found.irradiation.compute()


def test_a_total_taken_for_a_mean_is_refused_when_it_is_computed(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation / 0.0864 * 2, "W m-2"))  # a mean of daylight hours
    found = open_netcdf(whole(weather, tmp_path), variables={"irradiation": {"name": "rsds", "means": "daily-mean"}})
    with pytest.raises(WeatherError, match=r"check the units|Check the units and what the sunshine `means`"):
        found.compute()


def _long_sky(shift: float) -> xr.Dataset:
    """Twelve clear days of March, stamps moved by `shift` hours from the start of the hour they stand for."""
    hour = np.arange(12 * 24)
    sky = [clear_sky(np.full(hour.size, 3), 10 + hour // 24, (hour % 24) * 60 + 30, latitude=latitude, longitude=-0.5,
                     zone=0.0) for latitude in LATITUDE]
    values = np.repeat(np.stack(sky, axis=1)[:, :, None], LONGITUDE.size, axis=2)
    return grid(hours(shift, hour.size), rsds=(values, "W m-2"))


def test_a_stamp_read_at_the_wrong_end_is_warned_of(tmp_path):
    right = open_netcdf(whole(_long_sky(0.0), tmp_path)).attrs["conventions"]
    assert any("follows the sun 3" in line and "WARNING" not in line for line in right)
    (tmp_path / "ends").mkdir()
    path = whole(_long_sky(1.0), tmp_path / "ends")
    wrong = open_netcdf(path).attrs["conventions"]
    assert any("WARNING: Sunshine follows the sun -3" in line and "check `means` and `stamp`" in line for line in wrong)
    mended = open_netcdf(path, variables={"ghi": {"name": "rsds", "stamp": "end"}}).attrs["conventions"]
    assert not any("WARNING" in line for line in mended)


def test_values_outside_a_stated_range_are_missing(tmp_path):
    values = TRUE.irradiation.copy()
    values[2, 0, 0] = 900.0
    weather = grid(days(), rsds=(values, {"units": "MJ m-2", "valid_range": np.array([0.0, 60.0])}))
    found, counts = gate(netcdf.open_netcdf(whole(weather, tmp_path)).compute())
    assert bool(found.irradiation[2, 0, 0].isnull())
    assert counts.missing == {"irradiation": 1}


@pytest.mark.parametrize("own", [True, False])
def test_a_valid_range_of_packed_files_is_unpacked_with_each_file(tmp_path, own):
    """Written as packed numbers with each file's own scale, or in the unit of the values."""
    values = TRUE.irradiation.copy()
    values[0, 0, 0] = values[3, 2, 1] = 44.0  # beyond the valid 40, within what a gate would notice
    for number, (part, scale) in enumerate(((slice(0, 2), 0.01), (slice(2, 4), 0.002))):
        weather = grid(days(), rsds=(values, "MJ m-2")).isel(time=part)
        limits = np.array([0, round((40.0 - 20.0) / scale)], "i2") if own else np.array([0.0, 40.0])
        limits = np.array([round(-20.0 / scale), limits[1]], "i2") if own else limits
        weather.rsds.attrs["valid_range"] = limits
        weather.to_netcdf(tmp_path / f"v{number}.nc", encoding={"rsds": {
            "dtype": "i2", "scale_factor": scale, "add_offset": 20.0, "_FillValue": np.int16(-32768)}})
    found, _ = gate(netcdf.open_netcdf([str(tmp_path / "v*.nc")]).compute())
    assert bool(found.irradiation[0, 0, 0].isnull())
    assert bool(found.irradiation[3, 2, 1].isnull())
    assert int(found.irradiation.isnull().sum()) == 2
    assert totals(found["count"].values, found["counts"].values)["irradiation"]["sentinel"] == 2


def test_the_same_packed_limit_means_another_value_in_every_file(tmp_path):
    for number, (part, scale) in enumerate(((slice(0, 2), 0.01), (slice(2, 4), 0.001))):
        weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2")).isel(time=part)
        weather.rsds.attrs["valid_max"] = np.int16(2000)  # 40 in the first file, 22 in the second
        weather.to_netcdf(tmp_path / f"v{number}.nc", encoding={"rsds": {
            "dtype": "i2", "scale_factor": scale, "add_offset": 20.0, "_FillValue": np.int16(-32768)}})
    found = open_netcdf([str(tmp_path / "v*.nc")]).compute().irradiation
    expected = np.where((TRUE.irradiation > 22.0) & (np.arange(DAYS) >= 2)[:, None, None], np.nan, TRUE.irradiation)
    assert np.isnan(expected).any()
    np.testing.assert_allclose(found, expected, atol=0.01)


def _refused(tmp_path, weather: xr.Dataset, sentence: str, kind: type[WeatherError] = WeatherError, **said) -> None:
    folder = Path(tempfile.mkdtemp(dir=tmp_path))
    with pytest.raises(kind, match=sentence):
        open_netcdf(whole(weather, folder), variables=said or None)


def test_a_daily_rate_without_a_period_is_refused(tmp_path):
    _refused(tmp_path, grid(days(), rsds=(TRUE.irradiation, "W m-2")),
             r"irradiation has units 'W m-2'; a daily total needs energy \('J m-2', 'MJ m-2', 'kWh m-2'\) or a stated "
             r"averaging period\. Set variables\.irradiation\.means: 'daily-mean'")


def test_an_hourly_energy_without_a_meaning_is_refused(tmp_path):
    _refused(tmp_path, grid(hours(1.0), ssrd=(TRUE.ghi * 3600, "J m**-2")),
             r"the units 'J m\*\*-2' at a 1-hourly step do not say of which period the energy is \(wanted 'hour-ending "
             r"accumulation', 'hour-starting accumulation' or 'since-00-UTC'\)\. Set variables\.irradiation\.means")


def test_a_meaning_the_numbers_contradict_is_refused(tmp_path):
    _refused(tmp_path, grid(hours(1.0), ssrd=(TRUE.ghi * 3600, "J m**-2")),
             r"`means: 'since-00-UTC'` contradicts the numbers, which do not grow from 00 UTC on",
             irradiation={"name": "ssrd", "means": "since-00-UTC"})
    _refused(tmp_path, grid(hours(1.0), ssrd=(_since_midnight(TRUE.ghi), "J m**-2")),
             r"`means: 'hour-ending accumulation'` contradicts the numbers, which grow from 00 UTC on",
             irradiation={"name": "ssrd", "means": "hour-ending accumulation"})


@pytest.mark.parametrize(
    ("time", "values", "units", "means"),
    [
        (days, TRUE.irradiation, "MJ m-2", "daily-mean"),
        (days, TRUE.irradiation, "W m-2", "daily-total"),
        (days, TRUE.irradiation, "J m-2", "hour-ending accumulation"),
        (hours, TRUE.ghi, "W m-2", "hour-ending accumulation"),
        (hours, TRUE.ghi, "W m-2", "daily-mean"),
        (hours, TRUE.ghi, "J m-2", "step-mean"),
    ],
)
def test_a_meaning_that_does_not_go_with_units_and_step_is_refused(tmp_path, time, values, units, means):
    _refused(tmp_path, grid(time(), rsds=(values, units)),
             f"`means: '{means}'` does not go with units '{units}' at a (daily|1-hourly) step",
             irradiation={"name": "rsds", "means": means})


def test_units_are_demanded(tmp_path):
    _refused(tmp_path, grid(days(), rsds=(TRUE.irradiation, {})), "the unit of sunshine is missing", UnitsError)
    _refused(tmp_path, grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), tas=(TRUE.irradiation, {})),
             r"tas in .*w\.nc: the unit is missing \(wanted 'degC', 'K' or 'degF'\)", UnitsError)
    weather = grid(days(), rsds=(TRUE.irradiation, {}))
    found = open_netcdf(whole(weather, tmp_path), variables={"irradiation": {"name": "rsds", "units": "MJ m-2"}})
    np.testing.assert_allclose(found.irradiation, TRUE.irradiation)


def test_mean_components_of_wind_are_refused(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), uas=(TRUE.irradiation * 0, "m s-1"),
                   vas=(TRUE.irradiation * 0, "m s-1"))
    _refused(tmp_path, weather, r"wind components averaged over a day do not give the wind speed \(got a step of 24 h")


def test_wind_of_unknown_height_is_refused(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), wind_speed=(TRUE.irradiation * 0 + 3, "m s-1"))
    _refused(tmp_path, weather, r"the height of the wind is unknown .*Set variables\.wind_speed\.height_m")
    found = open_netcdf(whole(weather, tmp_path), variables={"wind_speed": {"height_m": 2.0}})
    np.testing.assert_allclose(found.wind_speed, 3.0)


def test_a_height_coordinate_tells_the_height_of_the_wind(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), windspeed=(TRUE.irradiation * 0 + 3, {
        "units": "m s-1", "standard_name": "wind_speed"}))
    weather = weather.assign_coords(height=((), 10.0, {"standard_name": "height", "units": "m"}))
    np.testing.assert_allclose(open_netcdf(whole(weather, tmp_path)).wind_speed, 3.0 * WIND_FACTOR)


def test_two_candidates_are_refused_and_a_choice_settles_it(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"), ssrd=(TRUE.irradiation * 2, "MJ m-2"))
    _refused(tmp_path, weather, r"several variables could be irradiation \(got rsds, ssrd\)\. Choose one under "
                                r"`variables\.irradiation\.name`")
    found = open_netcdf(whole(weather, tmp_path), variables={"irradiation": "rsds"})
    np.testing.assert_allclose(found.irradiation, TRUE.irradiation)


def test_no_sunshine_is_refused_with_what_is_there(tmp_path):
    _refused(tmp_path, grid(days(), tas=(TRUE.irradiation, "K"), swrd=(TRUE.irradiation, "MJ m-2")),
             r"no sunshine was recognised \(got tas, swrd; wanted a variable for irradiation\)")


def test_a_mapped_name_that_no_file_has_is_refused(tmp_path):
    _refused(tmp_path, grid(days(), rsds=(TRUE.irradiation, "MJ m-2")),
             r"weather\.variables\.temp_air\.name: no such variable in .*\.nc \(got tas; wanted one of rsds\)",
             temp_air="tas")


def test_a_mapping_is_checked(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    _refused(tmp_path, weather, r"variables\.sunshine: unknown quantity \(got sunshine; wanted irradiation, ghi",
             sunshine="rsds")
    _refused(tmp_path, weather, r"variables\.irradiation\.unit: unknown key \(got unit; wanted name, units, means",
             irradiation={"name": "rsds", "unit": "MJ m-2"})
    _refused(tmp_path, weather, r"`means` is not one of the possible ones \(got weekly; wanted 'daily-total', 'daily-m",
             irradiation={"name": "rsds", "means": "weekly"})


def test_grids_that_are_not_regular_are_refused(tmp_path):
    plain = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    curved = xr.Dataset(
        {"rsds": (("time", "y", "x"), TRUE.irradiation, {"units": "MJ m-2"})},
        coords={"time": days(),
                "lat": (("y", "x"), np.add.outer(LATITUDE, LONGITUDE * 0.1), {"units": "degrees_north"}),
                "lon": (("y", "x"), np.add.outer(LATITUDE * 0.1, LONGITUDE), {"units": "degrees_east"})},
    )
    _refused(tmp_path, curved, r"the grid is curvilinear or rotated.*\(got lat\(y, x\)")
    _refused(tmp_path, plain.assign_coords(latitude=("latitude", [8.0, 8.5, 9.5], {"units": "degrees_north"})),
             r"latitude is not evenly spaced \(got 8\.5 is followed by 9\.5|latitude is not evenly spaced \(got 8 is")
    _refused(tmp_path, plain.assign_coords(latitude=("latitude", [80.0, 90.0, 100.0], {"units": "degrees_north"})),
             r"impossible latitude \(got 100; wanted -90 to 90\)")
    _refused(tmp_path, plain.rename(latitude="row", longitude="column").drop_vars(["row", "column"]),
             "no latitude was found")
    cells = xr.Dataset(
        {"rsds": (("time", "cell"), TRUE.irradiation[:, 0], {"units": "MJ m-2"}), "corners": (("cell", "nv"),
                                                                                              np.zeros((4, 3)))},
        coords={"time": days(), "lat": ("cell", LONGITUDE, {"units": "degrees_north", "bounds": "corners"}),
                "lon": ("cell", LONGITUDE, {"units": "degrees_east"})})
    _refused(tmp_path, cells, "the grid is unstructured: its cells are polygons")


def test_times_that_cannot_be_used_are_refused(tmp_path):
    plain = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    _refused(tmp_path, plain.assign_coords(time=np.array(["2010-01-16", "2010-02-15", "2010-03-16", "2010-04-16"],
                                                         "datetime64[ns]")),
             r"this is monthly weather \(got steps of 29 days; wanted daily or hourly steps\)")
    _refused(tmp_path, plain.assign_coords(time=days()[0] + np.array([0, 24, 60, 96]) * np.timedelta64(1, "h")),
             r"the time steps are uneven \(got 36 h after 2010-03-11")
    _refused(tmp_path, plain.assign_coords(time=("time", np.arange(4.0), {"units": "Month"})),
             r"the time axis is not in dates \(got time in units 'Month'")
    _refused(tmp_path, plain.isel(time=[0]), "one time alone does not tell the time step")
    _refused(tmp_path, plain.isel(time=0, drop=True), "no time axis was found")


@pytest.mark.parametrize("write", [whole, packed])
def test_records_that_come_twice_with_the_same_values_count_once(tmp_path, write):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    (tmp_path / "b").mkdir()
    files = write(weather.isel(time=slice(0, 3)), tmp_path) + write(weather.isel(time=[3, 2, 1]), tmp_path / "b")
    found = open_netcdf(files)
    _check(found, "irradiation", TRUE.irradiation, days())
    assert "2 records of rsds come twice and count once." in found.attrs["conventions"]
    assert "Records of rsds do not stand in the order of time; they were sorted." in found.attrs["conventions"] \
        or write is packed  # which writes times in two halves, each of them in another file
    assert totals(found["count"].values, found["counts"].values)["irradiation"]["repeated"] == 2 * 12


def test_a_copy_that_lacks_a_value_takes_it_from_the_other(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    weather.where(weather.latitude > 8.2).isel(time=slice(0, 3)).to_netcdf(tmp_path / "a.nc")
    weather.isel(time=slice(0, 4)).to_netcdf(tmp_path / "b.nc")
    weather.isel(time=slice(1, 4)).to_netcdf(tmp_path / "c.nc")
    _check(open_netcdf([str(tmp_path / "*.nc")]), "irradiation", TRUE.irradiation, days())


def test_copies_that_contradict_each_other_are_refused_by_name_when_they_are_read(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    weather.isel(time=slice(0, 3)).to_netcdf(tmp_path / "a.nc")
    other = weather.isel(time=slice(2, 4)).copy(deep=True)
    other.rsds[0, 1, 2] += 0.5
    other.to_netcdf(tmp_path / "b.nc")
    found = open_netcdf([str(tmp_path / "*.nc")])
    with pytest.raises(WeatherError, match=r"2010-03-12 00:00 \(.*a\.nc, .*b\.nc\): a time comes twice with different "
                                           r"values \(got .* and .*; 1 such values\)\. Leave out one"):
        found.irradiation.compute()


def test_unlike_files_are_refused(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    weather.isel(time=slice(0, 3)).to_netcdf(tmp_path / "a.nc")
    weather.isel(time=slice(3, 4), latitude=[0, 1]).to_netcdf(tmp_path / "b.nc")
    with pytest.raises(WeatherError, match=r"files lie on different cells \(latitude\) \(got 3 and 2 values\)"):
        open_netcdf([str(tmp_path / "*.nc")])
    other = grid(days(), rsds=(TRUE.irradiation * 1e6, "J m-2")).isel(time=slice(3, 4))
    (tmp_path / "b.nc").unlink()
    other.to_netcdf(tmp_path / "b.nc")
    with pytest.raises(WeatherError, match=r"files disagree about sun \(got 'rsds' in 'MJ m-2' and 'rsds' in 'J m-2'"):
        open_netcdf([str(tmp_path / "*.nc")])


def test_variables_on_different_grids_or_periods_are_refused(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    weather.to_netcdf(tmp_path / "a.nc")
    coarse = grid(days(), tas=(TRUE.irradiation + 280, "K")).isel(longitude=[0, 2])
    coarse.to_netcdf(tmp_path / "b.nc")
    with pytest.raises(WeatherError, match="variables lie on different grids"):
        open_netcdf([str(tmp_path / "*.nc")])
    later = grid(days(24 * 300), tas=(TRUE.irradiation + 280, "K"))
    (tmp_path / "b.nc").unlink()
    later.to_netcdf(tmp_path / "b.nc")
    with pytest.raises(WeatherError, match="temp_air and the sunshine share no time"):
        open_netcdf([str(tmp_path / "*.nc")])
    finer = grid(hours(), tas=(TRUE.temp_air + 280, "K"))
    (tmp_path / "b.nc").unlink()
    finer.to_netcdf(tmp_path / "b.nc")
    with pytest.raises(WeatherError, match=r"variables have different time steps \(got temp_air every 1 h, sunshine"):
        open_netcdf([str(tmp_path / "*.nc")])


@pytest.mark.parametrize("format", ["NETCDF3_CLASSIC", "NETCDF3_64BIT", "NETCDF3_64BIT_DATA"])
@pytest.mark.parametrize("unlimited", [(), ("time",)])
def test_a_classic_file_cut_anywhere_is_refused(tmp_path, format, unlimited):
    from netCDF4 import Dataset

    path = tmp_path / "a.nc"
    with Dataset(path, "w", format=format) as file:
        for name, size in (("time", None if unlimited else DAYS), ("lat", 3), ("lon", 4)):
            file.createDimension(name, size)
        for name, dims, units, values in (("time", ("time",), "days since 2010-03-10", np.arange(DAYS)),
                                          ("lat", ("lat",), "degrees_north", LATITUDE),
                                          ("lon", ("lon",), "degrees_east", LONGITUDE),
                                          ("rsds", ("time", "lat", "lon"), "MJ m-2", TRUE.irradiation)):
            file.createVariable(name, "f4", dims).units = units
            file[name][:] = values
    assert open_netcdf([str(path)]).sizes["time"] == DAYS
    content = path.read_bytes()
    for cut in (len(content) - 1, len(content) // 2, 90, 5):
        path.write_bytes(content[:cut])
        with pytest.raises(WeatherError, match=rf"a\.nc: the file is cut off \(got {cut} bytes; wanted"):
            open_netcdf([str(path)])


def test_a_cut_netcdf4_file_and_one_without_records_are_refused(tmp_path):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    path = tmp_path / "a.nc"
    weather.to_netcdf(path, unlimited_dims=["time"])
    content = path.read_bytes()
    path.write_bytes(content[: len(content) // 2])
    with pytest.raises(WeatherError, match=r"a\.nc: the file cannot be read .*It is broken or cut off"):
        open_netcdf([str(path)])
    weather.isel(time=slice(0, 0)).to_netcdf(tmp_path / "b.nc", unlimited_dims=["time"])
    with pytest.raises(WeatherError, match=r"b\.nc: the file holds no times \(got 0 records"):
        open_netcdf([str(tmp_path / "b.nc")])


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"", "the file is empty"),
        (b"<!DOCTYPE html><html>log in</html>", "this is a web page or an error message saved as a file"),
        (b'{"error": "quota"}', "this is a web page or an error message saved as a file"),
        (b"GRIB\x00\x00", "this is a GRIB file"),
        (b"PK\x03\x04", "this is an archive"),
        (b"LOCATION,Drymouth", r"not a NetCDF file \(got first bytes b'LOCATION'"),
    ],
)
def test_foreign_files_are_named(tmp_path, content, sentence):
    (tmp_path / "a.nc").write_bytes(content)
    with pytest.raises(WeatherError, match=sentence):
        open_netcdf([str(tmp_path / "a.nc")])
