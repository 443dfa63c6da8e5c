"""Zarr stores and GRIB files: other containers, the same recognition, meanings and gates as NetCDF.

Their libraries are extras; without them one message says which to install.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import partial
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.sources.grids.netcdf import weather_from_pieces
from stillfield.sources.grids.netcdf_pieces import Piece, take_pieces
from stillfield.sources.locate import locate
from stillfield.sources.recognise import Choice, read_mapping

#: Grids whose cells stand in rows and columns of latitude and longitude.
_REGULAR_GRIDS = ("regular_ll", "regular_gg")


def open_zarr(
    files: Sequence[str], *, variables: Mapping[str, str | Mapping[str, Any]] | None = None,
    radiation_from_temperature: Mapping[str, float] | None = None, day_clock: str | None = None,
) -> xr.Dataset:
    """Open Zarr stores, version 2 or 3, as one lazy dataset in vocabulary names and units.

    Parameters
    ----------
    files : sequence of str
        Folders of stores; they may split the time axis, the variables, or both.
    variables, radiation_from_temperature, day_clock
        As for `stillfield.sources.grids.netcdf.open_netcdf`.

    Returns
    -------
    xarray.Dataset
        As `open_netcdf` gives it.

    Raises
    ------
    WeatherError
        If the extra ``zarr`` is not installed, a store cannot be read, lacks chunks, or holds no usable weather.
    UnitsError
        If a unit is missing, unknown or of the wrong kind.
    """
    _need("zarr", ("zarr",), files)
    return _opened(files, _zarr_datasets, variables, radiation_from_temperature=radiation_from_temperature,
                   day_clock=day_clock)


def open_grib(
    files: Sequence[str], *, variables: Mapping[str, str | Mapping[str, Any]] | None = None,
    radiation_from_temperature: Mapping[str, float] | None = None, day_clock: str | None = None,
) -> xr.Dataset:
    """Open GRIB files as one lazy dataset in vocabulary names and units.

    Nothing is written beside the files. Forecasts of several starts and leads become one series of the times
    they are valid at.

    Parameters
    ----------
    files : sequence of str
        Paths or patterns.
    variables, radiation_from_temperature, day_clock
        As for `stillfield.sources.grids.netcdf.open_netcdf`; names are the short names of ecCodes, such as ``ssrd``.

    Returns
    -------
    xarray.Dataset
        As `open_netcdf` gives it.

    Raises
    ------
    WeatherError
        If the extra ``grib`` is not installed, a file cannot be read, or its grid is not regular.
    UnitsError
        If a unit is missing, unknown or of the wrong kind.
    """
    _need("grib", ("cfgrib", "eccodes"), files)
    return _opened(files, _grib_datasets, variables, radiation_from_temperature=radiation_from_temperature,
                   day_clock=day_clock)


def _need(extra: str, modules: Sequence[str], files: Sequence[str]) -> None:
    missing = [name for name in modules if find_spec(name) is None]
    if missing:
        raise WeatherError(f"reading this kind of weather needs the extra '{extra}'", where=str(files[0]),
                           got=f"no module {missing[0]}", cure=f"Install it: pip install 'stillfield[{extra}]'.")


def _opened(
    files: Sequence[str], datasets: Callable[[Path], list[xr.Dataset]],
    variables: Mapping[str, str | Mapping[str, Any]] | None, **options: Any,
) -> xr.Dataset:
    paths, choices = locate(files), read_mapping(variables)
    pieces: list[Piece] = []
    names: dict[str, None] = {}
    for path in paths:
        opened = datasets(path)
        names |= dict.fromkeys(str(name) for weather in opened for name in weather.data_vars)
        pieces += _pieces(opened, path, choices)
    return weather_from_pieces(pieces, choices, labels=[path.name for path in paths],
                               available=partial(", ".join, names), **options)


def _pieces(opened: Sequence[xr.Dataset], path: Path, choices: Mapping[str, Choice]) -> list[Piece]:
    """Pieces of every dataset of a file; where none is usable, the reason of the first."""
    pieces: list[Piece] = []
    faults: list[WeatherError] = []
    for weather in opened:
        try:
            pieces += take_pieces(weather, str(path), choices)
        except WeatherError as fault:
            faults.append(fault)
    if faults and not pieces:
        raise faults[0]
    return pieces


def _unreadable(path: Path, fault: Exception, what: str) -> WeatherError:
    return WeatherError(f"the {what} cannot be read", where=str(path), got=" ".join(str(fault).split())[:160],
                        cure="It is broken or cut off, or of another kind; get it again.")


# --- Zarr ----------------------------------------------------------------------------------------------------


def _zarr_datasets(path: Path) -> list[xr.Dataset]:
    if not (path / ".zgroup").is_file() and not (path / "zarr.json").is_file():
        raise WeatherError("this is no Zarr store", where=str(path), wanted="a folder with .zgroup or zarr.json",
                           cure="Name the folder of the store itself.")
    try:
        weather = xr.open_dataset(path, engine="zarr", chunks=None, cache=False, decode_timedelta=False,
                                  consolidated=_is_consolidated(path))
        _prove_written(path, weather)
    except WeatherError:
        raise
    except Exception as fault:  # zarr, its codecs and the time decoder each raise their own kinds
        raise _unreadable(path, fault, "store") from fault
    return [weather]


def _is_consolidated(path: Path) -> bool:
    if (path / ".zmetadata").is_file():
        return True
    meta = path / "zarr.json"
    return meta.is_file() and '"consolidated_metadata"' in meta.read_text(encoding="utf-8")


def _prove_written(path: Path, weather: xr.Dataset) -> None:
    """Refuse a store whose missing chunks would read as numbers; a chunk that is not there is no error to Zarr."""
    import zarr

    group = zarr.open_group(path, mode="r")
    for name, variable in weather.variables.items():
        array = group.get(str(name))
        if not isinstance(array, zarr.Array) or array.nchunks_initialized >= array.nchunks:
            continue
        empty = np.asarray(0 if array.fill_value is None else array.fill_value, dtype=array.dtype)
        declared = variable.encoding.get("_FillValue", variable.attrs.get("missing_value"))
        if np.issubdtype(empty.dtype, np.floating) and np.isnan(empty):
            continue
        if declared is None or not np.array_equal(empty, np.asarray(declared)):
            raise WeatherError(
                f"chunks of '{name}' are missing and would read as {empty}", where=str(path),
                got=f"{array.nchunks_initialized} of {array.nchunks} chunks", cure="Copy the store again, whole.",
            )


# --- GRIB ----------------------------------------------------------------------------------------------------


def _grib_datasets(path: Path) -> list[xr.Dataset]:
    import cfgrib

    with path.open("rb") as stream:
        if stream.read(4) != b"GRIB":
            raise WeatherError("this is no GRIB file", where=str(path), wanted="a file that starts with 'GRIB'",
                               cure="Check the file and weather.kind.")
    _prove_complete(path)
    try:
        opened = cfgrib.open_datasets(str(path), backend_kwargs={"indexpath": "", "errors": "raise"}, cache=False)
    except Exception as fault:  # ecCodes, cfgrib and xarray each raise their own kinds
        raise _unreadable(path, fault, "file") from fault
    return [_one_time_axis(_true_columns(_on_regular_grid(weather, path))) for weather in opened]


def _prove_complete(path: Path) -> None:
    """Refuse a file whose last message is cut off: each message ends with '7777' (WMO FM 92, section 8 or 5)."""
    size = path.stat().st_size
    with path.open("rb") as stream:
        stream.seek(max(0, size - 4096))
        tail = stream.read().rstrip(b"\x00\n\r ")
    if not tail.endswith(b"7777"):
        raise WeatherError("the file is cut off", where=str(path), got=f"{size} bytes, no end of the last message",
                           cure="Get it again.")


def _on_regular_grid(weather: xr.Dataset, path: Path) -> xr.Dataset:
    for name, variable in weather.data_vars.items():
        grid = str(variable.attrs.get("GRIB_gridType", "regular_ll"))
        if grid not in _REGULAR_GRIDS:
            raise WeatherError(f"'{name}' does not lie in rows and columns of latitude and longitude", where=str(path),
                               got=f"grid type {grid}", wanted=" or ".join(_REGULAR_GRIDS),
                               cure="Interpolate it to a regular grid first.")
    return weather


def _true_columns(weather: xr.Dataset) -> xr.Dataset:
    """Put the columns of a box across Greenwich where its messages say they are.

    ecCodes lists their longitudes sorted, which is not the order of the values: the columns would change places
    without a word.
    """
    messages = [one.attrs for one in weather.data_vars.values() if "longitude" in one.dims]
    if not messages or weather["longitude"].size < 2:
        return weather
    said, listed = messages[0], weather["longitude"]
    first, last = (float(said[f"GRIB_longitudeOf{end}GridPointInDegrees"]) for end in ("First", "Last"))
    if abs((float(listed[0]) - first + 180.0) % 360.0 - 180.0) < 1e-3 and (np.diff(listed) > 0.0).all():
        return weather
    sign = -1.0 if int(said.get("GRIB_iScansNegatively", 0)) else 1.0
    steps = np.arange(listed.size) / (listed.size - 1)
    columns = first + sign * ((sign * (last - first)) % 360.0) * steps
    return weather.assign_coords(longitude=("longitude", columns, listed.attrs))


def _one_time_axis(weather: xr.Dataset) -> xr.Dataset:
    """Forecast starts and leads become the times they are valid at; a single one is a scalar already."""
    valid = weather.coords.get("valid_time")
    if valid is None or valid.ndim < 2:
        return weather
    dims = [str(dim) for dim in valid.dims]
    chunked = weather.chunk(dict.fromkeys(dims, 1))
    flat = chunked.stack(_valid=dims, create_index=False)
    stamps = flat["valid_time"].values
    flat = flat.drop_vars([*dims, "valid_time"], errors="ignore").rename(_valid="valid_time")
    return flat.assign_coords(valid_time=("valid_time", stamps, {"standard_name": "time"})).sortby("valid_time")
