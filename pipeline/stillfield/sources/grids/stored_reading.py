"""Plainly stored weather read into a buffer: chunk by chunk past the NetCDF library, or slices through it."""

from __future__ import annotations

from collections import OrderedDict
from collections.abc import Iterator
from contextlib import contextmanager
from math import prod
from typing import Any, NamedTuple

import netCDF4
import numpy as np
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.sources.grids.chunk_index import ONE_READER, chunk_index
from stillfield.sources.grids.fast_chunks import Slab, can_read_chunks, read_chunks
from stillfield.sources.grids.stored import Coding, Span, StoredField, StoredFile, StoredVariable
from stillfield.sources.settle import IMPOSSIBLY_LARGE, SENTINELS, TAKEN_OUT, Numbers, Settled, Sink, bounded, settle
from stillfield.vocabulary import Quantity

#: The library is asked for about this much at once. [bytes]
_SLICE_BYTES = 16 * 2**20
_AXES = ("time", "latitude", "longitude")


class Window(NamedTuple):
    """Places on the axes of the weather."""

    records: range
    rows: range
    columns: range


def read_field(
    field: StoredField, quantity: Quantity, window: Window, out: NDArray[np.float32], at: NDArray[Any],
    kept: NDArray[np.bool_] | None, *, fast: bool,
) -> Settled:
    """Read part of a field; see `stored.StoredWeather.read`."""
    if field.combination == "plain":
        factor, shift = field.units[0]
        sink = Sink(out, at, len(window.rows), kept)
        read_variable(field.variables[0], window, sink, bounded(Numbers(factor=factor, shift=shift), quantity),
                      fast=fast)
        return sink.settled()
    if field.combination == "difference":
        values = _steps_of(field, window, fast=fast)
    else:
        one, other = (_in_memory(field, i, window, fast=fast) for i in range(2))
        values = (one**2 + other**2) ** 0.5 if field.combination == "speed" else 0.5 * (one + other)
    if field.factor != 1.0:
        values *= np.float32(field.factor)
    return settle(values, quantity, out, at, kept)


def _in_memory(field: StoredField, which: int, window: Window, *, fast: bool) -> NDArray[np.float32]:
    """Values of one variable, shape (records, rows, columns); what was taken out is marked, not yet counted."""
    shape = tuple(len(part) for part in window)
    values = np.empty((shape[0], shape[1] * shape[2]), np.float32)
    factor, shift = field.units[which]
    sink = Sink(values, np.zeros(shape[2], np.int64), shape[1])
    read_variable(field.variables[which], window, sink, Numbers(factor=factor, shift=shift, instead=TAKEN_OUT),
                  fast=fast)
    return values.reshape(shape)


def _steps_of(field: StoredField, window: Window, *, fast: bool) -> NDArray[np.float32]:
    """Energy of each step from the energy since 00 UTC, as `sunshine.differences` has it."""
    first = window.records.start
    before = min(first, 1)
    grown = _in_memory(field, 0, window._replace(records=range(first - before, window.records.stop)), fast=fast)
    values = grown[before:].copy()
    with np.errstate(invalid="ignore"):
        values[1 - before:] -= grown[:-1]
    for i, record in enumerate(window.records):
        if field.opens[record]:
            values[i] = grown[i + before]
        elif not field.follows[record]:
            values[i] = np.nan
    return values


def read_variable(
    variable: StoredVariable, window: Window, sink: Sink, numbers: Numbers, *, fast: bool
) -> None:
    """Read part of a variable into a sink; records that no file holds are missing."""
    reached = window.records.start
    for file, records in variable.holding(window.records.start, window.records.stop):
        sink.lack(reached - window.records.start, records.at - reached)
        reached = records.at + records.count
        told = _told(numbers, file.coding)
        kind = np.dtype(file.coding.computed).type
        for rows in _parts(variable.rows, window.rows):
            for columns in _parts(variable.columns, window.columns):
                spans = dict(zip(_AXES, (records, rows, columns), strict=True))
                slab = [spans[axis].extent if axis else (0, 1) for axis in variable.axes]
                for values, corner in _blocks(file, variable, slab, fast=fast):
                    block, place = _turned(values, corner, variable.axes, spans)
                    start = [one - part.start for one, part in zip(place, window, strict=True)]
                    sink.take(block, start[0], (start[1], start[2]), told, absent=file.coding.absent, kind=kind)
    sink.lack(reached - window.records.start, window.records.stop - reached)


def _parts(spans: tuple[Span, ...], asked: range) -> Iterator[Span]:
    for span in spans:
        part = span.within(asked.start, asked.stop)
        if part is not None:
            yield part


def _told(numbers: Numbers, coding: Coding) -> Numbers:
    kind = np.dtype(coding.computed).type
    largest = float(np.nextafter(kind(IMPOSSIBLY_LARGE), kind(0.0)))
    return numbers._replace(
        scale=coding.scale, offset=coding.offset, sentinel=SENTINELS[0], other=SENTINELS[1],
        lowest=max(coding.valid[0], -largest), highest=min(coding.valid[1], largest),
    )


def _turned(
    values: NDArray[Any], corner: tuple[int, ...], axes: tuple[str, ...], spans: dict[str, Span]
) -> tuple[NDArray[Any], list[int]]:
    """Block as (time, latitude, longitude) in the order of the weather, and its place there."""
    spare = tuple(i for i, axis in enumerate(axes) if not axis)
    order = [[axis for axis in axes if axis].index(axis) for axis in _AXES]
    block = values.squeeze(spare).transpose(order) if spare else values.transpose(order)
    place, turns = [], []
    for axis, size in zip(_AXES, block.shape, strict=True):
        span, low = spans[axis], corner[axes.index(axis)]
        if span.step == 1:
            place.append(span.at + low - span.start)
        else:
            place.append(span.at + span.start - (low + size - 1))
        turns.append(slice(None, None, span.step))
    return block[tuple(turns)], place


def _blocks(
    file: StoredFile, variable: StoredVariable, slab: Slab, *, fast: bool
) -> Iterator[tuple[NDArray[Any], tuple[int, ...]]]:
    index = chunk_index(file.path, variable.name) if fast else None
    known = index is not None and can_read_chunks(index) and len(index.shape) == len(variable.axes)
    if index is not None and known and index.dtype.newbyteorder("=") == np.dtype(file.coding.dtype):
        if any(high > size for (_, high), size in zip(slab, index.shape, strict=True)):
            raise _changed(file.path, variable.name)
        return read_chunks(file.path, index, slab)
    return _through_library(file, variable, slab)


def _changed(path: str, name: str) -> WeatherError:
    return WeatherError("a file has changed since it was opened", where=f"{name} in {path}",
                        cure="Let nothing write to the weather while it is read.")


def _through_library(
    file: StoredFile, variable: StoredVariable, slab: Slab
) -> Iterator[tuple[NDArray[Any], tuple[int, ...]]]:
    """Slices of whole chunks through the NetCDF library, which one thread at a time may use."""
    where = f"{variable.name} in {file.path}"
    for cut in _slices(variable, slab, np.dtype(file.coding.dtype).itemsize):
        with ONE_READER, _in_our_words(where):
            stored = _opened(file.path).variables[variable.name]
            if variable.chunk is not None:
                stored.set_var_chunk_cache(*_NO_CACHE)  # no chunk is asked for twice
            values = np.asarray(stored[tuple(slice(low, high) for low, high in cut)])
        if values.shape != tuple(high - low for low, high in cut) or values.dtype.kind not in "iuf":
            raise _changed(file.path, variable.name)
        yield np.ascontiguousarray(values, np.dtype(file.coding.dtype)), tuple(low for low, _ in cut)


#: Files that the library holds open, the last used last: opening one costs as much as inflating some chunks of it.
_OPEN: OrderedDict[str, netCDF4.Dataset] = OrderedDict()
_MOST_OPEN = 4
#: Size in bytes, slots and preemption of the library's own cache of chunks.
_NO_CACHE = (0, 1, 0.75)


def _opened(path: str) -> netCDF4.Dataset:
    """An open file; the caller holds the lock."""
    if path not in _OPEN:
        while len(_OPEN) >= _MOST_OPEN:
            _OPEN.popitem(last=False)[1].close()
        opened = netCDF4.Dataset(path)
        opened.set_auto_maskandscale(False)
        _OPEN[path] = opened
    _OPEN.move_to_end(path)
    return _OPEN[path]


def close_files() -> None:
    """Close what the library holds open; whoever still reads opens it again."""
    with ONE_READER:
        while _OPEN:
            _OPEN.popitem()[1].close()


@contextmanager
def _in_our_words(where: str) -> Iterator[None]:
    try:
        yield
    except (OSError, RuntimeError, KeyError, IndexError) as fault:  # the library's own words for damage
        raise WeatherError("the file cannot be read", where=where, got=" ".join(str(fault).split())[:160],
                           cure="It is damaged or was changed; get it again.") from fault


def _slices(variable: StoredVariable, slab: Slab, itemsize: int) -> Iterator[list[tuple[int, int]]]:
    """The slab in parts of whole chunks, cut along its first axes only as far as needed."""
    chunk = variable.chunk or tuple(1 for _ in slab)
    for axis, (low, high) in enumerate(slab):
        rest = prod(end - start for i, (start, end) in enumerate(slab) if i != axis) * itemsize
        step = max(1, _SLICE_BYTES // max(rest, 1) // chunk[axis]) * chunk[axis]
        if low // chunk[axis] < (high - 1) // chunk[axis]:
            first = low - low % chunk[axis]
            for start in range(first, high, step):
                yield [*slab[:axis], (max(start, low), min(start + step, high)), *slab[axis + 1:]]
            return
    yield list(slab)
