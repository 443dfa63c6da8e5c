"""However files lie on disk and however they are read, the months are the same."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from stillfield.engine.job import Means, months_of, prepare
from stillfield.engine.readers import LazyReader
from stillfield.engine.stored_reader import StoredReader
from stillfield.methods.registry import get_method
from stillfield.settings.still_file import load_still_file
from stillfield.stages.read import Box, read_weather

STILL = load_still_file("config/stills/single-slope-glass.yaml")
VARIABLES = {"irradiation": {"name": "ssrd", "means": "hour-ending accumulation"}, "temp_air": "t2m",
             "wind_u": "u10", "wind_v": "v10"}
HOURS = 24 * 45
#: Layouts: chunks of times, rows and columns, and further encoding.
LAYOUTS: dict[str, dict[str, Any]] = {
    "blocks": {"chunksizes": (100, 3, 4), "zlib": True, "shuffle": True},
    "a map a chunk": {"chunksizes": (1, 6, 8), "zlib": True, "shuffle": True},
    "pencils of time": {"chunksizes": (HOURS, 1, 2), "zlib": True},
    "contiguous": {"contiguous": True},
    "zstd": {"chunksizes": (64, 3, 8), "compression": "zstd"},
    "checksummed": {"chunksizes": (100, 3, 4), "zlib": True, "fletcher32": True},
}


def weather() -> xr.Dataset:
    """Hours on 6 by 8 cells, some missing, some below zero by noise."""
    random = np.random.default_rng(5)
    hour = np.arange(HOURS)
    longitude = 120.0 + 3.0 * np.arange(8)
    solar = (hour[:, None, None] - 0.5 + longitude / 15.0) % 24.0
    energy = 3600.0 * 900.0 * np.maximum(np.sin((solar - 6) * np.pi / 12), 0.0) * random.uniform(0.5, 1, (HOURS, 6, 8))
    energy[energy == 0.0] = random.uniform(-3.0, 0.0, (energy == 0.0).sum())
    fields = {"ssrd": (energy, "J m-2"), "t2m": (random.uniform(288, 305, energy.shape), "K"),
              "u10": (random.normal(2.0, 2.0, energy.shape), "m s-1"),
              "v10": (random.normal(0.0, 2.0, energy.shape), "m s-1")}
    fields["t2m"][0][300:302, 2, 3] = np.nan
    fields["ssrd"][0][400:430, 4, 5] = np.nan
    return xr.Dataset(
        {name: (("time", "latitude", "longitude"), values.astype("f4"), {"units": unit})
         for name, (values, unit) in fields.items()},
        coords={"time": np.datetime64("2019-03-01T01", "ns") + hour * np.timedelta64(1, "h"),
                "latitude": ("latitude", 20.0 - np.arange(6.0), {"units": "degrees_north"}),
                "longitude": ("longitude", longitude, {"units": "degrees_east"})})


def written(folder: Path, layout: dict[str, Any], *, pieces: int = 1, kind: str = "NETCDF4") -> list[str]:
    data = weather()
    names = []
    for number, part in enumerate(np.array_split(np.arange(HOURS), pieces)):
        some = data.isel(time=part)
        own = {**layout}
        if "chunksizes" in own:
            own["chunksizes"] = tuple(min(size, whole) for size, whole in
                                      zip(own["chunksizes"], some["ssrd"].shape, strict=True))
        some.to_netcdf(folder / f"w{number}.nc", format=kind, encoding=dict.fromkeys(data.data_vars, own))
        names.append(str(folder / f"w{number}.nc"))
    return names


def months(files: list[str], *, fast: bool = True, lazily: bool = False, workers: int = 1,
           region: Box | None = None, method: str = "fitted") -> tuple[type, xr.Dataset]:
    opened = read_weather("netcdf", files, variables=VARIABLES, region=region)
    if lazily:
        opened.encoding.pop("stored")
    prepared = prepare(opened, get_method(method, hourly=True), means=Means(workers, fast=fast))
    found = months_of(prepared, [STILL]).monthly[0]
    return type(prepared.reader), found


@pytest.fixture(scope="module")
def truth(tmp_path_factory) -> xr.Dataset:
    """By xarray and dask, from one plain file."""
    kind, found = months(written(tmp_path_factory.mktemp("truth"), LAYOUTS["blocks"]), lazily=True)
    assert kind is LazyReader
    assert np.isfinite(found["monthly_yield"].sel(month=3)).all()
    return found


@pytest.mark.parametrize("layout", LAYOUTS)
def test_every_layout_and_both_ways_of_inflating_give_the_same_bits(tmp_path, truth, layout) -> None:
    files = written(tmp_path, LAYOUTS[layout])
    (kind, fast), (_, plain) = months(files), months(files, fast=False)
    assert kind is StoredReader
    xr.testing.assert_identical(fast, plain)
    _same_as_truth(fast, truth)


@pytest.mark.parametrize("workers", [1, 2, 3])
def test_files_in_any_order_and_any_number_of_workers_give_the_same_bits(tmp_path, truth, workers) -> None:
    files = written(tmp_path, LAYOUTS["blocks"], pieces=13)  # chunks of 100 hours cross the files
    _, found = months(files[::-1] if workers == 2 else files[::2] + files[1::2], workers=workers)
    _same_as_truth(found, truth)
    _, again = months(files)
    assert found.drop_attrs().identical(again.drop_attrs())


def test_classic_files_are_read_in_their_place(tmp_path, truth) -> None:
    kind, found = months(written(tmp_path, {}, kind="NETCDF3_64BIT"))
    assert kind is StoredReader
    _same_as_truth(found, truth)


def test_a_box_is_read_and_nothing_else(tmp_path, truth) -> None:
    box = Box(south=16.5, north=18.5, west=125.0, east=134.0)
    kind, found = months(written(tmp_path, LAYOUTS["blocks"]), region=box)
    assert kind is StoredReader
    part = truth.sel(latitude=found["latitude"], longitude=found["longitude"])
    assert dict(found.sizes) == {**dict(part.sizes)}
    np.testing.assert_array_equal(found["monthly_yield"], part["monthly_yield"])


def test_weather_that_was_changed_after_opening_is_not_read_past(tmp_path) -> None:
    files = written(tmp_path, LAYOUTS["blocks"])
    opened = read_weather("netcdf", files, variables=VARIABLES)
    method = get_method("fitted", hourly=True)
    assert isinstance(prepare(opened, method).reader, StoredReader)
    warmer = opened.assign(temp_air=opened["temp_air"] + 5.0)
    prepared = prepare(warmer, method)
    assert isinstance(prepared.reader, LazyReader)
    before = months_of(prepare(opened, method), [STILL]).monthly[0]
    assert bool((months_of(prepared, [STILL]).monthly[0]["monthly_yield"] > before["monthly_yield"]).sel(month=3).all())
    assert isinstance(prepare(opened.isel(time=slice(0, 480)), method).reader, LazyReader)


def test_opened_weather_can_be_written_and_opened_again(tmp_path) -> None:
    """As a notebook does that wants to keep a region: what the engine knows of the files stays out of the way."""
    import stillfield as sf

    opened = sf.open_weather(written(tmp_path, LAYOUTS["blocks"]), variables=VARIABLES)
    opened.isel(latitude=slice(0, 2)).to_netcdf(tmp_path / "kept.nc")
    again = sf.open_weather(str(tmp_path / "kept.nc"))
    np.testing.assert_allclose(again["temp_air"], opened["temp_air"][:, :2], rtol=1e-6)


def _same_as_truth(found: xr.Dataset, truth: xr.Dataset) -> None:
    assert found.attrs["counts"] == truth.attrs["counts"]
    for name in truth.data_vars:
        np.testing.assert_allclose(found[name], truth[name], rtol=3e-6, atol=1e-6, err_msg=str(name))
