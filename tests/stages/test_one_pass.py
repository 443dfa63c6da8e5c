"""Counting what was changed costs no second reading, and gives the same figures however the files are cut."""

from __future__ import annotations

import json
from collections import Counter
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from xarray.backends.netCDF4_ import NetCDF4ArrayWrapper

import stillfield as sf

DESIGN = sf.load_still(Path(__file__).parents[2] / "config" / "stills" / "single-slope-glass.yaml")
DAYS = 40


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
    chunks = {"chunksizes": (50, 2, 3), "zlib": True, "_FillValue": np.nan}
    weather.to_netcdf(path, encoding=dict.fromkeys(weather.data_vars, chunks))
    return path


@pytest.fixture(scope="module")
def file(tmp_path_factory) -> Path:
    return hourly_file(tmp_path_factory.mktemp("pass") / "w.nc")


def small_blocks(monkeypatch: pytest.MonkeyPatch) -> None:
    """Blocks of one stored chunk, as a file of many gigabytes has many blocks."""
    import stillfield.sources.grids.netcdf_pieces as pieces

    monkeypatch.setattr(pieces, "_BLOCK_BYTES", 50 * 2 * 3 * 4)


@pytest.mark.parametrize("method", ["rule", "fitted"])
def test_every_block_of_every_variable_is_read_once(file, monkeypatch, method):
    small_blocks(monkeypatch)
    weather = sf.open_weather(str(file), variables={"ghi": {"name": "rsds", "stamp": "start"}})
    reads: Counter[tuple[str, str]] = Counter()
    original = NetCDF4ArrayWrapper._getitem

    def spied(self: NetCDF4ArrayWrapper, key: object) -> object:
        reads[(self.variable_name, repr(key))] += 1
        return original(self, key)

    monkeypatch.setattr(NetCDF4ArrayWrapper, "_getitem", spied)
    sf.monthly_yield(weather, DESIGN, method=method)
    wanted = {"rsds"} if method == "rule" else {"rsds", "tas", "sfcWind"}
    assert {name for name, _ in reads} == wanted  # what a method does not take is not read to be counted
    assert max(reads.values()) == 1, reads.most_common(3)
    assert sum(name == "rsds" for name, _ in reads) > 30


def test_counts_and_litres_do_not_depend_on_the_blocks(file, monkeypatch):
    variables = {"ghi": {"name": "rsds", "stamp": "start"}}
    whole = sf.monthly_yield(sf.open_weather(str(file), variables=variables), DESIGN, method="heat-balance")
    small_blocks(monkeypatch)
    parts = sf.monthly_yield(sf.open_weather(str(file), variables=variables), DESIGN, method="heat-balance")
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
