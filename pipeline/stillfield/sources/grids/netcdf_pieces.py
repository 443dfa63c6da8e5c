"""One variable of one NetCDF file on canonical axes."""

from __future__ import annotations

import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, replace
from math import prod
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.sources.grids.grid_axes import Axes, clean_degrees, find_axes, latitude_order, longitude_order
from stillfield.sources.grids.stored_building import StoredPiece, describe_piece, with_files
from stillfield.sources.recognise import Choice, Found, recognise

#: Coordinates of stations that are kept where a file has them.
_OF_SITES = ("elevation", "utc_offset_hours", "name")
#: Size of the blocks weather is read in. [bytes]
_BLOCK_BYTES = 16 * 2**20


@dataclass(frozen=True)
class Piece:
    """One variable of one file: values as in the file, axes canonical.

    Attributes
    ----------
    found : Found
        Role, unit and meaning.
    path : str
        File, for errors.
    placed : {'bounds', None}
        'bounds' when time is already the lower time bound.
    values : DataArray
        Dims time and latitude, longitude or site; lazy; undeclared sentinels still in it.
    notes : tuple of str
        Sentences for the conventions.
    files : tuple of str
        All files, where several were opened as one; `path` is the first of them.
    stored : StoredPiece or None
        How the variable lies in its file, where that is plain.
    """

    found: Found
    path: str
    placed: str | None
    values: xr.DataArray
    notes: tuple[str, ...]
    files: tuple[str, ...] = ()
    stored: StoredPiece | None = None


def read_pieces(path: Path, choices: Mapping[str, Choice]) -> list[Piece]:
    """Open one file and take the variables that play a role.

    Parameters
    ----------
    path : Path
        A whole NetCDF file.
    choices : mapping of str to Choice
        What the run file says.

    Returns
    -------
    list of Piece
        Empty when the file holds nothing of use.

    Raises
    ------
    WeatherError
        If the file cannot be opened or its axes cannot be used.
    """
    weather = open_one(path)
    try:
        return [_in_file(piece, weather) for piece in take_pieces(weather, str(path), choices)]
    except BaseException:
        weather.close()  # a refused file must not stay open: it may be about to be replaced
        raise


def _in_file(piece: Piece, weather: xr.Dataset) -> Piece:
    """A piece of one NetCDF file, with the file among what is known of how it is stored."""
    own = [(piece.path, piece.values.sizes["time"], weather.variables[piece.found.name].encoding)]
    return replace(piece, stored=with_files(piece.stored, own, piece.values.attrs["valid_range"]))


def take_pieces(weather: xr.Dataset, where: str, choices: Mapping[str, Choice]) -> list[Piece]:
    """Take the variables that play a role from an open dataset, whatever it was opened from.

    Parameters
    ----------
    weather : xarray.Dataset
        With CF axes and units.
    where : str
        Where it came from, for errors.
    choices : mapping of str to Choice
        What the run file says.

    Returns
    -------
    list of Piece

    Raises
    ------
    WeatherError
        If its axes cannot be used.
    """
    weather, notes = _one_version(weather)
    axes = find_axes(weather, where=where)
    if weather[axes.time].size == 0:
        raise WeatherError("the file holds no times", where=where, got="0 records", wanted="at least one",
                           cure="Its writer did not finish; get it again.")
    keep = _core_dims(weather, axes)
    usable = frozenset(
        str(name) for name, variable in weather.variables.items()
        if np.issubdtype(variable.dtype, np.number)
        and all(size == 1 or dim in keep for dim, size in variable.sizes.items())
    )
    found = recognise(weather, choices, usable, where=where)
    return [_piece(weather, axes, one, where, notes) for one in found]


def open_one(path: Path) -> xr.Dataset:
    """Open one file lazily, its values decoded when they are read.

    Raises
    ------
    WeatherError
        If the file cannot be opened.
    """
    try:
        with _odd_origin():
            return xr.open_dataset(path, engine="netcdf4", decode_timedelta=False, cache=False)
    except Exception as fault:  # netCDF4, HDF5 and the time decoder each raise their own kinds
        raise WeatherError("the file cannot be read", where=str(path), got=" ".join(str(fault).split())[:160],
                           cure="It is broken or cut off, or its time axis is not CF; get it again or correct it.",
                           ) from fault


@contextmanager
def _odd_origin() -> Iterator[None]:
    """Decode times "since 1-1-1" without a word: the year is meant, as CF has it."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", xr.SerializationWarning)
        yield


def _one_version(weather: xr.Dataset) -> tuple[xr.Dataset, tuple[str, ...]]:
    """Final and preliminary weather on an `expver` dimension, joined: final first."""
    if "expver" not in weather.dims:
        return weather, ()
    final = weather.isel(expver=0, drop=True)
    for i in range(1, weather.sizes["expver"]):
        final = final.combine_first(weather.isel(expver=i, drop=True))
    return final, ("Final and preliminary weather (expver) were joined, final first.",)


def _core_dims(weather: xr.Dataset, axes: Axes) -> set[str]:
    names = (axes.latitude, axes.longitude, axes.time)
    return {str(dim) for name in names for dim in weather[name].dims}


def _piece(weather: xr.Dataset, axes: Axes, found: Found, where: str, notes: tuple[str, ...]) -> Piece:
    variable = weather.variables[found.name]
    core = _core_dims(weather, axes)
    spare = [dim for dim, size in variable.sizes.items() if dim not in core and size == 1]
    variable = variable.isel(dict.fromkeys(spare, 0))
    time, placed, hours = _time_of(weather, axes, found, where=where)
    time_dim = str(next(iter(weather[axes.time].dims), "time"))
    if time_dim not in variable.dims:
        if weather[axes.time].size != 1:
            raise WeatherError(f"variable '{found.name}' has no time", where=where)
        variable = xr.Variable((time_dim, *variable.dims), variable.chunk().data[np.newaxis], variable.attrs)
    chunked = variable if variable.chunks else variable.chunk(block_sizes(variable, time_dim))
    values, said = _on_cells(chunked, weather, axes, time_dim, where=where)
    valid = _valid_range(weather.variables[found.name])
    values = values.assign_coords(time=("time", time)).assign_attrs(
        bounds_hours=hours, valid_range=valid, resolution=_resolution(weather.variables[found.name]))
    stored = None if notes else describe_piece(found.name, weather, axes, time_dim)
    return Piece(found, where, placed, values, notes + said, stored=stored)


def _valid_range(variable: xr.Variable) -> tuple[float, float]:
    """Stated range of valid values in the file's unit; infinite where none is stated.

    A range of the type of the packed numbers is packed as they are (NetCDF Users' Guide, "valid_range").
    """
    both = np.ravel(variable.attrs.get("valid_range", (-np.inf, np.inf)))
    if both.size != 2:
        return (-np.inf, np.inf)
    named = zip(("valid_min", "valid_max"), both, strict=True)
    ends = [np.asarray(variable.attrs.get(name, end)) for name, end in named]
    packed = {"scale_factor", "add_offset"} & set(variable.encoding)
    scale, offset = (float(variable.encoding.get(name, usual)) for name, usual in (("scale_factor", 1.0),
                                                                                  ("add_offset", 0.0)))
    unpacked = [float(end) * scale + offset if packed and end.dtype == variable.encoding.get("dtype") else float(end)
                for end in ends]
    return min(unpacked), max(unpacked)


def _resolution(variable: xr.Variable) -> float:
    """Smallest difference the file can hold: its packing, or the last digits of single precision near 0."""
    return abs(float(variable.encoding.get("scale_factor", 0.0)))


def _time_of(weather: xr.Dataset, axes: Axes, found: Found, *, where: str) -> tuple[Any, str | None, float]:
    """Time stamps, moved to the lower bound where the file has time bounds and the variable is no instant."""
    time = weather[axes.time]
    stamps = np.atleast_1d(time.values)
    bounds_name = str(time.attrs.get("bounds", time.encoding.get("bounds", "")))
    bounds = weather.get(bounds_name) if bounds_name else None
    if bounds is None or "time: point" in found.cell_methods or bounds.size != 2 * stamps.size:
        return stamps, None, 0.0
    with _odd_origin():
        edges = bounds.values.reshape(-1, 2)
    lengths = np.array([_hours(b - a) for a, b in edges])
    if lengths.min() <= 0.0:
        raise WeatherError("time bounds are empty or reversed", where=where,
                           got=f"{edges[int(lengths.argmin())][0]} to {edges[int(lengths.argmin())][1]}")
    return edges[:, 0], "bounds", float(lengths[0])


def _hours(span: Any) -> float:
    seconds = span / np.timedelta64(1, "s") if isinstance(span, np.timedelta64) else span.total_seconds()
    return float(seconds) / 3600.0


def block_sizes(variable: xr.Variable, time_dim: str, sizes: Mapping[Any, int] | None = None) -> dict[Any, int]:
    """Blocks of whole stored chunks, about 16 MiB each, growing along time first.

    Parameters
    ----------
    variable : xarray.Variable
        As opened from a file.
    time_dim : str
        Its dimension of time.
    sizes : mapping, optional
        Sizes of all files together, where `variable` is that of the first.

    Returns
    -------
    dict
        Size of a block along each dimension.
    """
    stored = variable.encoding.get("chunksizes") or None
    sizes = dict(variable.sizes if sizes is None else sizes)
    if stored is None or len(stored) != len(sizes):
        row = variable.dtype.itemsize * prod(size for dim, size in sizes.items() if dim != time_dim)
        return {**sizes, time_dim: max(1, min(sizes[time_dim], _BLOCK_BYTES // max(row, 1)))}
    chunks = dict(zip(sizes, stored, strict=True))
    for dim in (time_dim, *(dim for dim in reversed(list(sizes)) if dim != time_dim)):
        room = _BLOCK_BYTES // (variable.dtype.itemsize * prod(chunks.values()))
        chunks[dim] = min(sizes[dim], chunks[dim] * max(1, room))
    return chunks


def _on_cells(
    variable: xr.Variable, weather: xr.Dataset, axes: Axes, time_dim: str, *, where: str
) -> tuple[xr.DataArray, tuple[str, ...]]:
    """Variable on canonical cells; its time coordinate is still to come."""
    latitude, longitude = (clean_degrees(weather[name].values) for name in (axes.latitude, axes.longitude))
    if axes.site_dim is not None:
        return _at_sites(variable.transpose(time_dim, axes.site_dim), weather, latitude, longitude), ()
    dims = {time_dim: "time"}
    for name, axis in ((axes.latitude, "latitude"), (axes.longitude, "longitude")):
        dims |= {str(dim): axis for dim in weather[name].dims}
    renamed = xr.Variable([dims[str(dim)] for dim in variable.dims], variable.data)
    for axis in ("latitude", "longitude"):
        if axis not in renamed.dims:
            renamed = xr.Variable((axis, *renamed.dims), renamed.data[np.newaxis])
    rows = latitude_order(latitude, where=where)
    columns, east, notes = longitude_order(longitude, where=where)
    laid = renamed.transpose("time", "latitude", "longitude").isel(latitude=_slice(rows), longitude=_slice(columns))
    values = xr.DataArray(laid, coords={"latitude": latitude[rows], "longitude": east})
    return values, tuple(notes)


def _slice(order: Any) -> Any:
    """A slice where the order is a plain run, which keeps blocks as they are stored."""
    steps = np.diff(order)
    if order.size > 1 and (steps == 1).all():
        return slice(int(order[0]), int(order[-1]) + 1)
    if order.size > 1 and (steps == -1).all():
        return slice(int(order[0]), None if order[-1] == 0 else int(order[-1]) - 1, -1)
    return order


def _at_sites(variable: xr.Variable, weather: xr.Dataset, latitude: Any, longitude: Any) -> xr.DataArray:
    names = next((variable for variable in weather.variables.values()
                  if variable.attrs.get("cf_role") == "timeseries_id" and variable.size == latitude.size), None)
    raw = np.arange(latitude.size) if names is None else names.values.ravel()
    ids = [one.decode() if isinstance(one, bytes) else str(one) for one in raw]
    wrapped = clean_degrees((longitude + 180.0) % 360.0 - 180.0)
    more = {name: ("site", weather[name].values.ravel(), weather[name].attrs) for name in _OF_SITES
            if name in weather.coords and weather[name].size == latitude.size}
    return xr.DataArray(
        variable.data, dims=("time", "site"),
        coords={"site": ids, "latitude": ("site", latitude), "longitude": ("site", wrapped), **more},
    )
