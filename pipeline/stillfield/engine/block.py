"""One block of cells, walked through the whole record: weather to days, days to litres, litres to months."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property, lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.engine.planning import BlockPlan
from stillfield.engine.readers import Reader
from stillfield.engine.steps import Counts, Steps, cell_numbers
from stillfield.methods import WARM_UP_DAYS, Block, Cells, DailyYield, March, Method, unrolled
from stillfield.physics.compiling import is_compiled
from stillfield.physics.still import Still
from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.sources.gates import most_irradiation, refuse_sunshine
from stillfield.stages.aggregate import Months, MonthSums, SumDays, month_sums
from stillfield.stages.prepare import LocalDays, days_of_steps, irradiation_of_days

Array = NDArray[np.floating[Any]]

#: Cell-days worked at a time, so that what passes between two steps of the work stays in the cache.
CELL_DAYS_AT_A_TIME = 262_144
#: Cells are picked out of a block when fewer than this share of them have weather. [1]
SPARSE_SHARE = 0.9


@dataclass(frozen=True)
class Work:
    """What is done with every block of a run; it travels to the workers.

    Attributes
    ----------
    reader : Reader
        Where the weather comes from.
    names : tuple of str
        Variables to read.
    local : LocalDays
        How the records fall into days.
    months : Months
        Calendar of the days.
    method : Method
        Yield method.
    stills : tuple of Still
        Designs, all in one pass.
    rule_litres_per_mj : float
        What the constant-efficiency rule makes of a MJ m-2. [L MJ-1]
    min_valid_hours : float
        Hours that a daily mean of temperature, wind or humidity needs. [h]
    fill_hours : float
        Longest gap that is bridged. [h]
    min_valid_days_share : float
        Share of its days that a month needs. [1]
    followed : ndarray of int
        Cells whose daily litres are kept.
    sampled : ndarray of int
        Cells whose weather of the first days is kept.
    sampled_days : int
        How many days.
    """

    reader: Reader
    names: tuple[str, ...]
    local: LocalDays
    months: Months
    method: Method
    stills: tuple[Still, ...]
    rule_litres_per_mj: float
    min_valid_hours: float = 20.0
    fill_hours: float = 3.0
    min_valid_days_share: float = 0.8
    followed: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    sampled: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    sampled_days: int = 0

    @cached_property
    def day_of_year(self) -> NDArray[np.int64]:
        """1 to 366, of every day."""
        return self.local.day_of_year

    @property
    def by_steps(self) -> bool:
        """Whether the method takes steps."""
        return self.method.resolution == "hourly"

    @property
    def steps_taken(self) -> int:
        """Steps of a day as the method takes them; 1 where it takes days."""
        return self.local.steps_per_day if self.by_steps else 1


@dataclass(frozen=True)
class BlockResult:
    """What one block gave.

    Attributes
    ----------
    cells : ndarray of int, shape (cell,)
        Their numbers in the region.
    span : tuple of int, or None
        As in the plan.
    size : int
        Records times cells.
    sums : list of list of (ndarray of int or slice, MonthSums)
        For each still the months of the cells that have any, by groups of them.
    missing_days : ndarray of int, shape (cell,)
        Days without irradiation.
    counts : dict
        What was found and changed: variable to kind to number.
    followed : dict
        Number of a cell to its daily litres of every still, shape (still, day). [L m-2]
    sampled : dict
        Number of a cell to its weather: name to values of the first days.
    """

    cells: NDArray[np.int64]
    span: tuple[int, int] | None
    size: int
    sums: list[list[tuple[NDArray[np.intp] | slice, MonthSums]]]
    missing_days: NDArray[np.int64]
    counts: Counts
    followed: dict[int, Array]
    sampled: dict[int, dict[str, Array]]


@dataclass
class _Group:
    """Some cells of a block that set out together, how far they have come, and which of them are followed."""

    cells: NDArray[np.intp] | slice
    marches: list[March]
    sums: list[MonthSums]
    sunshine: list[Array]
    done: list[int]
    followed: list[tuple[int, int]]


def work_block(work: Work, block: BlockPlan, tell: Callable[[int], None] | None = None) -> BlockResult:
    """Walk all stills through one block.

    Parameters
    ----------
    work : Work
        What is to be done.
    block : BlockPlan
        Where.
    tell : callable, optional
        Told after every window how many records times cells are done.

    Returns
    -------
    BlockResult

    Raises
    ------
    WeatherError
        If the weather cannot be read or cannot be true.
    """
    steps = Steps(work.reader, work.names, work.local, block, work.local.whole_steps(work.fill_hours))
    walk = _Walk(work, block)
    try:
        for number, window in enumerate(block.windows, start=1):
            last = number == len(block.windows)
            first_day, weather = steps.take(window, last=last)
            walk.on(first_day, weather, last=last)
            if tell is not None:
                tell((window.stop - window.start) * block.cells)
    finally:
        work.reader.close()
    return walk.result(steps.counts)


class _Walk:
    """The state of a block between windows."""

    def __init__(self, work: Work, block: BlockPlan) -> None:
        self.work = work
        self.block = block
        self.cells = cell_numbers(block, work.local.start.size)
        self.latitude = work.local.latitude[self.cells]
        self.clock = work.local.clock_to_solar_hours[self.cells]
        self.groups: list[_Group] = []
        self.missing_days = np.zeros(block.cells, dtype=np.int64)
        self.followed = {int(cell): [np.full(work.local.days, np.nan, np.float32) for _ in work.stills]
                         for cell in np.intersect1d(self.cells, work.followed)}
        sampled = np.flatnonzero(np.isin(self.cells, work.sampled))
        self.sampled: dict[int, dict[str, list[Array]]] = {int(self.cells[at]): {} for at in sampled}
        self.sampled_at = dict(zip(self.sampled, sampled.tolist(), strict=True))
        # Rows of a grid share a latitude, so the bound is made for each row or site once.
        by_row = self.latitude.reshape(block.rows.stop - block.rows.start, -1)
        self.bound_shape = (by_row.shape[0], 1 if (by_row == by_row[:, :1]).all() else by_row.shape[1])
        self.bounded = by_row[:, :self.bound_shape[1]].ravel()

    def on(self, first_day: int, weather: Mapping[str, Array], *, last: bool) -> None:
        """Take the days of a window, a cacheful at a time."""
        per_day = self.work.local.steps_per_day
        days = next(iter(weather.values())).shape[0] // per_day
        at_a_time = days if self.work.months.typical else max(1, CELL_DAYS_AT_A_TIME // self.block.cells)
        for start in range(0, days, at_a_time) if days else [0] if last else []:
            stop = min(start + at_a_time, days)
            some = {name: values[start * per_day:stop * per_day] for name, values in weather.items()}
            self._some_days(first_day + start, some, last=last and stop == days)

    def _some_days(self, first_day: int, weather: Mapping[str, Array], *, last: bool) -> None:
        daily = self._daily(weather)
        sunshine = daily["irradiation"]
        numbers = slice(first_day, first_day + sunshine.shape[0])
        self._check(sunshine, numbers)
        taken = weather if self.work.by_steps else daily
        self._sample(first_day, taken)
        finite = np.isfinite(sunshine)
        mine = self._counted(first_day, sunshine.shape[0])
        self.missing_days += max(mine.stop - mine.start, 0) - np.count_nonzero(finite[mine], axis=0)
        self._set_out(np.asarray(finite.any(axis=0)), first_day)
        for group in self.groups:
            self._advance(group, numbers, {name: values[:, group.cells] for name, values in taken.items()},
                          sunshine[:, group.cells], last=last)

    def _counted(self, first_day: int, days: int) -> slice:
        """Of some days those that this block counts."""
        first, end = self.block.span or (0, self.work.local.days)
        start = min(max(first - first_day, 0), days)
        return slice(start, max(min(end - first_day, days), start))

    def _daily(self, weather: Mapping[str, Array]) -> Mapping[str, Array]:
        """Weather of days; of steps only what the method takes."""
        if self.work.local.steps_per_day == 1:
            return weather
        if self.work.by_steps:
            return {"irradiation": irradiation_of_days(weather["ghi"], self.work.local.steps_per_day)}
        return days_of_steps(dict(weather), self.work.local.steps_per_day, min_valid_hours=self.work.min_valid_hours)

    def _check(self, sunshine: Array, numbers: slice) -> None:
        outside = extraterrestrial_irradiation(self.bounded, self.work.day_of_year[numbers])
        most = most_irradiation(outside).astype(np.float32).reshape(-1, *self.bound_shape)
        rows = sunshine.reshape(-1, self.bound_shape[0], self.block.cells // self.bound_shape[0])
        beyond = rows > most
        if beyond.any():
            day, row, column = np.unravel_index(int(np.argmax(beyond)), beyond.shape)
            cell = row * rows.shape[2] + column
            spot = f"time {str(self.work.local.time.values[numbers][day])[:16]}, latitude {self.latitude[cell]:g}"
            refuse_sunshine(float(rows[day, row, column]), float(np.broadcast_to(most, rows.shape)[day, row, column]),
                            int(beyond.sum()), where=f"{self.work.reader.where}, {spot}")

    def _set_out(self, alive: NDArray[np.bool_], first_day: int) -> None:
        """Begin with the cells that have weather; those that get it later set out later."""
        for group in self.groups:
            alive[group.cells] = False
        if not alive.any():
            return
        whole = not self.groups and alive.mean() >= SPARSE_SHARE
        cells: NDArray[np.intp] | slice = slice(None) if whole else np.flatnonzero(alive)
        work = self.work
        place = Cells(self.latitude[cells], self.clock[cells], work.steps_taken)
        marches = [work.method.begin(place, still, conditions_of(still)) for still in work.stills]
        count, counted_from = place.latitude.size, (self.block.span or (0, 0))[0]
        self.groups.append(_Group(
            cells, marches,
            [MonthSums.begin(work.months, count, min_valid_days_share=work.min_valid_days_share, first_day=counted_from,
                             part=self.block.span is not None) for _ in marches],
            [np.zeros((0, count), np.float32) for _ in marches], [first_day for _ in marches],
            [(int(cell), at) for at, cell in enumerate(self.cells[cells]) if int(cell) in self.followed],
        ))

    def _advance(
        self, group: _Group, numbers: slice, weather: Mapping[str, Array], sunshine: Array, *, last: bool
    ) -> None:
        work = self.work
        block = Block(weather, self.latitude[group.cells], work.day_of_year[numbers], work.steps_taken,
                      self.clock[group.cells])
        if work.months.typical:
            block = unrolled(block)
        for number, march in enumerate(group.marches):
            found = dict(zip(conditions_of(work.stills[number]), march.advance(block, last=last), strict=True))
            band = [found[condition] for condition in band_of(work.stills[number])]
            if work.months.typical:
                before = min(WARM_UP_DAYS, work.local.days)  # the days that `unrolled` has put in front
                band = [one.of_days(slice(before, before + work.local.days)) for one in band]
            held = group.sunshine[number]
            known = np.concatenate([held, sunshine]) if held.shape[0] else sunshine
            given = band[0].litres.shape[0]
            self._count(group, number, band, known[:given])
            group.sunshine[number] = known[given:].copy()
            group.done[number] += given

    def _count(self, group: _Group, number: int, band: Sequence[DailyYield], sunshine: Array) -> None:
        central, low, high = band
        first = group.done[number]
        mine = self._counted(first, central.litres.shape[0])
        days = slice(first + mine.start, first + mine.stop)
        flags = [flag[mine] if flag is not None and flag.any() else None for flag in (central.frost, central.outside)]
        group.sums[number].add(days.start, [central.litres[mine], low.litres[mine], high.litres[mine], sunshine[mine]],
                               flags, sum_days=_sum_days())
        for cell, at in group.followed:
            self.followed[cell][number][days] = central.litres[mine, at]

    def _sample(self, first_day: int, weather: Mapping[str, Array]) -> None:
        if first_day >= self.work.sampled_days or not self.sampled:
            return
        per_day = self.work.steps_taken
        days = next(iter(weather.values())).shape[0] // per_day
        mine = self._counted(first_day, min(days, self.work.sampled_days - first_day))
        for cell, kept in self.sampled.items():
            at = self.sampled_at[cell]
            for name, values in weather.items():
                kept.setdefault(name, []).append(values[mine.start * per_day:mine.stop * per_day, at].copy())

    def result(self, counts: Counts) -> BlockResult:
        """What the block gave."""
        return BlockResult(
            self.cells, self.block.span, self.block.size,
            [[(group.cells, group.sums[number]) for group in self.groups] for number in range(len(self.work.stills))],
            self.missing_days, counts,
            {cell: np.stack(litres) for cell, litres in self.followed.items()},
            {cell: {name: np.concatenate(parts) for name, parts in kept.items()}
             for cell, kept in self.sampled.items()},
        )


@lru_cache(maxsize=1)
def _sum_days() -> SumDays:
    """Month sums, compiled where numba is installed."""
    if not is_compiled("auto", "month sums"):
        return month_sums
    from stillfield.engine.month_sums_compiled import month_sums as compiled

    return compiled


def band_of(still: Still) -> tuple[str, str, str]:
    """Central, low and high condition of a still."""
    return still.condition, still.condition_low, still.condition_high


def conditions_of(still: Still) -> tuple[str, ...]:
    """Name every condition of a band once, so that a still without a band is worked once."""
    return tuple(dict.fromkeys(band_of(still)))
