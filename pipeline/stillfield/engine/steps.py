"""A window of weather on local days: read into place column by column, gaps filled, days handed out.

The array of a variable has shape (row, cell), its rows counting the steps of local days. Each column of a grid is
shifted to its own clock while it is read, so nothing is copied to align it. Some rows of the window before stay:
the day that is not yet whole, and what the filling of gaps has to see.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.engine.planning import BlockPlan
from stillfield.engine.readers import Reader
from stillfield.sources.gaps import SMOOTH, SUNSHINE, bridge, dark
from stillfield.stages.prepare import LocalDays

Array = NDArray[np.floating[Any]]
Counts = dict[str, dict[str, int]]


@dataclass
class Steps:
    """Weather of one block on local days, a window at a time.

    Attributes
    ----------
    reader : Reader
        Where the weather comes from.
    names : tuple of str
        Variables.
    local : LocalDays
        How the records fall into days.
    block : BlockPlan
        Cells and windows.
    fill_steps : int
        Longest gap in temperature, humidity or wind that is bridged.
    counts : dict
        What was found and changed: variable to kind to number.
    """

    reader: Reader
    names: tuple[str, ...]
    local: LocalDays
    block: BlockPlan
    fill_steps: int
    counts: Counts = field(default_factory=dict)
    _held: dict[str, Array] = field(default_factory=dict, repr=False)
    _first: int = 0
    _top: int = 0
    _given: int = 0
    _doubtful: set[str] = field(default_factory=set, repr=False)

    def __post_init__(self) -> None:
        start = self.local.start[self.block.columns]
        self._start = start
        spread = int(start.max() - start.min())
        per_day = self.local.steps_per_day
        self._ahead = self.fill_steps + 1 if per_day > 1 else 0
        self._behind = per_day * -(-(self.fill_steps + 1) // per_day) if per_day > 1 else 0
        longest = max(self._slots(window)[1] - self._slots(window)[0] for window in self.block.windows)
        rows = self._behind + (per_day - 1 + self._ahead if per_day > 1 else 0) + spread + longest
        # The first day may begin before the record, and its last columns end after it.
        rows += max(0, -int(start.min()), int(start.max())) if per_day > 1 else 0
        rows = min(rows, self._behind + self.local.days * per_day + spread + per_day)
        self._held = {name: np.full((rows, self.block.cells), np.nan, np.float32) for name in self.names}
        begin = self._slots(self.block.windows[0])[0] - int(start.min())
        self._given = max(0, -(-begin // per_day)) if self.block.windows[0].start else 0
        self._first = self._given * per_day - self._behind

    def _slots(self, records: slice) -> tuple[int, int]:
        return int(self.local.slots[records.start]), int(self.local.slots[records.stop - 1]) + 1

    def take(self, window: slice, *, last: bool) -> tuple[int, Mapping[str, Array]]:
        """Read a window and hand out the days that are whole now.

        Parameters
        ----------
        window : slice
            Records.
        last : bool
            Whether none come after it.

        Returns
        -------
        first_day : int
            Number of the first day handed out.
        weather : mapping of str to ndarray, shape (day * steps_per_day, cell)
            Views that the next call overwrites.

        Raises
        ------
        WeatherError
            If a value cannot be true.
        """
        self._drop_given()
        end = self._slots(window)[1]
        per_day = self.local.steps_per_day
        for run in self._runs(window):
            self._read(run)
        self._top = min(end - int(self._start.min()) - self._first, next(iter(self._held.values())).shape[0])
        whole = self.local.days * per_day if last else min(end - int(self._start.max()), self.local.days * per_day)
        if last:
            self._blank_after(end)
        days = self.local.days if last else max((whole - self._ahead) // per_day, self._given)
        if self.local.steps_per_day > 1 and self._doubtful:
            self._fill(whole)
        first_day = self._given
        rows = slice(first_day * per_day - self._first, days * per_day - self._first)
        self._given = days
        return first_day, {name: held[rows] for name, held in self._held.items()}

    def _drop_given(self) -> None:
        """Move what is still needed to the front."""
        drop = self._given * self.local.steps_per_day - self._behind - self._first
        if drop > 0:
            for held in self._held.values():
                held[:max(self._top - drop, 0)] = held[drop:max(self._top, drop)].copy()
            self._first += drop

    def _runs(self, window: slice) -> list[slice]:
        """Records of a window that follow each other without a gap; slots between them are made empty."""
        slots = self.local.slots[window]
        cuts = np.flatnonzero(np.diff(slots) != 1) + 1
        if cuts.size or (window.start and slots[0] != self.local.slots[window.start - 1] + 1):
            self._doubtful.update(self.names)
            before = int(self.local.slots[window.start - 1]) + 1 if window.start else int(slots[0])
            for column, start in enumerate(self._start):
                rows = slice(max(before - start - self._first, 0), int(slots[-1]) + 1 - start - self._first)
                for held in self._held.values():
                    self._by_column(held)[rows, :, column] = np.nan
        edges = [window.start, *(window.start + cuts).tolist(), window.stop]
        return [slice(*pair) for pair in pairwise(edges)]

    def _by_column(self, held: Array) -> Array:
        return held.reshape(held.shape[0], -1, self._start.size)

    def _read(self, records: slice) -> None:
        at = self.local.slots[records.start] - self._start - self._first
        for name, held in self._held.items():
            settled = self.reader.read(name, records, self.block, held, at)
            if self._counted(records):
                mine = self.counts.setdefault(name, {})
                for kind, number in settled.items():
                    mine[kind] = mine.get(kind, 0) + number
            if settled.get("missing"):
                self._doubtful.add(name)

    def _counted(self, records: slice) -> bool:
        """Whether records are this block's to count, and not those of the block before or after it in time."""
        if self.block.span is None:
            return True
        first, end = (day * self.local.steps_per_day for day in self.block.span)
        slot = int(self.local.slots[records.start]) - int(self._start.min())
        return (slot >= first or self.block.span[0] == 0) and (slot < end or self.block.span[1] == self.local.days)

    def _blank_after(self, end: int) -> None:
        """Empty the rows after the end of the record, which an earlier window has left full."""
        stop = self.local.days * self.local.steps_per_day - self._first
        edges = [0, *(np.flatnonzero(np.diff(self._start)) + 1).tolist(), self._start.size]
        for columns in (slice(*pair) for pair in pairwise(edges)):
            begin = max(end - int(self._start[columns.start]) - self._first, 0)
            for held in self._held.values() if begin < stop else ():
                self._by_column(held)[begin:stop, :, columns] = np.nan

    def _fill(self, whole: int) -> None:
        """Bridge short gaps of smooth weather, and set missing sunshine of the night to 0, in rows not yet given."""
        rows = slice(self._given * self.local.steps_per_day - self._behind - self._first, whole - self._first)
        for name in self._doubtful & {*SMOOTH, *SUNSHINE}:
            held = self._held[name][rows]
            gaps = np.isnan(held)
            cells = np.flatnonzero(gaps.any(axis=0))
            if cells.size == 0:
                continue
            before = gaps[:, cells]
            if name in SMOOTH:
                filled = bridge(held[:, cells], self.fill_steps) if self.fill_steps else held[:, cells]
                kind = "filled"
            else:
                filled = np.where(before & self._night(rows, cells), np.float32(0.0), held[:, cells])
                kind = "night"
            held[:, cells] = filled
            mine = self.counts.setdefault(name, {})
            mine[kind] = mine.get(kind, 0) + int(np.count_nonzero(before) - np.count_nonzero(np.isnan(filled)))

    def _night(self, rows: slice, cells: NDArray[np.intp]) -> NDArray[np.bool_]:
        """Steps of some cells that lie in the record and in the night."""
        local, per_day = self.local, self.local.steps_per_day
        step = (np.arange(rows.start, rows.stop) + self._first)[:, None]
        slot = step + self._start[cells % self._start.size]
        inside = (slot >= 0) & (slot <= local.slots[-1])
        day = local.day_of_year[np.clip(step // per_day, 0, local.days - 1)]
        numbers = cell_numbers(self.block, self.local.start.size)[cells]
        hour = (step % per_day + 0.5) * local.step_hours + local.clock_to_solar_hours[numbers]
        return np.asarray(inside & dark(hour, day, local.latitude[numbers], step_hours=local.step_hours))


def cell_numbers(block: BlockPlan, columns: int) -> NDArray[np.int64]:
    """Numbers, among all cells of the region, of the cells of a block.

    Parameters
    ----------
    block : BlockPlan
        The block.
    columns : int
        Columns of the region.

    Returns
    -------
    ndarray of int, shape (cell,)

    Examples
    --------
    >>> cell_numbers(BlockPlan(slice(1, 3), slice(0, 2), (slice(0, 1),)), 5).tolist()
    [5, 6, 10, 11]
    """
    rows = np.arange(block.rows.start, block.rows.stop)[:, None] * columns
    return np.asarray((rows + np.arange(block.columns.start, block.columns.stop)).ravel(), dtype=np.int64)
