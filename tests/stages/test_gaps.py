"""Gaps of hourly weather: bridged, known to be dark, or left missing; each counted, lazy or not."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from pvlib.solarposition import get_solarposition

from stillfield.engine.labelled import on_local_days
from stillfield.engine.planning import BlockPlan
from stillfield.engine.readers import LazyReader
from stillfield.engine.steps import Steps
from stillfield.sources.gaps import bridge
from stillfield.stages.prepare import local_days

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


def walked(weather: xr.Dataset, name: str, window: int, fill_hours: float) -> tuple[np.ndarray, dict]:
    """One variable on the record's own axis after a walk in windows, shape of the dataset; and the counts."""
    local = local_days(weather)
    windows = tuple(slice(start, min(start + window, weather.sizes["time"]))
                    for start in range(0, weather.sizes["time"], window))
    block = BlockPlan(slice(0, weather.sizes["latitude"]), slice(0, weather.sizes["longitude"]), windows)
    steps = Steps(LazyReader(weather), ("ghi", "temp_air", "wind_speed"), local, block,
                  int(fill_hours / local.step_hours))
    parts = [steps.take(one, last=one is windows[-1])[1][name].copy() for one in windows]
    local_rows = np.concatenate(parts).reshape(-1, weather.sizes["latitude"], weather.sizes["longitude"])
    found = np.full((weather.sizes["time"], *local_rows.shape[1:]), np.nan, np.float32)
    for column, start in enumerate(local.start):
        rows = np.arange(len(found)) - start
        there = (rows >= 0) & (rows < len(local_rows))
        found[there, :, column] = local_rows[rows[there], :, column]
    return found, steps.counts


@pytest.mark.parametrize("window", [144, 24, 5, 1])
@pytest.mark.parametrize("fill_hours", [0.0, 1.0, 3.0])
def test_short_gaps_are_bridged_by_a_line_and_long_ones_are_not(window, fill_hours):
    weather = hourly()
    whole = weather["temp_air"].to_numpy().copy()
    gaps = {20: 1, 33: 3, 57: 2, 80: 4, 143: 1}  # first hour: length; the last one lies at the end of the record
    for first, length in gaps.items():
        weather["temp_air"][first:first + length, 1, 2] = np.nan
    filled, counts = walked(weather, "temp_air", window, fill_hours)
    expected = sum(length for first, length in gaps.items() if length <= fill_hours and first != 143)
    assert counts["temp_air"].get("filled", 0) == expected
    assert counts["temp_air"]["missing"] == sum(gaps.values())
    valid = np.isfinite(filled)
    np.testing.assert_allclose(filled[valid], whole[valid], rtol=1e-6)  # a ramp is a line
    held = slice(14, 134)  # hours of the whole local days at 150 E
    assert np.count_nonzero(~valid[held, 1, 2]) == sum(gaps.values()) - 1 - expected


def test_a_bridge_never_reaches_beyond_the_record():
    values = np.array([np.nan, 1.0, np.nan, 2.0, np.nan])
    assert bridge(values, 9).tolist()[1:4] == [1.0, 1.5, 2.0]
    assert np.isnan(bridge(values, 9)[[0, 4]]).all()


@pytest.mark.parametrize("step_hours", [0.5, 1.0, 3.0])
def test_sunshine_missing_by_night_is_zero_and_by_day_stays_missing(step_hours):
    """Night by pvlib's ephemeris: the centre of the sun below the horizon at both ends of the step."""
    weather = hourly().resample(time=f"{round(step_hours * 60)}min").nearest().assign_attrs(hourly().attrs)
    weather["ghi"] = weather["ghi"] * np.nan
    weather.attrs["step_hours"] = step_hours
    values, _ = walked(weather, "ghi", 7, 3.0)
    filled = weather["ghi"].copy(data=values)
    edges = weather.indexes["time"].tz_localize("UTC")
    import pandas as pd

    for latitude in LATITUDES:
        for longitude in LONGITUDES:
            height = [get_solarposition(edges + pd.Timedelta(hours=shift), latitude, longitude)["elevation"].to_numpy()
                      for shift in (0.0, step_hours / 2, step_hours)]
            found = filled.sel(latitude=latitude, longitude=longitude).notnull().to_numpy()
            inner = slice(round(24 / step_hours), -round(24 / step_hours))  # whole local days everywhere
            surely_dark, surely_light = np.max(height, axis=0) < -0.5, np.max(height, axis=0) > 0.5
            assert found[inner][surely_dark[inner]].all()
            assert not found[surely_light].any()
            assert surely_dark.sum() > 20 / step_hours


@pytest.mark.parametrize("calendar", ["standard", "noleap", "360_day"])
def test_hours_that_are_absent_from_the_file_become_missing_in_every_calendar(calendar):
    weather = hourly(calendar=calendar)
    holes = weather.isel(time=np.r_[0:12, 13:60, 66:144])  # noon of the first day, and 12 to 18 h of the third, at 0 E
    prepared = on_local_days(holes)
    daily = prepared.daily.sel(longitude=0.0, latitude=20.0)
    assert np.isnan(daily["irradiation"].to_numpy()).tolist() == [True, False, True, False, False, False]
    assert np.isnan(daily["temp_air"].to_numpy()).tolist() == [False, False, True, False, False, False]
    assert daily["time"].dt.calendar == weather["time"].dt.calendar
    whole = on_local_days(weather).daily.sel(longitude=0.0, latitude=20.0)
    np.testing.assert_allclose(daily["temp_air"][0], whole["temp_air"][0])  # one hour of a ramp, bridged


def test_a_night_that_is_missing_costs_no_day():
    weather = hourly()
    solar = (np.arange(144)[:, None] + 0.5 + LONGITUDES / 15.0) % 24
    night = (np.abs(solar - 12) > 8)[:, None, :]
    holed = weather.assign(ghi=weather["ghi"].where(~np.broadcast_to(night, weather["ghi"].shape)))
    prepared, whole = on_local_days(holed), on_local_days(weather).daily
    np.testing.assert_allclose(prepared.daily["irradiation"], whole["irradiation"], rtol=1e-6)
    told = prepared.counts
    local = local_days(weather)
    slot = np.arange(144)[:, None] - local.start
    of_a_day = ((slot >= -24) & (slot < 24 * local.days))[:, None, :]  # what comes after the last day is not used
    assert told["ghi"]["night"] == int(np.broadcast_to(night & of_a_day, weather["ghi"].shape).sum())
    assert told["days"]["incomplete"] == 0


def test_days_with_a_gap_and_days_at_the_edge_are_told_apart():
    weather = hourly()
    weather["ghi"][36, :, 1] = np.nan  # noon of the second day at 0 E, two rows
    told = on_local_days(weather).counts["days"]
    # At 0 E all six days are whole; each other column holds five of them, and one in part at either end.
    assert told == {"edge": 2 * 3 * 2, "incomplete": 2, "values": 2 * (6 + 3 * 7)}
    assert int(on_local_days(hourly()).daily["irradiation"].notnull().sum()) == 2 * (6 + 3 * 5)
