"""Steps to local days: the same sunshine at every longitude, nothing invented at the edges."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from stillfield.engine.labelled import on_local_days
from stillfield.errors import WeatherError

LONGITUDES = np.array([-179.0, -150.0, -75.0, 0.0, 52.5, 150.0, 179.0])


def sunny_day(solar_hour: np.ndarray) -> np.ndarray:
    """A day of sunshine between 6 and 18 h solar time, W m-2, different on every day of the record."""
    day = np.floor(solar_hour / 24.0)
    return np.maximum(np.sin((solar_hour % 24.0 - 6.0) * np.pi / 12.0), 0.0) * (600.0 + 40.0 * (day % 5))


def hourly_utc(days: int = 10, step_hours: float = 1.0, calendar: str = "standard") -> xr.Dataset:
    steps = round(days * 24 / step_hours)
    freq = f"{round(step_hours * 60)}min"
    cftime = calendar != "standard"
    time = xr.date_range("2019-03-01", periods=steps, freq=freq, calendar=calendar, use_cftime=cftime)
    clock = (np.arange(steps) + 0.5) * step_hours
    sun = sunny_day(clock[:, None] + np.round(LONGITUDES / 15.0 / step_hours) * step_hours)
    ghi = np.broadcast_to(sun[:, None, :], (steps, 2, LONGITUDES.size))
    flat = np.full_like(ghi, 25.0)
    return xr.Dataset(
        {
            "ghi": (("time", "latitude", "longitude"), ghi.copy()),
            "temp_air": (("time", "latitude", "longitude"), flat),
            "wind_speed": (("time", "latitude", "longitude"), flat / 10.0),
        },
        coords={"time": time, "latitude": [10.0, 11.0], "longitude": LONGITUDES},
        attrs={"record": "series", "step_hours": step_hours, "clock": "UTC", "origin": "closed form"},
    )


@pytest.mark.parametrize("step_hours", [0.5, 1.0, 3.0, 6.0])
def test_every_longitude_gets_its_own_solar_day(step_hours: float) -> None:
    weather = hourly_utc(step_hours=step_hours)
    daily = on_local_days(weather).daily["irradiation"]
    # The integral of the half sine of amplitude A is 24 A / pi watt-hours; the midpoint sum of the step differs.
    centre = (np.arange(24 / step_hours) + 0.5) * step_hours
    weights = sunny_day(centre).sum() / 600.0 * step_hours * 3600e-6
    for column, _ in enumerate(LONGITUDES):
        values = daily.isel(latitude=0, longitude=column).to_numpy()
        whole = values[np.isfinite(values)]
        expected = weights * (600.0 + 40.0 * (np.arange(-1, 12) % 5))
        assert whole.size >= 9
        starts = [i for i in range(4) if np.allclose(expected[i : i + whole.size], whole, rtol=1e-5)]
        assert starts, f"no run of whole solar days at {LONGITUDES[column]} E"


def test_utc_days_would_have_been_wrong_far_from_greenwich() -> None:
    weather = hourly_utc()
    utc = weather["ghi"].coarsen(time=24).sum().isel(latitude=0, longitude=5) * 3600e-6
    local = on_local_days(weather).daily["irradiation"].isel(latitude=0, longitude=5)
    good = local.to_numpy()[np.isfinite(local.to_numpy())]
    assert abs(utc.to_numpy()[1:-1] - good[: utc.size - 2]).max() > 0.3


def test_energy_of_whole_days_is_conserved() -> None:
    weather = hourly_utc()
    daily = on_local_days(weather).daily["irradiation"]
    ghi = weather["ghi"].to_numpy()
    for column, longitude in enumerate(LONGITUDES):
        local_day = (np.arange(len(ghi)) + round(longitude / 15.0)) // 24
        days, steps = np.unique(local_day, return_counts=True)
        in_whole_days = np.isin(local_day, days[steps == 24])
        expected = ghi[in_whole_days, 0, column].sum() * 3600e-6
        assert float(daily.isel(latitude=0, longitude=column).sum()) == pytest.approx(expected, rel=1e-6)


def test_edge_days_are_missing_and_counted() -> None:
    prepared = on_local_days(hourly_utc())
    east = prepared.daily["irradiation"].isel(latitude=0).sel(longitude=150.0)
    greenwich = prepared.daily["irradiation"].isel(latitude=0).sel(longitude=0.0)
    assert int(greenwich.notnull().sum()) == 10
    assert int(east.notnull().sum()) == 9
    counted = prepared.counts["days"]
    # 10 UTC days, shifted by -12, -10, -5, 0, 4, 10 or 12 h: each column away from Greenwich holds 9 local days whole
    # and one in part at either end; two rows of cells.
    assert counted == {"edge": 2 * 6 * 2, "incomplete": 0, "values": 2 * (10 + 6 * 11)}


@pytest.mark.parametrize("calendar", ["noleap", "360_day", "all_leap", "proleptic_gregorian"])
def test_calendars_pass_through(calendar: str) -> None:
    weather = hourly_utc(calendar=calendar)
    daily = on_local_days(weather).daily
    assert daily["time"].dt.calendar == calendar
    assert daily.sizes["time"] >= 10


def test_a_missing_hour_of_sun_makes_the_day_missing() -> None:
    weather = hourly_utc()
    weather["ghi"][36, :, 3] = np.nan  # noon of the second day at Greenwich
    daily = on_local_days(weather).daily["irradiation"].isel(latitude=0).sel(longitude=0.0)
    assert np.flatnonzero(np.isnan(daily.to_numpy())).tolist() == [1]


def test_a_gap_in_time_is_not_closed_up() -> None:
    weather = hourly_utc()
    holed = on_local_days(weather.isel(time=np.r_[0:60, 90:240])).daily
    daily = holed["irradiation"].sel(longitude=0.0).isel(latitude=0)
    assert np.flatnonzero(np.isnan(daily.to_numpy())).tolist() == [2, 3]
    whole = on_local_days(weather).daily["irradiation"].sel(longitude=0.0).isel(latitude=0)
    np.testing.assert_allclose(daily.to_numpy()[4:], whole.to_numpy()[4:])


def test_backward_time_is_refused() -> None:
    weather = hourly_utc()
    with pytest.raises(WeatherError, match="time does not run forward"):
        on_local_days(weather.isel(time=[0, 1, 1, 2]))


def test_local_standard_days_are_kept_and_the_sun_is_told_the_rest() -> None:
    time = pd.date_range("2001-01-01", periods=48, freq="h")
    weather = xr.Dataset(
        {"ghi": (("time", "site"), np.ones((48, 1)))},
        coords={
            "time": time, "site": ["a"], "latitude": ("site", [1.37]), "longitude": ("site", [103.98]),
            "utc_offset_hours": ("site", [8.0]), "sun_offset_minutes": ("site", [32.0]),
        },
        attrs={"record": "typical-year", "step_hours": 1.0, "clock": "local-standard"},
    )
    steps = on_local_days(weather).steps
    assert steps["ghi"].sizes == {"time": 2, "step": 24, "site": 1}
    assert float(steps["clock_to_solar_hours"][0]) == pytest.approx(103.98 / 15 - 8 + 2 / 60)


def test_daily_weather_passes_through_with_its_own_days() -> None:
    time = pd.date_range("2001-01-01", periods=3, freq="D")
    values = np.array([[20.0], [np.nan], [22.0]])
    weather = xr.Dataset(
        {"irradiation": (("time", "site"), values)}, coords={"time": time, "site": ["a"], "latitude": ("site", [10.0])},
        attrs={"step_hours": 24.0, "record": "series", "clock": "own-days"},
    )
    daily = on_local_days(weather).daily
    np.testing.assert_array_equal(daily["irradiation"], values)
