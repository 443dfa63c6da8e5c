"""Invented gridded weather and the many ways real files write one and the same of it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xarray as xr

from typical_year_samples import clear_sky

LATITUDE = np.array([8.0, 8.5, 9.0])
LONGITUDE = np.array([-1.0, -0.5, 0.0, 0.5])
DAYS = 4


@dataclass(frozen=True)
class Truth:
    """Weather by the start of each hour, UTC: arrays of shape (hour, latitude, longitude)."""

    ghi: np.ndarray
    temp_air: np.ndarray
    wind_10m: np.ndarray

    @property
    def irradiation(self) -> np.ndarray:
        """Energy of each UTC day [MJ m-2]."""
        return self.ghi.reshape(DAYS, 24, *self.ghi.shape[1:]).sum(axis=1) * 0.0036


def truth() -> Truth:
    """Four clear days of March over a small grid, different in every cell."""
    hour = np.arange(DAYS * 24)
    ghi = np.empty((hour.size, LATITUDE.size, LONGITUDE.size))
    for i, latitude in enumerate(LATITUDE):
        for j, longitude in enumerate(LONGITUDE):
            sky = clear_sky(np.full(hour.size, 3), 10 + hour // 24, (hour % 24) * 60 + 30,
                            latitude=latitude, longitude=longitude, zone=0.0)
            ghi[:, i, j] = sky * (0.9 - 0.02 * i - 0.03 * j)
    warm = 25 + 5 * np.sin((hour % 24 - 9) * np.pi / 12)
    shape = np.arange(ghi[0].size).reshape(ghi[0].shape)
    return Truth(ghi, warm[:, None, None] + 0.1 * shape, 3.0 + 0.1 * shape + 0 * ghi)


def hours(shift: float = 0.0, count: int = DAYS * 24, step: float = 1.0) -> np.ndarray:
    """Stamps from 2010-03-10 on, moved by `shift` hours."""
    start = np.datetime64("2010-03-10", "ns")
    return start + ((np.arange(count) * step + shift) * 3600e9).astype("timedelta64[ns]")


def days(shift: float = 0.0) -> np.ndarray:
    """Daily stamps, moved by `shift` hours."""
    return hours(shift, DAYS, 24.0)


def grid(time: np.ndarray, names: tuple[str, str, str] = ("time", "latitude", "longitude"), **variables) -> xr.Dataset:
    """Dataset of variables given as (array, units) or (array, attributes)."""
    t, y, x = names
    data = {name: (names, values, {"units": about} if isinstance(about, str) else about)
            for name, (values, about) in variables.items()}
    return xr.Dataset(data, coords={t: time, y: (y, LATITUDE, {"units": "degrees_north"}),
                                    x: (x, LONGITUDE, {"units": "degrees_east"})})


Writer = Callable[[xr.Dataset, Path], list[str]]


def whole(weather: xr.Dataset, folder: Path) -> list[str]:
    """One file."""
    weather.to_netcdf(folder / "w.nc")
    return [str(folder / "w.nc")]


def split_in_time(weather: xr.Dataset, folder: Path) -> list[str]:
    """Two files, named so that the later one sorts first."""
    time = "valid_time" if "valid_time" in weather.dims else "time"
    half = weather.sizes[time] // 2
    weather.isel({time: slice(None, half)}).to_netcdf(folder / "w-b.nc")
    weather.isel({time: slice(half, None)}).to_netcdf(folder / "w-a.nc")
    return [str(folder / "w-*.nc")]


def split_by_variable(weather: xr.Dataset, folder: Path) -> list[str]:
    """A file for each variable."""
    names = []
    for name in weather.data_vars:
        weather[[name]].to_netcdf(folder / f"{name}.nc")
        names.append(str(folder / f"{name}.nc"))
    return names


def packed(weather: xr.Dataset, folder: Path) -> list[str]:
    """Two files of 16-bit integers, each with its own scale and offset."""
    time = "valid_time" if "valid_time" in weather.dims else "time"
    half = weather.sizes[time] // 2
    names = []
    for i, part in enumerate((slice(None, half), slice(half, None))):
        piece = weather.isel({time: part})
        encoding = {}
        for name, values in piece.data_vars.items():
            if np.issubdtype(values.dtype, np.datetime64):
                continue
            low, high = float(values.min()), float(values.max())
            encoding[name] = {"dtype": "int16", "scale_factor": max(high - low, 1e-6) / 65000,
                              "add_offset": (high + low) / 2, "_FillValue": -32768}
        piece.to_netcdf(folder / f"p{i}.nc", encoding=encoding)
        names.append(str(folder / f"p{i}.nc"))
    return names


def classic(weather: xr.Dataset, folder: Path) -> list[str]:
    """One file in the classic format."""
    weather.to_netcdf(folder / "c.nc", format="NETCDF3_64BIT")
    return [str(folder / "c.nc")]


def north_up(weather: xr.Dataset) -> xr.Dataset:
    """Latitude from north to south."""
    return weather.isel({dim: slice(None, None, -1) for dim in weather.dims if str(dim).startswith("lat")})


def positive_longitude(weather: xr.Dataset) -> xr.Dataset:
    """Longitude 0..360, sorted, as global files have it."""
    name = next(str(dim) for dim in weather.dims if str(dim).startswith("lon"))
    attrs = weather[name].attrs
    moved = weather.assign_coords({name: weather[name].values % 360.0}).sortby(name)
    moved[name].attrs = attrs
    return moved


def single_precision(weather: xr.Dataset) -> xr.Dataset:
    """Coordinates and values in 32 bits, longitude before latitude in the file."""
    moved = weather.astype(np.float32, keep_attrs=True)
    for dim in [dim for dim in weather.dims if str(dim).startswith("l")]:
        attrs = moved[dim].attrs
        moved = moved.assign_coords({dim: moved[dim].values.astype(np.float32)})
        moved[dim].attrs = attrs
    return moved.transpose(*reversed(list(moved.dims)))
