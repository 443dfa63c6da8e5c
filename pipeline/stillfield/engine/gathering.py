"""Results of blocks put together into arrays of the whole region."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.engine.block import BlockResult, Work
from stillfield.engine.planning import Plan
from stillfield.engine.steps import Counts
from stillfield.stages.aggregate import MONTHS, SUNSHINE, MonthSums, climatology

Array = NDArray[np.floating[Any]]


class Gathering:
    """Arrays of the whole region, filled block by block in any order.

    Attributes
    ----------
    irradiation : tuple of ndarray, shape (12, cell)
        Irradiation over all used days of the months [MJ m-2], and the number of these days, of the first still.
    missing_days : ndarray of int, shape (cell,)
        Days without irradiation.
    counts : dict
        What was found and changed: variable to kind to number.
    followed : dict
        Number of a cell to its daily litres of every still, shape (still, day). [L m-2]
    sampled : dict
        Number of a cell to its weather, in parts by their first day.
    """

    def __init__(self, work: Work, plan: Plan) -> None:
        self._work = work
        self._cells = work.local.latitude.size
        self._spans = len({block.span for block in plan.blocks})
        self._waiting: dict[int, list[BlockResult]] = {}
        self._monthly: list[dict[str, Array]] = [{} for _ in work.stills]
        self.irradiation = (np.zeros((MONTHS, self._cells)), np.zeros((MONTHS, self._cells)))
        self.missing_days = np.zeros(self._cells, dtype=np.int64)
        self.counts: Counts = {}
        self.followed: dict[int, Array] = {}
        self.sampled: dict[int, dict[int, dict[str, Array]]] = {}

    def take(self, result: BlockResult) -> None:
        """Put one block in its place."""
        self.missing_days[result.cells] += result.missing_days
        for name, kinds in result.counts.items():
            mine = self.counts.setdefault(name, {})
            for kind, number in kinds.items():
                mine[kind] = mine.get(kind, 0) + number
        first, end = result.span or (0, self._work.local.days)
        for cell, litres in result.followed.items():
            mine_litres = self.followed.setdefault(cell, np.full(litres.shape, np.nan, np.float32))
            mine_litres[:, first:end] = litres[:, first:end]
        for cell, weather in result.sampled.items():
            self.sampled.setdefault(cell, {})[first] = weather
        if result.span is None:
            self._place(result.cells, result.sums)
            return
        parts = self._waiting.setdefault(int(result.cells[0]), [])
        parts.append(result)
        if len(parts) == self._spans:
            self._join(self._waiting.pop(int(result.cells[0])))

    def _join(self, parts: list[BlockResult]) -> None:
        cells = parts[0].cells
        joined = []
        for number in range(len(self._work.stills)):
            sums = self._empty(cells.size)
            for part in sorted(parts, key=lambda one: one.span or (0, 0)):
                sums.join(part.sums[number], (part.span or (0, 0))[0])
            joined.append([(slice(None), sums)])
        self._place(cells, joined)

    def _empty(self, cells: int) -> MonthSums:
        return MonthSums.begin(self._work.months, cells, min_valid_days_share=self._work.min_valid_days_share)

    def _place(self, cells: NDArray[np.int64], by_still: list[list[tuple[Any, MonthSums]]]) -> None:
        for number, groups in enumerate(by_still):
            for some, sums in groups:
                place = cells[some]
                self._put(self._monthly[number], place, sums)
                if number == 0:
                    self.irradiation[0][:, place] = _of_used_days(sums)
                    self.irradiation[1][:, place] = sums.used

    def _put(self, monthly: dict[str, Array], place: NDArray[np.int64], sums: MonthSums) -> None:
        for name, values in climatology(sums, rule_litres_per_mj=self._work.rule_litres_per_mj).items():
            if name not in monthly:
                monthly[name] = np.full((*values.shape[:-1], self._cells), np.nan, np.float32)
            monthly[name][..., place] = values

    def whole(self) -> list[dict[str, Array]]:
        """Values of `climatology` of every still, for all cells; cells without weather have no day used."""
        for monthly in self._monthly:
            if not monthly:
                self._put(monthly, np.zeros(0, dtype=np.int64), self._empty(0))
            monthly["days_used"][np.isnan(monthly["days_used"])] = 0.0
            expected = climatology(self._empty(1), rule_litres_per_mj=1.0)["days_expected"]
            monthly["days_expected"][:] = expected
        return self._monthly

    def weather_of_sample(self) -> dict[str, Array]:
        """Weather of the sampled cells over the first days, by name, shape (day * steps_per_day, cell)."""
        work = self._work
        rows = min(work.sampled_days, work.local.days) * work.steps_taken
        series: dict[str, list[Array]] = {}
        for cell in sorted(self.sampled):
            parts = [weather for _, weather in sorted(self.sampled[cell].items())]
            for name in parts[0]:
                series.setdefault(name, []).append(np.concatenate([part[name] for part in parts if part])[:rows])
        return {name: np.stack(columns, axis=1) for name, columns in series.items()}


def _of_used_days(sums: MonthSums) -> Array:
    """Irradiation of the days used alone, shape (12, cell); the totals of months are of all their days [MJ m-2]."""
    all_days = np.where(sums.valid > 0, sums.valid * sums.months.mean_length[:, None], 1.0)
    return np.asarray(sums.totals[SUNSHINE] * sums.used / all_days)
