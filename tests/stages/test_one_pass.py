"""Each stored chunk is read once, and what is counted on the way is the same however the files are cut."""

from __future__ import annotations

import json
import os
from collections import Counter
from collections.abc import Iterator
from itertools import product
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from xarray.backends.netCDF4_ import NetCDF4ArrayWrapper

import stillfield as sf
from stillfield.engine import planning
from stillfield.engine.job import Means, Prepared, months_of, prepare
from stillfield.engine.readers import LazyReader
from stillfield.engine.stored_reader import StoredReader
from stillfield.methods.registry import get_method
from stillfield.sources.grids import fast_chunks, netcdf_pieces, stored_reading
from stillfield.sources.grids.chunk_index import chunk_index

DESIGN = sf.load_still(Path(__file__).parents[2] / "config" / "stills" / "single-slope-glass.yaml")
DAYS = 40
SHAPE, CHUNK = (DAYS * 24, 4, 6), (50, 2, 3)
CHUNKS = 20 * 2 * 2
#: Variables of the file that a method takes.
METHODS = {"rule": {"rsds"}, "fitted": {"rsds", "tas", "sfcWind"}}


def hourly_file(path: Path) -> Path:
    """40 days of hours on 4 by 6 cells between 140 E and 165 E, in stored chunks of 50 hours; some values amiss."""
    hour = np.arange(DAYS * 24)
    longitude = 140.0 + 5.0 * np.arange(6)
    solar = (hour[:, None] + 0.5 + longitude / 15) % 24
    ghi = np.repeat(np.maximum(700 * np.sin((solar - 6) * np.pi / 12), 0.0)[:, None, :], 4, axis=1).astype("f4")
    temp = np.full_like(ghi, 300.0)
    ghi[200:203, 1, 1] = -999.0
    ghi[17, 0, :] = np.where(ghi[17, 0, :] == 0.0, -0.4, ghi[17, 0, :])
    temp[300:302, 2, 2] = np.nan
    names = ("time", "lat", "lon")
    weather = xr.Dataset(
        {"rsds": (names, ghi, {"units": "W m-2"}), "tas": (names, temp, {"units": "K"}),
         "sfcWind": (names, np.full_like(ghi, 3.0), {"units": "m s-1"})},
        coords={"time": np.datetime64("2010-02-26", "ns") + hour * np.timedelta64(1, "h"),
                "lat": ("lat", [8.0, 9.0, 10.0, 11.0], {"units": "degrees_north"}),
                "lon": ("lon", longitude, {"units": "degrees_east"})})
    chunks = {"chunksizes": CHUNK, "zlib": True, "_FillValue": np.nan}
    weather.to_netcdf(path, encoding=dict.fromkeys(weather.data_vars, chunks))
    return path


@pytest.fixture(scope="module")
def file(tmp_path_factory) -> Path:
    return hourly_file(tmp_path_factory.mktemp("pass") / "w.nc")


def small_blocks(monkeypatch: pytest.MonkeyPatch) -> None:
    """Blocks and windows of one stored chunk, as a file of many gigabytes has many of both."""
    monkeypatch.setattr(planning, "WINDOW_BYTES", 1)
    monkeypatch.setattr(netcdf_pieces, "_BLOCK_BYTES", int(np.prod(CHUNK)) * 4)


def opened(file: Path, method: str, way: str) -> Prepared:
    """A run that reads chunk by chunk, through the NetCDF library, or as dask computes what xarray opened."""
    weather = sf.open_weather(str(file), variables={"ghi": {"name": "rsds", "stamp": "start"}})
    if way == "lazy":
        del weather.encoding["stored"]
    prepared = prepare(weather, get_method(method, hourly=True), means=Means(fast=way == "chunks"))
    assert type(prepared.reader) is (LazyReader if way == "lazy" else StoredReader)
    return prepared


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("small", [False, True])
def test_every_stored_chunk_of_every_variable_is_read_and_inflated_once(file, monkeypatch, method, small):
    if small:
        small_blocks(monkeypatch)
    prepared = opened(file, method, "chunks")
    read: list[tuple[int, int]] = []
    inflated: list[int] = []
    pread, inflate = os.pread, fast_chunks._inflated

    def spied(descriptor: int, size: int, start: int) -> bytes:
        read.append((start, size))
        return pread(descriptor, size, start)

    def spied_inflate(stored: bytes, index: Any, path: str) -> Any:
        inflated.append(len(stored))
        return inflate(stored, index, path)

    monkeypatch.setattr(os, "pread", spied)
    monkeypatch.setattr(fast_chunks, "_inflated", spied_inflate)
    monkeypatch.setattr(stored_reading, "_through_library", None)
    months_of(prepared, [DESIGN])
    indices = [chunk_index(str(file), name) for name in METHODS[method]]
    wanted = [spot for index in indices
              for spot in zip(index.starts.ravel().tolist(), index.sizes.ravel().tolist(), strict=True)]
    assert len(set(wanted)) == len(METHODS[method]) * CHUNKS
    assert Counter(read) == Counter(wanted)  # what a method does not take is not read to be counted
    assert Counter(inflated) == Counter(size for _, size in wanted)


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("small", [False, True])
def test_the_library_is_asked_for_every_stored_chunk_once(file, monkeypatch, method, small):
    if small:
        small_blocks(monkeypatch)
    prepared = opened(file, method, "library")
    asked: list[tuple[str, tuple[int, ...]]] = []
    original = stored_reading._through_library

    def spied(file: Any, variable: Any, slab: Any) -> Iterator[tuple[np.ndarray, tuple[int, ...]]]:
        for values, corner in original(file, variable, slab):
            touched = [range(low // size, (low + count - 1) // size + 1)
                       for low, count, size in zip(corner, values.shape, CHUNK, strict=True)]
            asked.extend((variable.name, chunk) for chunk in product(*touched))
            yield values, corner

    monkeypatch.setattr(stored_reading, "_through_library", spied)
    monkeypatch.setattr(stored_reading, "read_chunks", None)
    months_of(prepared, [DESIGN])
    grid = [range(-(-size // chunk)) for size, chunk in zip(SHAPE, CHUNK, strict=True)]
    assert Counter(asked) == Counter((name, chunk) for name in METHODS[method] for chunk in product(*grid))


@pytest.mark.parametrize("method", METHODS)
def test_every_block_of_every_lazy_variable_is_computed_once(file, monkeypatch, method):
    small_blocks(monkeypatch)
    prepared = opened(file, method, "lazy")
    reads: list[tuple[str, str, int]] = []
    original = NetCDF4ArrayWrapper._getitem

    def spied(self: NetCDF4ArrayWrapper, key: object) -> object:
        values = original(self, key)
        reads.append((self.variable_name, repr(key), np.size(values)))
        return values

    monkeypatch.setattr(NetCDF4ArrayWrapper, "_getitem", spied)
    months_of(prepared, [DESIGN])
    assert {name for name, _, _ in reads} == METHODS[method]
    assert max(Counter(reads).values()) == 1, Counter(reads).most_common(3)
    for name in METHODS[method]:
        sizes = [size for read, _, size in reads if read == name]
        assert len(sizes) > 30
        assert sum(sizes) == np.prod(SHAPE)  # no value twice, none left out


@pytest.mark.parametrize("way", ["chunks", "library", "lazy"])
def test_counts_and_litres_do_not_depend_on_the_blocks(file, monkeypatch, way):
    variables = {"ghi": {"name": "rsds", "stamp": "start"}}
    whole = sf.monthly_yield(sf.open_weather(str(file), variables=variables), DESIGN, method="heat-balance")
    few = opened(file, "heat-balance", way).plan.blocks
    small_blocks(monkeypatch)
    prepared = opened(file, "heat-balance", way)
    assert len(prepared.plan.blocks) == 4 >= len(few)
    assert len(prepared.plan.blocks[0].windows) > 15 > len(few[0].windows)
    parts = months_of(prepared, [DESIGN]).monthly[0]
    assert parts.attrs["counts"] == whole.attrs["counts"]
    np.testing.assert_allclose(parts["monthly_yield"], whole["monthly_yield"], rtol=1e-12)
    counted = json.loads(whole.attrs["counts"])
    cells, values = 24, DAYS * 24 * 24
    solar = (17.5 + (140.0 + 5.0 * np.arange(6)) / 15) % 24
    noise = int((np.sin((solar - 6) * np.pi / 12) <= 0).sum())
    assert noise > 0
    assert counted["ghi"]["sentinel"] == 3
    assert counted["ghi"]["clipped"] == noise
    assert counted["ghi"]["values"] == values
    # Hours 200 to 202 start at 8 UTC, 17:40 solar time at 145 E: the sun is up for part of the first, so that one stays
    # missing and its day is incomplete; the other two are night.
    assert counted["ghi"]["night"] == 2
    assert counted["temp_air"]["missing"] == counted["temp_air"]["filled"] == 2
    # Every column lies 9 to 11 h east, so its first and last local days are there in part.
    assert counted["days"] == {"edge": 2 * cells, "incomplete": 1, "values": (DAYS + 1) * cells}
    assert "3 of 23040 values of ghi were numbers that stand for missing" in " ".join(whole.attrs["conventions"])


def test_a_change_in_a_notebook_is_taken_and_the_rest_counted_as_ever(file):
    """Once opened, weather is free of noise and sentinels; what is told of them must not be lost for that."""
    weather = sf.open_weather(str(file), variables={"ghi": {"name": "rsds", "stamp": "start"}})
    assert float(weather["ghi"].min()) == 0.0
    assert np.isfinite(weather["ghi"]).sum() == weather["ghi"].size - 3
    before = sf.monthly_yield(weather, DESIGN)
    after = sf.monthly_yield(weather.assign(temp_air=weather["temp_air"] + 5.0), DESIGN)
    assert json.loads(before.attrs["counts"])["ghi"]["sentinel"] == 3
    assert after.attrs["counts"] == before.attrs["counts"]
    assert set(after.attrs) == set(before.attrs)
    march = [one["monthly_yield"].sel(month=3) for one in (before, after)]
    assert bool((march[1] > march[0]).all())
    dimmed = sf.monthly_yield(weather.assign(ghi=weather["ghi"] / 2.0), DESIGN)["monthly_yield"].sel(month=3)
    assert bool((dimmed < march[0]).all())
