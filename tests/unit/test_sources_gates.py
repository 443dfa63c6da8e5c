"""Gates: what is clipped and counted, and what is refused by cell and time."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.sources.gates import GateCounts, gate


def _daily(irradiation: np.ndarray) -> xr.Dataset:
    days = np.datetime64("2010-09-01", "ns") + np.arange(irradiation.shape[0]) * np.timedelta64(1, "D")
    return xr.Dataset(
        {"irradiation": (("time", "latitude", "longitude"), irradiation)},
        coords={"time": days, "latitude": [-20.0, -19.0], "longitude": [40.0, 41.0]}, attrs={"step_hours": 24.0},
    )


def _hourly(ghi: np.ndarray) -> xr.Dataset:
    hours = np.datetime64("2010-09-01", "ns") + np.arange(ghi.size) * np.timedelta64(1, "h")
    return xr.Dataset({"ghi": (("time", "site"), ghi[:, None])},
                      coords={"time": hours, "site": ["a"], "latitude": ("site", [-20.0])}, attrs={"step_hours": 1.0})


def test_tiny_negatives_become_zero_and_are_counted():
    values = np.full((3, 2, 2), 18.0)
    values[1, 0, 1], values[2, 1, 1] = -0.02, np.nan
    weather, counts = gate(_daily(values))
    assert weather.irradiation.values[1, 0, 1] == 0.0
    assert counts == GateCounts({"irradiation": 1}, {"irradiation": 1}, {"irradiation": 12})
    assert counts.sentences() == ["1 of 12 values of irradiation were slightly negative and set to 0.",
                                  "1 of 12 values of irradiation are missing."]


def test_counts_of_blocks_add_up():
    first = GateCounts({"ghi": 1}, {"ghi": 2}, {"ghi": 10})
    second = GateCounts({"ghi": 3, "temp_air": 0}, {"temp_air": 1}, {"ghi": 10, "temp_air": 5})
    assert first + second == GateCounts({"ghi": 4, "temp_air": 0}, {"ghi": 2, "temp_air": 1},
                                        {"ghi": 20, "temp_air": 5})


def test_more_than_extraterrestrial_is_refused_by_cell_and_day():
    # FAO-56 Example 8: at 20 S on 3 September the extraterrestrial radiation is 32.2 MJ m-2.
    values = np.full((3, 2, 2), 20.0)
    values[2, 0, 1] = 32.2 * 1.05 + 0.8
    with pytest.raises(WeatherError, match=r"run, time 2010-09-03T00:00, latitude -20, longitude 41: more sunshine "
                                           r"than reaches the top of the atmosphere \(got 34\.61 MJ m-2 in the day"):
        gate(_daily(values), where="run")
    values[2, 0, 1] = 32.2
    gate(_daily(values))


def test_large_negative_sunshine_is_refused():
    values = np.full((3, 2, 2), 18.0)
    values[0, 1, 0] = -5.0
    with pytest.raises(WeatherError, match=r"time 2010-09-01T00:00, latitude -19, longitude 40: irradiation "
                                           r"cannot be true \(got -5 MJ m-2; 1 such values; wanted -0\.5 to 50"):
        gate(_daily(values))


def test_hourly_sunshine_is_held_against_the_day():
    sky = 900.0 * np.clip(np.sin((np.arange(48) % 24 - 6) * np.pi / 12), 0, None)
    weather, _ = gate(_hourly(sky))
    assert float(weather.ghi.max()) == pytest.approx(900.0)
    with pytest.raises(WeatherError, match="more sunshine than reaches the top of the atmosphere"):
        gate(_hourly(sky * 1.7))  # 42 MJ m-2 in the day, each hour below its own bound


def test_the_day_check_starts_at_midnight_of_a_file_that_starts_at_noon():
    sky = 900.0 * np.clip(np.sin((np.arange(72) % 24 - 6) * np.pi / 12), 0, None) * 1.7
    noon = _hourly(sky).isel(time=slice(12, 72))
    with pytest.raises(WeatherError, match="time 2010-09-02T00:00"):
        gate(noon)


@pytest.mark.parametrize(("name", "value"), [("temp_air", 300.0), ("wind_speed", -1.66), ("relative_humidity", 126.0)])
def test_other_bounds(name, value):
    weather = _daily(np.full((3, 2, 2), 18.0))
    weather[name] = xr.full_like(weather.irradiation, value)
    with pytest.raises(WeatherError, match=f"{name} cannot be true"):
        gate(weather)
