"""Many NetCDF files opened for the price of one: files of the same build become one dataset along time.

A reanalysis comes as thousands of files that differ in nothing but their times and values. Only the first of
them goes through the full opening; of the others the header, the axes and the times are read and held
against it. Values stay on disk: each block is read, and unpacked by its own file's scale and offset, when it
is computed. Whatever is not plainly alike is opened by itself, so this changes speed and nothing else.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any
from uuid import uuid4

import netCDF4
import numpy as np
import xarray as xr
from numpy.typing import NDArray
from xarray.coding.times import decode_cf_datetime
from xarray.conventions import decode_cf_variable

from stillfield.sources.grids.chunk_index import ONE_READER
from stillfield.sources.grids.file_proof import prove_whole
from stillfield.sources.grids.netcdf_pieces import Piece, block_sizes, open_one, read_pieces, take_pieces
from stillfield.sources.grids.stored_building import StoredPiece, with_files
from stillfield.sources.recognise import Choice

#: Attributes that may differ between files of one build: each file's own packing, and what only describes.
_OWN = frozenset({"scale_factor", "add_offset", "_FillValue", "missing_value", "actual_range", "history"})
_PACKED = frozenset({"scale_factor", "add_offset"})
_RANGE = frozenset({"valid_range", "valid_min", "valid_max"})
#: Attributes of the time axis that each file's stamps are decoded by.
_CLOCK = frozenset({"units", "calendar"})
#: Variables without time up to this many values must be the same in every file; larger ones in shape only.
_COMPARED_VALUES = 20_000


@dataclass(frozen=True)
class _Header:
    """What is known of a file without its weather.

    Attributes
    ----------
    build : tuple
        Everything that must be equal for files to be read as one.
    time : str
        The time axis: name of its dimension and of its variable.
    bounds : str
        Variable with the time bounds; empty where there is none.
    stamps, edges : ndarray
        Decoded; edges are None without bounds.
    own : mapping
        Packing and numbers for missing of each variable.
    """

    path: Path
    build: tuple[Any, ...]
    time: str
    bounds: str
    stamps: NDArray[Any]
    edges: NDArray[Any] | None
    own: Mapping[str, Mapping[str, Any]]


def read_files(paths: Sequence[Path], choices: Mapping[str, Choice]) -> list[Piece]:
    """Open files and take the variables that play a role, files of one build as one piece.

    Parameters
    ----------
    paths : sequence of Path
        Any order.
    choices : mapping of str to Choice
        What the run file says.

    Returns
    -------
    list of Piece

    Raises
    ------
    WeatherError
        If a file is foreign or cut off, cannot be opened, or has axes that cannot be used.
    """
    alike: dict[tuple[Any, ...], list[_Header]] = {}
    pieces: list[Piece] = []
    for path in paths:
        prove_whole(path)
        header = _header(path) if len(paths) > 1 else None
        if header is None:
            pieces += read_pieces(path, choices)
        else:
            alike.setdefault(header.build, []).append(header)
    for headers in alike.values():
        run, others = _one_after_another(headers)
        for header in others:
            pieces += read_pieces(header.path, choices)
        pieces += read_pieces(run[0].path, choices) if len(run) == 1 else _read_run(run, choices)
    return pieces


def _one_after_another(headers: Sequence[_Header]) -> tuple[list[_Header], list[_Header]]:
    """Files in the order of their times, and those that overlap: by themselves they are named in a message."""
    ordered = sorted(headers, key=lambda header: header.stamps[0])
    run, others = ordered[:1], []
    for header in ordered[1:]:
        if header.stamps[0] > run[-1].stamps[-1]:
            run.append(header)
        else:
            others += [*([run.pop()] if len(run) > 1 else []), header]
    return run, others


def _header(path: Path) -> _Header | None:
    """Header of a file; None where anything about it is unusual, and the full opening has to judge it."""
    try:
        with ONE_READER, netCDF4.Dataset(path) as file:
            file.set_auto_maskandscale(False)
            file.set_auto_chartostring(False)
            return _described(path, file)
    except Exception:  # whatever is wrong, the full opening says it in full words
        return None


def _described(path: Path, file: netCDF4.Dataset) -> _Header | None:
    attributes = {name: dict(variable.__dict__) for name, variable in file.variables.items()}
    clocks = [name for name, said in attributes.items() if " since " in str(said.get("units", ""))]
    if len(clocks) != 1 or file.variables[clocks[0]].dimensions != (clocks[0],) or "expver" in file.dimensions:
        return None
    time = clocks[0]
    said = attributes[time]
    raw, bounds = file.variables[time][:], str(said.get("bounds", ""))
    edges = file.variables[bounds][:] if bounds in file.variables else None
    if not _plain_times(raw, said) or (edges is not None and edges.shape != (raw.size, 2)):
        return None
    if any(_PACKED & set(about) and _RANGE & set(about) for about in attributes.values()):
        return None  # the range may be in packed numbers, which mean something else in every file
    parts: list[Any] = [tuple((name, len(size)) for name, size in file.dimensions.items() if name != time)]
    for name, variable in file.variables.items():
        varies = time in variable.dimensions
        own = _OWN | _CLOCK if name in (time, bounds) else _OWN
        text = repr(sorted((key, value) for key, value in attributes[name].items() if key not in own))
        packing = [f"{key} {np.asarray(attributes[name][key]).dtype}" for key in sorted(_OWN & set(attributes[name]))]
        values = None if varies or variable.size > _COMPARED_VALUES else _content(variable)
        parts.append((name, variable.dimensions, str(variable.dtype), text, *packing, values))
    stamps, *rest = (_dates(one, said) for one in (raw, edges) if one is not None)
    parts += [str(said.get("calendar", "standard")), stamps.dtype]
    packed = {name: {key: about[key] for key in _OWN & set(about)} for name, about in attributes.items()}
    return _Header(
        path, tuple(parts), time, bounds if edges is not None else "", stamps, rest[0] if rest else None, packed
    )


def _plain_times(raw: NDArray[Any], said: Mapping[str, Any]) -> bool:
    """Whether times are there, rise, and are neither packed nor missing."""
    absent = [said[key] for key in ("_FillValue", "missing_value") if key in said]
    packed = "scale_factor" in said or "add_offset" in said
    known = np.isfinite(raw).all() and not np.isin(raw, absent).any()
    return bool(raw.size and not packed and known and (np.diff(raw) > 0).all())


def _content(variable: Any) -> Any:
    values = np.asarray(variable[...])
    return tuple(values.ravel()) if values.dtype == object else values.tobytes()


def _dates(raw: NDArray[Any], said: Mapping[str, Any]) -> NDArray[Any]:
    """Numbers on a time axis as dates, by the same decoder as the full opening."""
    return np.asarray(decode_cf_datetime(raw, said["units"], said.get("calendar")))


def _read_run(run: Sequence[_Header], choices: Mapping[str, Choice]) -> list[Piece]:
    first = open_one(run[0].path)
    try:
        pieces = take_pieces(_along_time(first, run), str(run[0].path), choices)
    except BaseException:
        first.close()
        raise
    return [replace(piece, files=tuple(str(header.path) for header in run), stored=_in_files(piece, run))
            for piece in pieces]


def _in_files(piece: Piece, run: Sequence[_Header]) -> StoredPiece | None:
    own = [(str(header.path), header.stamps.size, header.own[piece.found.name]) for header in run]
    return with_files(piece.stored, own, piece.values.attrs["valid_range"])


def _along_time(first: xr.Dataset, run: Sequence[_Header]) -> xr.Dataset:
    """The dataset of all files, built on that of the first."""
    time = run[0].time
    small = {time: np.concatenate([header.stamps for header in run])}
    if run[0].edges is not None:
        small[run[0].bounds] = np.concatenate([header.edges for header in run if header.edges is not None])
    variables = {}
    for name, variable in first.variables.items():
        if time not in variable.dims:
            variables[name] = variable
        elif name in small:
            variables[name] = xr.Variable(variable.dims, small[str(name)], variable.attrs, variable.encoding)
        elif np.issubdtype(variable.dtype, np.number):
            variables[name] = _lazy(str(name), variable, time, run)
    coords = {name: variables.pop(name) for name in list(first.coords) if name in variables}
    return xr.Dataset(variables, coords=coords, attrs=first.attrs)


@dataclass(frozen=True)
class _Blocks:
    """One variable over all files, and how it is cut.

    Attributes
    ----------
    parts : tuple
        For each block along time: file, first record and end, of every file that has a share in it.
    cuts : tuple of tuple of slice
        For each dimension the slices of its blocks; those along time are not used.
    """

    name: str
    axis: int
    dtype: np.dtype[Any]
    parts: tuple[tuple[tuple[str, int, int], ...], ...]
    cuts: tuple[tuple[slice, ...], ...]

    def read(self, block_id: tuple[int, ...]) -> NDArray[Any]:
        """Values of one block, unpacked."""
        where = [cuts[number] for cuts, number in zip(self.cuts, block_id, strict=True)]
        values = []
        for path, start, end in self.parts[block_id[self.axis]]:
            where[self.axis] = slice(start, end)
            values.append(_read_values(path, self.name, tuple(where)))
        whole = values[0] if len(values) == 1 else np.concatenate(values, axis=self.axis)
        return whole.astype(self.dtype, copy=False)


def _lazy(name: str, variable: xr.Variable, time: str, run: Sequence[_Header]) -> xr.Variable:
    import dask.array as da

    lengths = [header.stamps.size for header in run]
    sizes = {**variable.sizes, time: sum(lengths)}
    blocks = block_sizes(variable, time, sizes)
    parts = _share_out([(str(header.path), size) for header, size in zip(run, lengths, strict=True)], blocks[time])
    chunks = tuple(
        tuple(sum(end - start for _, start, end in part) for part in parts) if dim == time
        else tuple(min(blocks[dim], size - start) for start in range(0, size, blocks[dim]))
        for dim, size in sizes.items()
    )
    cuts = tuple(tuple(slice(end - size, end) for size, end in zip(one, np.cumsum(one).tolist(), strict=True))
                 for one in chunks)
    reader = _Blocks(name, variable.get_axis_num(time), variable.dtype, tuple(parts), cuts)
    data = da.map_blocks(_read_block, reader=_Held(reader), chunks=chunks, dtype=variable.dtype,
                         meta=np.empty((0,) * variable.ndim, variable.dtype), name=f"{name}-{uuid4().hex}")
    encoding = dict(variable.encoding)
    if "scale_factor" in run[0].own[name]:
        encoding["scale_factor"] = max(abs(float(header.own[name]["scale_factor"])) for header in run)
    return xr.Variable(variable.dims, data, variable.attrs, encoding)


class _Held:
    """Carries the reader through dask as one opaque thing."""

    def __init__(self, reader: _Blocks) -> None:
        self.reader = reader


def _read_block(*, reader: _Held, block_id: tuple[int, ...] | None = None) -> NDArray[Any]:
    return reader.reader.read(block_id or ())


def _share_out(files: Sequence[tuple[str, int]], longest: int) -> list[tuple[tuple[str, int, int], ...]]:
    """Records of files in blocks of at most `longest`: long files are cut, short ones put together.

    Examples
    --------
    >>> _share_out([("a", 2), ("b", 2), ("c", 5)], 4)
    [(('a', 0, 2), ('b', 0, 2)), (('c', 0, 4),), (('c', 4, 5),)]
    """
    blocks: list[tuple[tuple[str, int, int], ...]] = []
    open_block: list[tuple[str, int, int]] = []
    room = longest
    for path, size in files:
        if open_block and size > room:
            blocks.append(tuple(open_block))
            open_block, room = [], longest
        if size > longest:
            blocks += [((path, start, min(start + longest, size)),) for start in range(0, size, longest)]
            continue
        open_block.append((path, 0, size))
        room -= size
    return [*blocks, tuple(open_block)] if open_block else blocks


def _read_values(path: str, name: str, where: tuple[slice, ...]) -> NDArray[Any]:
    """Part of a variable, decoded as the full opening would."""
    with ONE_READER, netCDF4.Dataset(path) as file:
        stored = file.variables[name]
        stored.set_auto_maskandscale(False)
        raw = xr.Variable(stored.dimensions, stored[where], dict(stored.__dict__))
    return np.asarray(decode_cf_variable(name, raw, decode_times=False).values)
