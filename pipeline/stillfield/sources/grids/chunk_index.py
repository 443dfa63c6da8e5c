"""Where the chunks of a variable lie in an HDF5 file, so that they can be read without the HDF5 library.

The library holds one lock for everything it does. What is looked up here once under that lock lets threads read
and inflate chunks side by side. Whatever is not plainly stored has no index, and the library reads it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import prod
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from xarray.backends.locks import HDF5_LOCK, NETCDFC_LOCK, combine_locks

from stillfield.errors import WeatherError

#: The lock under which xarray reads NetCDF: neither library below it bears two threads at once.
ONE_READER = combine_locks([NETCDFC_LOCK, HDF5_LOCK])
#: Registered numbers of HDF5 filters.
_SHUFFLE, _DEFLATE, _ZSTD = 2, 1, 32015
_PIPELINES = {(): "", (_DEFLATE,): "deflate", (_SHUFFLE, _DEFLATE): "deflate", (_ZSTD,): "zstd",
              (_SHUFFLE, _ZSTD): "zstd"}
#: A chunk is held whole; larger ones are left to the library. [bytes]
_LARGEST_CHUNK = 1 << 30


@dataclass(frozen=True)
class ChunkIndex:
    """How one variable is stored, and where.

    Attributes
    ----------
    dtype : dtype
        As stored, with its byte order.
    shape, chunk : tuple of int
        Of the variable and of its chunks; an unchunked variable is one chunk.
    packed : {'', 'deflate', 'zstd'}
        Compression.
    shuffled : bool
        Whether the bytes of each chunk are shuffled.
    starts, sizes : ndarray of int, shape of the grid of chunks
        Place in the file and stored size; size 0 where a chunk was never written. [bytes]
    fill : scalar
        What chunks that were never written hold.
    """

    dtype: np.dtype[Any]
    shape: tuple[int, ...]
    chunk: tuple[int, ...]
    packed: str
    shuffled: bool
    starts: NDArray[np.int64]
    sizes: NDArray[np.int64]
    fill: Any

    @property
    def chunk_bytes(self) -> int:
        """Size of an inflated chunk."""
        return self.dtype.itemsize * prod(self.chunk)


def chunk_index(path: str, name: str) -> ChunkIndex | None:
    """Look up how a variable is stored; remembered until the file changes.

    Parameters
    ----------
    path : str
        A NetCDF file.
    name : str
        A variable of its root group.

    Returns
    -------
    ChunkIndex or None
        None where only the library can read it: not HDF5, other filters, chunks that skipped a filter, values
        in other files, or no h5py.

    Raises
    ------
    WeatherError
        If a chunk lies outside the file.
    """
    about = Path(path).stat()
    return _looked_up(path, name, about.st_size, about.st_mtime_ns)


@lru_cache(maxsize=16384)
def _looked_up(path: str, name: str, size: int, changed: int) -> ChunkIndex | None:
    del changed
    try:
        import h5py
    except ImportError:
        return None
    try:
        with HDF5_LOCK, h5py.File(path, "r", locking=False) as file:
            found = file.get(name)
            index = _indexed(found) if isinstance(found, h5py.Dataset) else None
    except (OSError, KeyError, ValueError, RuntimeError):  # not HDF5, or unusual: the library says what it is
        return None
    if index is not None and index.starts.size and int((index.starts + index.sizes).max()) > size:
        raise WeatherError("a part of the weather lies beyond the end of its file", where=f"{name} in {path}",
                           cure="The file is cut off; get it again.")
    return index


def _indexed(variable: Any) -> ChunkIndex | None:
    plan = variable.id.get_create_plist()
    filters = tuple(plan.get_filter(i)[0] for i in range(plan.get_nfilters()))
    plain = variable.dtype.kind in "iuf" and variable.shape and all(variable.shape)
    if not plain or filters not in _PIPELINES or variable.is_virtual or plan.get_external_count():
        return None
    stored = variable.dtype, tuple(variable.shape)
    if variable.chunks is None:
        start = variable.id.get_offset()
        if start is None:  # within the header, or never written
            return None
        ones = (1,) * len(variable.shape)
        size = prod(variable.shape) * variable.dtype.itemsize
        return ChunkIndex(*stored, tuple(variable.shape), "", False, np.full(ones, start), np.full(ones, size),
                          variable.fillvalue)
    places = _placed(variable)
    index = None if places is None else ChunkIndex(
        *stored, tuple(variable.chunks), _PIPELINES[filters], _SHUFFLE in filters and variable.dtype.itemsize > 1,
        *places, variable.fillvalue)
    return index if index is None or index.chunk_bytes <= _LARGEST_CHUNK else None


def _placed(variable: Any) -> tuple[NDArray[np.int64], NDArray[np.int64]] | None:
    """Place and size of every chunk; None where one of them skipped a filter."""
    chunks: Sequence[int] = variable.chunks
    grid = tuple(-(-size // chunk) for size, chunk in zip(variable.shape, chunks, strict=True))
    starts, sizes = np.zeros(grid, np.int64), np.zeros(grid, np.int64)
    skipped = []

    def note(chunk: Any) -> None:
        at = tuple(place // size for place, size in zip(chunk.chunk_offset, chunks, strict=True))
        if chunk.filter_mask or any(one >= size for one, size in zip(at, grid, strict=True)):
            skipped.append(at)
        else:
            starts[at], sizes[at] = chunk.byte_offset, chunk.size

    variable.id.chunk_iter(note)
    return None if skipped else (starts, sizes)
