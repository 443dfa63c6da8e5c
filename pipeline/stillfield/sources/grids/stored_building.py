"""Tell of weather that was opened how it lies in its files, where that is plain (`stored`).

A piece is plain when its variable has latitude, longitude and time as they are, and its numbers need no more than a
factor and a shift; weather is, when all of its quantities follow from such pieces by few enough steps. Where anything
else is met there is no record, and the weather is read the general way.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.sources.grids.grid_axes import Axes, clean_degrees, latitude_order, longitude_order
from stillfield.sources.grids.stored import Coding, Span, StoredFile, StoredVariable, spans_of

Places = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class StoredPiece:
    """How the variable of one `Piece` lies in its files.

    Attributes
    ----------
    name : str
        In the files.
    axes : tuple of str
        As of `stored.StoredVariable`.
    rows, columns : ndarray of int
        Place in the files of each latitude and longitude of the piece.
    dtype, computed : str
        As of `stored.Coding`.
    chunk : tuple of int or None
        Of the first file.
    files : tuple of (str, int, Coding)
        Path, number of records and coding, in the order of the piece's times; empty where no NetCDF file holds it.
    """

    name: str
    axes: tuple[str, ...]
    rows: Places
    columns: Places
    dtype: str
    computed: str
    chunk: tuple[int, ...] | None
    files: tuple[tuple[str, int, Coding], ...] = ()


def describe_piece(name: str, weather: xr.Dataset, axes: Axes, time_dim: str) -> StoredPiece | None:
    """Tell how a variable lies in the file it was opened from; None where that is not plain.

    Parameters
    ----------
    name : str
        Of the variable.
    weather : xarray.Dataset
        As opened.
    axes : Axes
        Of the file.
    time_dim : str
        Its dimension of time.
    """
    variable = weather.variables[name]
    latitude, longitude = weather[axes.latitude], weather[axes.longitude]
    dims = {time_dim: "time", **dict.fromkeys(latitude.dims, "latitude"), **dict.fromkeys(longitude.dims, "longitude")}
    order = tuple(dims.get(str(dim), "") for dim in variable.dims)
    stored = variable.encoding.get("dtype")
    if axes.site_dim is not None or sorted(filter(None, order)) != ["latitude", "longitude", "time"] or stored is None:
        return None
    dtype = np.dtype(stored).newbyteorder("=")
    if dtype.kind not in "iuf" or (dtype.kind != "f" and dtype.itemsize == 8) or "_Unsigned" in variable.encoding:
        return None
    small = variable.dtype == np.float32 and (dtype == np.float32 or dtype.itemsize <= 2)
    chunk = variable.encoding.get("chunksizes")
    where = f"{name} of the file"
    return StoredPiece(
        name, order, latitude_order(clean_degrees(latitude.values), where=where),
        longitude_order(clean_degrees(longitude.values), where=where)[0], str(dtype),
        "float32" if small else "float64",
        tuple(int(size) for size in chunk) if chunk and len(chunk) == len(order) else None,
    )


def with_files(
    piece: StoredPiece | None, files: Sequence[tuple[str, int, Mapping[str, Any]]], valid: tuple[float, float]
) -> StoredPiece | None:
    """A piece with its files: path, number of records, and attributes ``scale_factor`` and so on of each."""
    if piece is None:
        return None
    found = []
    for path, records, own in files:
        coding = _coding(piece, own, valid)
        if coding is None:
            return None
        found.append((path, records, coding))
    return replace(piece, files=tuple(found))


def _coding(piece: StoredPiece, own: Mapping[str, Any], valid: tuple[float, float]) -> Coding | None:
    absent = {float(one) for key in ("_FillValue", "missing_value") if key in own for one in np.ravel(own[key])}
    absent = {one for one in absent if not np.isnan(one)}
    packing = [np.ravel(own.get(key, usual)) for key, usual in (("scale_factor", 1.0), ("add_offset", 0.0))]
    if len(absent) > 2 or any(one.size != 1 for one in packing):
        return None
    scale, offset = (float(one[0]) for one in packing)
    return Coding(piece.dtype, piece.computed, scale, offset, tuple(sorted(absent)), valid)


@dataclass(frozen=True, eq=False)
class Role:
    """One role over all its files, for `stored_variable`.

    Attributes
    ----------
    parts : tuple
        How each piece lies, with its latitudes and longitudes.
    order : ndarray of int
        Which record of the pieces, end to end, is the first, second, ... in time.
    index : pandas.Index
        Times of all records, rising.
    """

    parts: tuple[tuple[StoredPiece | None, pd.Index[Any], pd.Index[Any]], ...]
    order: Places
    index: pd.Index[Any]


def stored_variable(
    role: Role, time: pd.Index[Any], latitude: NDArray[Any], longitude: NDArray[Any]
) -> StoredVariable | None:
    """Put one role on the axes of the weather; None where it does not lie plainly.

    Parameters
    ----------
    role : Role
        With times as in the weather.
    time, latitude, longitude
        Axes of the weather.
    """
    laid = []
    for piece, rows, columns in role.parts:
        if piece is None or not piece.files:
            return None
        places = (_found(rows, latitude), _found(columns, clean_degrees((longitude + 180.0) % 360.0 - 180.0)))
        spans = [None if at is None else spans_of(own[at]) for own, at in zip((piece.rows, piece.columns), places,
                                                                             strict=True)]
        if spans[0] is None or spans[1] is None:
            return None
        laid.append((piece, spans[0], spans[1]))
    first, across, along = laid[0]
    if any(piece.axes != first.axes or (rows, columns) != (across, along) for piece, rows, columns in laid[1:]):
        return None
    files = _files([file for piece, _, _ in laid for file in piece.files], role, time)
    return None if files is None else StoredVariable(first.name, first.axes, files, across, along, first.chunk)


def _found(own: pd.Index[Any], wanted: NDArray[Any]) -> Places | None:
    """Places of coordinates that mean the same cells (as `grid_axes.snapped`); None if one is not there."""
    cell = float(np.abs(np.diff(own)).min()) if len(own) > 1 else 0.01
    places = own.get_indexer(pd.Index(wanted), method="nearest", tolerance=0.01 * cell)
    return None if (places < 0).any() else places


def _files(
    files: Sequence[tuple[str, int, Coding]], role: Role, time: pd.Index[Any]
) -> tuple[StoredFile, ...] | None:
    """Files with the records they hold of the weather, in the order of time."""
    if sum(records for _, records, _ in files) != len(role.index) or not role.index.is_unique:
        return None
    places = np.empty(len(role.index), np.intp)
    places[role.order] = time.get_indexer(role.index)
    found: list[StoredFile] = []
    start = 0
    for path, records, coding in files:
        own = places[start:start + records]
        start += records
        runs = np.split(np.arange(records), np.flatnonzero(np.diff(own) != 1) + 1)
        found += [StoredFile(path, Span(int(own[run[0]]), run.size, int(run[0])), coding)
                  for run in runs if own[run[0]] >= 0]
    return tuple(sorted(found, key=lambda file: file.records.at))
