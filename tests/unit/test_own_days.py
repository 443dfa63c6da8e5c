"""Days of daily files: their dates, their clock in words, and means over the daylight."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from gridded_samples import DAYS, LATITUDE, days, grid, truth, whole
from stillfield.errors import WeatherError
from stillfield.sources.grids.netcdf import open_netcdf
from stillfield.sources.grids.own_days import clock_hours

TRUE = truth()


def bounded(first_hour: float) -> xr.Dataset:
    """Daily totals stamped at the end of days that begin at `first_hour`."""
    weather = grid(days(first_hour + 24.0), rsds=(TRUE.irradiation, "MJ m-2"))
    weather.time.attrs["bounds"] = "time_bnds"
    weather.time.encoding["units"] = "minutes since 2010-01-01"
    lower = days(first_hour)
    return weather.assign(time_bnds=(("time", "nv"), np.stack([lower, lower + np.timedelta64(1, "D")], axis=1)))


@pytest.mark.parametrize(
    ("first_hour", "date", "sentence"),
    [
        (0.0, 10, "Days are the source's own: calendar days by the clock of the files, taken to be UTC"),
        (6.0, 10, "Days are the source's own: from 06:00 to 06:00 by the clock of the files"),
        (18.0, 11, "from 18:00 to 18:00 by the clock of the files, taken to be UTC (set weather.day_clock"),
    ],
)
def test_a_day_carries_the_date_of_its_middle(tmp_path, first_hour, date, sentence):
    found = open_netcdf(whole(bounded(first_hour), tmp_path))
    assert found.time.values[0] == np.datetime64(f"2010-03-{date}")
    np.testing.assert_allclose(found.irradiation, TRUE.irradiation)
    assert any(sentence in line for line in found.attrs["conventions"])


def test_an_odd_stamp_without_bounds_is_warned_of(tmp_path):
    found = open_netcdf(whole(grid(days(18.0), rsds=(TRUE.irradiation, "MJ m-2")), tmp_path))
    assert found.time.values[0] == np.datetime64("2010-03-10")
    assert any("WARNING: daily values are stamped at 18:00 without time" in c for c in found.attrs["conventions"])


@pytest.mark.parametrize(
    ("longitude", "day_clock", "warned"),
    [(90.0, None, False), (101.0, None, True), (-101.0, "UTC", True), (179.0, "local", False), (150.0, "UTC+10", False),
     (20.0, "UTC+10", True), (-150.0, "UTC-10", False)],
)
def test_days_that_cut_the_sunshine_in_two_are_warned_of(tmp_path, longitude, day_clock, warned):
    weather = grid(days(), rsds=(TRUE.irradiation, "MJ m-2")).isel(longitude=[0])
    weather = weather.assign_coords(longitude=("longitude", [longitude], {"units": "degrees_east"}))
    said = open_netcdf(whole(weather, tmp_path), day_clock=day_clock).attrs["conventions"]
    assert any("WARNING: at 1 of 1 columns such a day begins and ends while the sun is up" in c for c in said) == warned


def test_a_clock_is_an_offset_or_refused():
    assert [clock_hours(text) for text in ("UTC", "utc-3:30", "UTC+12", "Local")] == [0.0, -3.5, 12.0, None]
    with pytest.raises(WeatherError, match=r"weather\.day_clock: unknown clock of the days \(got CET; wanted 'local'"):
        clock_hours("CET")


def test_a_mean_over_the_daylight_is_multiplied_by_the_length_of_the_day(tmp_path):
    # FAO-56 equation 34: N = 24 / pi * ws, ws = arccos(-tan(phi) tan(delta)), delta by equation 24.
    day_of_year = 69 + np.arange(DAYS)
    delta = 0.409 * np.sin(2 * np.pi * day_of_year / 365 - 1.39)
    hours = 24 / np.pi * np.arccos(-np.tan(np.radians(LATITUDE))[None, :] * np.tan(delta)[:, None])
    daylight_mean = TRUE.irradiation * 1e6 / (hours[:, :, None] * 3600)
    weather = grid(days(), rsds=(daylight_mean, "W m-2"))
    said = {"irradiation": {"name": "rsds", "means": "daylight-mean"}}
    found = open_netcdf(whole(weather, tmp_path), variables=said)
    # The single sine of equation 24 is up to half a degree off the declination of the longer series used here.
    np.testing.assert_allclose(found.irradiation, TRUE.irradiation, rtol=2e-3)
    assert any("mean irradiance from sunrise to sunset" in line for line in found.attrs["conventions"])
    energy = grid(days(), rsds=(TRUE.irradiation, "MJ m-2"))
    (tmp_path / "b").mkdir()
    with pytest.raises(WeatherError, match="`means: 'daylight-mean'` does not go with units 'MJ m-2'"):
        open_netcdf(whole(energy, tmp_path / "b"), variables=said)
