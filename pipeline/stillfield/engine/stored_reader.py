"""Weather that lies plainly in NetCDF files, read past xarray and its graph."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.engine.planning import BlockPlan, Layout
from stillfield.engine.readers import kept_cells, totals_of
from stillfield.sources.grids.stored import StoredWeather
from stillfield.sources.grids.stored_reading import close_files
from stillfield.sources.settle import Breach
from stillfield.stages.read import is_as_stored

Array = NDArray[np.floating[Any]]


@dataclass(frozen=True)
class StoredReader:
    """Reads what `StoredWeather` describes; see `readers.Reader`.

    Attributes
    ----------
    stored : StoredWeather
        Where every value lies.
    first : tuple of int
        Record, row and column of `stored` at which the weather of the run begins.
    size : tuple of int
        Records, rows and columns of the run.
    inside : ndarray of bool, shape (row, column), or None
        Cells of the region; all without it.
    fast : bool
        Whether to inflate chunks past the NetCDF library where that can be done.
    """

    stored: StoredWeather
    first: tuple[int, int, int]
    size: tuple[int, int, int]
    inside: NDArray[np.bool_] | None = None
    fast: bool = True

    def close(self) -> None:
        """Close the files that the NetCDF library holds open."""
        close_files()

    def from_anywhere(self) -> StoredReader:
        """The same with whole paths, for workers in another folder."""
        fields = {
            name: replace(field, variables=tuple(
                replace(variable, files=tuple(replace(file, path=str(Path(file.path).absolute()))
                                              for file in variable.files))
                for variable in field.variables))
            for name, field in self.stored.fields.items()
        }
        return replace(self, stored=replace(self.stored, fields=fields))

    @property
    def where(self) -> str:
        """Names of the files, for messages."""
        return self.stored.where

    @property
    def told(self) -> str | None:
        """How it is read, in words for a plan."""
        return "chunks are inflated past the NetCDF library where they can be" if self.fast \
            else "files are read by the NetCDF library, one thread at a time"

    @property
    def layout(self) -> Layout:
        """Chunks of the first variable, the sunshine."""
        edges = []
        for found, first, size in zip(self.stored.chunk_edges(next(iter(self.stored.fields))), self.first, self.size,
                                      strict=True):
            inner = found[(found > first) & (found < first + size)] - first
            edges.append(np.concatenate([[0], inner, [size]]).astype(np.int64))
        return Layout(*edges)

    def kept(self, block: BlockPlan) -> NDArray[np.bool_]:
        """Which cells of a block belong to the region, shape (row, column)."""
        return kept_cells(self.inside, block)

    def read(
        self, name: str, records: slice, block: BlockPlan, out: Array, at: NDArray[np.int64]
    ) -> Mapping[str, int]:
        """Read some records; see `readers.Reader.read`."""
        asked = [slice(part.start + first, part.stop + first)
                 for part, first in zip((records, block.rows, block.columns), self.first, strict=True)]
        settled = self.stored.read(
            name, asked[0], asked[1], asked[2], out.view(np.float32), at,
            None if self.inside is None else self.kept(block), fast=self.fast,
        )
        return totals_of(settled, self.stored.quantity(name), lambda breach: self._label(asked, breach), self.where)

    def _label(self, asked: Sequence[slice], breach: Breach) -> str:
        width = asked[2].stop - asked[2].start
        row, column = divmod(breach.cell, width)
        time = str(self.stored.time[asked[0].start + breach.record])[:16]
        return (f"time {time}, latitude {self.stored.latitude[asked[1].start + row]:g}, "
                f"longitude {self.stored.longitude[asked[2].start + column]:g}")


def stored_reader(
    weather: xr.Dataset, names: Sequence[str], inside: NDArray[np.bool_] | None, *, fast: bool
) -> StoredReader | None:
    """Reader of weather that is still as its files have it.

    Parameters
    ----------
    weather : xarray.Dataset
        As a source gives it, perhaps cut to a region.
    names : sequence of str
        Variables to read.
    inside : ndarray of bool, shape (row, column), or None
        Cells of the region.
    fast : bool
        Whether to inflate chunks past the NetCDF library where that can be done.

    Returns
    -------
    StoredReader or None
        None where the weather was changed after it was opened, or its cells lie apart in the files.
    """
    stored = weather.encoding.get("stored")
    known = isinstance(stored, StoredWeather) and set(names) <= set(stored.fields)
    if not isinstance(stored, StoredWeather) or not known or not is_as_stored(weather, names):
        return None
    axes = [_first_of(weather.indexes["time"], stored.time)]
    for axis, values in (("latitude", stored.latitude), ("longitude", stored.longitude)):
        axes.append(_first_of(np.atleast_1d(weather[axis].to_numpy()), values))
    if any(found is None for found in axes):
        return None
    kept = replace(stored, fields={name: stored.fields[name] for name in names})
    firsts = (axes[0] or 0, axes[1] or 0, axes[2] or 0)
    sizes = (weather.sizes["time"], *(np.size(weather[axis]) for axis in ("latitude", "longitude")))
    return StoredReader(kept, firsts, (sizes[0], sizes[1], sizes[2]), inside, fast)


def _first_of(part: Any, whole: Any) -> int | None:
    """Place in `whole` from which on it holds `part`; None where it does not."""
    if isinstance(whole, pd.Index):
        first = int(whole.get_indexer(part[:1])[0])
        return first if first >= 0 and whole[first:first + len(part)].equals(part) else None
    turned = (part + 180.0) % 360.0 - 180.0
    near = np.flatnonzero(np.isclose(whole, part[0]) | np.isclose(whole, turned[0]))
    if near.size != 1 or near[0] + part.size > whole.size:
        return None
    same = whole[near[0]:near[0] + part.size]
    return int(near[0]) if np.allclose((same - part + 180.0) % 360.0, 180.0) else None
