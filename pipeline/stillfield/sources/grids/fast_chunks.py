"""Stored chunks read and inflated outside the HDF5 library, in as many threads as call.

Deflate is undone by libdeflate where the extra ``speed`` is installed, else by the standard library; both free the
interpreter meanwhile. What a chunk holds is checked: neither more nor less than a chunk comes out of it.
"""

from __future__ import annotations

import os
import sys
import zlib
from collections.abc import Callable, Iterator, Sequence
from functools import lru_cache
from itertools import product
from math import prod
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.physics.compiling import is_compiled
from stillfield.sources.grids.chunk_index import ChunkIndex

Slab = Sequence[tuple[int, int]]
#: Unchunked values are read in pieces of about this size. [bytes]
_PIECE_BYTES = 8 * 2**20
_FAULTS = (ValueError, RuntimeError, zlib.error)


def read_chunks(path: str, index: ChunkIndex, slab: Slab) -> Iterator[tuple[NDArray[Any], tuple[int, ...]]]:
    """Read part of a variable chunk by chunk.

    Parameters
    ----------
    path : str
        The file.
    index : ChunkIndex
        Of the variable.
    slab : sequence of (int, int)
        First and end along each axis of the variable.

    Yields
    ------
    values : ndarray
        As stored, in native byte order; axes as in the file. Valid until the next is asked for.
    corner : tuple of int
        Where its first value stands in the variable.

    Raises
    ------
    WeatherError
        If a chunk is broken.
    """
    file = os.open(path, os.O_RDONLY | getattr(os, "O_BINARY", 0))
    try:
        if index.packed or index.chunk != index.shape:
            yield from _chunks(file, path, index, slab)
        else:
            yield from _pieces(file, path, index, slab)
    finally:
        os.close(file)


def can_read_chunks(index: ChunkIndex) -> bool:
    """Whether this system can read a variable chunk by chunk."""
    return hasattr(os, "pread") and (index.packed != "zstd" or _zstd() is not None)


def _chunks(file: int, path: str, index: ChunkIndex, slab: Slab) -> Iterator[tuple[NDArray[Any], tuple[int, ...]]]:
    ranges = [range(low // size, -(-high // size)) for (low, high), size in zip(slab, index.chunk, strict=True)]
    for at in product(*ranges):
        origin = [place * size for place, size in zip(at, index.chunk, strict=True)]
        cut = tuple(slice(max(low - start, 0), min(high - start, size))
                    for (low, high), start, size in zip(slab, origin, index.chunk, strict=True))
        corner = tuple(start + one.start for start, one in zip(origin, cut, strict=True))
        size = int(index.sizes[at])
        if size == 0:
            values: NDArray[Any] = np.full(index.chunk, index.fill, index.dtype.newbyteorder("="))
        else:
            stored = _stored_bytes(file, size, int(index.starts[at]), path)
            values = _unshuffled(_inflated(stored, index, path), index).reshape(index.chunk)
        yield _native(values[cut]), corner


def _pieces(file: int, path: str, index: ChunkIndex, slab: Slab) -> Iterator[tuple[NDArray[Any], tuple[int, ...]]]:
    """Part of a variable that lies in the file as it is: of each plane of its first axis the rows asked for, cut."""
    (first, end), (low, high), *rest = slab
    shape = index.shape[1:]
    row = prod(shape[1:]) * index.dtype.itemsize
    plane, begin = shape[0] * row, int(index.starts.ravel()[0]) + low * row
    step = max(1, _PIECE_BYTES // ((high - low) * row))
    cut = tuple(slice(*one) for one in rest)
    for start in range(first, end, step):
        count = min(step, end - start)
        if high - low == shape[0]:
            stored = _stored_bytes(file, count * plane, begin + start * plane, path)
        else:
            stored = b"".join(_stored_bytes(file, (high - low) * row, begin + i * plane, path)
                              for i in range(start, start + count))
        values = np.frombuffer(stored, index.dtype).reshape(count, high - low, *shape[1:])
        yield _native(values[(slice(None), slice(None), *cut)]), (start, *(one[0] for one in slab[1:]))


def _stored_bytes(file: int, size: int, start: int, path: str) -> bytes:
    stored = os.pread(file, size, start)
    if len(stored) != size:
        raise WeatherError("a part of the weather lies beyond the end of its file", where=path,
                           cure="The file is cut off; get it again.")
    return stored


def _inflated(stored: bytes, index: ChunkIndex, path: str) -> Any:
    """Bytes of a chunk, exactly as many as it must have."""
    wanted = index.chunk_bytes
    try:
        inflated = _inflater(index.packed)(stored, wanted)
    except _FAULTS as fault:
        raise _broken(path, str(fault)) from fault
    if len(inflated) != wanted:
        raise _broken(path, f"{len(inflated)} bytes in place of {wanted}")
    return inflated


def _broken(path: str, found: str) -> WeatherError:
    return WeatherError("a part of the weather cannot be unpacked", where=path, got=found,
                        cure="The file is damaged; get it again.")


def _as_it_is(stored: bytes, wanted: int) -> bytes:
    del wanted
    return stored


@lru_cache(maxsize=1)
def _deflate() -> Callable[[bytes, int], Any]:
    try:
        from deflate import DeflateError, zlib_decompress
    except ImportError:
        return _by_standard_library

    def inflate(stored: bytes, wanted: int) -> Any:
        try:
            return zlib_decompress(stored, wanted)
        except DeflateError as fault:
            raise ValueError(str(fault)) from fault

    return inflate


def _inflater(packed: str) -> Callable[[bytes, int], Any]:
    zstd = _zstd() if packed == "zstd" else None
    return zstd or (_deflate() if packed else _as_it_is)


def _by_standard_library(stored: bytes, wanted: int) -> bytes:
    machine = zlib.decompressobj()
    inflated = machine.decompress(stored, wanted)
    return inflated + machine.decompress(machine.unconsumed_tail, 1) if machine.unconsumed_tail else inflated


@lru_cache(maxsize=1)
def _zstd() -> Callable[[bytes, int], Any] | None:
    try:
        from numcodecs.zstd import decompress
    except ImportError:
        return None

    def inflate(stored: bytes, wanted: int) -> Any:
        if frame_content(stored) != wanted:
            raise ValueError(f"{frame_content(stored)} bytes in place of {wanted}")
        into = np.empty(wanted, np.uint8)
        decompress(stored, into)
        return into

    return inflate


def frame_content(stored: bytes) -> int | None:
    """Size that a zstd frame says it inflates to, None where it does not say (RFC 8878, section 3.1.1.1).

    Examples
    --------
    >>> frame_content(bytes.fromhex("28b52ffd2005"))
    5
    """
    if len(stored) < 6 or stored[:4] != b"\x28\xb5\x2f\xfd":
        return None
    flags = stored[4]
    alone = flags >> 5 & 1
    width = (alone, 2, 4, 8)[flags >> 6]
    start = 5 + (1 - alone) + (0, 1, 2, 4)[flags & 3]
    told = int.from_bytes(stored[start:start + width], "little")
    return told + 256 * (width == 2) if width else None


def _unshuffled(raw: Any, index: ChunkIndex) -> NDArray[Any]:
    if not index.shuffled:
        return np.frombuffer(raw, index.dtype)
    size = index.dtype.itemsize
    flat = np.frombuffer(raw, np.uint8)
    if size in {2, 4} and sys.byteorder == "little" and is_compiled("auto", "reading"):
        from stillfield.sources.settle_compiled import join_bytes

        joined = np.empty(flat.size // size, np.dtype(f"u{size}"))
        join_bytes(flat, joined)
        return joined.view(index.dtype)
    return np.ascontiguousarray(flat.reshape(size, -1).T).reshape(-1).view(index.dtype)


def _native(values: NDArray[Any]) -> NDArray[Any]:
    return values if values.dtype.isnative else values.astype(values.dtype.newbyteorder("="))
