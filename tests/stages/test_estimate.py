"""Estimate: blocks and missing cells change nothing, what a method lacks is told."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from stillfield.errors import MethodError
from stillfield.methods.baselines import ConstantEfficiency
from stillfield.methods.registry import get_method
from stillfield.settings.still_file import load_still_file
from stillfield.stages import estimate as stage
from stillfield.stages.estimate import estimate

STILL = load_still_file("config/stills/single-slope-glass.yaml")


def weather(sea: bool = True) -> xr.Dataset:
    random = np.random.default_rng(8)
    shape = (60, 4, 5)
    sunshine = random.uniform(5.0, 24.0, shape)
    if sea:
        sunshine[:, 1:3, 2] = np.nan
        sunshine[:, 0, :] = np.nan
    data = {
        "irradiation": sunshine, "temp_air": random.uniform(15.0, 35.0, shape),
        "wind_speed": random.uniform(0.5, 6.0, shape),
    }
    return xr.Dataset(
        {name: (("time", "latitude", "longitude"), values) for name, values in data.items()},
        coords={
            "time": pd.date_range("2015-02-01", periods=60, freq="D"), "latitude": [10.0, 12.0, 14.0, 16.0],
            "longitude": [40.0, 41.0, 42.0, 43.0, 44.0],
        },
        attrs={"record": "series", "step_hours": 24.0, "clock": "own-days"},
    )


@pytest.mark.parametrize("method", ["fitted", "rule", "nafey-2000"])
def test_cells_do_not_depend_on_their_neighbours(method: str) -> None:
    daily = weather()
    whole = estimate(daily, STILL, get_method(method), rule=ConstantEfficiency()).compute()
    for row in range(4):
        alone = estimate(
            daily.isel(latitude=[row]), STILL, get_method(method), rule=ConstantEfficiency()
        ).compute()
        for name in ("daily_yield", "daily_yield_low", "daily_yield_high", "daily_yield_rule"):
            np.testing.assert_allclose(alone[name][:, 0], whole[name][:, row], rtol=1e-6)
    missing = daily["irradiation"].isnull()
    assert bool((whole["daily_yield"].isnull() == missing).all())
    assert not bool(whole["frost"].where(missing, 0.0).any())


def test_the_size_of_blocks_changes_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    daily = weather()
    whole = estimate(daily, STILL, get_method("fitted"), rule=ConstantEfficiency()).compute()
    monkeypatch.setattr(stage, "BLOCK_BYTES", 60 * 8.0 * 6 * 2)
    pieces = estimate(daily, STILL, get_method("fitted"), rule=ConstantEfficiency())
    assert pieces["daily_yield"].data.npartitions > 4
    xr.testing.assert_allclose(pieces.compute(), whole, rtol=1e-6)


def test_the_band_is_in_order_of_upkeep() -> None:
    found = estimate(weather(sea=False), STILL, get_method("fitted"), rule=ConstantEfficiency()).compute()
    sunny = weather(sea=False)["irradiation"] > 8.0
    assert bool((found["daily_yield_low"] < found["daily_yield"]).where(sunny, True).all())
    assert bool((found["daily_yield"] < found["daily_yield_high"]).where(sunny, True).all())


def test_what_a_method_lacks_is_told() -> None:
    with pytest.raises(MethodError, match="wind_speed"):
        estimate(weather().drop_vars("wind_speed"), STILL, get_method("fitted"), rule=ConstantEfficiency())
    with pytest.raises(MethodError, match="works on steps of at most 6 h"):
        estimate(weather(), STILL, get_method("heat-balance"), rule=ConstantEfficiency())
