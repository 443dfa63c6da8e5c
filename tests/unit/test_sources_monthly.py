"""Monthly means in the ways real files write them: axes of months, units, grids that differ, what is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from stillfield.api import monthly_yield
from stillfield.errors import WeatherError
from stillfield.physics.clearness_days import DAYS_IN_MONTH
from stillfield.sources import open_source

LATITUDE, LONGITUDE = np.array([10.0, 12.0]), np.array([40.0, 42.0, 44.0])
#: Mean daily irradiation of each month [MJ m-2] at the first cell; the others have a little less.
SUN = np.array([18.0, 20.0, 22.0, 23.0, 22.0, 20.0, 17.0, 16.5, 18.0, 19.0, 18.0, 17.0])
STARTS = np.array([f"2001-{month:02d}-01" for month in range(1, 13)], dtype="datetime64[ns]")


def field(values: np.ndarray, lessening: float = 0.02) -> np.ndarray:
    """Months by cells."""
    cells = 1.0 - lessening * np.arange(6).reshape(2, 3)
    return values[:, None, None] * cells


def means(time=("time", STARTS), sun_units="MJ m-2 day-1", sun=SUN, **about) -> xr.Dataset:
    """A whole file of monthly means."""
    name, stamps, *attrs = time
    dims = (name, "lat", "lon")
    return xr.Dataset(
        {"irradiation": (dims, field(sun), {"units": sun_units, **about}),
         "tas": (dims, field(np.linspace(24, 30, 12), 0.0), {"units": "DEG C"}),
         "sfcWind": (dims, field(np.full(12, 3.0), 0.0), {"units": "M/S"})},
        coords={name: (name, stamps, attrs[0] if attrs else {}), "lat": ("lat", LATITUDE, {"units": "degrees_north"}),
                "lon": ("lon", LONGITUDE, {"units": "degrees_east"})},
    )


def opened(*files, **options) -> xr.Dataset:
    return open_source("monthly-means", [str(file) for file in files], **options).open()


def written(weather: xr.Dataset, path):
    weather.to_netcdf(path)
    return path


def monthly_mean(days: xr.Dataset) -> np.ndarray:
    return days["irradiation"].groupby("time.month").mean("time").values


MIDS = np.cumsum(DAYS_IN_MONTH) - np.array(DAYS_IN_MONTH) / 2
AXES = {
    "dates": ("time", STARTS),
    "mid-months": ("time", STARTS + np.timedelta64(14, "D")),
    "month ends": ("time", STARTS + (np.array(DAYS_IN_MONTH) - 1).astype("timedelta64[D]")),
    "Month": ("month", np.arange(1.0, 13.0), {"units": "Month"}),
    "no units": ("month", np.arange(1, 13)),
    "year 0": ("TIME", MIDS * 24, {"units": "hour since 0000-01-01 00:00:00"}),
    "year 1": ("time", MIDS, {"units": "days since 0001-01-01"}),
    "months since": ("time", np.arange(12), {"units": "months since 1958-1-1"}),
    "noleap": ("time", MIDS, {"units": "days since 1999-01-01", "calendar": "noleap"}),
    "360 days": ("time", np.arange(12) * 30.0 + 15, {"units": "days since 1999-01-01", "calendar": "360_day"}),
    "standard_name": ("t0", MIDS, {"units": "days since 1999-01-01", "standard_name": "time"}),
}


@pytest.mark.parametrize("axis", AXES.values(), ids=AXES)
def test_any_axis_of_months_is_one_year(tmp_path, axis):
    days = opened(written(means(time=axis), tmp_path / "m.nc"))
    assert days.sizes["time"] == 365
    np.testing.assert_allclose(monthly_mean(days), field(SUN), rtol=1e-12)
    np.testing.assert_allclose(days.temp_air.groupby("time.month").mean("time")[:, 0, 0], np.linspace(24, 30, 12))
    assert (days.attrs["record"], days.attrs["clock"]) == ("typical-year", "own-days")
    assert "kept" in days.attrs["generated_days"]


UNITS = {
    "W m-2": (SUN / 0.0864, {"cell_methods": "time: mean"}),
    "W/m2": (SUN / 0.0864, {"means": "daily-mean"}),
    "kWh/m2/day": (SUN / 3.6, {}),
    "J m**-2": (SUN * 1e6, {"means": "daily-total"}),
    "kWh m-2": (SUN / 3.6 * np.array(DAYS_IN_MONTH), {"means": "monthly-total"}),
    "kWh/m2/month": (SUN / 3.6 * np.array(DAYS_IN_MONTH), {}),
}


@pytest.mark.parametrize("units", UNITS)
def test_sunshine_in_any_unit_is_one_irradiation(tmp_path, units):
    sun, about = UNITS[units]
    means_it = {"variables": {"irradiation": {"means": about["means"]}}} if "means" in about else {}
    weather = means(sun_units=units, sun=sun, **({} if "means" in about else about))
    days = opened(written(weather, tmp_path / "m.nc"), **means_it)
    np.testing.assert_allclose(monthly_mean(days), field(SUN), rtol=1e-6)


@pytest.mark.parametrize("units", ["W m-2", "J m**-2", "kWh m-2"])
def test_sunshine_that_can_be_read_in_two_ways_is_refused(tmp_path, units):
    with pytest.raises(WeatherError, match=r"do not say what a monthly value.*'monthly-total'"):
        opened(written(means(sun_units=units), tmp_path / "m.nc"))


def test_a_series_becomes_the_mean_of_its_years_and_february_its_own_length(tmp_path):
    stamps = np.arange("2003-01", "2005-01", dtype="datetime64[M]").astype("datetime64[ns]")
    totals = np.concatenate([SUN - 1, SUN + 1]) * np.array([*DAYS_IN_MONTH, 31, 29, *DAYS_IN_MONTH[2:]])
    weather = means().isel(time=np.tile(np.arange(12), 2)).assign_coords(time=stamps)
    weather["irradiation"] = (("time", "lat", "lon"), field(totals, 0.0), {"units": "MJ m-2"})
    parts = [written(weather.isel(time=slice(i, i + 12)), tmp_path / f"{i}.nc") for i in (0, 12)]
    days = opened(*parts, variables={"irradiation": {"means": "monthly-total"}})
    np.testing.assert_allclose(monthly_mean(days), field(SUN, 0.0), rtol=1e-9)
    assert any("irradiation over 2" in line for line in days.attrs["conventions"])


def test_a_missing_month_stays_missing_and_is_told(tmp_path):
    days = opened(written(means().isel(time=slice(0, 11)), tmp_path / "m.nc"))
    by_month = monthly_mean(days)
    assert np.isnan(by_month[11]).all()
    assert np.isfinite(by_month[:11]).all()
    assert any("has no 12. month" in line for line in days.attrs["conventions"])


def test_specific_humidity_becomes_a_dew_point(tmp_path):
    weather = means()
    weather["SPEH"] = (("time", "lat", "lon"), field(np.full(12, 14.4), 0.0), {"units": "G/KG"})
    days = opened(written(weather, tmp_path / "m.nc"), variables={"specific_humidity": "SPEH"})
    # Saturated air of 101.325 kPa at 19.8 degC holds 14.4 g/kg: e = 2.31 kPa (FAO-56, Table 2.3: 2.338 at 20 degC).
    assert float(days.temp_dew.mean()) == pytest.approx(19.8, abs=0.15)


def coarse(weather: xr.Dataset) -> xr.Dataset:
    """Temperature and wind on another grid, in 21..379 degrees, with one cell at sea level missing."""
    other = weather[["tas", "sfcWind"]].assign_coords(lat=LATITUDE + 0.4, lon=LONGITUDE + 360.4)
    other["tas"].loc[{"lat": 10.4, "lon": 400.4}] = np.nan
    return other


def test_other_grids_are_refused_until_a_distance_is_stated_and_told(tmp_path):
    weather = means()
    files = [written(weather[["irradiation"]], tmp_path / "s.nc"), written(coarse(weather), tmp_path / "t.nc")]
    with pytest.raises(WeatherError, match=r"different cells .*weather\.join_within_km"):
        opened(*files)
    days = opened(*files, join_within_km=100)
    missing = np.isnan(days.temp_air.isel(time=0).values)
    # The next cell to the missing one is 2 deg of longitude off, some 260 km.
    assert missing.tolist() == [[True, False, False], [False, False, False]]
    assert np.array_equal(missing, np.isnan(days.wind_speed.isel(time=0).values))
    assert np.isfinite(days.irradiation.values).all()
    told = next(line for line in days.attrs["conventions"] if "other cells" in line)
    # 0.4 deg of latitude and of longitude: 62 km at 10 N.
    assert "5 cells take" in told
    assert "62 km away on average" in told
    assert "1 cells have none" in told
    assert not np.isnan(opened(*files, join_within_km=400).temp_air.values).any()


def test_days_differ_and_their_yield_is_not_that_of_the_mean_day(tmp_path, still):
    days = opened(written(means(), tmp_path / "m.nc"))
    assert float(days.irradiation.isel(latitude=0, longitude=0)[:31].std()) > 2.0
    monthly = monthly_yield(days, still)
    assert "monthly_yield_poor_year" not in monthly
    assert (monthly.days_used == monthly.days_expected).all()


@pytest.fixture
def still():
    from stillfield.api import load_still

    return load_still(Path(__file__).parents[2] / "config/stills/single-slope-glass.yaml")


def test_sunshine_from_the_temperature_range_only_when_asked_for(tmp_path):
    weather = means()[["tas", "sfcWind"]].rename(tas="tasmax")
    weather["tasmin"] = weather["tasmax"] - 11.8
    weather["tasmin"].attrs["units"] = "DEG C"
    path = written(weather, tmp_path / "t.nc")
    with pytest.raises(WeatherError, match=r"no sunshine was recognised.*radiation_from_temperature: \{k_rs: 0\.16\}"):
        opened(path)
    days = opened(path, radiation_from_temperature={"k_rs": 0.16})
    # FAO-56, Table 2.6 (quoted from memory): January at 10 N, 32.0 MJ m-2 above the atmosphere.
    assert monthly_mean(days)[0, 0, 0] == pytest.approx(0.16 * 11.8**0.5 * 32.0, rel=0.02)
    assert any("WARNING: sunshine was not measured" in line for line in days.attrs["conventions"])


@pytest.mark.parametrize(
    ("time", "message"),
    [
        (("time", np.arange("2001-01-01", "2001-01-13", dtype="datetime64[D]").astype("datetime64[ns]")),
         "a month comes more than once"),
        (("time", np.arange(12) + 0.5), "does not tell its months"),
        (("time", np.arange(12) * 1.0, {"units": "fortnights since 2000-01-01"}), "cannot be read"),
    ],
)  # fmt: skip
def test_axes_that_hold_no_months_are_refused(tmp_path, time, message):
    with pytest.raises(WeatherError, match=message):
        opened(written(means(time=time), tmp_path / "m.nc"))


def test_eleven_climatological_months_are_refused(tmp_path):
    weather = means(time=("TIME", MIDS, {"units": "days since 0000-01-01"})).isel(TIME=slice(0, 11))
    with pytest.raises(WeatherError, match="not twelve months"):
        opened(written(weather, tmp_path / "m.nc"))
