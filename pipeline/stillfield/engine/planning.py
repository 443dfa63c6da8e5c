"""How a region is cut into blocks of cells and windows of time, from how the weather is stored and the memory there is.

Results do not depend on the cut: every cell is worked strictly day after day. Only time and memory do.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise, product
from math import ceil

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import MemoryLimitError
from stillfield.stages.aggregate import Months
from stillfield.stages.prepare import LocalDays

Edges = NDArray[np.int64]

#: Memory of interpreter and libraries. [bytes]
BASE_BYTES = 400_000_000
#: Weather of a window: enough to keep the cost of a call small, small enough to stay near the cache. [bytes]
WINDOW_BYTES = 12_000_000
#: Days before a span that are walked through to know the state of the basin: what is left of any difference after
#: them is far below the last digit.
SPIN_UP_DAYS = 60
#: Cells of a block where the chunks leave the choice.
CELLS_WANTED = 4096
#: How many times the weather of a window is held at most: as stored, in its place, and as what it is turned into.
COPIES_HELD = 4.0
#: Result of a cell, without and per year. [bytes]
CELL_BYTES, CELL_YEAR_BYTES = 3200, 12 * 12
_VALUE_BYTES = 4


@dataclass(frozen=True)
class Layout:
    """How weather lies in store.

    Attributes
    ----------
    records, rows, columns : ndarray of int
        Edges of the chunks along each axis, from 0 to its length. One cell wide where the weather is in memory.
    """

    records: Edges
    rows: Edges
    columns: Edges

    @property
    def shape(self) -> tuple[int, int, int]:
        """Records, rows and columns of cells."""
        return int(self.records[-1]), int(self.rows[-1]), int(self.columns[-1])


@dataclass(frozen=True)
class BlockPlan:
    """One block of cells and the windows it is walked through.

    Attributes
    ----------
    rows, columns : slice
        Cells of the block.
    windows : tuple of slice
        Records of each window, in order, without a gap.
    span : tuple of int, or None
        First day, and the day after the last, that are counted, where the record is shared among several workers;
        the days around them are walked through only to know the state of the basin. All days without it.
    """

    rows: slice
    columns: slice
    windows: tuple[slice, ...]
    span: tuple[int, int] | None = None

    @property
    def cells(self) -> int:
        """Number of cells."""
        return int((self.rows.stop - self.rows.start) * (self.columns.stop - self.columns.start))

    @property
    def size(self) -> int:
        """Records times cells."""
        return int(sum(window.stop - window.start for window in self.windows) * self.cells)

    @property
    def longest(self) -> int:
        """Records of the longest window."""
        return int(max(window.stop - window.start for window in self.windows))


@dataclass(frozen=True)
class Plan:
    """Blocks of a run.

    Attributes
    ----------
    blocks : tuple of BlockPlan
        In the order of the rows.
    workers : int
        How many blocks are worked at the same time.
    memory_bytes : int
        Largest memory, estimated.
    """

    blocks: tuple[BlockPlan, ...]
    workers: int
    memory_bytes: int


def plan_blocks(
    layout: Layout, *, variables: int, years: int, stills: int = 1, workers: int = 1, memory_bytes: int | None = None,
    whole_record: bool = False,
) -> Plan:
    """Cut a region along the chunks of its weather so that memory stays within what is allowed.

    Parameters
    ----------
    layout : Layout
        How the weather lies in store.
    variables : int
        Variables that are read.
    years, stills : int
        Size of the result.
    workers : int
        Blocks to be worked at the same time; fewer where memory or the number of chunks says so.
    memory_bytes : int, optional
        Memory that may be used; no limit without it. [bytes]
    whole_record : bool
        Whether all records must be in one window, as those of a typical year.

    Returns
    -------
    Plan

    Raises
    ------
    MemoryLimitError
        If not even one block of one chunk fits.

    Examples
    --------
    >>> stored = Layout(np.arange(0, 3651, 73), np.array([0, 50, 100]), np.array([0, 50, 100]))
    >>> plan = plan_blocks(stored, variables=3, years=10, workers=2)
    >>> len(plan.blocks), plan.blocks[0].cells, len(plan.blocks[0].windows)
    (4, 2500, 10)
    """
    records, rows, columns = layout.shape
    result = rows * columns * stills * (CELL_BYTES + CELL_YEAR_BYTES * years)
    room = None if memory_bytes is None else memory_bytes - BASE_BYTES - result
    longest, tall, wide = (int(np.diff(edges).max()) for edges in (layout.records, layout.rows, layout.columns))
    longest = records if whole_record else longest
    per_record = variables * _VALUE_BYTES * COPIES_HELD
    least = tall * wide * longest * per_record
    if room is not None and least > room:
        raise MemoryLimitError(
            "the weather does not fit into the memory allowed", where="compute.memory",
            got=_megabytes(memory_bytes or 0),
            wanted=f"at least {_megabytes(BASE_BYTES + result + least)}: the result takes {_megabytes(result)}, and a "
                   f"stored chunk of {longest} times, {tall} rows and {wide} columns must be held at once",
            cure="Allow more memory, cut the region, or store the weather in smaller chunks.",
        )
    fitting = workers if room is None else max(1, min(workers, int(room // max(least, 1.0))))
    target = WINDOW_BYTES * COPIES_HELD if room is None else min(WINDOW_BYTES * COPIES_HELD, room / fitting)
    across, down = _widened(layout, tall, wide, fitting, target / (longest * per_record))
    row_spans, column_spans = _spans(layout.rows, down), _spans(layout.columns, across)
    cells = max(s.stop - s.start for s in row_spans) * max(s.stop - s.start for s in column_spans)
    windows = (slice(0, records),) if whole_record else _spans(
        layout.records, max(1, int(target / (cells * per_record)) // longest))
    blocks = tuple(BlockPlan(down_to, over, windows) for down_to, over in product(row_spans, column_spans))
    used = min(fitting, len(blocks))
    held = used * cells * max(w.stop - w.start for w in windows) * per_record
    return Plan(blocks, used, round(BASE_BYTES + result + held))


def split_in_time(plan: Plan, months: Months, local: LocalDays, *, workers: int) -> Plan:
    """Share the years of a region that makes too few blocks for all workers.

    Weather stored as one map after another is one block, because a chunk holds every cell. So each worker takes
    some years of it, and walks through `SPIN_UP_DAYS` before them first.

    Parameters
    ----------
    plan : Plan
        Blocks that hold the whole record.
    months : Months
        Calendar of the days.
    local : LocalDays
        How the records fall into days.
    workers : int
        Workers to be kept busy.

    Returns
    -------
    Plan
        With a span for every block, or as it was.
    """
    wanted = min(ceil(2 * workers / len(plan.blocks)), months.years.size, len(plan.blocks[0].windows))
    if wanted <= 1 or workers <= 1 or months.typical:
        return plan
    year_starts = np.flatnonzero(np.diff(months.year[months.of_day], prepend=months.years[0] - 1))
    firsts = year_starts[np.round(np.linspace(0, year_starts.size, wanted + 1)[:-1]).astype(int)].tolist()
    spans = list(pairwise([*firsts, local.days]))
    blocks = []
    for block in plan.blocks:
        start, per_day = local.start[block.columns], local.steps_per_day
        for first, end in spans:
            earliest = (first - SPIN_UP_DAYS) * per_day + int(start.min())
            latest = (end + 2) * per_day + int(start.max())
            windows = tuple(window for window in block.windows
                            if local.slots[window.stop - 1] >= earliest and local.slots[window.start] < latest)
            blocks.append(BlockPlan(block.rows, block.columns, windows, (first, end)))
    return Plan(tuple(blocks), min(workers, len(blocks)), plan.memory_bytes)


def _widened(layout: Layout, tall: int, wide: int, workers: int, most_cells: float) -> tuple[int, int]:
    """Chunks across and down a block: enough cells for long loops, blocks enough for all workers."""
    down_all, across_all = layout.rows.size - 1, layout.columns.size - 1
    wanted = min(CELLS_WANTED, most_cells, ceil(layout.shape[1] * layout.shape[2] / (2 * workers)))
    chunks = max(1, int(wanted // (tall * wide)))
    across = min(across_all, chunks)
    return across, min(down_all, max(1, chunks // across))


def _spans(edges: Edges, together: int) -> tuple[slice, ...]:
    """Slices of `together` chunks each."""
    marks: Sequence[int] = [*edges[:-1:together].tolist(), int(edges[-1])]
    return tuple(slice(start, stop) for start, stop in pairwise(marks))


def _megabytes(count: float) -> str:
    return f"{count / 1e6:,.0f} MB".replace(",", " ")
