"""Readers: weather of any origin brought into the arrays of the engine, held against its bounds and counted."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.engine.planning import BlockPlan, Layout
from stillfield.sources.settle import Breach, Settled, refuse_breach, settle
from stillfield.stages.prepare import space_of
from stillfield.vocabulary import DAY_WEATHER, STEP_HOURS_DAILY, STEP_WEATHER, Quantity

Array = NDArray[np.floating[Any]]


class Reader(Protocol):
    """Where weather comes from; may be sent to another process."""

    def close(self) -> None:
        """Let go of what is held open."""
        ...

    def from_anywhere(self) -> Reader:
        """The same with whole paths, for workers in another folder."""
        ...

    @property
    def where(self) -> str:
        """Names of the files, for messages."""
        ...

    @property
    def layout(self) -> Layout:
        """How the weather lies in store."""
        ...

    @property
    def told(self) -> str | None:
        """How it is read, in words for a plan."""
        ...

    def kept(self, block: BlockPlan) -> NDArray[np.bool_]:
        """Which cells of a block belong to the region, shape (row, column)."""
        ...

    def read(
        self, name: str, records: slice, block: BlockPlan, out: Array, at: NDArray[np.int64]
    ) -> Mapping[str, int]:
        """Read some records of one variable.

        Parameters
        ----------
        name : str
            Vocabulary name.
        records : slice
            Records, counted along the time axis of the weather.
        block : BlockPlan
            Cells.
        out : ndarray of float32, shape (row of the array, cell)
            Where values go: record i of column c into row ``at[c] + i``; rows that do not exist are left out.
        at : ndarray of int, shape (column,)
            Row of the first record.

        Returns
        -------
        mapping of str to int
            Number of values that were missing, clipped, or taken out.

        Raises
        ------
        WeatherError
            If the file cannot be read, or a value cannot be true.
        """
        ...


def quantities(step_hours: float) -> Mapping[str, Quantity]:
    """Quantities of weather with this step."""
    return DAY_WEATHER if step_hours >= STEP_HOURS_DAILY else STEP_WEATHER


def kept_cells(inside: NDArray[np.bool_] | None, block: BlockPlan) -> NDArray[np.bool_]:
    """Which cells of a block belong to the region.

    Parameters
    ----------
    inside : ndarray of bool, shape (row, column), or None
        Cells of the region; all without it.
    block : BlockPlan
        The block.

    Returns
    -------
    ndarray of bool, shape (row, column) of the block
    """
    if inside is None:
        return np.ones((block.rows.stop - block.rows.start, block.columns.stop - block.columns.start), np.bool_)
    return inside[block.rows, block.columns]


@dataclass(frozen=True)
class LazyReader:
    """Weather behind xarray, in memory or computed a window at a time.

    Attributes
    ----------
    weather : xarray.Dataset
        Variables to read, dimensions time and space.
    inside : ndarray of bool, shape (row, column), or None
        Cells of the region; all without it.
    """

    weather: xr.Dataset
    inside: NDArray[np.bool_] | None = None

    def close(self) -> None:
        """Nothing is held open."""

    def from_anywhere(self) -> LazyReader:
        """The same; a graph keeps the paths that it was made with."""
        return self

    @property
    def where(self) -> str:
        """Names of the files, for messages."""
        return str(self.weather.attrs.get("files", "weather"))

    @property
    def told(self) -> str | None:
        """How it is read, in words for a plan."""
        lazy = any(values.chunks is not None for values in self.weather.data_vars.values())
        return "computed by dask, window by window" if lazy else None

    @property
    def layout(self) -> Layout:
        """Chunks of the variable with the most of them; in memory every cell is one."""
        edges = []
        for dim in ("time", *(["latitude", "longitude"] if "site" not in self.weather.dims else ["site"])):
            chunked = [values.chunksizes[dim] for values in self.weather.data_vars.values() if dim in values.chunksizes]
            sizes = max(chunked, key=len) if chunked else (1,) * self.weather.sizes[dim]
            edges.append(np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64))
        return Layout(edges[0], edges[1] if len(edges) == 3 else np.array([0, 1]), edges[-1])

    def kept(self, block: BlockPlan) -> NDArray[np.bool_]:
        """Which cells of a block belong to the region, shape (row, column)."""
        return kept_cells(self.inside, block)

    def read(
        self, name: str, records: slice, block: BlockPlan, out: Array, at: NDArray[np.int64]
    ) -> Mapping[str, int]:
        """Compute some records; see `Reader.read`."""
        space = space_of(self.weather)
        cut = {"site": block.columns} if space == ("site",) else {"latitude": block.rows, "longitude": block.columns}
        part = self.weather[name].transpose("time", *space).isel({"time": records, **cut})
        data = part.data
        values = np.asarray(data.compute(scheduler="synchronous") if hasattr(data, "compute") else data)
        values = values.reshape(values.shape[0], block.rows.stop - block.rows.start, -1)
        quantity = quantities(float(self.weather.attrs["step_hours"]))[name]
        settled = settle(values, quantity, out, at, None if self.inside is None else self.kept(block))
        return totals_of(settled, quantity, lambda breach: self._label(part, breach), self.where)

    def _label(self, part: xr.DataArray, breach: Breach) -> str:
        spot = np.unravel_index(breach.cell, part.shape[1:])
        return label(part, (breach.record, *(int(i) for i in spot)))


def label(part: xr.DataArray, index: tuple[int, ...]) -> str:
    """Time and place of one value, in words."""
    words = []
    for dim, at in zip(part.dims, index, strict=True):
        mark = part[dim].values[at] if dim in part.coords else at
        said = str(mark)[:16] if dim == "time" else f"{mark:g}" if isinstance(mark, np.floating) else str(mark)
        words.append(f"{dim} {said}")
    return ", ".join(words)


def totals_of(settled: Settled, quantity: Quantity, label_of: Any, where: str) -> dict[str, int]:
    """Counts of all cells together; a value that cannot be true is refused.

    Raises
    ------
    WeatherError
        With the first of them.
    """
    if settled.breach is not None:
        refuse_breach(settled.breach, quantity, where=f"{where}, {label_of(settled.breach)}")
    return {kind: int(counts.sum()) for kind, counts in settled.counts.items()}
