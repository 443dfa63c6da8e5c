"""Sunshine that is wrong by a unit in every single day, yet within the bounds of each, is warned of."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import stillfield as sf
from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.sources.plausible import count_doubtful

DESIGN = sf.load_still(Path(__file__).parents[2] / "config" / "stills" / "single-slope-glass.yaml")


def daily(clearness: np.ndarray, days: int = 60, latitude: float = 20.0, chunk: bool = False) -> xr.Dataset:
    time = pd.date_range("2010-03-01", periods=days, freq="D")
    outside = extraterrestrial_irradiation([latitude], time.day_of_year.to_numpy())
    values = (outside * clearness).astype(np.float32)
    weather = xr.Dataset({"irradiation": (("time", "site"), values)},
                         coords={"time": time, "site": [f"s{i}" for i in range(clearness.size)],
                                 "latitude": ("site", np.full(clearness.size, latitude))},
                         attrs={"record": "series", "step_hours": 24.0, "clock": "own-days"})
    return weather.chunk(time=7) if chunk else weather


@pytest.mark.parametrize("chunk", [False, True])
def test_records_out_of_range_are_counted_and_told(chunk):
    # 0.6 is an ordinary sky; 0.6 / 3.6 is the same read in Wh as if it were kJ; 0.88 is brighter than any sky.
    monthly = sf.monthly_yield(daily(np.array([0.6, 0.6 / 3.6, 0.88]), chunk=chunk), DESIGN, method="rule")
    assert json.loads(monthly.attrs["counts"])["clearness"] == {"dull": 1, "bright": 1, "values": 3}
    told = monthly.attrs["conventions"]
    assert any("WARNING: at 1 of 3 cells the sunshine of the whole record is less than 0.2" in line for line in told)
    assert any("WARNING: at 1 of 3 cells the sunshine of the whole record is more than 0.85" in line for line in told)


def test_short_records_and_low_suns_are_not_judged():
    for weather in (daily(np.array([0.1]), days=19), daily(np.array([0.1]), days=20, latitude=89.0)):
        assert int(count_doubtful(weather)["counts"].sel(count="clearness:dull").sum()) == 0
    assert int(count_doubtful(daily(np.array([0.1]), days=20))["counts"].sel(count="clearness:dull").sum()) == 1


def test_missing_days_do_not_make_a_record_dull():
    weather = daily(np.array([0.6]))
    weather["irradiation"][::2] = np.nan
    assert int(count_doubtful(weather)["counts"].sel(count="clearness:dull").sum()) == 0
