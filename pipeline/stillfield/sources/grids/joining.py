"""Pieces of one quantity from several files joined along time: sorted, alike, each record once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.sources.grids.grid_axes import snapped
from stillfield.sources.grids.netcdf_pieces import Piece
from stillfield.sources.settle import IMPOSSIBLY_LARGE, SENTINELS, TAKEN_OUT

#: Numbers of a repeated record are the same when they agree to this share: single precision. [1]
_SAME = 1e-6


@dataclass(frozen=True)
class Series:
    """One role over all files, stamps as in the files.

    Attributes
    ----------
    values : DataArray
        Dims time and latitude, longitude or site; times rise and come once; lazy.
    counts : dict
        Counts by kind (`tally.SENTENCES`), by cell.
    notes : list of str
        Sentences for the conventions.
    """

    values: xr.DataArray
    counts: dict[str, xr.DataArray | int] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)


def join_pieces(pieces: Sequence[Piece]) -> Series:
    """Join pieces of one role along time.

    A record that comes twice counts once when both copies hold the same numbers; where one copy lacks a number
    the other's is taken. Copies that contradict each other are refused when they are read.

    Parameters
    ----------
    pieces : sequence of Piece
        Of one role, any order, times in any order.

    Returns
    -------
    Series

    Raises
    ------
    WeatherError
        If the pieces differ in unit, kind of stamp or cells.
    """
    ordered = sorted(pieces, key=lambda piece: piece.values.indexes["time"].min())
    first = ordered[0]
    parts = [first.values, *(snapped(other.values, first.values) for other in ordered[1:])]
    for other, values in zip(ordered[1:], parts[1:], strict=True):
        _check_alike(first, other, values)
    # Every file has its own valid range, as it has its own packing.
    masked = _end_to_end([_masked(part, piece.values.attrs["valid_range"])
                          for part, piece in zip(parts, ordered, strict=True)])
    notes = []
    if not masked.indexes["time"].is_monotonic_increasing:
        if any(not part.indexes["time"].is_monotonic_increasing for part in parts):
            notes.append(f"Records of {first.found.name} do not stand in the order of time; they were sorted.")
        masked = masked.isel(time=np.argsort(masked.indexes["time"].to_numpy(), kind="stable"))
    counts: dict[str, xr.DataArray | int] = {}
    if masked.indexes["time"].has_duplicates:
        masked, repeated = _each_once(masked, ordered)
        counts["repeated"] = repeated
        notes.append(f"{repeated} records of {first.found.name} come twice and count once.")
    return Series(masked, counts, notes)


def _end_to_end(parts: Sequence[xr.DataArray]) -> xr.DataArray:
    if len(parts) == 1:
        return parts[0]
    return xr.concat(parts, dim="time", join="exact", combine_attrs="override", coords="minimal", compat="override")


def _each_once(values: xr.DataArray, pieces: Sequence[Piece]) -> tuple[xr.DataArray, int]:
    """Merge copies of a record; they are compared when they are read."""
    index = values.indexes["time"]
    repeated = 0
    tolerance = max(float(piece.values.attrs["resolution"]) for piece in pieces)
    while index.has_duplicates:  # each round takes one more copy away
        again = np.flatnonzero(index[1:] == index[:-1]) + 1
        again = again[np.concatenate([[True], np.diff(again) > 1])]
        repeated += again.size
        alone = np.setdiff1d(np.arange(len(index)), np.concatenate([again - 1, again]))
        one, other = values.isel(time=again - 1), values.isel(time=again)
        names = [", ".join(dict.fromkeys(_holders(pieces, stamp))) for stamp in index[again]]
        told = np.array([f"{str(stamp)[:16]} ({name})" for stamp, name in zip(index[again], names, strict=True)])
        merged = one.copy(data=_merged(one, other, told, tolerance))
        values = xr.concat([values.isel(time=alone), merged], dim="time", join="exact", coords="minimal",
                           compat="override", combine_attrs="override")
        values = values.isel(time=np.argsort(values.indexes["time"].to_numpy(), kind="stable"))
        index = values.indexes["time"]
    return values, repeated


def _holders(pieces: Sequence[Piece], stamp: Any) -> list[str]:
    return [piece.path for piece in pieces if stamp in piece.values.indexes["time"]]


def _merged(one: xr.DataArray, other: xr.DataArray, told: NDArray[Any], tolerance: float) -> Any:
    import dask.array as da

    first, second = da.asarray(one.data), da.asarray(other.data)
    second = second.rechunk(first.chunks)
    labels = da.from_array(told.reshape(-1, *[1] * (first.ndim - 1)), chunks=(first.chunks[0], *[1] * (first.ndim - 1)))
    return da.map_blocks(partial(_same_block, tolerance=tolerance), first, second, labels, dtype=first.dtype,
                         meta=np.empty((0,) * first.ndim, first.dtype))


def _same_block(first: NDArray[Any], second: NDArray[Any], told: NDArray[Any], *, tolerance: float) -> NDArray[Any]:
    with np.errstate(invalid="ignore"):
        apart = np.isfinite(first) & np.isfinite(second)
        apart &= np.abs(first - second) > tolerance + _SAME * np.maximum(np.abs(first), np.abs(second))
    if apart.any():
        at = np.unravel_index(int(np.argmax(apart)), apart.shape)
        raise WeatherError(
            "a time comes twice with different values", where=str(told[at[0]].ravel()[0]),
            got=f"{float(first[at]):g} and {float(second[at]):g}; {int(apart.sum())} such values",
            cure="Leave out one of the overlapping files.",
        )
    return np.where(np.isfinite(first), first, np.where(np.isfinite(second), second, np.fmax(first, second)))


def _masked(values: xr.DataArray, valid: tuple[float, float]) -> xr.DataArray:
    """Values as floats; undeclared sentinels and values outside the stated range are marked `TAKEN_OUT`."""
    import dask.array as da

    kind = values.dtype if np.issubdtype(values.dtype, np.floating) else np.dtype(np.float64)
    data = da.asarray(values.data)
    return values.copy(data=da.map_blocks(partial(_mask_block, valid=valid), data, dtype=kind,
                                          meta=np.empty((0,) * data.ndim, kind)))


def _mask_block(block: NDArray[Any], *, valid: tuple[float, float]) -> NDArray[Any]:
    block = block if np.issubdtype(block.dtype, np.floating) else block.astype(np.float64)
    with np.errstate(invalid="ignore"):
        bad = np.abs(block) >= IMPOSSIBLY_LARGE
        for sentinel in SENTINELS:
            bad |= block == sentinel
        if np.isfinite(valid).any():
            bad |= (block < valid[0]) | (block > valid[1])
    return np.where(bad, block.dtype.type(TAKEN_OUT), block) if bad.any() else block


def _check_alike(first: Piece, other: Piece, values: xr.DataArray) -> None:
    where = f"{first.path} and {other.path}"
    if first.found.units != other.found.units or first.found.name != other.found.name:
        raise WeatherError(
            f"files disagree about {first.found.role}", where=where,
            got=f"'{first.found.name}' in '{first.found.units}' and '{other.found.name}' in '{other.found.units}'",
            wanted="one variable in one unit", cure="Run them apart, or choose the variable under `variables`.",
        )
    calendars = [str(piece.values["time"].dt.calendar) for piece in (first, other)]
    if calendars[0] != calendars[1]:
        raise WeatherError("files have different calendars", where=where, got=" and ".join(calendars),
                           wanted="one calendar", cure="Run them apart.")
    if first.placed != other.placed:
        raise WeatherError("only some of the files have time bounds", where=where, cure="Make them alike.")
    for axis in set(first.values.dims) - {"time"}:
        if not first.values.indexes[axis].equals(values.indexes[axis]):
            raise WeatherError(f"files lie on different cells ({axis})", where=where,
                               got=f"{first.values.sizes[axis]} and {values.sizes[axis]} values",
                               cure="Cut or regrid them to one grid first.")
