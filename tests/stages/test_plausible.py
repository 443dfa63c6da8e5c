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
FINE = {"dull": 0, "bright": 0, "values": 1}
DULL = {"dull": 1, "bright": 0, "values": 1}
BRIGHT = {"dull": 0, "bright": 1, "values": 1}


def daily(clearness: np.ndarray, days: int = 60, latitude: float = 20.0, chunk: bool = False) -> xr.Dataset:
    time = pd.date_range("2010-03-01", periods=days, freq="D")
    outside = extraterrestrial_irradiation([latitude], time.day_of_year.to_numpy())
    values = (outside * clearness).astype(np.float32)
    weather = xr.Dataset({"irradiation": (("time", "site"), values)},
                         coords={"time": time, "site": [f"s{i}" for i in range(clearness.size)],
                                 "latitude": ("site", np.full(clearness.size, latitude))},
                         attrs={"record": "series", "step_hours": 24.0, "clock": "own-days"})
    return weather.chunk(time=7) if chunk else weather


def found(weather: xr.Dataset) -> dict[str, int]:
    """What is doubted of the months of some days."""
    irradiation = weather["irradiation"].to_numpy()
    month = weather["time"].dt.month.to_numpy()
    sums, days = np.zeros((12, irradiation.shape[1])), np.zeros((12, irradiation.shape[1]))
    np.add.at(sums, month - 1, np.nan_to_num(irradiation))
    np.add.at(days, month - 1, np.isfinite(irradiation))
    return count_doubtful(sums, days, weather["latitude"].to_numpy())


def run(weather: xr.Dataset, **needs: float) -> dict[str, int]:
    """The same of a run."""
    monthly = sf.monthly_yield(weather, DESIGN, method="rule", **needs)
    return json.loads(monthly.attrs["counts"])["clearness"]


@pytest.mark.parametrize("chunk", [False, True])
def test_records_out_of_range_are_counted_and_told(chunk):
    # 0.6 is an ordinary sky; 0.6 / 3.6 is the same read in Wh as if it were kJ; 0.88 is brighter than any sky.
    monthly = sf.monthly_yield(daily(np.array([0.6, 0.6 / 3.6, 0.88]), chunk=chunk), DESIGN, method="rule")
    assert json.loads(monthly.attrs["counts"])["clearness"] == {"dull": 1, "bright": 1, "values": 3}
    told = monthly.attrs["conventions"]
    assert any("WARNING: at 1 of 3 cells the sunshine of the whole record is less than 0.2" in line for line in told)
    assert any("WARNING: at 1 of 3 cells the sunshine of the whole record is more than 0.85" in line for line in told)


def test_ordinary_records_are_not_warned_of():
    monthly = sf.monthly_yield(daily(np.array([0.3, 0.6, 0.75])), DESIGN, method="rule")
    assert json.loads(monthly.attrs["counts"])["clearness"] == {"dull": 0, "bright": 0, "values": 3}
    assert not any("WARNING" in line for line in monthly.attrs["conventions"])


@pytest.mark.parametrize(("units", "dull"), [("kWh m-2", 0), ("MJ m-2", 2)])
def test_wrong_units_of_files_are_noticed(tmp_path, units, dull):
    """About 6 kWh m-2 a day are 21 MJ m-2. Taken for MJ m-2 they are too little, though any one day may be so dull."""
    weather = daily(np.array([0.6, 0.6]))
    file = xr.Dataset(
        {"rsds": (("time", "lat", "lon"), weather["irradiation"].to_numpy()[:, None] / 3.6, {"units": units})},
        coords={"time": weather["time"], "lat": ("lat", [20.0], {"units": "degrees_north"}),
                "lon": ("lon", [10.0, 11.0], {"units": "degrees_east"})})
    file.to_netcdf(tmp_path / "w.nc")
    monthly = sf.monthly_yield(sf.open_weather(str(tmp_path / "w.nc"), kind="netcdf"), DESIGN, method="rule")
    assert json.loads(monthly.attrs["counts"])["clearness"] == {"dull": dull, "bright": 0, "values": 2}
    told = [line for line in monthly.attrs["conventions"] if line.startswith("WARNING: at 2 of 2 cells the sunshine")]
    assert len(told) == (dull > 0)


@pytest.mark.parametrize(("clearness", "doubted"), [(0.1, DULL), (0.92, BRIGHT)])
def test_short_records_and_low_suns_are_not_judged(clearness, doubted):
    assert found(daily(np.array([clearness]), days=20)) == doubted
    assert found(daily(np.array([clearness]), days=19)) == FINE
    assert found(daily(np.array([clearness]), days=20, latitude=89.0)) == FINE


def test_a_run_judges_no_short_record_either():
    for days, doubted in ((19, FINE), (20, DULL)):
        assert run(daily(np.array([0.1]), days=days), min_valid_days_share=0.05) == doubted


@pytest.mark.parametrize(("clearness", "doubted"), [(0.3, FINE), (0.6, FINE), (0.15, DULL), (0.92, BRIGHT)])
def test_missing_days_make_a_record_neither_dull_nor_bright(clearness, doubted):
    """Half of 0.3 would be dull and twice 0.6 bright; 0.15 stays dull, though months are made up to their length."""
    weather = daily(np.array([clearness]))
    weather["irradiation"][::2] = np.nan
    assert found(weather) == doubted
    assert run(weather, min_valid_days_share=0.05) == doubted


def test_years_of_which_some_months_are_left_out_are_judged_by_the_rest():
    weather = daily(np.array([0.3, 0.6, 0.15, 0.92]), days=1461)
    random = np.random.default_rng(3)
    weather["irradiation"][random.random(1461) < 0.2] = np.nan  # some months keep fewer than 0.8 of their days
    monthly = sf.monthly_yield(weather, DESIGN, method="rule")
    assert 0.0 < (monthly["days_used"] < 0.7 * monthly["days_expected"]).mean() < 1.0
    assert json.loads(monthly.attrs["counts"])["clearness"] == {"dull": 1, "bright": 1, "values": 4}


def test_months_left_out_for_their_gaps_do_not_make_a_record_dull():
    """Of the 61 days of two months, 40 are kept; the month with the gap is left out, not counted as dark."""
    weather = daily(np.array([0.3]), days=61)
    weather["irradiation"][10:31] = np.nan
    assert run(weather) == FINE
    dim = daily(np.array([0.1]), days=61)
    dim["irradiation"][10:31] = np.nan
    assert run(dim) == DULL
