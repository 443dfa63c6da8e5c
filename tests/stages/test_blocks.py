"""Blocks, windows and workers change time and memory, and no digit; what cannot be worked is told at once."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from stillfield.engine.job import Means, Prepared, months_of, prepare
from stillfield.engine.planning import Layout, plan_blocks, split_in_time
from stillfield.errors import MemoryLimitError, MethodError
from stillfield.methods.registry import get_method
from stillfield.settings.still_file import load_still_file

STILL = load_still_file("config/stills/single-slope-glass.yaml")
DEEP = load_still_file("config/stills/deep-basin.yaml")


def weather(days: int = 60, *, sea: bool = True, hourly: bool = False, longitudes: int = 5) -> xr.Dataset:
    """Random days, or hours that follow the sun, on 4 rows; some cells are sea."""
    random = np.random.default_rng(8)
    steps = days * 24 if hourly else days
    shape = (steps, 4, longitudes)
    longitude = 40.0 + 6.0 * np.arange(longitudes)
    name, sunshine = "irradiation", random.uniform(5.0, 24.0, shape)
    if hourly:
        solar = (np.arange(steps)[:, None, None] + 0.5 + longitude / 15.0) % 24.0
        name = "ghi"
        sunshine = 900.0 * np.maximum(np.sin((solar - 6) * np.pi / 12), 0.0) * random.uniform(0.6, 1, shape)
    if sea:
        sunshine[:, 1:3, 2] = np.nan
        sunshine[:, 0, :] = np.nan
    data = {name: sunshine, "temp_air": random.uniform(15.0, 35.0, shape),
            "wind_speed": random.uniform(0.5, 6.0, shape)}
    return xr.Dataset(
        {key: (("time", "latitude", "longitude"), values.astype(np.float32)) for key, values in data.items()},
        coords={
            "time": pd.date_range("2015-02-01", periods=steps, freq="h" if hourly else "D"),
            "latitude": [10.0, 12.0, 14.0, 16.0], "longitude": longitude,
        },
        attrs={"record": "series", "step_hours": 1.0 if hourly else 24.0, "clock": "UTC" if hourly else "own-days"},
    )


def cut(prepared: Prepared, records: int, rows: int, columns: int) -> Prepared:
    """The same with blocks and windows as if the weather were stored in chunks of this size."""
    sizes = prepared.reader.layout.shape
    edges = [np.unique([*range(0, size, chunk), size])
             for size, chunk in zip(sizes, (records, rows, columns), strict=True)]
    plan = plan_blocks(Layout(*edges), variables=3, years=3, workers=2, memory_bytes=None)
    blocks = []
    for row in zip(edges[1][:-1], edges[1][1:], strict=True):
        for column in zip(edges[2][:-1], edges[2][1:], strict=True):
            windows = tuple(slice(int(a), int(b)) for a, b in zip(edges[0][:-1], edges[0][1:], strict=True))
            blocks.append(replace(plan.blocks[0], rows=slice(*map(int, row)), columns=slice(*map(int, column)),
                                  windows=windows))
    return replace(prepared, plan=replace(plan, blocks=tuple(blocks)))


@pytest.mark.parametrize(("method", "hourly"), [
    ("fitted", False), ("rule", False), ("nafey-2000", False), ("fitted", True), ("heat-balance", True), ("rule", True)
])
def test_blocks_and_windows_change_no_digit(method: str, hourly: bool) -> None:
    data = weather(40 if hourly else 400, hourly=hourly)
    prepared = prepare(data, get_method(method, hourly=hourly), stills=2)
    whole = months_of(prepared, [STILL, DEEP], followed=[7, 19])
    step = 24 if hourly else 1
    for chunk in ((7 * step, 2, 2), (11 * step + (5 if hourly else 0), 4, 1), (1000 * step, 1, 5)):
        parts = months_of(cut(prepared, *chunk), [STILL, DEEP], followed=[7, 19])
        for one, other in zip(parts.monthly, whole.monthly, strict=True):
            xr.testing.assert_identical(one, other)
        for cell, litres in whole.followed.items():
            np.testing.assert_array_equal(parts.followed[cell], litres)
        for name, values in whole.sample.block.weather.items():
            np.testing.assert_array_equal(parts.sample.block.weather[name], values)
    assert np.isfinite(whole.monthly[0]["monthly_yield_by_year"]).any()


@pytest.mark.parametrize(("method", "hourly"), [("fitted", False), ("fitted", True), ("heat-balance", True)])
def test_years_shared_among_workers_change_no_digit(method: str, hourly: bool) -> None:
    data = weather(800, sea=False, hourly=hourly, longitudes=2)
    prepared = cut(prepare(data, get_method(method, hourly=hourly)), 20 * (24 if hourly else 1), 4, 2)
    shared = replace(prepared, plan=split_in_time(prepared.plan, prepared.months, prepared.local, workers=2))
    assert len({block.span for block in shared.plan.blocks}) == 3
    whole, parts = (months_of(one, [DEEP], followed=[6]) for one in (prepared, shared))
    xr.testing.assert_identical(parts.monthly[0], whole.monthly[0])
    np.testing.assert_array_equal(parts.followed[6], whole.followed[6])


def test_cells_do_not_depend_on_their_neighbours() -> None:
    daily = weather()
    whole = months_of(prepare(daily, get_method("fitted")), [STILL]).monthly[0]
    for row in range(4):
        alone = months_of(prepare(daily.isel(latitude=[row]), get_method("fitted")), [STILL]).monthly[0]
        for name in ("monthly_yield", "monthly_yield_low", "monthly_yield_high", "monthly_yield_rule"):
            np.testing.assert_array_equal(alone[name][:, 0], whole[name][:, row])
    missing = daily["irradiation"].isnull().all("time")
    assert bool((whole["days_used"].sum("month") == 0).where(missing, True).all())
    assert bool(whole["frost_share"].where(missing).isnull().all())


def test_a_cell_whose_weather_begins_late_begins_late() -> None:
    daily = weather(400, sea=False)
    daily["irradiation"][:100, 1, 1] = np.nan
    prepared = cut(prepare(daily, get_method("fitted")), 30, 4, 5)
    found = months_of(prepared, [STILL]).monthly[0]["monthly_yield_by_year"]
    alone = months_of(prepare(daily.isel(latitude=[1], longitude=[1]), get_method("fitted")), [STILL]).monthly[0]
    np.testing.assert_array_equal(found[:, :, 1, 1], alone["monthly_yield_by_year"][:, :, 0, 0])
    assert np.isnan(found[0, 1, 1, 1])
    assert np.isfinite(found[0, 5, 1, 1])


def test_the_band_is_in_order_of_upkeep() -> None:
    found = months_of(prepare(weather(sea=False), get_method("fitted")), [STILL]).monthly[0]
    some = found.sel(month=3)
    assert bool((some["monthly_yield_low"] < some["monthly_yield"]).all())
    assert bool((some["monthly_yield"] < some["monthly_yield_high"]).all())


def test_what_a_method_lacks_is_told() -> None:
    with pytest.raises(MethodError, match="wind_speed"):
        prepare(weather().drop_vars("wind_speed"), get_method("fitted"))
    with pytest.raises(MethodError, match="works on steps of at most 6 h"):
        prepare(weather(), get_method("heat-balance"))


def test_memory_is_honoured_or_refused_before_anything_is_read() -> None:
    stored = Layout(np.arange(0, 350641, 744), np.arange(0, 722, 721), np.arange(0, 1441, 1440))
    with pytest.raises(MemoryLimitError, match=r"compute\.memory: .*744 times, 721 rows and 1440 columns"):
        plan_blocks(stored, variables=4, years=40, memory_bytes=4_000_000_000)
    for allowed in (700_000_000, 1_000_000_000, 3_000_000_000):
        plan = plan_blocks(Layout(np.arange(0, 350641, 744), np.arange(0, 101, 10), np.arange(0, 101, 10)),
                           variables=4, years=40, workers=8, memory_bytes=allowed)
        assert plan.memory_bytes <= allowed
    long, short = (plan_blocks(Layout(np.arange(0, years * 365 + 1, 73), np.arange(0, 101, 50), np.arange(0, 101, 50)),
                               variables=3, years=years, workers=2) for years in (40, 1))
    assert long.blocks[0].cells == short.blocks[0].cells
    assert long.memory_bytes < 1.3 * short.memory_bytes


def test_a_block_travels_between_processes() -> None:
    cloudpickle = pytest.importorskip("cloudpickle")
    prepared = prepare(weather().chunk(time=20), get_method("fitted"))
    outcome = months_of(prepared, [STILL])
    assert outcome.monthly[0].sizes["month"] == 12
    again = cloudpickle.loads(cloudpickle.dumps(prepared))
    xr.testing.assert_identical(months_of(again, [STILL]).monthly[0], outcome.monthly[0])


def test_workers_are_no_more_than_there_are_blocks() -> None:
    assert Means(workers=3).at_once == 3
    assert Means().at_once >= 1
    plan = plan_blocks(Layout(np.arange(11), np.array([0, 1]), np.array([0, 1])), variables=1, years=1, workers=8)
    assert plan.workers == 1
