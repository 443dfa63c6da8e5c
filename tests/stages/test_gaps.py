"""Gaps of hourly weather: bridged, known to be dark, or left missing; each counted, lazy or not."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from pvlib.solarposition import get_solarposition

from stillfield.sources.gaps import bridge, fill_gaps
from stillfield.sources.tally import totals
from stillfield.stages.prepare import prepare

LONGITUDES = np.array([-150.0, 0.0, 150.0, 179.0])
LATITUDES = np.array([-35.0, 20.0])


def hourly(days: int = 6, start: str = "2019-06-18", calendar: str = "standard") -> xr.Dataset:
    """Sunshine from 6 to 18 h solar time, temperature a ramp."""
    time = xr.date_range(start, periods=24 * days, freq="h", calendar=calendar, use_cftime=calendar != "standard")
    hour = np.arange(24 * days)
    solar = hour[:, None] + 0.5 + LONGITUDES / 15.0
    ghi = np.maximum(np.sin((solar % 24 - 6) * np.pi / 12), 0.0)[:, None, :] * np.array([[400.0], [900.0]])
    ramp = np.broadcast_to(15.0 + 0.1 * hour[:, None, None], ghi.shape)
    names = ("time", "latitude", "longitude")
    return xr.Dataset(
        {"ghi": (names, ghi), "temp_air": (names, ramp.copy()), "wind_speed": (names, np.full(ghi.shape, 3.0))},
        coords={"time": time, "latitude": LATITUDES, "longitude": LONGITUDES},
        attrs={"record": "series", "step_hours": 1.0, "clock": "UTC", "origin": "closed form"})


def counted(weather: xr.Dataset) -> dict[str, dict[str, int]]:
    return totals(weather["count"].values, weather["counts"].values)


@pytest.mark.parametrize("chunk", [None, 1, 5, 24, 144])
@pytest.mark.parametrize("fill_hours", [0.0, 1.0, 3.0])
def test_short_gaps_are_bridged_by_a_line_and_long_ones_are_not(chunk, fill_hours):
    weather = hourly()
    whole = weather["temp_air"].copy(deep=True)
    gaps = {10: 1, 23: 3, 47: 2, 80: 4, 143: 1}  # first hour: length; the last one lies at the end of the record
    for first, length in gaps.items():
        weather["temp_air"][first:first + length, 1, 2] = np.nan
    weather = weather if chunk is None else weather.chunk(time=chunk)
    filled = fill_gaps(weather, step_hours=1.0, fill_hours=fill_hours)
    expected = sum(length for first, length in gaps.items() if length <= fill_hours and first != 143)
    assert counted(filled)["temp_air"]["filled"] == expected if fill_hours else "temp_air" not in counted(filled)
    valid = filled["temp_air"].notnull()
    np.testing.assert_allclose(filled["temp_air"].where(valid, 0.0), whole.where(valid, 0.0))  # a ramp is a line
    assert int((~valid).sum()) == sum(gaps.values()) - expected


def test_a_bridge_never_reaches_beyond_the_record():
    values = np.array([np.nan, 1.0, np.nan, 2.0, np.nan])
    assert bridge(values, 9).tolist()[1:4] == [1.0, 1.5, 2.0]
    assert np.isnan(bridge(values, 9)[[0, 4]]).all()


@pytest.mark.parametrize("step_hours", [0.5, 1.0, 3.0])
def test_sunshine_missing_by_night_is_zero_and_by_day_stays_missing(step_hours):
    """Night by pvlib's ephemeris: the centre of the sun below the horizon at both ends of the step."""
    weather = hourly().resample(time=f"{round(step_hours * 60)}min").nearest().assign_attrs(hourly().attrs)
    weather["ghi"] = weather["ghi"] * np.nan
    filled = fill_gaps(weather.assign_attrs(step_hours=step_hours), step_hours=step_hours, fill_hours=3.0)["ghi"]
    edges = weather.indexes["time"].tz_localize("UTC")
    import pandas as pd

    for latitude in LATITUDES:
        for longitude in LONGITUDES:
            height = [get_solarposition(edges + pd.Timedelta(hours=shift), latitude, longitude)["elevation"].to_numpy()
                      for shift in (0.0, step_hours / 2, step_hours)]
            found = filled.sel(latitude=latitude, longitude=longitude).notnull().to_numpy()
            surely_dark, surely_light = np.max(height, axis=0) < -0.5, np.max(height, axis=0) > 0.5
            assert found[surely_dark].all()
            assert not found[surely_light].any()
            assert surely_dark.sum() > 20 / step_hours


@pytest.mark.parametrize("calendar", ["standard", "noleap", "360_day"])
def test_hours_that_are_absent_from_the_file_become_missing_in_every_calendar(calendar):
    weather = hourly(calendar=calendar)
    holes = weather.isel(time=np.r_[0:12, 13:60, 66:144])  # noon of the first day, and 12 to 18 h of the third, at 0 E
    prepared = prepare(holes)
    daily = prepared.daily.sel(longitude=0.0, latitude=20.0)
    assert np.isnan(daily["irradiation"].to_numpy()).tolist() == [True, False, True, False, False, False]
    assert np.isnan(daily["temp_air"].to_numpy()).tolist() == [False, False, True, False, False, False]
    assert daily["time"].dt.calendar == weather["time"].dt.calendar
    whole = prepare(weather).daily.sel(longitude=0.0, latitude=20.0)
    np.testing.assert_allclose(daily["temp_air"][0], whole["temp_air"][0])  # one hour of a ramp, bridged


def test_a_night_that_is_missing_costs_no_day():
    weather = hourly()
    solar = (np.arange(144)[:, None] + 0.5 + LONGITUDES / 15.0) % 24
    night = (np.abs(solar - 12) > 8)[:, None, :]
    holed = weather.assign(ghi=weather["ghi"].where(~np.broadcast_to(night, weather["ghi"].shape)))
    with_nights, whole = prepare(holed).daily, prepare(weather).daily
    np.testing.assert_allclose(with_nights["irradiation"], whole["irradiation"], rtol=1e-6)
    told = counted(with_nights)
    assert told["ghi"]["night"] == int(np.broadcast_to(night, weather["ghi"].shape).sum())
    assert told["days"]["incomplete"] == 0


def test_days_with_a_gap_and_days_at_the_edge_are_told_apart():
    weather = hourly()
    weather["ghi"][36, :, 1] = np.nan  # noon of the second day at 0 E, two rows
    told = counted(prepare(weather).daily)["days"]
    # At 0 E all six days are whole; each other column holds five of them, and one in part at either end.
    assert told == {"edge": 2 * 3 * 2, "incomplete": 2, "values": 2 * (6 + 3 * 7)}
    assert int(prepare(hourly()).daily["irradiation"].notnull().sum()) == 2 * (6 + 3 * 5)
